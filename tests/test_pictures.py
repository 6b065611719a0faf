"""The pictures of columns, windows and loops: what they draw, that it can be read, and that the files repeat."""

import dataclasses
import re
import subprocess
import sys
import xml.etree.ElementTree as ET
from itertools import combinations
from pathlib import Path

import matplotlib
import numpy as np
import pytest
import scenes

import leanloop
from leanloop.errors import InputError, MissingExtra
from leanloop.pictures import base, convergence, profiles, stage_diagram, window
from leanloop.pinch.shapes import Pinch, StageDiagram, Window

VENT = Path(__file__).resolve().parents[1] / "flowsheets" / "coating_vent.toml"
SCRUBBER = VENT.with_name("acetone_scrubber.toml")


def ratios(K, straight=False):
    """Equilibrium on mole ratios of y = K x, or of Y = K X, both ways."""
    if straight:
        return (lambda X: K * X), (lambda Y: Y / K)
    up = lambda X: K * X / (1 + X) / (1 - K * X / (1 + X))  # noqa: E731
    down = lambda Y: Y / (1 + Y) / K / (1 - Y / (1 + Y) / K)  # noqa: E731
    return up, down


def stepped(kind, K, lean, slope, stages, straight=False, **changes):
    """A diagram stepped by hand from the lean end, with its least-rate line to the equilibrium at the rich end."""
    up, down = ratios(K, straight)
    (x, y), corners, found = lean, [lean], []
    for _ in range(stages):
        x, y = (down(y), y) if kind == "absorber" else (x, up(x))
        found.append((x, y))
        corners.append((x, y))
        x, y = (x, lean[1] + slope * (x - lean[0])) if kind == "absorber" else (lean[0] + (y - lean[1]) / slope, y)
        corners.append((x, y))
    found = np.array(found if kind == "absorber" else found[::-1])
    corners = np.array(corners)
    end = (down(y), y) if kind == "absorber" else (x, up(x))
    line = np.linspace(0, 1.15 * max(end[0], x), 150)
    least = (end[1] - lean[1]) / (end[0] - lean[0])
    diagram = StageDiagram(
        "wash" if kind == "absorber" else "strip", kind, "benzene", "oil", "air" if kind == "absorber" else "steam", True,
        line, up(line), np.array([lean[0], x]), np.array([lean[1], y]), *corners.T, *found.T,
        np.array([lean[0], end[0]]), np.array([lean[1], end[1]]), Pinch("rich end", *end), 0.4,
        slope / least if kind == "absorber" else least / slope, stages - 0.25,
    )  # fmt: skip
    return dataclasses.replace(diagram, **changes)


def tangent():
    """A table curve with an inflection, which the least-rate line touches at (0.3, 0.0405) on the way up."""
    line = np.linspace(0, 0.9, 91)
    rise = 0.45 * line**2 / (1 + 9 * (line - 0.05).clip(0) ** 1.5 + 4 * line**2)
    place = int(np.argmax((rise[1:] - 0.0005) / line[1:])) + 1
    slope = (rise[place] - 0.0005) / line[place]
    x, y, found, corners = 0.0, 0.0005, [], [(0.0, 0.0005)]
    for _ in range(6):
        x = float(np.interp(y, rise[: rise.argmax() + 1], line[: rise.argmax() + 1]))
        found.append((x, y))
        corners.append((x, y))
        y = 0.0005 + 1.4 * slope * x
        corners.append((x, y))
    top = np.array([0.0005, y])
    return StageDiagram(
        "wash", "absorber", "toluene", "oil", "air", True, line, rise, np.array([0.0, x]), top, *np.array(corners).T,
        *np.array(found).T, np.array([0.0, (y - 0.0005) / slope]), top, Pinch("tangent", float(line[place]), float(rise[place])),
        0.3, 1.4, 5.7,
    )  # fmt: skip


BARE = dict(least_x=None, least_y=None, pinch=None, least_mol_s=None, ratio_to_least=None, stages_needed=None)
LONG = dict(unit="first_absorber_of_the_eastern_train", component="benzene_toluene_xylene_lumped",
            liquid="wash_oil + resin + tar", gas="air + nitrogen + carbon_dioxide")  # fmt: skip


def cloud(diagram):
    """The same diagram where equilibrium is known at the stages alone."""
    order = np.argsort(diagram.stages_x)
    return dataclasses.replace(
        diagram, curve=False, equilibrium_x=diagram.stages_x[order], equilibrium_y=diagram.stages_y[order],
        least_x=None, least_y=None, pinch=None,
    )  # fmt: skip


DIAGRAMS = {
    "three stages": stepped("absorber", 0.125, (0.005, 0.002), 0.17, 3),
    "eight stages": stepped("absorber", 0.125, (0.003, 0.0015), 0.15, 8),
    "forty stages": stepped("absorber", 0.125, (0.02, 0.0029), 0.128, 40, straight=True),
    "many stages": stepped("absorber", 0.125, (0.02, 0.00262), 0.1265, 120, straight=True),
    "one stage": stepped("absorber", 0.125, (0.0, 0.01), 0.25, 1),
    "removal 0.9999": stepped("absorber", 0.125, (1e-5, 5e-6), 0.17, 17),
    "fresh solvent": stepped("absorber", 0.125, (0.0, 1e-5), 0.19, 8),
    "stripper": stepped("stripper", 1.5, (1e-4, 0.0), 0.6, 7),
    "short stripper": stepped("stripper", 1.5, (0.02, 0.0), 0.9, 4),
    "tangent": tangent(),
    "no pinch": stepped("absorber", 0.125, (0.003, 0.002), 0.16, 5, **BARE),
    "no curve": cloud(stepped("absorber", 0.125, (0.003, 0.0015), 0.15, 8)),
    "far from least": stepped("absorber", 0.125, (0.0003, 0.0004), 0.9, 2),
    "long names": stepped("absorber", 0.125, (0.003, 0.0015), 0.15, 8, **LONG),
    "odd names": stepped("absorber", 0.125, (0.003, 0.0015), 0.15, 8, component="$苯_2$", unit="a$b"),
}
FLOW = np.linspace(0.25, 2.2, 80)
WITHOUT_LIMIT = 1e-5 / FLOW**3 + 2e-6 * np.exp(2.1 * FLOW)
AS_IS = 1.6 * WITHOUT_LIMIT + 6e-6 / FLOW
LOWEST = (float(FLOW[AS_IS.argmin()]), float(AS_IS.min())), (float(FLOW[WITHOUT_LIMIT.argmin()]), float(WITHOUT_LIMIT.min()))
GAPS = np.where(FLOW < 0.5, np.nan, AS_IS)
PAIR = ("wash", "strip", "toluene", "oil", "air")
# stages without limit leave next to nothing between the ends of the window
DEEP = np.where((FLOW > 0.7) & (FLOW < 1.4), 4e-5 * 10 ** (-150 * np.sin(np.pi * (FLOW - 0.7) / 0.7).clip(0)), AS_IS)
WINDOWS = {
    "whole": Window(*PAIR, FLOW, AS_IS, WITHOUT_LIMIT, 4e-5, 0.68, 1.38, *LOWEST, (0.62, 8.9e-5)),
    "gaps": Window(*PAIR, FLOW, GAPS, np.full(80, np.nan), None, None, None, None, None, (0.62, 8.9e-5)),
    "one side": Window(*PAIR, FLOW[20:50], AS_IS[20:50], WITHOUT_LIMIT[20:50], 5e-5, 0.5, None, None, LOWEST[1], (0.9, 5e-5)),
    "deep": Window(*PAIR, FLOW, AS_IS, DEEP, 4e-5, 0.7, 1.4, LOWEST[0], (1.05, 4e-155), (0.62, 8.9e-5)),
    "empty": Window(*PAIR, FLOW, AS_IS, WITHOUT_LIMIT, 1e-6, None, None, *LOWEST, (0.62, 8.9e-5)),
    "long names": Window("first_absorber_of_the_train", "regenerator_of_the_train", "benzene_toluene_xylene_lumped", "oil + tar",
                         "air + nitrogen + methane", FLOW, AS_IS, WITHOUT_LIMIT, 4e-5, 0.68, 1.38, *LOWEST, (0.62, 8.9e-5)),
}  # fmt: skip


class Shown:
    """A result of which some of the dict is other than solved."""

    def __init__(self, result, change):
        self.axis, self.sheet, self._result, self._change = result.axis, result.sheet, result, change

    def to_dict(self, lists=True):
        data = self._result.to_dict(lists=lists)
        return self._change(data if lists else {**data, "units": {name: dict(unit) for name, unit in data["units"].items()}})


def two_loops(data):
    return {**data, "loops": [data["loops"][0], {**data["loops"][0], "history": [3.0, 0.4, 1e-2, 3e-5, 1e-8, 0.0]}]}


def warm_and_crowded(data):
    """The washing column with nine further components and a bulge of temperature."""
    profile = dict(data["units"]["wash"]["profile"])
    profile["temperature_K"] = 300 + 12 * np.sin(np.arange(9) / 3)
    for letter in "xyK":
        more = {f"more_{place}": profile[letter]["toluene"] * (1 + place) / 20 for place in range(9)}
        profile[letter] = {**profile[letter], **more}
    data["units"]["wash"]["profile"] = profile
    return data


@pytest.fixture(scope="module")
def results(tmp_path_factory):
    column = scenes.column("absorber", 5, ["sol"], {"inert": 1.0, "sol": 0.02}, {"oil": 2.0}, scenes.constants(["sol"], [1.5]))
    vent = leanloop.read(VENT).solve()
    return {
        "vent": vent,
        "scrubber": leanloop.read(SCRUBBER).solve(),
        "tall": leanloop.read(VENT, ["units.wash.stages=60"]).solve(),
        "slow": leanloop.read(VENT, ['loop.method="substitution"', "loop.passes=300"]).solve(),
        "batch": leanloop.read(VENT).solve({"feeds.steam.flow": np.array([0.02, 0.025, 0.03])}),
        "unequal": leanloop.read(VENT).solve({"units.wash.stages": np.array([5, 8])}),
        "leaky": leanloop.read(VENT).solve({"units.divide.shares.bleed": np.array([0.002, 0.0])}),
        "column": scenes.solve(tmp_path_factory.mktemp("column"), column),
        "two loops": Shown(vent, two_loops),
        "crowded": Shown(vent, warm_and_crowded),
    }


PROFILES = {
    "wash": ("vent", "wash"), "strip": ("vent", "strip"), "two move": ("scrubber", "scrub"), "tall": ("tall", "wash"),
    "case": ("batch", "strip", 1), "crowded": ("crowded", "wash"), "unsolved": ("leaky", "wash", 1),
    "unequal": ("unequal", "wash", 1), "column": ("column", "column"),
}  # fmt: skip
LOOPS = {"newton": ("vent",), "slow": ("slow",), "case": ("batch", 2), "two loops": ("two loops",)}
NAMES = (
    [("stages", name) for name in DIAGRAMS] + [("window", name) for name in WINDOWS]
    + [("profiles", name) for name in PROFILES] + [("convergence", name) for name in LOOPS]
)  # fmt: skip
SOME = [("stages", "eight stages"), ("window", "whole"), ("profiles", "two move"), ("convergence", "two loops")]


def drawn(sort, name, results):
    if sort == "stages":
        return stage_diagram.figure(DIAGRAMS[name])
    if sort == "window":
        return window.figure(WINDOWS[name])
    key, *rest = (PROFILES if sort == "profiles" else LOOPS)[name]
    return (profiles if sort == "profiles" else convergence).figure(results[key], *rest)


@pytest.fixture(scope="module")
def pictures(results):
    return {key: drawn(*key, results) for key in NAMES}


def lines(figure):
    """Lines that carry data, by gid."""
    return {line.get_gid(): line for axes in figure.axes for line in axes.lines if line.get_gid()}


def data_of(line):
    return np.asarray(line.get_xdata(), dtype=float), np.asarray(line.get_ydata(), dtype=float)


def panel(figure, gid):
    return next(axes for axes in figure.axes if axes.get_gid() == gid)


def text_of(figure, gid):
    return next(text.get_text() for text in figure.texts if text.get_gid() == gid).replace("\n", " ")


@pytest.mark.filterwarnings("ignore:Glyph .* missing from font")
class TestEveryPicture:
    @pytest.mark.parametrize("key", NAMES, ids="-".join)
    def test_texts_keep_apart_and_on_the_paper(self, pictures, key):
        figure = pictures[key]
        figure.draw_without_rendering()
        # labels of ticks outside the limits are kept by the library but never drawn
        hidden = {id(label) for axes in figure.axes for axis in (axes.xaxis, axes.yaxis) for label in _hidden(axis)}
        shown = [
            (text.get_text(), text.get_window_extent()) for text in figure.findobj(matplotlib.text.Text)
            if text.get_visible() and text.get_text().strip() and id(text) not in hidden
        ]  # fmt: skip
        assert len(shown) > 8
        paper = figure.bbox
        for text, box in shown:
            assert box.x0 >= paper.x0 and box.x1 <= paper.x1 and box.y0 >= paper.y0 and box.y1 <= paper.y1, text
        for (one, first), (other, second) in combinations(shown, 2):
            across = min(first.x1, second.x1) - max(first.x0, second.x0)
            up = min(first.y1, second.y1) - max(first.y0, second.y0)
            assert min(across, up) < 1.0, (one, other)  # dots

    @pytest.mark.parametrize("key", NAMES, ids="-".join)
    def test_legend_lies_off_all_axes(self, pictures, key):
        figure = pictures[key]
        figure.draw_without_rendering()
        (legend,) = figure.legends
        box = legend.get_window_extent()
        assert all(box.y1 < axes.get_window_extent().y0 for axes in figure.axes)
        for axes in figure.axes:
            label = axes.xaxis.label.get_window_extent()
            assert box.y1 < label.y0

    @pytest.mark.parametrize("key", NAMES, ids="-".join)
    def test_lines_can_be_told_apart_without_colour(self, pictures, key):
        for axes in pictures[key].axes:
            looks = [(str(line._unscaled_dash_pattern), str(line.get_marker())) for line in axes.lines if len(line.get_xdata())]
            named = [line.get_gid() for line in axes.lines]
            twins = [pair for pair in combinations(zip(looks, named, strict=True), 2) if pair[0][0] == pair[1][0]]
            # the two edges of a window are one thing, and say so in the legend
            assert [pair for pair in twins if {pair[0][1], pair[1][1]} != {"least", "most"}] == []

    @pytest.mark.parametrize("key", NAMES, ids="-".join)
    def test_axes_say_their_units(self, pictures, key):
        for axes in pictures[key].axes:
            across, up = (label.replace("\n", " ") for label in (axes.get_xlabel(), axes.get_ylabel()))
            assert re.search(r"mol .*per mol|mol per mol|kmol/h|degC|^pass$", across)
            assert not up or re.search(r"mol .*per mol|mol per mol|^stage, 1 at the top$", up)

    @pytest.mark.parametrize("key", NAMES, ids="-".join)
    def test_width_fits_a_page(self, pictures, key):
        assert pictures[key].get_figwidth() * 25.4 <= 170.01
        assert pictures[key].get_figheight() * 25.4 <= 130


def _hidden(axis):
    low, high = sorted(axis.get_view_interval())
    for tick in (*axis.get_major_ticks(), *axis.get_minor_ticks()):
        if not low <= tick.get_loc() <= high or not tick.label1.get_visible():
            yield tick.label1
        yield tick.label2


class TestFiles:
    @pytest.mark.parametrize("key", SOME, ids="-".join)
    def test_same_bytes_from_a_figure_made_anew(self, results, pictures, key):
        again = drawn(*key, results)
        assert base.svg(again, "one") == base.svg(pictures[key], "one")  # saved in another order than below
        assert base.png(again) == base.png(pictures[key])
        assert base.svg(again, "one") == base.svg(pictures[key], "one")

    @pytest.mark.parametrize("key", SOME, ids="-".join)
    def test_png_is_one_and_has_the_size(self, pictures, key):
        data = base.png(pictures[key])
        assert data.startswith(b"\x89PNG\r\n\x1a\n")
        assert int.from_bytes(data[16:20], "big") == pytest.approx(pictures[key].get_figwidth() * 150, abs=1)
        assert b"Software" not in data and b"tIME" not in data

    @pytest.mark.parametrize("key", SOME, ids="-".join)
    def test_svg_parts_refer_to_themselves(self, pictures, key):
        text = base.svg(pictures[key], "my picture")
        root = ET.fromstring(text)
        assert root.tag.endswith("svg") and root.get("id") == "my-picture"
        names = [item.get("id") for item in root.iter() if item.get("id")]
        assert len(names) == len(set(names)) > 20
        assert all(name.startswith("my-picture") for name in names)
        wanted = set(re.findall(r'href="#([^"]+)"|url\(#([^)]+)\)', text))
        assert {a or b for a, b in wanted} <= set(names)
        style = next(item.text for item in root.iter() if item.tag.endswith("style"))
        assert all(rule.startswith("#my-picture ") for rule in style.strip().splitlines())
        assert "<?xml" not in text and "date" not in text.lower()

    def test_two_in_one_page_share_no_id(self, pictures):
        first, second = (base.svg(pictures[SOME[0]], prefix) for prefix in ("a", "b"))
        ids = [set(re.findall(r'\bid="([^"]+)"', text)) for text in (first, second)]
        assert not ids[0] & ids[1]

    def test_title_is_said_and_escaped(self):
        figure = stage_diagram.figure(DIAGRAMS["odd names"])
        root = ET.fromstring(base.svg(figure))
        assert root[0].tag.endswith("title")
        assert root[0].text == "Stages of a$b, $苯_2$"
        assert base.png(figure).startswith(b"\x89PNG")

    def test_own_settings_of_the_user_change_nothing_and_are_kept(self, pictures):
        plain = base.svg(pictures[SOME[0]])
        with matplotlib.rc_context({"font.size": 30.0, "lines.linewidth": 9.0, "svg.fonttype": "none", "axes.grid": False}):
            assert base.svg(stage_diagram.figure(DIAGRAMS["eight stages"])) == plain
            assert matplotlib.rcParams["font.size"] == 30.0
            assert matplotlib.rcParams["svg.fonttype"] == "none"

    def test_no_pyplot(self):
        code = (
            "import sys\nfrom leanloop.pictures import base, convergence, profiles, stage_diagram, window\n"
            "assert 'matplotlib' not in sys.modules\n"
            "base.png(base.canvas(80, 60, 'Title', 'note'))\nassert 'matplotlib.pyplot' not in sys.modules"
        )
        done = subprocess.run([sys.executable, "-W", "error", "-c", code], capture_output=True, text=True, check=False)
        assert done.returncode == 0, done.stderr

    def test_without_the_library_the_extra_is_named(self, monkeypatch, results):
        for name in [name for name in sys.modules if name.split(".")[0] == "matplotlib"]:
            monkeypatch.delitem(sys.modules, name)
        monkeypatch.setitem(sys.modules, "matplotlib", None)
        for call in (
            lambda: base.canvas(100, 100),
            lambda: stage_diagram.figure(DIAGRAMS["three stages"]),
            lambda: window.figure(WINDOWS["whole"]),
            lambda: profiles.figure(results["vent"], "wash"),
            lambda: convergence.figure(results["vent"]),
        ):
            with pytest.raises(MissingExtra, match=re.escape('pip install "leanloop[pictures]"')):
                call()


class TestStages:
    @pytest.mark.parametrize("name", DIAGRAMS)
    def test_lines_are_those_of_the_diagram(self, pictures, name):
        diagram, found = DIAGRAMS[name], lines(pictures["stages", name])
        for part in ("equilibrium", "operating", "steps", "least"):
            wanted = getattr(diagram, f"{part}_x")
            assert (part in found) == (wanted is not None)
            if wanted is not None:
                np.testing.assert_array_equal(data_of(found[part]), [wanted, getattr(diagram, f"{part}_y")])

    @pytest.mark.parametrize("name", [name for name in DIAGRAMS if name not in ("tangent", "no curve")])
    def test_drawn_steps_go_from_line_to_line_with_a_marker_at_each_stage(self, pictures, name):
        diagram, found = DIAGRAMS[name], lines(pictures["stages", name])
        x, y = data_of(found["steps"])
        operating = np.interp(x, *data_of(found["operating"]))
        equilibrium = ratios(0.125 if diagram.kind == "absorber" else 1.5, name in ("forty stages", "many stages"))[0](x)
        np.testing.assert_allclose(y[::2], operating[::2], rtol=1e-9, atol=1e-15)
        np.testing.assert_allclose(y[1::2], equilibrium[1::2], rtol=1e-9)
        assert found["steps"].get_markevery() == list(range(1, len(x), 2))

    @pytest.mark.parametrize("name", DIAGRAMS)
    def test_limits_hold_the_ends_and_little_more(self, pictures, name):
        diagram, figure = DIAGRAMS[name], pictures["stages", name]
        far = name == "far from least"
        for axis in "xy":
            values = [getattr(diagram, f"operating_{axis}"), getattr(diagram, f"stages_{axis}")]
            if diagram.least_x is not None and not far:
                values.append(getattr(diagram, f"least_{axis}"))
            values = np.concatenate(values)
            low, high = getattr(panel(figure, "linear"), f"get_{axis}lim")()
            assert low <= values.min() and values.max() <= high <= 1.6 * values.max()
            assert low >= 0
            if values.min() < 0.4 * values.max():
                assert low == 0

    def test_a_pinch_far_away_is_told_and_not_drawn(self, pictures):
        figure, pinch = pictures["stages", "far from least"], DIAGRAMS["far from least"].pinch
        assert "pinch" not in lines(figure)
        assert f"pinch outside the picture, at X = {pinch.x:.3g}" in text_of(figure, "note")

    @pytest.mark.parametrize(("name", "words"), [("fresh solvent", "pinch at the rich end"), ("tangent", "pinch: tangent"),
                                                 ("stripper", "pinch at the rich end")])  # fmt: skip
    def test_pinch_stands_where_it_is_with_its_kind(self, pictures, name, words):
        figure, pinch = pictures["stages", name], DIAGRAMS[name].pinch
        for gid in ("pinch", "log-pinch"):
            x, y = data_of(lines(figure)[gid])
            assert (x.tolist(), y.tolist()) == ([pinch.x], [pinch.y])
        assert words in [text.get_text() for text in figure.legends[0].get_texts()]
        assert lines(figure)["pinch"].get_markersize() > lines(figure)["steps"].get_markersize()

    def test_tangent_line_of_the_scene_touches(self):
        diagram = DIAGRAMS["tangent"]
        gap = np.interp(diagram.equilibrium_x, diagram.least_x, diagram.least_y) - diagram.equilibrium_y
        inside = diagram.equilibrium_x <= diagram.least_x[1]
        assert abs(gap[inside].min()) < 1e-12 and 0 < diagram.pinch.x < diagram.least_x[1]

    @pytest.mark.parametrize("name", DIAGRAMS)
    def test_second_panel_where_lean_stages_would_vanish(self, pictures, name):
        diagram, figure = DIAGRAMS[name], pictures["stages", name]
        share = min(diagram.stages_x.min() / diagram.operating_x.max(), diagram.stages_y.min() / diagram.operating_y.max())
        assert (len(figure.axes) == 2) == (share < 0.03) == stage_diagram.needs_log(diagram)
        if len(figure.axes) == 2:
            axes = panel(figure, "log")
            assert axes.get_xscale() == axes.get_yscale() == "log"
            (low, high), (bottom, top) = axes.get_xlim(), axes.get_ylim()
            assert np.all((diagram.stages_x > low) & (diagram.stages_x < high))
            assert np.all((diagram.stages_y > bottom) & (diagram.stages_y < top))
            assert low > diagram.stages_x.min() / 50 and bottom > diagram.stages_y.min() / 50

    def test_straight_lines_are_curved_on_log_scales(self, pictures):
        diagram, found = DIAGRAMS["removal 0.9999"], lines(pictures["stages", "removal 0.9999"])
        x, y = data_of(found["log-operating"])
        assert len(x) > 100
        np.testing.assert_allclose(y, np.interp(x, diagram.operating_x, diagram.operating_y), rtol=1e-12)

    def test_every_stage_is_numbered_on_log_scales_from_the_top(self, pictures):
        for name, lean in (("removal 0.9999", 1), ("stripper", 7)):
            diagram, axes = DIAGRAMS[name], panel(pictures["stages", name], "log")
            spots = {int(text.get_text()): text.xy for text in axes.texts}
            assert set(spots) >= set(range(2, len(diagram.stages_x)))
            for number, spot in spots.items():
                assert spot == (diagram.stages_x[number - 1], diagram.stages_y[number - 1])
            assert diagram.stages_x.argmin() + 1 == lean

    def test_many_stages_are_numbered_in_round_steps(self, pictures):
        for name, every in (("forty stages", 5), ("many stages", 10)):
            count = len(DIAGRAMS[name].stages_x)
            numbers = [int(text.get_text()) for text in panel(pictures["stages", name], "linear").texts]
            assert len(numbers) > 3 and all(number % every == 0 or number in (1, count) for number in numbers)

    def test_points_that_are_no_curve_are_said_to_be_points(self, pictures):
        figure = pictures["stages", "no curve"]
        words = [text.get_text() for text in figure.legends[0].get_texts()]
        assert "equilibrium at the stages (no curve of X alone)" in words and "equilibrium" not in words
        assert lines(figure)["equilibrium"].get_marker() == "s"
        assert lines(figure)["equilibrium"].get_linewidth() < 1

    def test_title_and_note_tell_rates_and_stages(self, pictures):
        diagram, figure = DIAGRAMS["eight stages"], pictures["stages", "eight stages"]
        assert text_of(figure, "title") == "Stages of wash, benzene"
        note = text_of(figure, "note")
        assert "absorber of 8 equilibrium stages, 7.75 needed" in note
        assert f"oil at {diagram.ratio_to_least:.3g} times the least rate of 1.44 kmol/h" in note
        assert "steam at" in text_of(pictures["stages", "stripper"], "note")
        assert "no least rate of oil known" in text_of(pictures["stages", "no pinch"], "note")
        assert "absorber of 1 equilibrium stage," in text_of(pictures["stages", "one stage"], "note")

    def test_labels_name_component_and_what_it_refers_to(self, pictures):
        axes = panel(pictures["stages", "stripper"], "linear")
        assert (axes.get_xlabel(), axes.get_ylabel()) == ("X, mol benzene per mol oil", "Y, mol benzene per mol steam")


class TestWindow:
    @pytest.mark.parametrize("name", WINDOWS)
    def test_curves_and_limits_are_those_given(self, pictures, name):
        given, found = WINDOWS[name], lines(pictures["window", name])
        np.testing.assert_array_equal(data_of(found["outlet"]), [given.circulation * 3.6, given.outlet])
        assert ("unlimited" in found) == bool(np.isfinite(given.outlet_unlimited).any())
        if "unlimited" in found:
            np.testing.assert_array_equal(found["unlimited"].get_ydata(), given.outlet_unlimited)
        for gid in ("least", "most"):
            value = getattr(given, gid)
            assert (gid in found) == (value is not None)
            if value is not None:
                assert list(found[gid].get_xdata()) == pytest.approx([3.6 * value] * 2, rel=1e-15)
        assert ("required" in found) == (given.required is not None)
        if given.required is not None:
            assert list(found["required"].get_ydata()) == [given.required] * 2
        for gid in ("turning", "turning-unlimited", "operating"):
            spot = getattr(given, gid.replace("-", "_"))
            assert (gid in found) == (spot is not None and spot[1] > 1e-100)
            if gid in found:
                assert data_of(found[gid]) == ([pytest.approx(3.6 * spot[0], rel=1e-15)], [spot[1]])

    @pytest.mark.parametrize(("name", "ends"), [
        ("whole", (0.68, 1.38)), ("one side", (0.5, None)), ("empty", None), ("gaps", None),
    ])  # fmt: skip
    def test_window_is_shaded(self, pictures, name, ends):
        axes = panel(pictures["window", name], "window")
        shades = [patch for patch in axes.patches if patch.get_gid() == "allowed"]
        assert len(shades) == (ends is not None)
        if ends:
            box = shades[0].get_path().get_extents(shades[0].get_patch_transform())
            assert box.x0 == pytest.approx(3.6 * ends[0], rel=1e-12)
            assert box.x1 == pytest.approx(3.6 * ends[1], rel=1e-12) if ends[1] else box.x1 > axes.get_xlim()[1]
            assert shades[0].get_hatch()

    @pytest.mark.parametrize(("name", "scale"), [("whole", "log"), ("empty", "log"), ("one side", "linear"), ("gaps", "linear")])
    def test_scale_and_limits(self, pictures, name, scale):
        given, axes = WINDOWS[name], panel(pictures["window", name], "window")
        assert axes.get_yscale() == scale
        values = np.concatenate([given.outlet, given.outlet_unlimited, [given.operating[1]]])
        values = values[np.isfinite(values)]
        low, high = axes.get_ylim()
        assert low < values.min() and values.max() < high <= 1.6 * values.max()
        assert given.required is None or low < given.required < high
        left, right = axes.get_xlim()
        assert left <= 3.6 * given.circulation[0] and 3.6 * given.circulation[-1] <= right <= 1.1 * 3.6 * given.circulation[-1]
        assert given.least is None or left < 3.6 * given.least

    def test_next_to_nothing_does_not_flatten_the_rest(self, pictures):
        figure = pictures["window", "deep"]
        axes = panel(figure, "window")
        low, high = axes.get_ylim()
        assert axes.get_yscale() == "log" and 4e-5 / 50 < low < 4e-5 and AS_IS.max() < high < 2 * AS_IS.max()
        assert lines(figure)["unlimited"].get_ydata().min() < 1e-150
        assert "stages without limit, partly below" in [text.get_text() for text in figure.legends[0].get_texts()]

    def test_note_tells_the_window(self, pictures):
        assert "between 2.448 and 4.968 kmol/h" in text_of(pictures["window", "whole"], "note")
        assert "from 1.8 kmol/h on" in text_of(pictures["window", "one side"], "note")
        assert "no window is known" in text_of(pictures["window", "empty"], "note")
        assert "window" not in text_of(pictures["window", "gaps"], "note")


class TestProfiles:
    @pytest.mark.parametrize("name", [name for name in PROFILES if name not in ("crowded", "unsolved")])
    def test_lines_are_those_of_the_result(self, pictures, results, name):
        key, unit, *case = PROFILES[name]
        case = case[0] if case else None
        profile = results[key].to_dict()["units"][unit]["profile"]
        pick = lambda item: item if case is None else item[case]  # noqa: E731
        found = lines(pictures["profiles", name])
        stages = pick(profile["stage"])
        names = list(profile["K"])
        assert set(found) == {f"{letter}-{own}" for letter in "xy" for own in names} | {"liquid-flow", "gas-flow"}
        for own in names:
            for letter in "xy":
                x, y = data_of(found[f"{letter}-{own}"])
                np.testing.assert_array_equal(x, pick(profile[letter][own]))
                np.testing.assert_array_equal(y, stages)
        for gid, own in (("liquid-flow", "liquid_mol_s"), ("gas-flow", "gas_mol_s")):
            np.testing.assert_allclose(found[gid].get_xdata(), 3.6 * np.array(pick(profile[own])), rtol=1e-15)

    def test_the_carriers_that_do_not_move_are_left_out(self, pictures):
        assert not [gid for gid in lines(pictures["profiles", "wash"]) if re.search("air|oil|resin|steam", gid)]

    @pytest.mark.parametrize("name", PROFILES)
    def test_top_is_at_the_top_and_all_is_inside(self, pictures, name):
        figure = pictures["profiles", name]
        for axes in figure.axes:
            bottom, top = axes.get_ylim()
            assert top == 0.5 and bottom > 4
            left, right = axes.get_xlim()
            for line in axes.lines:
                values, stages = data_of(line)
                assert bottom == stages[-1] + 0.5
                values = values[np.isfinite(values)]
                assert np.all((values >= left) & (values <= right))

    def test_log_axis_over_two_decades_alone(self, pictures):
        assert panel(pictures["profiles", "wash"], "liquid").get_xscale() == "log"
        assert panel(pictures["profiles", "wash"], "flows").get_xscale() == "linear"
        axes = panel(pictures["profiles", "column"], "gas")
        assert axes.get_xscale() == "linear" and axes.get_xlim()[0] == 0

    def test_temperature_only_where_it_varies(self, pictures):
        assert len(pictures["profiles", "wash"].axes) == 3
        assert "at 28 degC" in text_of(pictures["profiles", "wash"], "note")
        axes = panel(pictures["profiles", "crowded"], "temperature")
        assert axes.get_xlabel() == "degC"
        np.testing.assert_allclose(axes.lines[0].get_xdata(), 26.85 + 12 * np.sin(np.arange(9) / 3), rtol=1e-12)

    def test_a_case_that_is_not_solved_says_so(self, pictures, results):
        assert results["leaky"].status[1] != "converged"
        assert "not solved" in text_of(pictures["profiles", "unsolved"], "note")
        assert "case 1" in text_of(pictures["profiles", "unsolved"], "title")

    def test_what_is_no_column_is_refused(self, results):
        with pytest.raises(InputError, match="units.wsh: is no column of this flowsheet; did you mean 'wash'"):
            profiles.figure(results["vent"], "wsh")
        with pytest.raises(InputError, match="units.preheat"):
            profiles.figure(results["vent"], "preheat")


class TestConvergence:
    @pytest.mark.parametrize("name", LOOPS)
    def test_residuals_by_pass(self, pictures, results, name):
        key, *case = LOOPS[name]
        figure = pictures["convergence", name]
        axes = panel(figure, "convergence")
        assert axes.get_yscale() == "log"
        for place, loop in enumerate(results[key].to_dict()["loops"]):
            history = loop["history"][case[0]] if case else loop["history"]
            x, y = data_of(lines(figure)[f"loop-{place + 1}"])
            assert x.tolist() == list(range(1, len(history) + 1))
            low, high = axes.get_ylim()
            assert y.tolist() == [value or low for value in history]
            assert low <= y.min() and y.max() < high

    def test_zero_is_drawn_at_the_floor_and_said(self, pictures):
        figure = pictures["convergence", "two loops"]
        y = lines(figure)["loop-2"].get_ydata()
        floor = panel(figure, "convergence").get_ylim()[0]
        assert y[-1] == floor < lines(figure)["loop-1"].get_ydata().min()
        assert f"drawn at the floor, 1e{round(np.log10(floor))}" in text_of(figure, "note")
        assert "floor" not in text_of(pictures["convergence", "newton"], "note")

    def test_tolerance_and_loop_are_named(self, pictures, results):
        figure = pictures["convergence", "newton"]
        assert list(lines(figure)["tolerance"].get_ydata()) == [results["vent"].sheet.settings.tolerance] * 2
        words = [text.get_text() for text in figure.legends[0].get_texts()]
        assert words[0] == "wash, preheat, strip, ... (6 in all), torn at cool_lean: 3 passes"

    def test_long_histories_have_few_markers(self, pictures):
        line = lines(pictures["convergence", "slow"])["loop-1"]
        assert len(line.get_xdata()) / line.get_markevery() <= 40

    def test_no_loop_no_picture(self, results):
        assert convergence.figure(results["column"]) is None


def test_looks_differ_for_many_lines():
    seen = {(str(own["linestyle"]), own["marker"]) for own in map(base.look, range(64))}
    assert len(seen) == 64


@pytest.mark.parametrize(("value", "text"), [(4e-5, "4e-5"), (0.00123, "0.00123"), (1.5e7, "1.5e7"), (2e-12, "2e-12"), (0, "0")])
def test_short_numbers(value, text):
    assert base.short(value) == text


def test_wrapping_keeps_breaks_and_every_word():
    text = "one two three four five\nsix"
    found = base.wrapped(text, 20.0, 2.0)
    assert found.splitlines()[-1] == "six" and found.split() == text.split()
    assert all(len(line) <= 10 for line in found.splitlines())
