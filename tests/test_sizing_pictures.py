"""The pictures of a scan of designs: what they draw, that it can be read, that odd scans do no harm, and that files repeat."""

import copy
import dataclasses
import sys
from itertools import combinations
from pathlib import Path

import matplotlib
import numpy as np
import pytest

import leanloop
from leanloop.errors import MissingExtra
from leanloop.flowsheet.scales import of_input
from leanloop.pictures import base, gather
from leanloop.sizing.effects import flood_effects, solvent_effects

VENT = Path(__file__).resolve().parents[1] / "flowsheets" / "coating_vent.toml"
PACKED = {"internals": "packing", "packing": "pall_plastic_35", "hetp": "0.65 m"}
TRAYS = {
    "internals": "trays", "efficiency": 0.6, "liquid_density": "760 kg/m3", "liquid_viscosity": "0.9 mPa s",
    "surface_tension": "22 mN/m", "gas_viscosity": "0.014 mPa s",
}  # fmt: skip
COLUMNS = {"wash": PACKED, "strip": TRAYS}
STEAM = {"feeds.steam.flow": ["65 kg/h", "75 kg/h", "90 kg/h"]}
CASES = {"summer": {"feeds.vent.flow": "960 Nm3/h"}}
PRICES = {"steam": "28 /t", "solvent": "2.1 /kg", "column": "18000 /m3", "yearly": 0.15}
GRID = {"wash": [7, 12], "strip": [5, 8]}


def altered(found, sheet=None, **attributes):
    """The same scan with some of its figures replaced."""
    out = copy.copy(found)
    out.__dict__.update(attributes)
    if sheet:
        out.sheet = copy.copy(found.sheet)
        for name, value in sheet.items():
            object.__setattr__(out.sheet, name, value)
    return out


def renamed(found, names, feeds):
    """The same scan with other names of columns and feed cases, which no flowsheet has to have."""
    sizing = dataclasses.replace(found.sizing, feeds=dict(zip(feeds, found.sizing.feeds.values(), strict=True)))
    columns = dict(zip(names, found.columns.values(), strict=True))
    stages = dict(zip(names, found.stages.values(), strict=True))
    return altered(found, sizing=sizing, columns=columns, stages=stages, sheet={"title": "A title that goes on and on " * 9})


@pytest.fixture(scope="module")
def found():
    sheet = leanloop.read(VENT)

    def run(**entries):
        return leanloop.size(sheet, **entries)

    out = {
        "plain": run(stages=GRID),
        "priced": run(stages=GRID, change=STEAM, cases=CASES, columns=COLUMNS, prices=PRICES),
        "equipped": run(stages=GRID, change=STEAM, columns={**COLUMNS, "wash": {**PACKED, "most_drop": "150 Pa/m"}}),
        "curve": run(stages={"wash": [6, 12]}, columns=COLUMNS),
        "rates": run(change={"feeds.steam.flow": [f"{rate} kg/h" for rate in (70, 75, 80, 90)]}),
        "mixed": run(stages={"wash": [7, 10]}, change=STEAM, columns=COLUMNS),
        "rated": run(stages={"wash": [9, 11]}, columns={"wash": {**PACKED, "diameter": "0.9 m"}}),
        "single": run(columns=COLUMNS),
        "many cases": run(columns=COLUMNS, cases={f"case_{n}": {"feeds.vent.flow": f"{850 + 7 * n} Nm3/h"} for n in range(14)}),
        "none": run(stages={"wash": [3, 4], "strip": [2, 3]}, columns=COLUMNS),
    }
    plain, priced = out["plain"], out["priced"]
    few = np.zeros(plain.count, dtype=bool)
    few[plain.chosen] = True
    nans = np.full(priced.count, np.nan)
    flood = {name: dataclasses.replace(item, flood=np.full_like(item.flood, np.nan), drop_Pa=np.full_like(item.drop_Pa, np.inf))
             for name, item in priced.columns.items()}  # fmt: skip
    out |= {
        "one good": altered(plain, good=few, front=few),
        "nothing chosen": altered(plain, chosen=None, knee=None),
        "no cost known": altered(priced, costs={key: nans for key in priced.costs}, chosen=None, cheapest=None, knee=None),
        "unknown loads": altered(priced, columns=flood),
        "odd numbers": altered(priced, circulation=np.where(np.arange(priced.count) % 3, np.nan, 10.0 ** np.arange(priced.count)),
                               volume=np.full(priced.count, np.inf)),
        "boiled": altered(plain, energy=1e5 + 1e3 * np.arange(plain.count), stripping=np.zeros(plain.count)),
        "long names": renamed(priced, ["W" * 60 + "a", "W" * 60 + "b"], ["feed_case_" * 8 + "a", "feed_case_" * 8 + "b"]),
        "odd names": renamed(priced, ["a$b", "苯"], ["$x", "y_$"]),
    }  # fmt: skip
    return out


NAMES = (
    "plain", "priced", "equipped", "curve", "rates", "mixed", "rated", "single", "none", "one good", "nothing chosen",
    "no cost known", "unknown loads", "odd numbers", "boiled", "long names", "odd names", "many cases",
)  # fmt: skip


@pytest.fixture(scope="module")
def drawn(found):
    """Figures by scan and by name."""
    return {key: {item.name.removeprefix("designs_"): item.figure for item in gather.of_designs(found[key])} for key in NAMES}


def parts(figure):
    """What carries data, by gid."""
    out = {}
    for axes in figure.axes:
        for item in (*axes.lines, *axes.patches, *axes.collections, *axes.texts):
            if item.get_gid():
                assert item.get_gid() not in out
                out[item.get_gid()] = item
    return out


def panels(figure):
    return [axes.get_gid().removeprefix("panel-") for axes in figure.axes]


def note(figure):
    return next(text.get_text() for text in figure.texts if text.get_gid() == "note").replace("\n", " ")


def legend(figure):
    return [text.get_text() for text in figure.legends[0].get_texts()]


def _hidden(axis):
    low, high = sorted(axis.get_view_interval())
    for tick in (*axis.get_major_ticks(), *axis.get_minor_ticks()):
        if not low <= tick.get_loc() <= high or not tick.label1.get_visible():
            yield tick.label1
        yield tick.label2


def beaten(pair, good):
    """Which designs another good one betters in one of two figures without being worse in the other."""
    rows = [place for place in np.flatnonzero(good) if np.isfinite(pair[place]).all()]
    return {
        place for place in rows
        if any((pair[other] <= pair[place]).all() and (pair[other] < pair[place]).any() for other in rows)
    }  # fmt: skip


@pytest.mark.filterwarnings("ignore:Glyph .* missing from font")
class TestEveryPicture:
    @pytest.mark.parametrize("key", NAMES)
    def test_texts_keep_apart_and_on_the_paper(self, drawn, key):
        for name, figure in drawn[key].items():
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
    def test_page_panels_and_legend(self, drawn, key):
        for figure in drawn[key].values():
            assert figure.get_figwidth() * 25.4 <= 170.01 and figure.get_figheight() * 25.4 <= 270
            assert figure.axes
            parts(figure)  # no gid twice
            for axes in figure.axes:
                assert axes.get_title(loc="left") and len(axes.lines) + len(axes.patches) + len(axes.texts) > 0
                for axis in (axes.xaxis, axes.yaxis):
                    low, high = axis.get_view_interval()
                    assert np.isfinite([low, high]).all() and low != high and axis.get_offset_text().get_text() == ""
                written = [label.get_text() for label in axes.get_xticklabels() if label.get_text()]
                assert len(set(written)) == len(written)
                for shown in figure.legends:
                    box = shown.get_window_extent()
                    assert box.x0 >= figure.bbox.x0 and box.x1 <= figure.bbox.x1 and box.y1 < axes.get_window_extent().y0

    def test_what_there_is_by_scan(self, drawn):
        every = ["contours", "pareto", "columns", "margins"]
        assert {key: list(drawn[key]) for key in NAMES if key not in ("odd numbers", "odd names", "many cases")} == {
            "plain": ["contours", "pareto", "margins"], "priced": every, "equipped": every, "curve": every,
            "rates": ["contours", "pareto"], "mixed": every, "rated": every, "single": ["columns", "margins"],
            "none": [], "one good": [], "nothing chosen": ["contours", "pareto"], "no cost known": ["contours", "pareto"],
            "unknown loads": every, "boiled": ["contours", "pareto", "margins"], "long names": every,
        }  # fmt: skip

    @pytest.mark.parametrize("key", ["plain", "priced", "curve", "odd names"])
    def test_same_bytes_from_figures_made_anew(self, found, drawn, key):
        for again in gather.of_designs(found[key]):
            first = drawn[key][again.name.removeprefix("designs_")]
            assert base.svg(again.figure, again.name) == base.svg(first, again.name)
            assert base.png(again.figure) == base.png(first)

    def test_places_are_those_of_the_report(self, found):
        places = {item.name: item.place for item in gather.of_designs(found["priced"])}
        assert places == {"designs_contours": "designs", "designs_pareto": "designs", "designs_columns": "chosen",
                          "designs_margins": "margins"}  # fmt: skip

    def test_without_the_library_the_extra_is_named(self, monkeypatch, found):
        for name in [name for name in sys.modules if name.split(".")[0] == "matplotlib"]:
            monkeypatch.delitem(sys.modules, name)
        monkeypatch.setitem(sys.modules, "matplotlib", None)
        with pytest.raises(MissingExtra):
            gather.of_designs(found["none"])


class TestContours:
    def test_plane_is_that_of_the_chosen_design(self, found, drawn):
        own, figure = found["priced"], drawn["priced"]["contours"]
        assert panels(figure) == ["circulation", "volume", "cost"]
        steam = own.inputs["feeds.steam.flow"]
        plane = np.isclose(steam, steam[own.chosen])
        rate = of_input(own.sheet, "feeds.steam.flow").shown(steam[own.chosen])
        assert rate == pytest.approx([65.0, 75.0, 90.0][own.chosen % 3])  # the steam is the last of the grid
        assert f"at the values of the chosen design, feeds.steam.flow = {rate:.4g} kg/h" in note(figure)
        for key, values in (("circulation", 3.6 * own.circulation), ("volume", own.volume), ("cost", own.costs["total"])):
            found_parts = parts(figure)
            wash, strip = own.stages["wash"], own.stages["strip"]
            good, bad = plane & own.good, plane & ~own.good
            for gid, rows in ((f"designs-{key}", good), (f"failed-{key}", bad)):
                assert set(zip(*found_parts[gid].get_data(), strict=True)) == set(zip(wash[rows], strip[rows], strict=True))
            assert found_parts[f"chosen-{key}"].get_xydata()[0].tolist() == [wash[own.chosen], strip[own.chosen]]
            edges = found_parts[f"fields-{key}"].levels
            assert edges[0] >= values[good].min() * (1 - 1e-8) and edges[-1] <= values[good].max() * (1 + 1e-8)

    def test_lines_run_where_the_quantity_has_their_level(self, found):
        own = found["plain"]
        linear = (2.0 * own.stages["wash"] + 0.5 * own.stages["strip"]) / 3.6
        whole = altered(own, circulation=linear, good=np.ones(own.count, dtype=bool))
        lines = parts(gather.of_designs(whole)[0].figure)["lines-circulation"]
        assert len(lines.levels) >= 3
        for level, path in zip(lines.levels, lines.get_paths(), strict=True):
            x, y = path.vertices.T
            np.testing.assert_allclose(2.0 * x + 0.5 * y, level, rtol=1e-9)

    def test_chosen_knee_and_cheapest_are_told_apart_and_named(self, found, drawn):
        own, figure = found["priced"], drawn["priced"]["pareto"]
        items = parts(figure)
        marks = [items[f"{word}-operation"] for word in ("chosen", "knee", "cheapest")]
        assert len({(item.get_marker(), item.get_markersize()) for item in marks}) == 3
        for word, design in (("chosen", own.chosen), ("knee", own.knee), ("cheapest", own.cheapest)):
            stages = f"{own.stages['wash'][design]} + {own.stages['strip'][design]}"
            assert any(text.startswith(f"{word}: {stages}, feeds.steam.flow = ") for text in legend(figure))
            assert items[f"name-{design}-operation"].get_text() == stages
        assert "named by the stages of wash + strip, those of one name differ in feeds.steam.flow" in note(figure)

    def test_designs_in_other_planes_are_said(self, found):
        own = found["priced"]
        steam = own.inputs["feeds.steam.flow"]
        other = int(np.flatnonzero(own.good & ~np.isclose(steam, steam[own.chosen]))[0])
        figure = gather.of_designs(altered(own, knee=other))[0].figure
        assert "knee-circulation" not in parts(figure)
        assert f"not marked: knee: {own.stages['wash'][other]} + {own.stages['strip'][other]}" in note(figure)

    def test_one_column_alone_gives_curves(self, found, drawn):
        own, figure = found["curve"], drawn["curve"]["contours"]
        assert panels(figure) == ["circulation", "volume"] and "stripping gas = 4.162 kmol/h" in note(figure)
        x, y = parts(figure)["circulation"].get_data()
        np.testing.assert_array_equal(x, own.stages["wash"])
        np.testing.assert_allclose(y, np.where(own.good, 3.6 * own.circulation, np.nan))
        assert not own.good.all()
        np.testing.assert_array_equal(parts(figure)["failed-volume"].get_xdata(), own.stages["wash"][~own.good])

    def test_duty_of_reboilers_is_in_kW(self, found, drawn):
        assert panels(drawn["boiled"]["contours"]) == ["circulation", "reboilers"]
        assert panels(drawn["boiled"]["pareto"]) == ["circulation", "reboilers"]
        x = parts(drawn["boiled"]["pareto"])["designs-reboilers"].get_xdata()
        np.testing.assert_allclose(x, found["boiled"].energy[found["boiled"].good] / 1e3)


class TestPareto:
    @pytest.mark.parametrize("key", ["plain", "equipped", "priced", "mixed"])
    def test_stairs_are_what_none_betters(self, found, drawn, key):
        own, items = found[key], parts(drawn[key]["pareto"])
        if key == "priced":
            pairs = {"operation": (own.costs["invested"], own.costs["operation"])}
        else:
            pairs = {"circulation": (3.6 * own.circulation, own.size_measure)}
            pairs |= {"stripping": (3.6 * own.stripping, own.size_measure)} if np.ptp(own.stripping) else {}
        assert panels(drawn[key]["pareto"]) == list(pairs)
        for name, (across, up) in pairs.items():
            pair = np.stack([across, up], axis=1)
            np.testing.assert_allclose(items[f"designs-{name}"].get_xydata(), pair[own.good])
            stairs = items[f"stairs-{name}"]
            best = {tuple(pair[place]) for place in set(np.flatnonzero(own.good)) - beaten(pair, own.good)}
            assert {tuple(point) for point in stairs.get_xydata()} == best
            assert stairs.get_drawstyle() == "steps-post" and (np.diff(stairs.get_xdata()) > 0).all()
            if f"set-{name}" in items:
                shown = {tuple(point) for point in (*stairs.get_xydata(), *items[f"set-{name}"].get_xydata())}
                assert shown == {tuple(point) for point in pair[own.front]}

    def test_grey_lines_have_equal_cost(self, found, drawn):
        own, items = found["priced"], parts(drawn["priced"]["pareto"])
        lines = items["equal-operation"]
        assert len(lines.levels) >= 3
        for level, path in zip(lines.levels, lines.get_paths(), strict=True):
            x, y = path.vertices.T
            np.testing.assert_allclose(y + 0.15 * x, level, rtol=1e-9)
        written = [text.get_text() for gid, text in items.items() if gid.startswith("level-")]
        assert written and {float(text) for text in written} <= set(np.round(lines.levels, 6))
        assert not any("e" in text for text in written)
        point = items["cheapest-operation"].get_xydata()[0]
        assert point[1] + 0.15 * point[0] == pytest.approx(own.costs["total"][own.good].min())

    def test_rates_alone_are_drawn_against_each_other(self, found, drawn):
        own, items = found["rates"], parts(drawn["rates"]["pareto"])
        x, y = items["designs-circulation"].get_data()
        np.testing.assert_allclose(x, 3.6 * own.circulation[own.good])
        np.testing.assert_allclose(y, 3.6 * own.stripping[own.good])
        assert "designs are named by feeds.steam.flow" in note(drawn["rates"]["pareto"])
        written = {text.get_text() for gid, text in items.items() if gid.startswith("name-")}
        assert written and written <= {f"{rate} kg/h" for rate in (70, 75, 80, 90)}
        assert any(text.startswith("chosen: ") and text.endswith("kg/h") for text in legend(drawn["rates"]["pareto"]))


class TestColumns:
    def test_bars_are_the_loads_of_the_feed_cases(self, found, drawn):
        own, items = found["priced"], parts(drawn["priced"]["columns"])
        for name, item in own.columns.items():
            for place, feed in enumerate(own.sizing.feeds):
                assert items[f"flood-{feed}-{name}"].get_width() == pytest.approx(100 * item.flood[own.chosen, place])
                assert items[f"drop-{feed}-{name}"].get_width() == pytest.approx(item.drop_Pa[own.chosen, place] / 100)
        assert items["design-wash"].get_xdata()[0] == pytest.approx(70.0)
        assert items["design-strip"].get_xdata()[0] == pytest.approx(80.0)
        assert max(items[f"flood-{feed}-strip"].get_width() for feed in own.sizing.feeds) == pytest.approx(80.0, rel=1e-6)
        assert not any(gid.startswith("most-") for gid in items)

    def test_limit_of_pressure_drop_is_over_the_packing(self, found, drawn):
        own, items = found["equipped"], parts(drawn["equipped"]["columns"])
        assert items["most-wash"].get_xdata()[0] == pytest.approx(1.5 * own.columns["wash"].height_m[own.chosen])
        assert "most-strip" not in items

    def test_of_many_feed_cases_those_nearest_to_flooding_are_drawn(self, found, drawn):
        own, figure = found["many cases"], drawn["many cases"]["columns"]
        assert "the 12 of 15 feed cases that are nearest" in note(figure)
        for name, item in own.columns.items():
            nearest = np.array(list(own.sizing.feeds))[np.argsort(item.flood[own.chosen])[-12:]]
            assert {gid for gid in parts(figure) if gid.startswith("flood-") and gid.endswith(name)} == {
                f"flood-{feed}-{name}" for feed in nearest
            }

    def test_what_is_not_known_has_no_bar(self, drawn):
        items = parts(drawn["unknown loads"]["columns"])
        assert not any(gid.startswith(("flood-", "drop-")) for gid in items)
        assert items["number-flood-summer-wash"].get_text() == "not known"


class TestMargins:
    def test_widths_are_those_of_other_parts_of_flood(self, found, drawn):
        own, items = found["priced"], parts(drawn["priced"]["margins"])
        for name in own.columns:
            rows = [(100 * part, wide) for column, part, wide, _ in flood_effects(own) if column == name]
            np.testing.assert_allclose(items[f"diameter-{name}"].get_xydata(), rows)
            wide = items[f"diameter-{name}"].get_ydata()
            # area goes with one over the part of flood for packing; of trays as well, where the downcomer's share stays
            np.testing.assert_allclose(wide[0] / wide[-1], np.sqrt(90 / 60), rtol=1e-3)
        points = [tuple(point) for point in items["chosen-flood"].get_xydata()]
        assert points == [(70.0, own.columns["wash"].diameter_m[own.chosen]), (80.0, own.columns["strip"].diameter_m[own.chosen])]

    def test_columns_without_a_choice_of_width_are_said(self, drawn):
        assert "width is given, or the pressure drop is limited: wash" in note(drawn["equipped"]["margins"])
        assert panels(drawn["rated"]["margins"]) == ["solvent"]

    @pytest.mark.parametrize("key", ["plain", "priced"])
    def test_stairs_hold_the_designs_of_fewest_stages(self, found, drawn, key):
        own, items = found[key], parts(drawn[key]["margins"])
        total, times = sum(own.stages.values()), own.circulation / own.circulation[own.good].min()
        x, y = items["stages"].get_data()
        shown = set(zip(x, y, strict=True))
        assert {(times[design], total[design]) for _, design in solvent_effects(own)} <= shown
        for limit in np.linspace(1.0, x[-1], 30):  # anywhere between as well
            fewest = total[own.good & (times <= limit)].min()
            assert y[np.flatnonzero(x <= limit)[-1]] == fewest
        assert items["chosen-solvent"].get_xydata()[0].tolist() == pytest.approx([times[own.chosen], total[own.chosen]])
