"""The flowsheet drawing, read back: what is drawn, that nothing lies on anything else, and that it can be read."""

import random
import subprocess
import sys
import time
from functools import cache
from itertools import combinations
from pathlib import Path

import numpy as np
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.colors import to_rgb

import leanloop
from leanloop.entries import Entry
from leanloop.pictures import base, drawing, layout_boxes, layout_labels, layout_ranks
from leanloop.pictures.layout import lay_out
from leanloop.pictures.layout_route import Port, Router, Wire
from leanloop.units import KINDS
from leanloop.units.base import Unit

ROOT = Path(__file__).parent.parent
A4, A3 = (297.0, 210.0), (420.0, 297.0)
SLACK = 1e-6  # mm

# --- flowsheets


def stream(phase):
    flows = {"inert": 10.0, "solute": 0.1} if phase == "gas" else {"oil": 2.0}
    return {"phase": phase, "temperature": 300.0, "pressure": 1e5, "flows": flows}


def column(kind, gas_in, liquid_in, gas_out, liquid_out, stages=8):
    return {"kind": kind, "gas_in": gas_in, "liquid_in": liquid_in, "gas_out": gas_out, "liquid_out": liquid_out,
            "stages": stages, "equilibrium": "here"}


def through(kind, takes, gives, temperature=350.0):
    return {"kind": kind, "takes": takes, "gives": gives, "temperature": temperature}


def mixer(takes, gives):
    return {"kind": "mixer", "takes": takes, "gives": gives}


def splitter(takes, gives, share=0.1):
    return {"kind": "splitter", "takes": takes, "gives": gives, "shares": dict.fromkeys(gives[:-1], share)}


def makeup(takes, gives):
    return {"kind": "makeup", "takes": takes, "gives": gives, "hold": {"oil": 2.0}}


def build(feeds, units, **more):
    components = {"inert": {"stays_in": "gas"}, "oil": {"stays_in": "liquid"}, "solute": {}}
    models = {"here": {"solute": {"model": "constant", "K": 0.3}}}
    return leanloop.Flowsheet(components, models, {name: stream(phase) for name, phase in feeds.items()}, units, **more)


def alone():
    return build({"vent": "gas", "solvent": "liquid"}, {"wash": column("absorber", "vent", "solvent", "clean", "rich")})


def train():
    """Three washes in series, each with its own regenerator: 25 units, three loops."""
    feeds, units, gas = {"raw_gas": "gas"}, {}, "raw_gas"
    for k in (1, 2, 3):
        feeds[f"steam_{k}"] = "gas"
        units |= {
            f"absorber_{k}": column("absorber", gas, f"lean_cool_{k}", f"cleaned_{k}", f"rich_{k}"),
            f"preheater_{k}": through("heater", f"rich_{k}", f"rich_warm_{k}"),
            f"heater_{k}": through("heater", f"rich_warm_{k}", f"rich_hot_{k}", 390.0),
            f"stripper_{k}": column("stripper", f"steam_{k}", f"rich_hot_{k}", f"overhead_{k}", f"lean_{k}"),
            f"splitter_{k}": splitter(f"lean_{k}", [f"bleed_{k}", f"kept_{k}"], 0.01),
            f"makeup_{k}": makeup(f"kept_{k}", f"full_{k}"),
            f"cooler_{k}": through("cooler", f"full_{k}", f"lean_warm_{k}", 320.0),
            f"trim_{k}": through("cooler", f"lean_warm_{k}", f"lean_cool_{k}", 300.0),
        }
        gas = f"cleaned_{k}"
    units["reheat"] = through("heater", gas, "sales_gas", 320.0)
    return build(feeds, units, title="Gas train of three washes in series, each with its own regenerator")


def shared():
    return build({"vent_a": "gas", "vent_b": "gas", "steam": "gas"}, {
        "wash_a": column("absorber", "vent_a", "lean_a", "clean_a", "rich_a"),
        "wash_b": column("absorber", "vent_b", "lean_b", "clean_b", "rich_b"),
        "join": mixer(["rich_a", "rich_b"], "rich"),
        "preheat": through("heater", "rich", "rich_hot"),
        "regenerator": column("stripper", "steam", "rich_hot", "overhead", "lean_hot", 12),
        "condenser": through("cooler", "overhead", "offgas", 300.0),
        "trim": through("cooler", "lean_hot", "lean_cold", 300.0),
        "purge": splitter("lean_cold", ["bleed", "lean_rest"], 0.01),
        "top_up": makeup("lean_rest", "lean_full"),
        "divide": splitter("lean_full", ["lean_a", "lean_b"], 0.5),
    }, requirements={"purity": {"quantity": "streams.rich.fraction.solute", "equals": 0.08, "free": "units.top_up.hold.oil",
                                "between": [0.1, 50.0]}})  # fmt: skip


def once_through():
    return build({"solvent": "liquid", "vent": "gas", "steam": "gas", "second_vent": "gas"}, {
        "chill": through("cooler", "vent", "vent_cold", 295.0),
        "join_gas": mixer(["vent_cold", "second_vent"], "gas"),
        "solvent_cooler": through("cooler", "solvent", "solvent_cold", 295.0),
        "solvent_split": splitter("solvent_cold", ["to_first", "to_second"], 0.6),
        "first_wash": column("absorber", "gas", "to_first", "half_clean", "rich_first"),
        "second_wash": column("absorber", "half_clean", "to_second", "clean", "rich_second"),
        "join_rich": mixer(["rich_first", "rich_second"], "rich"),
        "preheat": through("heater", "rich", "rich_hot"),
        "strip": column("stripper", "steam", "rich_hot", "overhead", "lean"),
        "condense": through("cooler", "overhead", "offgas", 300.0),
        "cool_lean": through("cooler", "lean", "lean_out", 300.0),
        "reheat": through("heater", "clean", "stack", 330.0),
    })  # fmt: skip


def chance(seed, count):
    """Units of random kinds on random open streams; some mixers take what a later splitter gives back."""
    pick = random.Random(seed)
    feeds, units, loose, asked = {}, {}, {"gas": [], "liquid": []}, []
    number = iter(range(10**6))

    def new(phase):
        return f"{phase[0]}{next(number)}"

    def take(phase):
        if loose[phase] and pick.random() < 0.8:
            return loose[phase].pop(pick.randrange(len(loose[phase])))
        name = new(phase) + "_feed"
        feeds[name] = phase
        return name

    for place in range(count):
        sort = pick.choice(["column", "column", "mixer", "mixer", "splitter", "through"])
        phase = pick.choice(["gas", "liquid", "liquid"])
        if sort == "column":
            gas, liquid = new("gas"), new("liquid")
            units[f"column{place}"] = column(pick.choice(["absorber", "stripper"]), take("gas"), take("liquid"), gas, liquid)
            loose["gas"].append(gas)
            loose["liquid"].append(liquid)
            continue
        out = new(phase)
        if sort == "mixer":
            taken = [take(phase), f"{new(phase)}_back" if pick.random() < 0.6 else take(phase)]
            asked += [(phase, name) for name in taken if name.endswith("_back")]
            units[f"mixer{place}"] = mixer(taken, out)
        elif sort == "splitter":
            more = [new(phase) for _ in range(pick.randint(1, 2))]
            units[f"splitter{place}"] = splitter(take(phase), [*more, out])
            loose[phase] += more
        else:
            units[f"unit{place}"] = through(pick.choice(["heater", "cooler"]), take(phase), out)
        loose[phase].append(out)
    for place, (phase, name) in enumerate(asked):
        units[f"back{place}"] = splitter(take(phase), [name, rest := new(phase)])
        loose[phase].append(rest)
    return build(feeds, units, title=f"Chance {seed}")


class Twin(Unit):
    """Two streams side by side, with ports of four names, as an exchanger has them."""

    kind = "twin"
    entries = tuple(Entry(f"{side}_in", "inlet", required=True, doc="in") for side in ("hot", "cold")) + tuple(
        Entry(f"{side}_out", "outlet", required=True, doc="out") for side in ("hot", "cold")
    )

    def leans_on(self, outlet, what):
        return [(outlet.replace("out", "in"), what)]

    def passes(self, inlet, outlet, components, numbers=None):
        return np.full(len(components), inlet.partition("_")[0] == outlet.partition("_")[0])

    def phase(self, outlet, phases):
        return phases.get(outlet.replace("out", "in"))

    def sections(self):
        return [(("hot_in",), ("hot_out",)), (("cold_in",), ("cold_out",))]

    def calculate(self, inlets, numbers):
        return {label.replace("in", "out"): inlet for label, inlet in inlets.items()}


def exchanged():
    """The lean liquid warms the rich one, and four outlets leave one unit."""
    units = {
        "wash": column("absorber", "vent", "cool", "clean", "rich"),
        "economiser_between_lean_and_rich": {"kind": "twin", "hot_in": "lean", "hot_out": "lean_2", "cold_in": "rich",
                                             "cold_out": "rich_2"},
        "strip": column("stripper", "steam", "rich_2", "overhead", "lean", 40),
        "divide": splitter("lean_2", ["a_rather_long_name_of_a_bleed-that_goes_on", "b", "c", "kept"], 0.01),
        "top_up": makeup("kept", "cool"),
    }  # fmt: skip
    KINDS.add(Twin.kind, Twin)
    try:
        return build({"vent": "gas", "steam": "gas"}, units)
    finally:
        KINDS.remove(Twin.kind)


def from_file(name):
    return leanloop.read(ROOT / "flowsheets" / f"{name}.toml")


SHEETS = {
    "coating_vent": lambda: from_file("coating_vent"),
    "acetone_scrubber": lambda: from_file("acetone_scrubber"),
    "alone": alone,
    "train": train,
    "shared": shared,
    "once_through": once_through,
    "exchanged": exchanged,
    **{f"chance {seed}": lambda seed=seed, count=count: chance(seed, count)
       for seed, count in enumerate((3, 5, 8, 10, 12, 14, 16, 18, 20, 25, 25, 40))},
}  # fmt: skip
DRAWN = [name for name in SHEETS if not name.startswith("chance")] + ["chance 3", "chance 7", "chance 9", "chance 11"]
SOLVED = ["coating_vent", "acetone_scrubber", "alone", "train", "once_through"]


@cache
def sheet_of(name):
    return SHEETS[name]()


@cache
def laid(name):
    return lay_out(sheet_of(name))


@cache
def drawn(name, solved=False):
    sheet = sheet_of(name)
    return drawing.figure(sheet, sheet.solve() if solved else None)


def artists(figure, kind):
    """Artists by gid, for gids that open with a word; a gid that comes twice fails."""
    found = {}
    for item in figure.axes[0].get_children():
        gid = item.get_gid() or ""
        if gid.startswith(kind + ":"):
            assert gid not in found, gid
            found[gid] = item
    return found


# --- what must not be, each found by a function that is itself tested below


def segments(layout):
    return [(name, a, b) for name, route in layout.routes.items() for a, b in zip(route.points, route.points[1:])]


def overlaps(extents, apart=0.0):
    """Pairs of names whose extents (left, bottom, right, top) share ground."""
    return [
        (one, other)
        for (one, a), (other, b) in combinations(extents, 2)
        if a[0] < b[2] - apart and b[0] < a[2] - apart and a[1] < b[3] - apart and b[1] < a[3] - apart
    ]


def entered(layout):
    """(stream, box) where a stream runs inside a box or along its edge; at its own ends it may touch."""
    found = []
    for name, a, b in segments(layout):
        low, high = np.minimum(a, b), np.maximum(a, b)
        for key, (left, bottom, right, top) in layout.extents.items():
            touch = low[0] <= right + SLACK and left - SLACK <= high[0] and low[1] <= top + SLACK and bottom - SLACK <= high[1]
            inside = low[0] < right - SLACK and left + SLACK < high[0] and low[1] < top - SLACK and bottom + SLACK < high[1]
            link = layout.routes[name].link
            if inside or touch and key not in (link.source, link.target):
                found.append((name, key))
    return found


def on_one_track(layout):
    """Pairs of streams that run on top of each other, or touch otherwise than by crossing."""
    found = []
    for (one, a, b), (other, c, d) in combinations(segments(layout), 2):
        if one == other:
            continue
        low = np.maximum(np.minimum(a, b), np.minimum(c, d))
        high = np.minimum(np.maximum(a, b), np.maximum(c, d))
        if (low > high + SLACK).any():
            continue
        crossing = (a[0] == b[0]) != (c[0] == d[0])
        ends = any(abs(low[0] - x) + abs(low[1] - y) < 1e-3 for x, y in (a, b, c, d))
        if not crossing or ends:
            found.append((one, other))
    return found


# --- tests of the layout


@pytest.mark.parametrize("name", SHEETS)
class TestLayout:
    def test_every_box_and_stream_is_there(self, name):
        sheet, layout = sheet_of(name), laid(name)
        structure = sheet.plan.structure
        wanted = [("unit", unit) for unit in sheet.units] + [("feed", feed) for feed in sheet.feeds]
        wanted += [("product", product) for product in structure.products]
        assert sorted(layout.boxes) == sorted(layout.extents) == sorted(wanted)
        assert sorted(layout.routes) == sorted(structure.streams)

    def test_boxes_stand_apart(self, name):
        assert overlaps(laid(name).extents.items(), -1.0) == []

    def test_no_stream_enters_a_box(self, name):
        assert entered(laid(name)) == []

    def test_no_two_streams_on_one_track(self, name):
        assert on_one_track(laid(name)) == []

    def test_streams_end_at_the_edges_of_their_boxes(self, name):
        layout = laid(name)
        for route in layout.routes.values():
            for key, (x, y), (ox, oy) in ((route.link.source, *route.points[:2]), (route.link.target, *route.points[:-3:-1])):
                left, bottom, right, top = layout.extents[key]
                sides = {"left": abs(x - left), "right": abs(x - right), "bottom": abs(y - bottom), "top": abs(y - top)}
                side = min(sides, key=sides.get)
                assert sides[side] < SLACK
                assert left - SLACK <= x <= right + SLACK and bottom - SLACK <= y <= top + SLACK
                out = {"left": ox < x, "right": ox > x, "bottom": oy < y, "top": oy > y}
                assert out[side], "it leaves its box outwards"

    def test_ports_of_columns(self, name):
        layout = laid(name)
        for route in layout.routes.values():
            link = route.link
            for unit, label, (_, y) in ((link.maker, link.outlet, route.points[0]), (link.taker, link.inlet, route.points[-1])):
                if unit and layout.boxes["unit", unit].column:
                    _, bottom, _, top = layout.extents["unit", unit]
                    share = (y - bottom) / (top - bottom)
                    low, high = {"gas_out": (1, 1), "liquid_out": (0, 0), "liquid_in": (0.8, 0.99), "gas_in": (0.01, 0.2)}[label]
                    assert low - 1e-9 <= share <= high + 1e-9, (link.name, label, share)

    def test_other_units_take_in_on_the_left_and_give_out_on_the_right(self, name):
        layout = laid(name)
        for route in layout.routes.values():
            link = route.link
            if link.maker and not layout.boxes["unit", link.maker].column:
                assert route.points[0][0] > layout.extents["unit", link.maker][0] + SLACK
            if link.taker and not layout.boxes["unit", link.taker].column:
                assert route.points[-1][0] < layout.extents["unit", link.taker][2] - SLACK

    def test_columns_are_tall(self, name):
        layout = laid(name)
        for (sort, unit), box in layout.boxes.items():
            if sort == "unit":
                left, bottom, right, top = layout.extents[sort, unit]
                assert box.column == hasattr(sheet_of(name).units[unit], "cleans")
                if box.column:
                    assert top - bottom >= 30.0
                    assert top - bottom > right - left

    def test_everything_is_on_the_paper(self, name):
        layout = laid(name)
        extents = [*layout.extents.values(), *(label.extent for label in layout.labels)]
        extents += [(*np.minimum(a, b), *np.maximum(a, b)) for _, a, b in segments(layout)]
        low, high = np.array(extents)[:, :2].min(axis=0), np.array(extents)[:, 2:].max(axis=0)
        assert (low > 1.0).all()
        assert (high < np.array([layout.width, layout.height]) - 1.0).all()

    def test_again_the_same(self, name):
        assert repr(lay_out(SHEETS[name]())) == repr(laid(name))


# --- tests of the figure


def renderer_of(figure):
    canvas = FigureCanvasAgg(figure)
    canvas.draw()
    return canvas.get_renderer()


def extents_of(figure, items):
    found, renderer = [], renderer_of(figure)
    inverse = figure.axes[0].transData.inverted()
    for item in items:
        box = item.get_window_extent(renderer).transformed(inverse)
        found.append((item.get_gid() or item.get_text(), (box.x0, box.y0, box.x1, box.y1)))
    return found


@pytest.mark.parametrize(("name", "solved"), [(name, False) for name in DRAWN] + [(name, True) for name in SOLVED])
class TestFigure:
    def test_each_thing_is_drawn_once(self, name, solved):
        sheet, figure = sheet_of(name), drawn(name, solved)
        streams = sheet.plan.structure.streams
        assert sorted(artists(figure, "unit")) == sorted(f"unit:{unit}" for unit in sheet.units)
        assert sorted(artists(figure, "feed")) == sorted(f"feed:{feed}" for feed in sheet.feeds)
        assert sorted(artists(figure, "product")) == sorted(f"product:{item}" for item in sheet.plan.structure.products)
        assert sorted(artists(figure, "stream")) == sorted(f"stream:{item}" for item in streams)
        assert sorted(artists(figure, "head")) == sorted(f"head:{item}" for item in streams)

    def test_each_stream_is_named_once(self, name, solved):
        sheet, texts = sheet_of(name), artists(drawn(name, solved), "text")
        inner = [item for item in sheet.plan.structure.streams if item in sheet.plan.structure.takers and item not in sheet.feeds]
        names = [gid for gid in texts if gid.startswith("text:stream:") and gid.count(":") == 2]
        assert sorted(names) == sorted(f"text:stream:{item}" for item in inner)
        for item in inner:
            assert texts[f"text:stream:{item}"].get_text() == item
        for sort, items in (("unit", sheet.units), ("feed", sheet.feeds), ("product", sheet.plan.structure.products)):
            for item in items:
                lines = [text.get_text() for gid, text in texts.items() if gid.rpartition(":")[0] == f"text:{sort}:{item}"]
                assert "".join(lines).startswith(item)
                if sort == "unit":
                    assert sheet.units[item].kind in lines
                    stages = sheet.units[item].values.numbers.get("stages")
                    assert stages is None or f"{stages} stages" in lines

    def test_tears_are_those_of_the_calculation(self, name, solved):
        sheet, figure = sheet_of(name), drawn(name, solved)
        tears = sheet.check()["tears"]
        assert sorted(artists(figure, "tear")) == sorted(f"tear:{item}{bar}" for item in tears for bar in ("", ":2"))
        texts = {gid: text for gid, text in artists(figure, "text").items() if gid.startswith("text:tear:")}
        assert sorted(texts) == sorted(f"text:tear:{item}" for item in tears)
        assert {text.get_text() for text in texts.values()} <= {"tear"}
        for item in tears:
            bars = [artists(figure, "tear")[f"tear:{item}{bar}"].get_xydata() for bar in ("", ":2")]
            line = artists(figure, "stream")[f"stream:{item}"].get_xydata()
            middle = np.concatenate(bars).mean(axis=0)
            low, high = np.minimum(line[:-1], line[1:]) - SLACK, np.maximum(line[:-1], line[1:]) + SLACK
            assert ((low <= middle) & (middle <= high)).all(axis=1).any()

    def test_loops_are_those_of_the_calculation(self, name, solved):
        sheet, figure = sheet_of(name), drawn(name, solved)
        structure, loops = sheet.plan.structure, sheet.check()["loops"]
        wanted = set()
        for number, units in enumerate(loops):
            for item in sheet.plan.recycled():
                if structure.makers[item][0] in units and structure.takers[item][0] in units:
                    wanted.add(f"loop:{number + 1}:{item}")
        assert set(artists(figure, "loop")) == wanted
        texts = {gid: item.get_text() for gid, item in artists(figure, "text").items() if gid.startswith("text:loop:")}
        assert texts == {f"text:loop:{number + 1}": f"loop {number + 1}" for number in range(len(loops))}

    def test_lines_run_as_laid_out(self, name, solved):
        if not solved:
            for gid, line in artists(drawn(name, solved), "stream").items():
                np.testing.assert_allclose(line.get_xydata(), laid(name).routes[gid.partition(":")[2]].points)

    def test_gas_is_dashed_and_liquid_is_not(self, name, solved):
        for gid, line in artists(drawn(name, solved), "stream").items():
            phase = sheet_of(name).plan.phases[gid.partition(":")[2]]
            assert line.is_dashed() == (phase == "gas")

    def test_texts_touch_nothing(self, name, solved):
        figure = drawn(name, solved)
        texts = artists(figure, "text")
        free = [item for gid, item in texts.items() if gid.split(":")[1] in ("stream", "tear", "loop")]
        free = extents_of(figure, free)
        legend = extents_of(figure, [*artists(figure, "legend").values(), *figure.texts])
        boxes = extents_of(figure, [item for sort in ("unit", "feed", "product") for item in artists(figure, sort).values()])
        assert overlaps(free + legend) == []
        assert [pair for pair in overlaps(free + legend + boxes) if pair[0].startswith("text:")] == []
        lines = []
        for gid, line in artists(figure, "stream").items():
            for a, b in zip(line.get_xydata(), line.get_xydata()[1:]):
                lines.append((gid, (*np.minimum(a, b) - 0.1, *np.maximum(a, b) + 0.1)))
        bars = [(gid, (*item.get_xydata().min(axis=0), *item.get_xydata().max(axis=0)))
                for gid, item in artists(figure, "tear").items()]  # fmt: skip
        for gid, extent in free + legend:
            for other, ground in lines + bars:
                assert overlaps([(gid, extent), (other, ground)]) == []

    def test_texts_of_boxes_stay_inside(self, name, solved):
        figure = drawn(name, solved)
        boxes = dict(extents_of(figure, [item for sort in ("unit", "feed", "product") for item in artists(figure, sort).values()]))
        texts = [item for gid, item in artists(figure, "text").items() if gid.split(":")[1] in ("unit", "feed", "product")]
        for gid, (left, bottom, right, top) in extents_of(figure, texts):
            box = boxes[gid.split(":", 1)[1].rpartition(":")[0]]
            assert box[0] < left and right < box[2] and box[1] < bottom and top < box[3], gid

    def test_it_can_be_read_on_paper(self, name, solved):
        figure = drawn(name, solved)
        across, up = figure.get_size_inches() * 25.4
        on_a3 = min(1.0, A3[0] / across, A3[1] / up)  # a larger sheet is printed smaller
        sizes = [item.get_fontsize() for item in (*artists(figure, "text").values(), *artists(figure, "legend").values())]
        assert min(sizes) >= 6.0
        if len(sheet_of(name).units) <= 25 and not name.startswith("chance"):
            assert min(sizes) * on_a3 >= 6.0
        if len(sheet_of(name).units) <= 7:
            assert (across, up) == pytest.approx(A4)


class TestDrawing:
    def test_25_units_with_three_loops_fill_a3(self):
        sheet = sheet_of("train")
        assert (len(sheet.units), len(sheet.check()["loops"]), len(sheet.check()["tears"])) == (25, 3, 3)
        assert drawn("train").get_size_inches() * 25.4 == pytest.approx(A3)

    def test_some_chance_flowsheets_have_loops(self):
        assert sum(len(sheet_of(name).check()["loops"]) for name in SHEETS if name.startswith("chance")) >= 5

    def test_same_file_again(self):
        one, other = (base.png(drawing.figure(from_file("coating_vent")), 50) for _ in range(2))
        assert one == other
        assert base.svg(drawing.figure(from_file("coating_vent"))) == base.svg(drawing.figure(from_file("coating_vent")))

    def test_flows_and_temperatures(self):
        sheet = sheet_of("coating_vent")
        result = sheet.solve()
        texts = {gid: item.get_text() for gid, item in artists(drawn("coating_vent", True), "text").items()}
        assert texts["text:stream:cool_lean:1"] == f"{result['streams.cool_lean.total_mol_s'] * 3.6:.4g} kmol/h"
        assert texts["text:stream:cool_lean:2"] == "28.0 °C"
        assert [texts[f"text:feed:steam:{k}"] for k in range(3)] == ["steam", "4.162 kmol/h", "155.0 °C"]

    def test_a_case_axis_leaves_names_alone(self):
        sheet = sheet_of("coating_vent")
        result = sheet.solve({"units.trim.temperature": np.array([300.0, 305.0])})
        assert drawing.stream_data(sheet, result) == {}
        assert drawing.stream_data(sheet, None) == {}

    def test_what_failed_has_no_numbers(self):
        sheet = sheet_of("coating_vent")
        result = sheet.solve({"feeds.steam.flow": "1e-9 kg/h"})
        shown = drawing.stream_data(sheet, result)
        flows = {name: float(result.stream(name).total) for name in sheet.plan.structure.streams}
        assert set(shown) == {name for name, flow in flows.items() if np.isfinite(flow)}
        assert not any("nan" in text for text in shown.values())

    def test_requirements_stand_where_they_belong(self):
        texts = {gid: item.get_text() for gid, item in artists(drawn("coating_vent"), "text").items()}
        assert "required: emission" in [text for gid, text in texts.items() if gid.startswith("text:product:cleaned:")]
        assert "freed: hold.oil" in [text for gid, text in texts.items() if gid.startswith("text:unit:top_up:")]
        assert sum("emission" in text for text in texts.values()) == 1
        inner = {gid: item.get_text() for gid, item in artists(drawn("shared"), "text").items()}
        assert inner["text:stream:rich:1"] == "required: purity"

    def test_a_freed_feed_says_so(self):
        sheet = build({"vent": "gas", "solvent": "liquid"}, {"wash": column("absorber", "vent", "solvent", "clean", "rich")},
                      requirements={"enough": {"quantity": "units.wash.results.removal.solute", "equals": 0.9,
                                               "free": "feeds.solvent.flows.oil", "between": [0.1, 50.0]}})  # fmt: skip
        lines = {key: [text for _, text in box.lines] for key, box in lay_out(sheet).boxes.items()}
        assert "freed: flows.oil" in " ".join(lines["feed", "solvent"])
        assert "required: enough" in lines["unit", "wash"]

    def test_long_names_of_streams_side_by_side(self):
        names = [f"one_of_three_parts_of_a_stream_{number}" for number in range(3)]
        layout = lay_out(build({"solvent": "liquid"}, {"part": splitter("solvent", names), "join": mixer(names, "all")}))
        labels = [label for label in layout.labels if label.sort == "stream"]
        assert sorted("".join(label.lines) for label in labels) == names
        ground = [(name, (*np.minimum(a, b), *np.maximum(a, b) + SLACK)) for name, a, b in segments(layout)]
        assert overlaps([(label.name, label.extent) for label in labels]) == []
        for label in labels:
            assert [overlaps([("text", label.extent), line]) for line in ground] == [[]] * len(ground)

    def test_it_tells_apart_without_colour(self):
        grey = lambda colour: np.dot(to_rgb(colour), (0.299, 0.587, 0.114))  # noqa: E731
        assert max(map(grey, drawing.COLOURS.values())) < 0.5
        assert min(map(grey, drawing.HALOS)) > 0.75

    def test_a_title_stays_on_the_paper(self):
        sheet = build({"vent": "gas", "solvent": "liquid"}, {"wash": column("absorber", "vent", "solvent", "clean", "rich")},
                      title="A title that is much longer than any paper is wide, " * 6)  # fmt: skip
        figure = drawing.figure(sheet)
        (_, extent), = extents_of(figure, figure.texts)  # fmt: skip
        assert extent[2] < figure.axes[0].get_xlim()[1]

    def test_layout_needs_no_matplotlib(self):
        script = (
            f"import sys\nsys.path.insert(0, {str(ROOT / 'src')!r})\nsys.modules['matplotlib'] = None\nimport leanloop\n"
            "from leanloop.errors import MissingExtra\nfrom leanloop.pictures import drawing, layout\n"
            f"sheet = leanloop.read({str(ROOT / 'flowsheets/coating_vent.toml')!r})\n"
            "print(len(layout.lay_out(sheet).routes))\n"
            "try:\n    drawing.figure(sheet)\nexcept MissingExtra:\n    print('missing')\n"
        )
        done = subprocess.run([sys.executable, "-W", "error", "-c", script], capture_output=True, text=True, timeout=60, check=True)
        assert done.stdout.split() == ["11", "missing"]

    @pytest.mark.bench
    def test_25_units_in_seconds(self):
        sheet, begin = train(), time.perf_counter()
        base.png(drawing.figure(sheet))
        assert time.perf_counter() - begin < 5.0


# --- tests of the parts


class TestChecks:
    """The functions above see what they look for."""

    def moved(self, name, key, x, y):
        layout = lay_out(SHEETS[name]())
        left, bottom, right, top = layout.extents[key]
        layout.extents[key] = (left + x, bottom + y, right + x, top + y)
        return layout

    def test_a_box_on_a_box(self):
        layout = laid("alone")
        left, bottom, _, _ = layout.extents["feed", "vent"]
        x, y, _, _ = layout.extents["unit", "wash"]
        moved = self.moved("alone", ("feed", "vent"), x - left, y - bottom)
        assert overlaps(moved.extents.items())

    def test_a_stream_through_a_box(self):
        layout = laid("coating_vent")
        (ax, ay), (bx, by) = layout.routes["cool_lean"].points[-2:]
        left, bottom, right, top = layout.extents["unit", "preheat"]
        moved = self.moved("coating_vent", ("unit", "preheat"), (ax + bx) / 2 - (left + right) / 2, ay - (bottom + top) / 2)
        assert ("cool_lean", ("unit", "preheat")) in entered(moved)

    def test_two_streams_on_one_track(self):
        layout = lay_out(SHEETS["coating_vent"]())
        layout.routes["rich"].points = [(x + 0.5, y) if number else (x, y) for number, (x, y) in
                                        enumerate(layout.routes["cool_lean"].points)]  # fmt: skip
        assert ("rich", "cool_lean") in on_one_track(layout) or ("cool_lean", "rich") in on_one_track(layout)


class TestRanks:
    def test_links_lead_to_higher_ranks_and_recycles_bind_nothing(self):
        found = layout_ranks.ranks("abcd", [("a", "b"), ("b", "c"), ("c", "a"), ("d", "d")])
        assert [found[name] for name in "abc"] == [0, 1, 2]
        assert found["d"] == 0

    def test_a_source_stands_before_what_it_feeds(self):
        assert layout_ranks.ranks("axbc", [("a", "b"), ("b", "c"), ("x", "c")])["x"] == 1

    def test_rows_are_cut_where_fewest_streams_are(self):
        links = [("a", "b"), ("b", "c"), ("c", "a"), ("c", "d"), ("d", "e"), ("e", "f"), ("f", "d")]
        assert layout_ranks.rows("abcdef", links, 4) == [0, 3]
        assert layout_ranks.rows("abcdef", links, 6) == [0]
        assert len(layout_ranks.rows("abcdef", links, 1)) == 6

    def test_crossings_are_counted(self):
        link = lambda a, b: (a, b, 0.0, 0.0)  # noqa: E731
        assert layout_ranks.crossings([["a", "b"], ["c", "d"]], [[link("a", "d"), link("b", "c")]]) == 1
        assert layout_ranks.crossings([["a", "b"], ["d", "c"]], [[link("a", "d"), link("b", "c")]]) == 0
        # ports on one unit: the lower one to the upper place
        assert layout_ranks.crossings([["a"], ["c", "d"]], [[("a", "c", 0.5, 0.0), ("a", "d", -0.5, 0.0)]]) == 1

    @pytest.mark.parametrize("seed", range(6))
    def test_order_undoes_a_shuffle_of_a_drawing_without_crossings(self, seed):
        pick = random.Random(seed)
        layers = [[(rank, place) for place in range(5)] for rank in range(5)]
        links = [[((rank, place), (rank + 1, place), 0.0, 0.0) for place in range(5)] for rank in range(4)]
        links[0].append(((0, 1), (1, 2), 0.0, 0.0))
        for layer in layers:
            pick.shuffle(layer)
        assert layout_ranks.crossings(layout_ranks.arrange(layers, links, {}), links) == 0

    def test_separate_is_the_least_squares_answer(self):
        from scipy.optimize import minimize

        pick = np.random.default_rng(4)
        for _ in range(10):
            wanted, weights, gaps = pick.normal(size=6), pick.uniform(0.5, 2, 6), pick.uniform(0.2, 1, 5)
            found = np.array(layout_ranks.separate(wanted, weights, gaps))
            assert (np.diff(found) >= gaps - 1e-9).all()
            best = minimize(lambda x, w=weights, a=wanted: (w * (x - a) ** 2).sum(), np.cumsum([0, *gaps]), method="SLSQP",
                            constraints={"type": "ineq", "fun": lambda x, least=gaps: np.diff(x) - least})  # fmt: skip
            assert (weights * (found - wanted) ** 2).sum() <= best.fun + 1e-6

    def test_whole_positions_keep_whole_gaps(self):
        found = layout_ranks.snapped([0.4, 0.5, 5.6], [1, 1, 1], [2, 2])
        assert all(isinstance(value, int) for value in found)
        assert found[1] - found[0] >= 2 and found[2] - found[1] >= 2


class TestRouter:
    def test_the_cheapest_way_round_a_box(self):
        wire = Wire("a", [Port(2, 5, 0)], [Port(18, 5, 2)])
        assert Router(20, 10, [(0, 4, 2, 6), (18, 4, 20, 6), (9, 1, 11, 6)]).route([wire]) == []
        assert wire.corners()[0] == (2, 5) and wire.corners()[-1] == (18, 5)
        assert len(wire.corners()) == 6
        assert max(y for _, y in wire.path) > 6

    def test_a_second_stream_keeps_off_the_first(self):
        wires = [Wire(name, [Port(2, 4, 0), Port(2, 5, 0)], [Port(18, 4, 2), Port(18, 5, 2)]) for name in "ab"]
        assert Router(20, 10, [(0, 3, 2, 6), (18, 3, 20, 6)]).route(wires) == []
        assert not set(wires[0].path) & set(wires[1].path)

    def test_no_way_is_said(self):
        wire = Wire("a", [Port(5, 4, 3)], [Port(18, 5, 2)])
        walls = [(3, 4, 7, 6), (3, 1, 4, 4), (6, 1, 7, 4), (3, 1, 7, 2), (18, 4, 20, 6)]
        assert Router(20, 10, walls).route([wire]) == [wire]


class TestTexts:
    def test_a_name_keeps_off_the_bars_of_its_tear(self):
        line = [(0.0, 0.0), (12.0, 0.0)]
        tear = layout_labels.Label("tear", "a", ["tear"], 7.0, 2.8, 1.3)
        name = layout_labels.Label("stream", "a", ["name"], 7.0, 2.8)
        ground = np.array(list(layout_labels.segment_extents(line)))
        assert layout_labels.place([tear, name], [[line], [line]], np.zeros((0, 4)), ground, (-9, -9, 21, 9)) == []
        x, y, upright = tear.mark
        assert not upright
        bars = (x - layout_labels.BARS, y - layout_labels.BARS, x + layout_labels.BARS, y + layout_labels.BARS)
        assert overlaps([("bars", bars), ("name", name.extent)]) == overlaps([("tear", tear.extent), ("name", name.extent)]) == []

    def test_a_name_makes_way_for_another(self):
        short, long = [(0.0, 0.0), (8.0, 0.0)], [(0.0, 4.0), (40.0, 4.0)]
        labels = [layout_labels.Label("stream", name, [name], 7.0, 2.8) for name in "ab"]
        ground = np.array([*layout_labels.segment_extents(short), *layout_labels.segment_extents(long)])
        assert layout_labels.place(labels, [[short], [long]], np.zeros((0, 4)), ground, (-9, -1, 41, 9)) == []
        assert overlaps([(label.name, label.extent) for label in labels]) == []
        assert labels[0].y < 4.0

    def test_what_finds_no_place_is_said(self):
        line = [(0.0, 0.0), (8.0, 0.0)]
        label = layout_labels.Label("stream", "a", ["a"], 7.0, 2.8)
        ground = np.array(list(layout_labels.segment_extents(line)))
        walls = np.array([[-9.0, 0.5, 21.0, 9.0], [-9.0, -9.0, 21.0, -0.5]])
        assert layout_labels.place([label], [[line]], walls, ground, (-9, -9, 21, 9)) == [label]

    def test_widths_are_estimated_from_above(self):
        figure = drawing.figure(alone())
        renderer = renderer_of(figure)
        pick = random.Random(9)
        letters = "abcdefghijklmnopqrstuvwxyzABCDEFGHIJKLMNOPQRSTUVWXYZ0123456789_-.:°/ "
        for bold in (False, True):
            for text in [*letters, *("".join(pick.choices(letters, k=12)) for _ in range(40)), "36.36 kmol/h", "1.23e-05 kmol/h"]:
                drawn_text = figure.axes[0].text(5, 5, text, size=20, weight="bold" if bold else "normal")
                width = drawn_text.get_window_extent(renderer).width / figure.dpi * 25.4
                drawn_text.remove()
                assert width <= layout_labels.text_width(text, 20, bold) + 0.2, (text, bold)

    @pytest.mark.parametrize(("text", "lines"), [
        ("wash", ["wash"]),
        ("economiser_between_lean", ["economiser_", "between_lean"]),
        ("a" * 33, ["a" * 15, "a" * 15, "aaa"]),
        ("", [""]),
    ])  # fmt: skip
    def test_long_names_are_broken(self, text, lines):
        assert layout_boxes.broken(text, 15) == lines
        assert "".join(layout_boxes.broken(text, 15)) == text
