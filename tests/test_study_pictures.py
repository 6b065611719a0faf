"""The pictures of studies: what they draw, that it can be read, that odd findings do no harm, and that the files repeat."""

import dataclasses
import re
import sys
import xml.etree.ElementTree as ET
from itertools import combinations
from pathlib import Path
from types import SimpleNamespace

import matplotlib
import numpy as np
import pytest
from scipy.stats import norm, spearmanr

import leanloop
from leanloop.errors import MissingExtra
from leanloop.flowsheet.scales import of_column
from leanloop.pictures import base, contour_lines, gather, panel_scales, study_histograms, study_samples, words
from leanloop.studies.axes import Axis
from leanloop.studies.findings import Findings
from leanloop.studies.influence import Influence

VENT = Path(__file__).resolve().parents[1] / "flowsheets" / "coating_vent.toml"
BLEED, STEAM, TRIM = "units.divide.shares.bleed", "feeds.steam.flow", "units.trim.temperature"
LEAN, CLEANED = "streams.lean.loading.toluene", "streams.cleaned.mg_per_Nm3.toluene"
FREED, ADDED = "requirements.emission.free_value", "units.top_up.results.added_mol_s.oil"
A = "equilibrium.oil.toluene.vapour_pressure.A"
PURITY = {"limits": {"resin": {"mass_fraction": 0.02}}, "inventory": "2000 kg"}
SPREAD = {A: "0.5 %", "feeds.vent.flow": "5 %", TRIM: "1 K"}


def ranged(low, high, count, **more):
    return {"from": low, "to": high, "count": count, **more}


def changed(found, uncertainty=None, curves=None, study=None, influences=(), **columns):
    """The same findings with some columns replaced, and with other influences."""
    cases = {**found.cases, **columns}
    out = Findings(study or found.study, found.base, cases, found.curves if curves is None else curves,
                   found.uncertainty if uncertainty is None else uncertainty)  # fmt: skip
    out.__dict__["influences"] = list(influences)
    return out


def renamed(found, old, new):
    """The same findings with a quantity under another address, which no flowsheet has to have."""
    study = SimpleNamespace(**vars(found.study))
    study.record = tuple(new if item == old else item for item in found.study.record)
    cases = {key.replace(old, new): item for key, item in found.cases.items()}
    out = Findings(study, found.base, cases, found.curves, found.uncertainty)
    out.__dict__["influences"] = [
        dataclasses.replace(item, quantity=item.quantity.replace(old, new)) for item in found.influences
    ]
    return out


@pytest.fixture(scope="module")
def sheet():
    return leanloop.read(VENT)


@pytest.fixture(scope="module")
def found(sheet):
    def run(name, **entries):
        return leanloop.study(sheet, name, **entries).run()

    log = {"spacing": "log"}
    out = {
        "bleed": run("bleed", change={BLEED: ranged(3e-4, 3e-2, 10, **log)}, purity=PURITY),
        "steam": run("steam", change=[{STEAM: ranged(0.01, 0.05, 15), TRIM: ranged("20 degC", "40 degC", 15)}], purity=False),
        "plane": run("plane", change={STEAM: ranged(0.01, 0.05, 9), BLEED: ranged(3e-4, 3e-2, 7, **log)}, purity=False),
        "three": run("three", change={STEAM: ranged(0.02, 0.05, 5), "units.wash.stages": [8, 9, 10],
                                      BLEED: [1e-3, 2e-3, 4e-3, 5e-3]}),
        "sampled": run("sampled", change={STEAM: {"from": 0.01, "to": 0.05}, BLEED: {"from": 3e-4, "to": 3e-2, **log}},
                       sample={"count": 64}, purity=False),
        "spread": run("spread", spread=SPREAD, sample={"count": 256}),
        "one": run("one", purity=PURITY),
    }  # fmt: skip
    bleed, steam, plane, spread = (out[key] for key in ("bleed", "steam", "plane", "spread"))
    ten, wide = np.arange(10.0), "W" * 80
    lost = ["failed"] * 10
    out |= {
        "gaps": changed(bleed, status=["converged" if place in (0, 2, 3, 7) else "failed" for place in range(10)]),
        "nothing": changed(bleed, status=lost, curves={}, influences=bleed.influences),
        "nothing in the plane": changed(plane, status=["failed"] * 63),
        "nothing spread": changed(spread, uncertainty={"status": "failed", "quantities": {}}),
        "no cases": Findings(spread.study, spread.base, {}, {}, {"status": "failed", "quantities": {}, "requirements": {}}),
        "odd numbers": changed(bleed, **{
            FREED: np.where(ten < 3, np.nan, np.where(ten < 5, np.inf, 1.0 + ten)), LEAN: -ten * 1e-30,
            ADDED: 10.0 ** (60 * ten - 300),
            "purity.level.resin": np.zeros(10), "purity.build_up.resin": 1.0 + 1e-7 * ten}),
        "negative": changed(bleed, **{LEAN: -1e6 - ten, ADDED: np.array([0.0, 1e300, -1e300] + [0.0] * 7)}),
        "one point": changed(bleed, status=["converged"] + lost[1:]),
        "two points": changed(bleed, status=["converged"] * 2 + lost[2:]),
        "one square": changed(plane, status=["converged" if place in (16, 17, 23, 24) else "failed" for place in range(63)]),
        "scattered": changed(plane, status=["converged" if place % 2 else "failed" for place in range(63)]),
        "odd plane": changed(plane, status=["converged"] * 63, **{LEAN: np.where(np.arange(63) % 7, np.arange(63.0), np.inf),
                             FREED: 10.0 ** np.linspace(-120, 120, 63), ADDED: np.full(63, np.nan)}),
        "odd spread": changed(spread, **{CLEANED: 10.0 ** np.linspace(-40, 20, 256), LEAN: np.r_[np.nan, np.zeros(254), 1.0]}),
        "few solved": changed(spread, status=["converged"] * 2 + ["failed"] * 254),
        "long names": renamed(bleed, LEAN, f"streams.{'long_name_' * 8}.loading.{'component' * 8}"),
        "wide names": renamed(plane, LEAN, f"streams.{wide}.loading.{wide}"),
        "odd names": renamed(bleed, LEAN, "streams.a$b.loading.$苯_2$"),
        "long influences": changed(out["one"], influences=[
            Influence(LEAN, f"units.{'W' * 74}_{place}.{'M' * 40}", 3.0 - 0.7 * place, "K") for place in range(9)]),
        "short curves": changed(out["one"], curves={"case": np.array([0]), "component": ["resin"], "time_s": np.zeros(1),
                                                    "level": np.array([0.01])}),
        "odd curves": changed(bleed, curves={**bleed.curves, "level": np.where(np.arange(600) % 3, bleed.curves["level"], np.nan)}),
    }  # fmt: skip
    return out


NAMES = (
    "bleed", "steam", "plane", "three", "sampled", "spread", "one", "gaps", "nothing", "nothing in the plane", "nothing spread",
    "no cases", "odd numbers", "negative", "one point", "two points", "one square", "scattered", "odd plane", "odd spread",
    "few solved", "long names", "wide names", "odd names", "long influences", "short curves", "odd curves",
)  # fmt: skip


@pytest.fixture(scope="module")
def drawn(found):
    """Pictures by findings and by name."""
    return {key: {item.name: item for item in gather.of_study(found[key])} for key in NAMES}


def parts(figure):
    """What carries data, by gid."""
    out = {}
    for axes in figure.axes:
        for item in (*axes.lines, *axes.patches, *axes.collections, *axes.texts):
            if item.get_gid():
                assert item.get_gid() not in out
                out[item.get_gid()] = item
    return out


def panel(figure, address):
    return next(axes for axes in figure.axes if axes.get_gid() == f"panel-{address}")


def shown_panels(figure):
    return [axes.get_gid().removeprefix("panel-") for axes in figure.axes]


def note(figure):
    return next(text.get_text() for text in figure.texts if text.get_gid() == "note").replace("\n", " ")


def label_of(text):
    return text.replace("\n", "").replace(" ", "")


def scaled(found, address, values=None):
    return of_column(found.study.sheet, address).shown(np.asarray(found[address] if values is None else values, dtype=float))


@pytest.mark.filterwarnings("ignore:Glyph .* missing from font")
class TestEveryPicture:
    @pytest.mark.parametrize("key", NAMES)
    def test_texts_keep_apart_and_on_the_paper(self, drawn, key):
        for name, item in drawn[key].items():
            figure = item.figure
            figure.draw_without_rendering()
            hidden = {id(label) for axes in figure.axes for axis in (axes.xaxis, axes.yaxis) for label in _hidden(axis)}
            texts = [
                (text.get_text(), text.get_window_extent()) for text in figure.findobj(matplotlib.text.Text)
                if text.get_visible() and text.get_text().strip() and id(text) not in hidden
            ]  # fmt: skip
            paper = figure.bbox
            for text, box in texts:
                assert box.x0 >= paper.x0 and box.x1 <= paper.x1 and box.y0 >= paper.y0 and box.y1 <= paper.y1, (name, text)
            for (one, first), (other, second) in combinations(texts, 2):
                across = min(first.x1, second.x1) - max(first.x0, second.x0)
                up = min(first.y1, second.y1) - max(first.y0, second.y0)
                assert min(across, up) < 1.0, (name, one, other)  # dots

    @pytest.mark.parametrize("key", NAMES)
    def test_legend_lies_off_all_axes(self, drawn, key):
        for item in drawn[key].values():
            for legend in item.figure.legends:
                box = legend.get_window_extent()
                for axes in item.figure.axes:
                    assert box.y1 < axes.get_window_extent().y0
                    if axes.get_xlabel():
                        assert box.y1 < axes.xaxis.label.get_window_extent().y0

    @pytest.mark.parametrize("key", NAMES)
    def test_every_panel_has_its_name_its_marks_and_something_in_it(self, drawn, key):
        for item in drawn[key].values():
            assert item.figure.axes
            for axes in item.figure.axes:
                assert axes.get_title(loc="left")
                assert len(axes.lines) + len(axes.patches) + len(axes.collections) > 0
                for axis in (axes.xaxis, axes.yaxis):
                    low, high = axis.get_view_interval()
                    assert np.isfinite([low, high]).all() and low != high
                    assert axis.get_offset_text().get_text() == ""
                written = [label.get_text() for label in axes.get_xticklabels() if label.get_text()]
                assert len(set(written)) == len(written)

    @pytest.mark.parametrize("key", NAMES)
    def test_size_fits_a_page(self, drawn, key):
        for item in drawn[key].values():
            assert item.figure.get_figwidth() * 25.4 <= 170.01
            assert item.figure.get_figheight() * 25.4 <= 270

    def test_lines_can_be_told_apart_without_colour(self, drawn):
        for key in ("bleed", "one", "gaps", "spread"):
            for item in drawn[key].values():
                for axes in item.figure.axes:
                    looks = {}
                    for line in axes.lines:
                        look = (str(line._unscaled_dash_pattern), str(line.get_marker()))
                        looks.setdefault(look, set()).add(str(line.get_label()))
                    assert all(len(labels) == 1 for labels in looks.values()), looks

    def test_what_there_is_by_study(self, drawn):
        assert {key: list(drawn[key]) for key in ("bleed", "steam", "plane", "sampled", "spread", "one")} == {
            "bleed": ["bleed_curves", "bleed_tornado", "bleed_buildup"],
            "steam": ["steam_curves", "steam_tornado"],
            "plane": ["plane_contours", "plane_tornado"],
            "sampled": ["sampled_samples", "sampled_tornado"],
            "spread": ["spread_samples", "spread_histograms", "spread_variance", "spread_tornado"],
            "one": ["one_tornado", "one_buildup"],
        }
        assert list(drawn["nothing"]) == ["bleed_tornado"]
        assert list(drawn["no cases"]) == ["spread_tornado"]
        assert all(item.place == f"studies.{item.name.rpartition('_')[0]}" and item.caption for item in drawn["spread"].values())

    def test_more_than_six_quantities_go_on_to_a_second_page(self, found):
        study = SimpleNamespace(**vars(found["bleed"].study))
        study.record = tuple(f"streams.lean.fraction.c{place}" for place in range(8))
        columns = {name: np.arange(10.0) + place for place, name in enumerate(study.record)}
        shown = gather.of_study(changed(found["bleed"], study=study, curves={}, **columns))
        assert [item.name for item in shown] == ["bleed_curves", "bleed_curves_2"]
        assert [item.caption for item in shown] == ["Quantities against the input, 1 of 2", "Quantities against the input, 2 of 2"]
        assert [len(item.figure.axes) for item in shown] == [6, 4]


def _hidden(axis):
    low, high = sorted(axis.get_view_interval())
    for tick in (*axis.get_major_ticks(), *axis.get_minor_ticks()):
        if not low <= tick.get_loc() <= high or not tick.label1.get_visible():
            yield tick.label1
        yield tick.label2


@pytest.mark.filterwarnings("ignore:Glyph .* missing from font")
class TestFiles:
    @pytest.mark.parametrize("key", ["gaps", "plane", "spread", "one", "odd names"])
    def test_same_bytes_from_a_figure_made_anew(self, found, drawn, key):
        for again in gather.of_study(changed(found[key], influences=found[key].influences)):
            first = drawn[key][again.name].figure
            assert base.svg(again.figure, again.name) == base.svg(first, again.name)  # saved in another order than below
            assert base.png(again.figure) == base.png(first)
            assert base.png(first).startswith(b"\x89PNG\r\n\x1a\n")

    @pytest.mark.parametrize("key", ["gaps", "plane", "spread", "bleed"])
    def test_svg_is_one_and_shares_no_id(self, drawn, key):
        for name, item in drawn[key].items():
            root = ET.fromstring(base.svg(item.figure, name))
            ids = [part.get("id") for part in root.iter() if part.get("id")]
            assert len(ids) == len(set(ids)) > 20

    def test_without_the_library_the_extra_is_named(self, monkeypatch, found):
        for name in [name for name in sys.modules if name.split(".")[0] == "matplotlib"]:
            monkeypatch.delitem(sys.modules, name)
        monkeypatch.setitem(sys.modules, "matplotlib", None)
        with pytest.raises(MissingExtra, match=re.escape('pip install "leanloop[pictures]"')):
            gather.of_study(found["no cases"])


class TestCurves:
    def test_lines_are_the_columns_as_they_are_read(self, found, drawn):
        own, figure = found["bleed"], drawn["bleed"]["bleed_curves"].figure
        assert shown_panels(figure) == [FREED, LEAN, ADDED, "purity.build_up.resin", "purity.level.resin"]
        for address in (FREED, LEAN, ADDED, f"clean.{FREED}", f"clean.{LEAN}", f"clean.{ADDED}", "purity.level.resin"):
            x, y = parts(figure)[address].get_data()
            np.testing.assert_allclose(x, own[BLEED], rtol=1e-14)
            np.testing.assert_allclose(y, scaled(own, address), rtol=1e-14)
        assert 3.6 * own[FREED][0] == pytest.approx(parts(figure)[FREED].get_ydata()[0])
        assert label_of(panel(figure, FREED).get_title(loc="left")) == f"{FREED},kmol/h"
        assert {axes.get_xscale() for axes in figure.axes} == {"log"}
        assert panel(figure, "purity.level.resin").get_yscale() == "log" and panel(figure, FREED).get_yscale() == "linear"
        assert [text.get_text() for text in figure.legends[0].get_texts()] == ["as it is", "with clean solvent"]

    def test_what_does_not_vary_is_left_out_and_said(self, drawn):
        text = note(drawn["bleed"]["bleed_curves"].figure)
        assert f"not drawn, as it does not vary: {CLEANED} = 150 mg/Nm3" in text and "10 cases, all converged" in text

    def test_cases_that_did_not_converge_leave_gaps_and_crosses(self, found, drawn):
        own, figure = found["gaps"], drawn["gaps"]["bleed_curves"].figure
        good = own.converged
        for address in (FREED, f"clean.{FREED}", "purity.build_up.resin"):
            line = parts(figure)[address]
            np.testing.assert_array_equal(np.isfinite(line.get_ydata()), good)
            assert {0, 7} <= set(line.get_markevery())  # nothing else would show them
        crosses = parts(figure)[f"failed-{FREED}"]
        np.testing.assert_allclose(crosses.get_xdata(), own[BLEED][~good])
        assert crosses.get_marker() == "x" and (np.asarray(crosses.get_ydata()) == 0).all()
        assert "4 of 10 cases converged, 6 did not" in note(figure)

    def test_inputs_that_move_together_are_named(self, drawn):
        figure = drawn["steam"]["steam_curves"].figure
        assert f"moving with {STEAM}: {TRIM} from 20 degC to 40 degC" in note(figure)
        assert {axes.get_xlabel() for axes in figure.axes if axes.get_xlabel()} == {f"{STEAM}, kg/h"}
        x = parts(figure)[FREED].get_xdata()
        np.testing.assert_allclose(x[[0, -1]], [36.0, 180.0])

    def test_values_in_any_order_are_joined_by_size(self, sheet):
        own = leanloop.study(sheet, "order", change={BLEED: [4e-3, 1e-3, 2e-3]}, record=[LEAN], purity=False).run()
        figure = gather.of_study(own)[0].figure
        x, y = parts(figure)[LEAN].get_data()
        np.testing.assert_allclose(x, [1e-3, 2e-3, 4e-3])
        np.testing.assert_allclose(y, own[LEAN][[1, 2, 0]])


    def test_lists_stand_by_their_place(self, sheet):
        own = leanloop.study(sheet, "lists", change={BLEED: [1e-3, 2e-3, 4e-3]}, record=[LEAN], purity=False).run()
        study = SimpleNamespace(**vars(own.study))
        axis = Axis({"units.wash.efficiencies": [[1.0, 0.9], [1.0, 0.8], [1.0, 0.7]]})
        study.cases = SimpleNamespace(changes=axis.values, axes=(axis,), sampled=(), count=3)
        figure = gather.of_study(changed(own, study=study))[0].figure
        np.testing.assert_array_equal(parts(figure)[LEAN].get_xdata(), [1, 2, 3])
        assert label_of(panel(figure, LEAN).get_xlabel()) == "placeinthelistofunits.wash.efficiencies"


class TestContours:
    def test_lines_run_where_the_quantity_has_their_level(self, found):
        own = found["plane"]
        steam, bleed = (np.asarray(own[key]) for key in (STEAM, BLEED))
        plane = changed(own, status=["converged"] * 63, **{LEAN: 3.0 * steam * 3600 + 1e4 * bleed})
        figure = gather.of_study(plane)[0].figure
        lines = parts(figure)[f"lines-{LEAN}"]
        assert len(lines.levels) >= 4
        for level, path in zip(lines.levels, lines.get_paths(), strict=True):
            x, y = path.vertices.T  # kg/h, of a feed of 18.02 g/mol
            assert len(x)
            np.testing.assert_allclose(3.0 * x * (steam[-1] * 3600 / scaled(own, STEAM)[-1]) + 1e4 * y, level, rtol=1e-9)
        fields = parts(figure)[f"fields-{LEAN}"]
        np.testing.assert_allclose(fields.levels[1:-1], lines.levels)
        shades = [color[:3].mean() for color in fields.get_facecolor()]
        assert shades == sorted(shades, reverse=True) and min(shades) > 0.6  # dark enough to tell, light enough to read on

    def test_axes_and_crosses(self, found, drawn):
        own, figure = found["plane"], drawn["plane"]["plane_contours"].figure
        for address in (FREED, LEAN, ADDED):
            axes = panel(figure, address)
            assert (axes.get_xscale(), axes.get_yscale()) == ("linear", "log")
            np.testing.assert_allclose(axes.get_xlim(), [36, 180])
            np.testing.assert_allclose(axes.get_ylim(), [3e-4, 3e-2])
            x, y = parts(figure)[f"failed-{address}"].get_data()
            bad = ~own.converged
            assert set(zip(np.round(x, 6), np.round(y, 9), strict=True)) == set(
                zip(np.round(scaled(own, STEAM)[bad], 6), np.round(own[BLEED][bad], 9), strict=True)
            )
            field = parts(figure)[f"fields-{address}"]
            assert min(path.vertices[:, 0].min() for path in field.get_paths() if len(path.vertices)) >= 72 - 1e-9
        assert "49 of 63 cases converged, 14 did not: crosses" in note(figure)

    def test_numbers_are_those_of_their_lines(self, drawn):
        figure = drawn["plane"]["plane_contours"].figure
        found = parts(figure)
        for address in (FREED, LEAN, ADDED):
            axes, lines = panel(figure, address), found[f"lines-{address}"]
            numbers = {key: text for key, text in found.items() if re.fullmatch(rf"level-\d+-{re.escape(address)}", key)}
            assert len(numbers) >= len(lines.levels) / 2
            for key, text in numbers.items():
                place = int(key.split("-")[1])
                assert float(text.get_text()) == pytest.approx(lines.levels[place], rel=1e-9)
                spot = axes.transAxes.transform(text.get_position())
                near = [
                    np.hypot(*(np.linspace(a, b, 200) - spot).T).min()
                    for piece in axes.transData.transform_path(lines.get_paths()[place]).to_polygons(closed_only=False)
                    for a, b in zip(piece[:-1], piece[1:], strict=True)
                ]
                assert min(near) < 2.0  # dots

    def test_further_axes_stay_at_their_middle_and_the_note_says_so(self, found, drawn):
        own, figure = found["three"], drawn["three"]["three_contours"].figure
        assert "at units.wash.stages = 9" in note(figure)
        middle = np.asarray(own["units.wash.stages"]) == 9
        values = scaled(own, LEAN)[middle]
        edges = parts(figure)[f"fields-{LEAN}"].levels
        assert edges[0] == pytest.approx(values.min(), rel=1e-6) and edges[-1] == pytest.approx(values.max(), rel=1e-6)

    def test_levels_are_round_and_inside(self):
        spans = np.linspace(2.13, 2.31, 9), np.linspace(-5.0, 7.0, 4), np.geomspace(1e-9, 3e4, 40), np.geomspace(2.0, 500.0, 7)
        for values in spans:
            found, log = contour_lines.levels(values)
            assert 1 <= len(found) <= 10 and (np.diff(found) > 0).all()
            assert values.min() < found[0] and found[-1] < values.max()
            assert log == (values.min() > 0 and values.max() > 50 * values.min())

    def test_crosses_of_many_cases_stand_for_blocks(self):
        bad = np.zeros((90, 50), dtype=bool)
        bad[:40], bad[77, 33] = True, True
        x, y = contour_lines.crosses(np.arange(50.0), np.arange(90.0), bad)
        assert len(x) == 10 * 17 + 1 and bad[y.astype(int), x.astype(int)].all()
        assert (33.0, 77.0) in set(zip(x, y, strict=True))

    def test_no_field_without_four_neighbours(self, drawn):
        assert not any("lines-" in gid for gid in parts(drawn["scattered"]["plane_contours"].figure))
        assert f"lines-{LEAN}" in parts(drawn["one square"]["plane_contours"].figure)


class TestSamples:
    @pytest.mark.parametrize("key", ["sampled", "spread"])
    def test_points_are_the_cases_against_the_input_they_follow(self, found, drawn, key):
        own, figure = found[key], drawn[key][f"{key}_samples"].figure
        good = own.converged
        for address in shown_panels(figure):
            values = np.where(good, own[address], np.nan)
            ranks = {name: spearmanr(own[name][good], values[good]).statistic for name in own.study.cases.sampled}
            best = max(ranks, key=lambda name: abs(ranks[name]))
            x, y = parts(figure)[f"points-{address}"].get_data()
            np.testing.assert_allclose(x, scaled(own, best))
            np.testing.assert_allclose(y, scaled(own, address, values))
            assert f"rank correlation {ranks[best]:.2f}" in panel(figure, address).get_title(loc="left")
            assert label_of(panel(figure, address).get_xlabel()).startswith(best)
            if not good.all():
                np.testing.assert_allclose(parts(figure)[f"failed-{address}"].get_xdata(), scaled(own, best)[~good])

    def test_rank_correlation(self):
        rng = np.random.default_rng(1)
        one, other = rng.random(50), np.round(rng.random(50), 1)
        assert study_samples.rank_correlation(one, other) == pytest.approx(spearmanr(one, other).statistic)
        assert study_samples.rank_correlation(one, -np.exp(one)) == pytest.approx(-1)
        assert np.isnan(study_samples.rank_correlation(one, np.ones(50)))
        assert np.isnan(study_samples.rank_correlation(one[:2], other[:2]))

    def test_of_many_cases_some_are_drawn(self, found):
        own = found["sampled"]
        many = {key: np.tile(values, 100) if not isinstance(values, list) else values * 100 for key, values in own.cases.items()}
        figure = gather.of_study(changed(own, **many))[0].figure
        assert len(parts(figure)[f"points-{LEAN}"].get_xdata()) == 2000
        assert "2000 evenly chosen cases are drawn" in note(figure) and "of 6400 cases" in note(figure)


def bars(figure, address):
    found = parts(figure)
    return [item for key, item in found.items() if re.fullmatch(rf"bar-\d+-{re.escape(address)}", key)]


class TestHistograms:
    def test_counts_are_those_of_the_cases(self, found, drawn):
        own, figure = found["spread"], drawn["spread"]["spread_histograms"].figure
        assert shown_panels(figure)[0] == CLEANED  # judged, so first
        for address in shown_panels(figure):
            values, shown = scaled(own, address), bars(figure, address)
            assert sum(bar.get_height() for bar in shown) == len(own) == 256
            for bar in shown[:-1]:
                inside = (values >= bar.get_x()) & (values < shown[shown.index(bar) + 1].get_x())
                assert bar.get_height() == inside.sum()
            assert shown[0].get_x() == pytest.approx(values.min())
            assert shown[-1].get_x() + shown[-1].get_width() == pytest.approx(values.max())

    def test_limit_base_marks_and_density(self, found, drawn):
        own, figure = found["spread"], drawn["spread"]["spread_histograms"].figure
        items, told = parts(figure), own.uncertainty
        assert items["limit-emission"].get_xdata()[0] == 150
        judged = told["requirements"]["emission"]
        title = panel(figure, CLEANED).get_title(loc="left").replace("\n", " ")
        assert f"at most 150 in {100 * judged['sampled']:.3g} % of cases, first order 50 %" in title
        assert judged["sampled"] == pytest.approx(np.mean(np.asarray(own[CLEANED]) <= 150))
        for address in shown_panels(figure):
            quantity = told["quantities"][address]
            assert items[f"base-{address}"].get_xdata()[0] == pytest.approx(scaled(own, address, quantity["base"]))
            x, y = items[f"density-{address}"].get_data()
            width = bars(figure, address)[0].get_width()
            first = quantity["first_order"]
            np.testing.assert_allclose(y, 256 * width * norm.pdf(x, first["mean"], first["deviation"]), rtol=1e-9)
        for mark in (5, 50, 95):
            assert f"mark-{mark}-{CLEANED}" not in items
            place = items[f"mark-{mark}-{LEAN}"].get_xdata()[0]
            assert place == pytest.approx(told["quantities"][LEAN]["sampled"]["quantiles"][mark])

    def test_log_bins_hold_everything_and_the_density_keeps_its_area(self):
        values = np.geomspace(1e-4, 1e4, 900)
        edges, log = study_histograms.bins(values)
        assert log and np.histogram(values, edges)[0].sum() == 900
        np.testing.assert_allclose(edges[1:] / edges[:-1], edges[1] / edges[0])
        across = np.linspace(-9, 15, 20001)
        assert np.trapezoid(study_histograms.density(across, 3.0, 1.5), across) == pytest.approx(1)

    def test_failed_cases_are_not_counted(self, drawn):
        figure = drawn["few solved"]["spread_histograms"].figure
        assert sum(bar.get_height() for bar in bars(figure, LEAN)) == 2
        assert "2 of 256 cases converged, 254 did not" in note(figure)
        for axes in figure.axes:
            assert all(float(tick).is_integer() for tick in axes.get_yticks())


class TestBars:
    def test_lengths_are_the_influences(self, found, drawn):
        own, figure = found["one"], drawn["one"]["one_tornado"].figure
        items = parts(figure)
        assert shown_panels(figure) == [FREED, LEAN, ADDED]
        for address in shown_panels(figure):
            wanted = [item for item in own.influences if item.quantity == address][:12]
            drawn_bars = {key: bar for key, bar in items.items() if key.startswith("bar-") and key.endswith(f"-{address}")}
            assert len(drawn_bars) == len(wanted) == 12
            for place, item in enumerate(wanted):
                bar = drawn_bars[f"bar-{item.number}-{address}"]
                assert bar.get_x() + bar.get_width() == pytest.approx(item.per_cent) or bar.get_x() == pytest.approx(item.per_cent)
                assert min(abs(bar.get_x()), abs(bar.get_x() + bar.get_width())) == pytest.approx(0, abs=1e-12)
                assert bool(bar.get_hatch()) == (item.per_cent < 0)
                label = panel(figure, address).get_yticklabels()[place].get_text()
                assert label == f"{item.number}, 1 {item.unit}"
        assert "as its limit alone moves it: " + CLEANED in note(figure) and "the 12 largest of each" in note(figure)
        assert "largest" not in note(drawn["long influences"]["one_tornado"].figure)

    def test_shares_of_the_variance_stand_side_by_side(self, found, drawn):
        told, figure = found["spread"].uncertainty["quantities"], drawn["spread"]["spread_variance"].figure
        items = parts(figure)
        assert ADDED not in shown_panels(figure)  # nothing moves it
        for address in shown_panels(figure):
            for sort, key in (("first", "first_order"), ("sampled", "sampled")):
                for number, share in told[address][key]["shares"].items():
                    assert items[f"{sort}-{number}-{address}"].get_width() == pytest.approx(100 * share)
            assert items[f"sampled-rest-{address}"].get_width() == pytest.approx(100 * told[address]["sampled"]["rest"])
            assert items[f"first-{A}-{address}"].get_hatch() is None and items[f"sampled-{A}-{address}"].get_hatch()

    def test_more_than_four_quantities_go_on_to_a_second_page(self, found):
        study = SimpleNamespace(**vars(found["one"].study))
        study.record = tuple(f"streams.lean.fraction.c{place}" for place in range(5))
        ends = ("feeds.a.flow", 2.0), ("x.y", -1.0)
        own = [Influence(name, number, value, "%") for name in study.record for number, value in ends]
        shown = gather.of_study(changed(found["one"], study=study, influences=own, curves={}))
        assert [item.name for item in shown] == ["one_tornado", "one_tornado_2"]
        assert [len(item.figure.axes) for item in shown] == [4, 1]


class TestBuildUp:
    def test_a_single_case_has_its_times_and_its_steady_level(self, found, drawn):
        own, figure = found["one"], drawn["one"]["one_buildup"].figure
        items = parts(figure)
        x, y = items["case-0-resin"].get_data()
        np.testing.assert_allclose(x, own.curves["time_s"] / 86400)
        np.testing.assert_allclose(y, own.curves["level"])
        steady = own["purity.level.resin"][0]
        assert items["steady-resin"].get_ydata()[0] == steady
        said = panel(figure, "resin").get_title(loc="left")
        for share in (50, 90, 99):
            place = own[f"purity.time_to_{share}_s.resin"][0] / 86400
            assert items[f"time-{share}-resin"].get_data() == (pytest.approx([place]), pytest.approx([share / 100 * steady]))
            assert np.interp(place, x, y) == pytest.approx(share / 100 * steady, rel=5e-3)  # on the curve
            assert f"{share} % after {place:.3g}" in said
        assert panel(figure, "resin").get_xlabel() == "time, days"

    def test_eight_of_many_cases_are_drawn_and_named_by_their_inputs(self, found, drawn):
        own, figure = found["bleed"], drawn["bleed"]["bleed_buildup"].figure
        lines = {key: line for key, line in parts(figure).items() if key.startswith("case-")}
        assert len(lines) == 8 and {"case-0-resin", "case-9-resin"} <= set(lines)
        for key, line in lines.items():
            case = int(key.split("-")[1])
            rows = np.asarray(own.curves["case"]) == case
            np.testing.assert_allclose(line.get_data(), [own.curves["time_s"][rows] / 86400, own.curves["level"][rows]])
            assert line.get_label() == f"case {case}: {words.short(own[BLEED][case], 4)}"
        assert "8 of 10 cases are drawn" in note(figure) and BLEED in note(figure)

    def test_hours_where_it_is_quick(self, found):
        own = found["one"]
        times = [f"purity.time_to_{share}_s.resin" for share in (50, 90, 99)]
        curves = {**own.curves, "time_s": own.curves["time_s"] / 1000}
        quick = changed(own, curves=curves, **{key: own[key] / 1000 for key in times})
        figure = next(item.figure for item in gather.of_study(quick) if item.name == "one_buildup")
        assert panel(figure, "resin").get_xlabel() == "time, hours"
        np.testing.assert_allclose(parts(figure)["case-0-resin"].get_xdata(), own.curves["time_s"] / 3.6e6)


class TestWords:
    def test_the_middle_is_left_out(self):
        assert words.shortened("streams.lean", 20) == "streams.lean"
        assert words.shortened("abcdefghijklmnopqrstuvwxyz", 11) == "abcd...wxyz"
        assert all(len(words.shortened("x" * 200, letters)) == letters for letters in range(8, 60))

    def test_lines_break_behind_dots_and_are_few(self):
        assert words.address_lines("units.top_up.results.added_mol_s.oil", 24) == "units.top_up.results.\nadded_mol_s.oil"
        for text in ("W" * 80, "streams." + "long_name_" * 8 + ".loading." + "c" * 80, "a.b"):
            for letters in (10, 24, 40):
                for lines in (1, 2, 3):
                    out = words.address_lines(text, letters, lines).splitlines()
                    assert len(out) <= lines and max(map(len, out)) <= letters
                    assert out[0][0] == text[0] and out[-1][-1] == text[-1]
                    assert "".join(out) == text or sum("..." in line for line in out) == 1

    def test_what_differs_still_does(self):
        alike = [f"units.{'x' * 30}{place}{'y' * 30}.flow" for place in range(5)]
        out = words.told_apart([*alike, "feeds.a.flow", "feeds.a.flow"], 20)
        assert len(set(out[:5])) == 5 and out[5:] == ["feeds.a.flow"] * 2 and max(map(len, out)) <= 20


class TestScales:
    @pytest.mark.parametrize("ends", [(0, 1), (149.99999, 150.00001), (1.23456e5, 1.23458e5), (-3e-7, 2e-7), (7, 7), (0, 0),
                                      (1e-180, 2e-180), (-1e190, 1e190), (36, 180), (2.1301, 2.1302)])  # fmt: skip
    def test_ticks_can_be_told_apart_and_have_no_digits_to_spare(self, ends):
        with base.style():
            figure = base.canvas(80, 60)
            axes = figure.subplots()
            panel_scales.fit_axis(axes.yaxis, np.array(ends, dtype=float))
            figure.draw_without_rendering()
            low, high = axes.get_ylim()
            assert low <= ends[0] <= ends[1] <= high and low < high
            shown = [label.get_text() for label in axes.get_yticklabels() if low <= label.get_position()[1] <= high]
        assert len(shown) == len(set(shown)) >= 2
        fractions = [text.partition(".")[2] for text in shown if "." in text and "e" not in text]
        assert not fractions or any(not text.endswith("0") for text in fractions)
        for text, tick in zip(axes.get_yticklabels(), axes.get_yticks(), strict=True):
            if text.get_text():
                assert float(text.get_text()) == pytest.approx(tick, rel=1e-9, abs=1e-9 * (high - low))

    def test_log_where_all_is_above_zero(self):
        with base.style():
            axes = base.canvas(80, 60).subplots()
            panel_scales.fit_axis(axes.xaxis, np.array([1e-3, 1e2]), log=True)
            assert axes.get_xscale() == "log" and axes.get_xlim()[0] < 1e-3 and axes.get_xlim()[1] > 1e2
            axes = base.canvas(80, 60).subplots()
            panel_scales.fit_axis(axes.xaxis, np.array([0.0, 1e2]), log=True)
            assert axes.get_xscale() == "linear"
