"""What must hold for any column and any loop: balances, scaling, order, batches, sensitivities.

Flowsheets are drawn at random but the same ones every time.
"""

import functools
import math
import tempfile
from pathlib import Path

import independent
import numpy as np
import pytest
import scenes
from hypothesis import HealthCheck, example, given, settings
from hypothesis import strategies as st

import leanloop

settings.register_profile("laws", derandomize=True, deadline=None, database=None, max_examples=25,
                          suppress_health_check=[HealthCheck.too_slow])
laws = settings.get_profile("laws")


def read(text):
    with tempfile.TemporaryDirectory() as folder:
        return leanloop.read(scenes.write(Path(folder), text))


def log_uniform(low, high):
    return st.floats(math.log10(low), math.log10(high)).map(lambda e: 10.0**e)


def shares(count, most):
    """Shares of `count` solutes that add up to at most `most`; zeros are as ordinary as others."""
    raw = st.lists(st.one_of(st.just(0.0), log_uniform(1e-6, 1.0)), min_size=count, max_size=count)
    return st.tuples(raw, st.one_of(st.just(0.0), st.just(most), log_uniform(1e-9, most))).map(
        lambda drawn: [s * drawn[1] / max(sum(drawn[0]), 1.0) for s in drawn[0]])


def fed(carrier, total, names, parts):
    return {carrier: total * (1 - sum(parts))} | {
        c: total * s for c, s in zip(names, parts, strict=True)}


@st.composite
def columns(draw):
    """Inputs of one column, K from 1e-4 to 1e4, both feeds from pure carrier to 60 % solute."""
    count = draw(st.integers(1, 6))
    names = [f"s{i}" for i in range(count)]
    gas, liquid = draw(log_uniform(0.1, 100.0)), draw(log_uniform(0.1, 100.0))
    in_gas, in_liquid = draw(shares(count, 0.6)), draw(shares(count, 0.6))
    return dict(
        kind=draw(st.sampled_from(["absorber", "stripper"])),
        stages=draw(st.integers(1, 60)), names=names,
        K=draw(st.lists(log_uniform(1e-4, 1e4), min_size=count, max_size=count)),
        basis=draw(st.sampled_from(["fraction", "ratio"])),
        gas=fed("inert", gas, names, in_gas), liquid=fed("oil", liquid, names, in_liquid))


@st.composite
def loops(draw, most_stages=60, most_solutes=6):
    """Inputs of a closed loop that has a steady state: over the hot solvent every K is above one,
    so that the stripping gas can carry away whatever the absorber takes up."""
    count = draw(st.integers(1, most_solutes))
    names = [f"s{i}" for i in range(count)]
    gas = draw(log_uniform(1.0, 100.0))
    feed = draw(shares(count, 0.6))
    carrier = gas * (1 - sum(feed))
    stripping = carrier * draw(log_uniform(0.2, 2.0))
    brought = draw(shares(count, 0.05))
    impurity = draw(st.sampled_from([0.0, 1e-4])) * carrier
    purge = draw(log_uniform(1e-3, 0.1)) if impurity else draw(st.sampled_from([0.0, 1e-2]))
    return dict(
        stages=(draw(st.integers(1, most_stages)), draw(st.integers(1, most_stages))), names=names,
        cold=draw(st.lists(log_uniform(1e-3, 1e2), min_size=count, max_size=count)),
        hot=draw(st.lists(log_uniform(1.2, 1e4), min_size=count, max_size=count)),
        solvent=carrier * draw(log_uniform(0.1, 3.0)), gas=carrier, stripping=stripping,
        feed=[s * gas / carrier for s in feed], brought=brought, purge=purge, impurity=impurity)


def column_text(scene, scale=1.0, order=None):
    scaled = lambda flows: {c: scale * flows[c] for c in sorted(flows, key=position)}  # noqa: E731
    names = order or scene["names"]
    position = ["inert", "oil", *names].index
    models = scenes.constants(scene["names"], scene["K"], scene["basis"])
    return scenes.column(scene["kind"], scene["stages"], names, scaled(scene["gas"]),
                         scaled(scene["liquid"]), {c: models[c] for c in names})


def loop_text(scene, scale=1.0, **options):
    names = scene["names"]
    return scenes.loop(
        scene["stages"], scenes.constants(names, scene["cold"]),
        scenes.constants(names, scene["hot"]), scale * scene["solvent"], scale * scene["gas"],
        scale * scene["stripping"], dict(zip(names, scene["feed"], strict=True)),
        dict(zip(names, scene["brought"], strict=True)), scene["purge"],
        scale * scene["impurity"], **options)


def tight(scene, scale=1.0, **options):
    """A loop closed to rounding, so that two ways to it can be compared."""
    return loop_text(scene, scale, tolerance=1e-13, **options)


def stream_flows(result, names):
    """{stream: {component: mol/s}} from the result as written."""
    return {s: {c: stream["mol_s"][c] for c in names}
            for s, stream in result.to_dict()["streams"].items()}


def solved_flows(text, names):
    result = read(text).solve()
    assert result["status"] == "converged"
    return stream_flows(result, names)


def check_balances(result, came_from, went_to, made_up=None):
    """Closures as reported, and once more from the streams themselves."""
    written = result.to_dict()
    added = written["units"][made_up]["results"]["added_mol_s"] if made_up else {}
    for component, balance in written["balance"]["components"].items():
        flow = lambda s, c=component: written["streams"][s]["mol_s"][c]  # noqa: E731
        came = sum(map(flow, came_from)) + (added.get(component) or 0.0)
        went = sum(map(flow, went_to))
        assert abs(balance["closure"]) <= 1e-9, component
        assert abs(came - went) <= 1e-9 * max(came, went), component
        assert min(map(flow, [*came_from, *went_to])) >= 0.0, component


def assert_same(found, expected, names, tolerance, scale=1.0, floor=1e-12):
    """All streams alike to a relative tolerance, traces to a floor of the component's own flow.

    The scale of a component that is hardly there is 1e-12 of the whole flow.
    """
    whole = max(sum(flows.values()) for flows in expected.values())
    for component in names:
        largest = max(1e-12 * whole, *(flows[component] for flows in expected.values())) * scale
        for stream, flows in expected.items():
            wanted = scale * flows[component]
            gap = abs(found[stream][component] - wanted)
            assert gap <= tolerance * wanted + floor * largest, (stream, component)


class TestColumns:
    @settings(laws, max_examples=100)
    @given(columns())
    @example(dict(kind="absorber", stages=21, names=["s0"], K=[1.0], basis="fraction",
                  gas={"inert": 0.09975371809717382, "s0": 0.0002462819028261926},
                  liquid={"oil": 10.0, "s0": 0.0}))  # leaves 1e-38 of the solute, not less than none
    def test_every_component_balances(self, scene):
        result = read(column_text(scene)).solve()
        assert result["status"] == "converged"
        check_balances(result, ["sour", "solvent"], ["cleaned", "rich"])

    @laws
    @given(columns())
    def test_stages_are_in_equilibrium(self, scene):
        result = read(column_text(scene)).solve()
        low, up = ("x", "y") if scene["basis"] == "fraction" else ("X", "Y")
        for name, K in zip(scene["names"], scene["K"], strict=True):
            liquid = np.asarray(result[f"units.column.profile.{low}.{name}"])
            gas = np.asarray(result[f"units.column.profile.{up}.{name}"])
            np.testing.assert_allclose(gas, K * liquid, rtol=1e-8, atol=1e-13)

    @laws
    @given(columns(), log_uniform(1e-3, 1e3))
    def test_scaling_feeds_scales_flows(self, scene, scale):
        names = ["inert", "oil", *scene["names"]]
        one = solved_flows(column_text(scene), names)
        other = solved_flows(column_text(scene, scale), names)
        assert_same(other, one, names, 1e-9, scale)

    @laws
    @given(columns(), st.randoms(use_true_random=False))
    def test_order_of_components_does_not_matter(self, scene, random):
        order = list(scene["names"])
        random.shuffle(order)
        names = ["inert", "oil", *scene["names"]]
        one = solved_flows(column_text(scene), names)
        result = read(column_text(scene, order=order)).solve()
        assert_same(stream_flows(result, names), one, names, 1e-9)
        # Arrays follow the order of the file at hand.
        flows = result.stream("cleaned").flows
        listed = [result[f"streams.cleaned.mol_s.{c}"] for c in ["inert", "oil", *order]]
        np.testing.assert_array_equal(flows, listed)

    @laws
    @given(columns(), st.lists(st.tuples(log_uniform(0.3, 3.0), log_uniform(0.3, 3.0),
                                         st.integers(1, 60)), min_size=2, max_size=6))
    def test_batch_gives_what_its_cases_give(self, scene, changes):
        names = ["inert", "oil", *scene["names"]]
        text = column_text(scene)
        sheet = read(text)
        gas = np.array([scene["gas"]["inert"] * a for a, _, _ in changes])
        oil = np.array([scene["liquid"]["oil"] * b for _, b, _ in changes])
        stages = np.array([n for _, _, n in changes])
        inputs = {"feeds.sour.flows.inert": gas, "feeds.solvent.flows.oil": oil,
                  "units.column.stages": stages}
        batch = sheet.solve(inputs)
        assert list(batch["status"]) == ["converged"] * len(changes)
        for i in range(len(changes)):
            alone = sheet.solve({"feeds.sour.flows.inert": float(gas[i]),
                                 "feeds.solvent.flows.oil": float(oil[i]),
                                 "units.column.stages": int(stages[i])})
            expected = stream_flows(alone, names)
            found = {s: {c: batch[f"streams.{s}.mol_s.{c}"][i] for c in names} for s in expected}
            assert_same(found, expected, names, 1e-10)


class TestLoops:
    came, went = ["vent", "steam"], ["cleaned", "overhead"]

    @settings(laws, max_examples=40)
    @given(loops())
    @example(dict(  # absent, light and heavy solutes at once, joined by an impurity
        stages=(17, 5), names=["s0", "s1", "s2", "s3", "s4", "s5"],
        cold=[0.001, 49.34290114186233, 49.59141622950439, 24.318889377185208,
              0.00274078660346119, 0.6736201274786001],
        hot=[10.0**0.99999, 4056.5834811004615, 1.2, 11.023484981024035, 644.6385083465672,
             489.47828197634027],
        solvent=3.611874287712843, gas=9.49548156922903, stripping=11.306816851644722,
        feed=[0.0, 0.054393774171643476, 0.0, 0.936815928134171, 0.5087231631381056,
              6.713455607908152e-05],
        brought=[0.0, 0.0, 0.0, 2.642067915143182e-07, 3.583508958071475e-07,
                 0.049999377442312684],
        purge=0.029959324492580087, impurity=0.0009495481569229031))
    def test_every_component_balances(self, scene):
        result = read(loop_text(scene)).solve()
        assert result["status"] == "converged"
        check_balances(result, self.came + (["dirt"] if scene["impurity"] else []),
                       self.went + (["bleed"] if scene["purge"] else []), "top_up")

    @laws
    @given(loops(), log_uniform(1e-3, 1e3))
    def test_scaling_feeds_and_held_solvent_scales_flows(self, scene, scale):
        names = ["inert", "steam", "oil", *scene["names"]]
        one = solved_flows(tight(scene), names)
        other = solved_flows(tight(scene, scale), names)
        assert_same(other, one, names, 1e-8, scale)

    @laws
    @given(loops(), st.randoms(use_true_random=False))
    def test_order_of_components_does_not_matter(self, scene, random):
        order = list(scene["names"])
        random.shuffle(order)
        names = ["inert", "steam", "oil", *scene["names"]]
        one = solved_flows(tight(scene), names)
        other = solved_flows(tight(scene, order=order), names)
        assert_same(other, one, names, 1e-8)

    @laws
    @given(loops(), st.data())
    def test_tear_stream_does_not_matter(self, scene, data):
        names = ["inert", "steam", "oil", *scene["names"]]
        tear = data.draw(st.sampled_from(scenes.tear_candidates(scene["purge"], scene["impurity"])))
        one = read(tight(scene)).solve()
        other = read(tight(scene, tears=[tear])).solve()
        assert one["status"] == other["status"] == "converged"
        assert list(other["loop.tears"]) == [tear]
        assert_same(stream_flows(other, names), stream_flows(one, names), names, 1e-8)

    @laws
    @given(st.integers(1, 12), st.integers(3, 12), st.lists(log_uniform(1e-2, 1e2), min_size=1,
           max_size=4), st.lists(st.floats(1.5, 20.0), min_size=4, max_size=4), st.floats(0.0, 0.5))
    def test_method_does_not_matter(self, n_wash, n_strip, K, strength, richness):
        # Stripping factors from 1.5: a pass of substitution then shrinks the error at least tenfold
        # or so, and no drawn loop is too slow for it.
        names = [f"s{i}" for i in range(len(K))]
        feed = dict(zip(names, np.full(len(K), richness / len(K)), strict=True))
        hot = [s * 60.0 / 40.0 for s, _ in zip(strength, K, strict=False)]
        text = functools.partial(scenes.loop, (n_wash, n_strip), scenes.constants(names, K),
                                 scenes.constants(names, hot), 60.0, 100.0, 40.0, feed,
                                 tolerance=1e-13)
        components = ["inert", "steam", "oil", *names]
        one, other = (read(text(method=m)).solve() for m in ("newton", "substitution"))
        assert one["status"] == other["status"] == "converged"
        assert (one["loop.method"], other["loop.method"]) == ("newton", "substitution")
        assert_same(stream_flows(other, components), stream_flows(one, components), components,
                    1e-8)

    @settings(laws, max_examples=12)
    @given(loops(most_stages=20, most_solutes=3), st.floats(0.55, 1.8), st.floats(0.55, 1.8))
    def test_start_of_a_freed_input_does_not_matter(self, scene, first, second):
        # The circulation is freed to meet the rich liquid's flow that it had when it was held; that
        # flow always follows the circulation, whereas a loading may not (a pinch).
        held = read(tight(scene)).solve()
        target = float(held["streams.rich.total_mol_s"])
        between = tuple(f"{f * scene['solvent']!r} mol/s" for f in (0.5, 2.0))
        extra = scenes.requirement("rich", "streams.rich.total_mol_s", f"{target!r} mol/s",
                                   "units.top_up.hold.oil", between)
        found = []
        for start in (first, second):
            moved = scene | {"solvent": start * scene["solvent"]}
            result = read(tight(moved, extra=extra)).solve()
            assert result["status"] == "converged"
            assert result["requirements.rich.value"] == pytest.approx(target, rel=1e-9)
            found.append(result["requirements.rich.free_value"])
        assert found[0] == pytest.approx(found[1], rel=1e-7)

    @settings(laws, max_examples=15)
    @given(loops(most_stages=30), st.lists(st.tuples(log_uniform(0.5, 2.0), log_uniform(0.5, 2.0),
           st.integers(1, 30)), min_size=2, max_size=5))
    def test_batch_gives_what_its_cases_give(self, scene, changes):
        names = ["inert", "steam", "oil", *scene["names"]]
        sheet = read(tight(scene))
        hold = np.array([scene["solvent"] * a for a, _, _ in changes])
        steam = np.array([scene["stripping"] * b for _, b, _ in changes])
        stages = np.array([n for _, _, n in changes])
        batch = sheet.solve({"units.top_up.hold.oil": hold, "feeds.steam.flows.steam": steam,
                             "units.strip.stages": stages})
        assert list(batch["status"]) == ["converged"] * len(changes)
        for i in range(len(changes)):
            alone = sheet.solve({"units.top_up.hold.oil": float(hold[i]),
                                 "feeds.steam.flows.steam": float(steam[i]),
                                 "units.strip.stages": int(stages[i])})
            expected = stream_flows(alone, names)
            found = {s: {c: batch[f"streams.{s}.mol_s.{c}"][i] for c in names} for s in expected}
            assert_same(found, expected, names, 1e-8)

    def test_array_of_length_one_makes_a_case_axis(self):
        scene = dict(stages=(4, 4), names=["s0"], cold=[0.2], hot=[3.0], solvent=40.0, gas=100.0,
                     stripping=30.0, feed=[0.05], brought=[0.0], purge=0.0, impurity=0.0)
        sheet = read(loop_text(scene))
        single, batch = sheet.solve(), sheet.solve({"units.top_up.hold.oil": np.array([40.0])})
        assert single.stream("cleaned").flows.shape == (4,)
        assert batch.stream("cleaned").flows.shape == (1, 4)
        np.testing.assert_allclose(batch.stream("cleaned").flows[0],
                                   single.stream("cleaned").flows, rtol=1e-12)
        assert batch.to_dict()["status"] == ["converged"]
        assert batch.to_dict()["units"]["wash"]["profile"]["X"]["s0"] == [
            pytest.approx(single.to_dict()["units"]["wash"]["profile"]["X"]["s0"], rel=1e-12)]
        text = sheet.solve({"units.top_up.hold.oil": "144 kmol/h"})  # a single case again
        np.testing.assert_allclose(text.stream("cleaned").flows, single.stream("cleaned").flows,
                                   rtol=1e-12)


class TestCasesDoNotInfectEachOther:
    """One impossible case changes no other by more than 1e-12 and bears its own status."""

    column = dict(kind="absorber", stages=6, names=["a", "b"], K=[0.3, 2.0], basis="fraction",
                  gas={"inert": 10.0, "a": 0.8, "b": 0.4}, liquid={"oil": 5.0, "a": 0.0, "b": 0.01})
    loop = dict(stages=(6, 5), names=["a", "b"], cold=[0.3, 0.9], hot=[3.0, 8.0], solvent=40.0,
                gas=100.0, stripping=30.0, feed=[0.05, 0.10], brought=[0.0, 1e-3], purge=1e-2,
                impurity=0.01)

    def compare(self, text, address, good, bad, place, expected=None):
        """Put `bad` among the values at `address`; return what is said of it."""
        sheet = read(text)
        clean = sheet.solve({address: np.array(good)})
        mixed = sheet.solve({address: np.array([*good[:place], bad, *good[place:]])})
        others = [i for i in range(len(good) + 1) if i != place]
        assert list(clean["status"]) == ["converged"] * len(good)
        assert [mixed["status"][i] for i in others] == ["converged"] * len(good)
        written = clean.to_dict()["streams"]
        for stream in written:
            np.testing.assert_allclose(mixed.stream(stream).flows[others],
                                       clean.stream(stream).flows, rtol=1e-12, atol=0,
                                       err_msg=stream)
        status = mixed["status"][place]
        assert status != "converged"
        if expected:
            assert status == expected
        assert mixed.to_dict()["status"][place] == status
        return mixed

    @pytest.mark.parametrize("place", [0, 2, 4])
    @pytest.mark.parametrize("bad, expected", [(math.nan, None), (math.inf, None), (-1.0, None),
                                               (0.0, "dry_stage")])
    def test_solvent_of_a_column(self, place, bad, expected):
        text = column_text(self.column | {"liquid": {"oil": 5.0, "a": 0.0, "b": 0.0}})
        self.compare(text, "feeds.solvent.flows.oil", [3.0, 5.0, 8.0, 20.0], bad, place, expected)

    @pytest.mark.parametrize("place", [0, 2, 4])
    @pytest.mark.parametrize("bad", [math.nan, -1.0])
    def test_solute_fed_to_a_column(self, place, bad):
        self.compare(column_text(self.column), "feeds.sour.flows.a", [0.0, 0.5, 0.8, 5.0], bad,
                     place)

    @pytest.mark.parametrize("place", [0, 3])
    @pytest.mark.parametrize("bad, expected", [(math.nan, None), (-1.0, None), (0.0, "dry_stage")])
    def test_held_solvent_of_a_loop(self, place, bad, expected):
        scene = self.loop | {"purge": 0.0, "impurity": 0.0}
        self.compare(loop_text(scene), "units.top_up.hold.oil", [20.0, 40.0, 60.0], bad, place,
                     expected)

    @pytest.mark.parametrize("place", [0, 3])
    def test_nan_in_the_gas_of_a_loop(self, place):
        mixed = self.compare(loop_text(self.loop), "feeds.vent.flows.b", [5.0, 10.0, 20.0],
                             math.nan, place)
        assert mixed.to_dict()["streams"]["cleaned"]["mol_s"]["b"][place] is None

    @pytest.mark.parametrize("place", [0, 3])
    def test_no_bleed_in_one_case(self, place):
        # The impurity is fed and cannot leave: that case has no steady state.
        self.compare(loop_text(self.loop), "units.divide.shares.bleed", [1e-3, 1e-2, 0.1], 0.0,
                     place, "no_steady_state")

    @pytest.mark.parametrize("place", [0, 3])
    def test_requirement_out_of_reach_in_one_case(self, place):
        extra = scenes.requirement("outlet", "streams.cleaned.ratio.a", 0.004,
                                   "units.top_up.hold.oil", ("20 mol/s", "60 mol/s"))
        scene = self.loop | {"stripping": 60.0}
        reached = read(loop_text(scene)).solve(
            {"units.top_up.hold.oil": np.array([30.0, 38.0, 45.0])})
        good = list(reached["streams.cleaned.ratio.a"])
        self.compare(loop_text(scene, extra=extra), "requirements.outlet.equals", good, 1e-9, place,
                     "out_of_reach")

    def test_several_bad_ones_in_a_long_batch(self):
        sheet = read(loop_text(self.loop))
        feed = np.linspace(1.0, 12.0, 40)
        clean = sheet.solve({"feeds.vent.flows.a": feed})
        spoilt = feed.copy()
        spoilt[[0, 7, 8, 39]] = math.nan
        mixed = sheet.solve({"feeds.vent.flows.a": spoilt})
        good = np.isfinite(spoilt)
        assert (np.array(mixed["status"]) == "converged").tolist() == good.tolist()
        for stream in ("cleaned", "overhead", "bleed"):
            np.testing.assert_allclose(mixed.stream(stream).flows[good],
                                       clean.stream(stream).flows[good], rtol=1e-12, atol=0)


class TestZeroFlows:
    """An absent component, no solute at all, no stripping gas: ordinary, not special."""

    def test_no_solute_at_all(self):
        scene = dict(stages=(5, 5), names=["a", "b"], cold=[0.3, 0.9], hot=[3.0, 8.0], solvent=40.0,
                     gas=100.0, stripping=30.0, feed=[0.0, 0.0], brought=[0.0, 0.0], purge=0.0,
                     impurity=0.0)
        result = read(loop_text(scene)).solve()
        assert result["status"] == "converged"
        for stream in ("cleaned", "rich", "lean", "overhead"):
            assert result[f"streams.{stream}.mol_s.a"] == 0
        assert result.to_dict()["balance"]["components"]["a"]["closure"] == 0

    @laws
    @given(loops(most_stages=20), st.data())
    def test_what_is_fed_nowhere_is_found_nowhere(self, scene, data):
        absent = data.draw(st.integers(0, len(scene["names"]) - 1))
        none = lambda values: [0.0 if i == absent else v for i, v in enumerate(values)]  # noqa: E731
        scene = scene | {"feed": none(scene["feed"]), "brought": none(scene["brought"])}
        result = read(tight(scene)).solve()
        assert result["status"] == "converged"
        written, name = result.to_dict(), scene["names"][absent]
        assert {s: stream["mol_s"][name] for s, stream in written["streams"].items()} == (
            dict.fromkeys(written["streams"], 0.0))
        assert written["balance"]["components"][name]["closure"] == 0

    def test_an_absent_solute_changes_nothing(self):
        scene = dict(stages=(5, 5), names=["a"], cold=[0.3], hot=[3.0], solvent=40.0, gas=100.0,
                     stripping=30.0, feed=[0.1], brought=[0.0], purge=0.0, impurity=0.0)
        alone = read(loop_text(scene)).solve()
        with_other = read(loop_text(scene | dict(names=["a", "b"], cold=[0.3, 0.9], hot=[3.0, 8.0],
                                                 feed=[0.1, 0.0], brought=[0.0, 0.0]))).solve()
        for stream in ("cleaned", "rich", "lean"):
            assert with_other[f"streams.{stream}.mol_s.a"] == pytest.approx(
                alone[f"streams.{stream}.mol_s.a"], rel=1e-12)
            assert with_other[f"streams.{stream}.mol_s.b"] == 0

    def test_stripper_without_gas(self):
        # Nothing rises, nothing is stripped: what comes in leaves below.
        scene = dict(kind="stripper", stages=4, names=["a"], K=[2.0], basis="fraction",
                     gas={"inert": 0.0, "a": 0.0}, liquid={"oil": 5.0, "a": 0.2})
        sheet = read(column_text(scene))
        mixed = sheet.solve({"feeds.sour.flows.inert": np.array([1.0, 0.0, 2.0])})
        assert [mixed["status"][i] for i in (0, 2)] == ["converged"] * 2
        clean = sheet.solve({"feeds.sour.flows.inert": np.array([1.0, 2.0])})
        np.testing.assert_allclose(mixed.stream("rich").flows[[0, 2]], clean.stream("rich").flows,
                                   rtol=1e-12)
        assert mixed["streams.rich.mol_s.a"][1] == pytest.approx(0.2, rel=1e-12)


def ridders(values, p, first=0.02, levels=6):
    """Derivative at p from central differences with halved steps (Ridders 1982): estimate, error.

    `values` maps an array of arguments to an array of results, so all solves are one batch.
    """
    steps = abs(p) * first / 2.0 ** np.arange(levels)
    found = np.asarray(values(np.concatenate([p + steps, p - steps])), float)
    table = [(found[:levels] - found[levels:]) / (2 * steps)]
    best, error = table[0][-1], math.inf
    for order in range(1, levels):
        before = table[-1]
        table.append((4**order * before[1:] - before[:-1]) / (4**order - 1))
        gaps = np.maximum(np.abs(table[-1] - before[1:]), np.abs(table[-1] - before[:-1]))
        least = int(np.argmin(gaps))
        if gaps[least] < error:
            best, error = table[-1][least], gaps[least]
    return best, error


@st.composite
def moderate_loops(draw):
    """Loops whose outlets stand well above rounding: differences of solves mean something."""
    scene = draw(loops(most_stages=8, most_solutes=4))
    factor = st.floats(0.4, 3.0)
    oil, gas, steam = scene["solvent"], scene["gas"], scene["stripping"]
    return scene | dict(
        cold=[oil / gas / draw(factor) for _ in scene["cold"]],
        hot=[1.2 + oil / steam * draw(factor) for _ in scene["hot"]],
        feed=[1e-3 + f for f in scene["feed"]], purge=scene["purge"] or 1e-2)


class TestSensitivities:
    """Exact derivatives through the closed loop, against differences of solves at 1e-13."""

    quantities = ("streams.cleaned.fraction.s0", "streams.cool_lean.ratio.s0",
                  "streams.overhead.mol_s.s0", "units.wash.results.removal.s0")

    def check(self, sheet, result, quantity, address, p):
        found = result.sensitivity(quantity, address)
        slope, _ = ridders(lambda values: sheet.solve({address: values})[quantity], p)
        size = abs(result[quantity] / p)
        assert abs(found - slope) <= 1e-6 * max(abs(slope), 1e-5 * size), (quantity, address)

    @settings(laws, max_examples=20)
    @given(moderate_loops(), st.sampled_from(quantities), st.integers(0, 4))
    def test_against_differences(self, scene, quantity, which):
        address, p = [
            ("units.top_up.hold.oil", scene["solvent"]),
            ("feeds.steam.flows.steam", scene["stripping"]),
            ("feeds.vent.flows.s0", scene["gas"] * scene["feed"][0]),
            ("units.divide.shares.bleed", scene["purge"]),
            ("equilibrium.hot.s0.K", scene["hot"][0]),
        ][which]
        sheet = read(loop_text(scene, tolerance=1e-13))
        result = sheet.solve()
        assert result["status"] == "converged"
        self.check(sheet, result, quantity, address, p)

    def test_through_an_active_requirement(self):
        scene = dict(stages=(6, 5), names=["s0", "s1"], cold=[0.3, 0.9], hot=[3.0, 8.0],
                     solvent=45.0, gas=100.0, stripping=60.0, feed=[0.05, 0.10],
                     brought=[0.0, 0.0], purge=1e-2, impurity=0.0)
        target = float(read(loop_text(scene)).solve()["streams.cleaned.ratio.s0"])
        extra = scenes.requirement("outlet", "streams.cleaned.ratio.s0", target,
                                   "units.top_up.hold.oil", ("36 mol/s", "52 mol/s"))
        sheet = read(loop_text(scene, tolerance=1e-13, extra=extra))
        result = sheet.solve()
        for quantity in ("requirements.outlet.free_value", "streams.cool_lean.ratio.s0",
                         "streams.cleaned.ratio.s1"):
            for address, p in (("feeds.steam.flows.steam", 60.0), ("feeds.vent.flows.s0", 5.0),
                               ("requirements.outlet.equals", target)):
                self.check(sheet, result, quantity, address, p)
        # What is required does not move with anything but its own target.
        assert result.sensitivity("streams.cleaned.ratio.s0", "feeds.steam.flows.steam") == (
            pytest.approx(0.0, abs=1e-9 * target / 60.0))
        assert result.sensitivity("streams.cleaned.ratio.s0", "requirements.outlet.equals") == (
            pytest.approx(1.0, rel=1e-9))

    def test_sixty_stages_past_a_pinch(self):
        # The rich end is in equilibrium with the gas fed: the derivative all but vanishes.
        scene = dict(stages=(60, 10), names=["s0"], cold=[0.5], hot=[3.0], solvent=35.0, gas=100.0,
                     stripping=40.0, feed=[0.05], brought=[0.0], purge=0.0, impurity=0.0)
        sheet = read(loop_text(scene, tolerance=1e-13))
        result = sheet.solve()
        for quantity in ("streams.rich.ratio.s0", "streams.cleaned.ratio.s0"):
            self.check(sheet, result, quantity, "units.top_up.hold.oil", 35.0)

    def test_closed_form(self):
        # One stage each, Y = K X: solved and differentiated by hand.
        K1, K2, L, G, V, Y = 0.5, 3.0, 40.0, 100.0, 30.0, 0.02
        text = scenes.loop((1, 1), scenes.constants(["s0"], [K1], "ratio"),
                           scenes.constants(["s0"], [K2], "ratio"), L, G, V, {"s0": Y})
        result = read(text).solve()
        # Balances: L (X_r - X_l) = G (Y - K1 X_r) = V K2 X_l, hence X_l = L G Y / D with
        # D = (L + V K2)(L + G K1) - L L.
        D = (L + V * K2) * (L + G * K1) - L * L
        lean = L * G * Y / D
        slope = lean / L - lean / D * (V * K2 + G * K1)
        assert result["streams.cool_lean.ratio.s0"] == pytest.approx(lean, rel=1e-11)
        assert result.sensitivity("streams.cool_lean.ratio.s0", "units.top_up.hold.oil") == (
            pytest.approx(slope, rel=1e-10))

    def test_each_case_of_a_batch_has_its_own(self):
        scene = dict(stages=(6, 5), names=["s0"], cold=[0.3], hot=[3.0], solvent=45.0, gas=100.0,
                     stripping=60.0, feed=[0.05], brought=[0.0], purge=0.0, impurity=0.0)
        sheet = read(loop_text(scene))
        hold = np.array([25.0, 45.0, 90.0])
        batch = sheet.solve({"units.top_up.hold.oil": hold})
        ask = ("streams.cleaned.fraction.s0", "units.top_up.hold.oil")
        found = batch.sensitivity(*ask)
        assert np.shape(found) == (3,)
        for i, value in enumerate(hold):
            alone = sheet.solve({"units.top_up.hold.oil": float(value)}).sensitivity(*ask)
            assert found[i] == pytest.approx(alone, rel=1e-9)


@settings(laws, max_examples=15)
@given(loops(most_stages=12, most_solutes=3))
def test_random_loops_agree_with_the_independent_solution(scene):
    result = read(loop_text(scene)).solve()
    other = independent.solve_loop(
        scene["stages"], (np.array(scene["cold"]), np.array(scene["hot"])), scene["solvent"],
        scene["gas"], scene["stripping"], scene["feed"], np.array(scene["brought"]), scene["purge"],
        scene["impurity"])
    sent = scene["gas"] * np.array(scene["feed"]) + scene["stripping"] * np.array(scene["brought"])
    for stream in ("cleaned", "overhead"):
        found = np.array([result[f"streams.{stream}.mol_s.{c}"] for c in scene["names"]])
        expected = getattr(other, stream)
        scale = np.maximum(sent, 1e-12 * scene["gas"])
        assert (np.abs(found - expected) <= 1e-8 * np.abs(expected) + 1e-10 * scale).all(), stream
