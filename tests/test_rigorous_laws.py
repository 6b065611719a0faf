"""Laws that columns with heat obey, whatever their numbers: balances, symmetries, limits, an exact march, sensitivities."""

import dataclasses

import columns
import numpy as np
import pytest
from independent_rigorous import DATUM, Column, Species
from scipy.optimize import brentq

AIR = Species("air", "gas", cp_gas=29.1)
WATER = Species("water", None, 23.477, 3984.92, -39.724, 75.3, 33.6, 44.0e3)
AMMONIA = Species("ammonia", None, 23.0, 3300.0, 0.0, 80.8, 35.8, 35.0e3)
OIL = Species("oil", "liquid", cp_liquid=310.0)
LIGHT = Species("light", None, 21.2, 2700.0, -45.0, 130.0, 85.0, 28.0e3)
HEAVY = Species("heavy", None, 21.6, 3800.0, -55.0, 210.0, 150.0, 43.0e3, 273.15)

WASH = Column([AIR, AMMONIA, WATER, OIL], 6,
              [(1, "liquid", [0, 0.01, 9.0, 2.0], 300.0), (6, "gas", [10.0, 2.0, 0.1, 0], 312.0),
               (3, "liquid", [0, 0.3, 6.0, 1.0], 306.0)],
              1.5e5, 5e3, draws=[(4, "liquid", 2.0), (5, "gas", 0.8)], duties=[(2, -2.0e4)], efficiency=0.7)  # fmt: skip
STRIP = Column([AMMONIA, LIGHT, WATER, HEAVY], 5,
               [(1, "liquid", [0.4, 1.5, 12.0, 2.0], 340.0), (3, "liquid", [0, 0.5, 3.0, 1.0], 350.0)],
               1.4e5, reboiler=("boil_up", 0.5), condenser=("reflux_ratio", 0.8), draw=0.4)  # fmt: skip


def solved(data, folder, inputs=None, name="column.toml"):
    result = columns.read(data, folder, name).solve(inputs)
    assert np.all(np.asarray(result.status) == "converged")
    return result


def streams(result):
    """Component flows and temperature of every stream that leaves."""
    told = result.to_dict()["streams"]
    return {name: (np.array([flow or 0.0 for flow in told[name]["mol_s"].values()]), told[name]["temperature_K"])
            for name in told if name in ("top", "bottom", "condensate") or name.startswith("draw")}


def same(one, other, rel=1e-9, factor=1.0):
    one, other = streams(one), streams(other)
    assert set(one) == set(other)
    for name, (flows, temperature) in one.items():
        np.testing.assert_allclose(other[name][0], factor * flows, rtol=rel, atol=rel * factor * flows.sum() * 1e-3)
        assert other[name][1] == pytest.approx(temperature, rel=rel)


@pytest.mark.parametrize("column", [WASH, STRIP], ids=["wash", "strip"])
class TestBalances:
    def test_energy_closes_from_the_streams(self, tmp_path, column):
        told = solved(columns.tables(column), tmp_path).to_dict()
        into = out = spread = 0.0
        fed = set(columns.tables(column)["feeds"])
        for name, stream in told["streams"].items():
            h = sum(flow * (s.h_gas(stream["temperature_K"]) if stream["phase"] == "gas" else s.h_liquid(stream["temperature_K"]))
                    for s, flow in ((s, stream["mol_s"].get(s.name) or 0.0) for s in column.species))
            into, out = (into + h, out) if name in fed else (into, out + h)
            spread += sum((stream["mol_s"].get(s.name) or 0.0) for s in column.species) * 50 * abs(stream["temperature_K"] - DATUM)
        results, energy = told["units"]["col"]["results"], told["balance"]["energy"]
        duties = sum(duty for _, duty in column.duties)
        duties += sum(results.get(f"{part}_duty_W") or 0.0 for part in ("reboiler", "condenser"))
        assert abs(into + duties - out) < 1e-9 * spread
        assert energy["in_W"] == pytest.approx(into, rel=1e-10)
        assert energy["out_W"] == pytest.approx(out, rel=1e-10)
        assert energy["duties_W"] == pytest.approx(duties, rel=1e-10)
        parts = [results.get(f"{part}_duty_W") or 0.0 for part in ("reboiler", "condenser")]
        assert results["duty_W"] + sum(parts) == pytest.approx(duties, rel=1e-10)
        assert abs(energy["closure"]) < 1e-10

    def test_scale(self, tmp_path, column):
        factor = 37.5
        bigger = dataclasses.replace(
            column, feeds=[(s, p, factor * np.array(f), T) for s, p, f, T in column.feeds], draw=factor * column.draw,
            draws=[(s, p, factor * f) for s, p, f in column.draws], duties=[(s, factor * d) for s, d in column.duties])
        one, other = (solved(columns.tables(c), tmp_path) for c in (column, bigger))
        same(one, other, factor=factor)
        for key in ("reboiler_duty_W", "condenser_duty_W"):
            if column.reboiler:
                small, large = (r.to_dict()["units"]["col"]["results"][key] for r in (one, other))
                assert large == pytest.approx(factor * small, rel=1e-9)

    def test_order_of_components(self, tmp_path, column):
        order = [2, 0, 3, 1]
        turned = dataclasses.replace(column, species=[column.species[i] for i in order],
                                     feeds=[(s, p, np.array(f)[order], T) for s, p, f, T in column.feeds])
        one, other = (streams(solved(columns.tables(c), tmp_path)) for c in (column, turned))
        for name, (flows, temperature) in one.items():
            np.testing.assert_allclose(other[name][0], flows[order], rtol=1e-9)
            assert other[name][1] == pytest.approx(temperature, rel=1e-10)

    def test_efficiency_of_one_is_none(self, tmp_path, column):
        column = dataclasses.replace(column, efficiency=1.0)
        data = columns.tables(column)
        plain = solved(data, tmp_path)
        data["units"]["col"]["efficiency"] = 1.0
        same(plain, solved(data, tmp_path), rel=1e-10)
        data["units"]["col"]["efficiency"] = [1.0] * column.stages
        same(plain, solved(data, tmp_path), rel=1e-10)

    def test_height_over_hetp(self, tmp_path, column):
        data = columns.tables(column)
        plain = solved(data, tmp_path)
        unit = data["units"]["col"]
        del unit["stages"]
        unit |= {"height": f"{0.45 * column.stages!r} m", "hetp": "45 cm"}
        same(plain, solved(data, tmp_path), rel=1e-12)

    def test_cases_do_not_touch_each_other(self, tmp_path, column):
        sheet = columns.read(columns.tables(column), tmp_path)
        values = np.array([295.0, 300.0, 310.0])
        batch = sheet.solve({"feeds.lean.temperature": values})
        for place, value in enumerate(values):
            single = sheet.solve({"feeds.lean.temperature": float(value)})
            for name in ("top", "bottom"):
                np.testing.assert_allclose(batch.stream(name).flows[place], single.stream(name).flows, rtol=1e-9, atol=1e-12)


class TestLimits:
    def test_heat_capacity_without_end_is_isothermal(self, tmp_path):
        heavy_oil = dataclasses.replace(OIL, cp_liquid=1e11)
        feeds = [(1, "liquid", [0, 0.01, 0.2, 6.0], 305.0), (6, "gas", [10.0, 2.0, 0.1, 0], 340.0)]
        column = Column([AIR, AMMONIA, WATER, heavy_oil], 6, feeds, 1.5e5, efficiency=0.8)
        one = solved(columns.tables(column), tmp_path)
        other = solved(columns.tables(dataclasses.replace(column, temperature=305.0)), tmp_path)
        same(one, other, rel=1e-7)
        # and heat does matter where the solvent holds little of it
        warm = solved(columns.tables(dataclasses.replace(column, species=[AIR, AMMONIA, WATER, OIL])), tmp_path)
        assert warm.to_dict()["streams"]["bottom"]["temperature_K"] > 310

    def test_side_feed_at_the_top_is_mixed_with_the_liquid(self, tmp_path):
        apart = dataclasses.replace(WASH, feeds=[*WASH.feeds[:2], (1, "liquid", [0, 0.3, 6.0, 1.0], 300.0)])
        top = np.array(WASH.feeds[0][2]) + np.array([0, 0.3, 6.0, 1.0])
        joined = dataclasses.replace(WASH, feeds=[(1, "liquid", top, 300.0), WASH.feeds[1]])
        same(solved(columns.tables(apart), tmp_path), solved(columns.tables(joined), tmp_path))

    def two_phases(self, folder, how, efficiency):
        """A hot liquid above its bubble pressure, fed to stage 3: as it is, through a valve, or as the two phases of a drum."""
        hot = (3, "liquid", [0.4, 2.5, 3.0, 1.0], 390.0)
        column = dataclasses.replace(STRIP, efficiency=efficiency, feeds=[STRIP.feeds[0], hot])
        data = columns.tables(column)
        feed = data["feeds"]["side1"]
        feed["pressure"] = "20 bar"
        if how == "valve":
            data["units"]["let_down"] = {"kind": "valve", "takes": "side1", "gives": "mixed",
                                         "pressure": "140 kPa", "equilibrium": "e"}
            data["units"]["col"]["side_feeds"] = [{"stream": "mixed", "stage": 3}]
        if how == "drum":
            data["units"]["drum"] = {"kind": "flash_drum", "takes": "side1", "gas_out": "steam", "liquid_out": "rest",
                                     "pressure": "140 kPa", "equilibrium": "e"}
            data["units"]["col"]["side_feeds"] = [{"stream": "steam", "stage": 3}, {"stream": "rest", "stage": 3}]
        return solved(data, folder)

    @pytest.mark.parametrize("efficiency", [1.0, 0.7])
    def test_two_phase_feed_is_its_two_phases(self, tmp_path, efficiency):
        plain, valve, drum = (self.two_phases(tmp_path, how, efficiency) for how in ("plain", "valve", "drum"))
        assert drum.to_dict()["streams"]["steam"]["total_mol_s"] > 0.5
        same(plain, drum)
        same(valve, drum)


class TestSensitivities:
    """Exact derivatives against Richardson's from four solves."""

    def agrees(self, folder, data, address, value, step):
        sheet = columns.read(data, folder)
        result = sheet.solve()
        never = {"gas": "bottom", "liquid": "top"}  # the stream that a component which stays in a phase is not in
        quantities = [f"streams.{stream}.mol_s.{name}" for stream in ("top", "bottom") for name, own in data["components"].items()
                      if never.get(own.get("stays_in")) != stream]
        quantities += ["streams.bottom.temperature_K", "streams.top.temperature_K"]
        if "reboiler" in data["units"]["col"]:
            quantities += ["units.col.results.reboiler_duty_W", "units.col.results.condenser_duty_W"]
        exact = np.array([result.sensitivity(quantity, address) for quantity in quantities], float)
        read = lambda x: np.array([sheet.solve({address: x})[q] for q in quantities], float)  # noqa: E731
        wide, narrow = ((read(value + h) - read(value - h)) / (2 * h) for h in (step, step / 2))
        wanted = (4 * narrow - wide) / 3
        size = np.abs([result[q] for q in quantities]) / abs(value)
        gap = np.abs(exact - wanted) / np.maximum(np.abs(wanted), 1e-3 * size)
        assert (np.abs(wanted) > 1e-3 * size).sum() >= 3
        assert gap.max() < 1e-6, dict(zip(quantities, zip(exact, wanted, gap)))

    @pytest.mark.parametrize(("address", "value", "step"), [
        ("units.col.reboiler.boil_up", 0.5, 2e-3),
        ("units.col.condenser.reflux_ratio", 0.8, 2e-3),
        ("units.col.condenser.draw.flow", 0.4, 2e-3),
        ("feeds.lean.temperature", 340.0, 0.2),
        ("units.col.pressure", 1.4e5, 200.0),
        ("heat_data.water.heat_of_vaporisation.value", 44.0e3, 50.0),
        ("heat_data.heavy.liquid_heat_capacity", 210.0, 0.5),
    ])  # fmt: skip
    def test_strip(self, tmp_path, address, value, step):
        self.agrees(tmp_path, columns.tables(STRIP), address, value, step)

    def test_duty(self, tmp_path):
        found = solved(columns.tables(STRIP), tmp_path).to_dict()["units"]["col"]["results"]["reboiler_duty_W"]
        column = dataclasses.replace(STRIP, reboiler=("duty", round(found, -3)))
        self.agrees(tmp_path, columns.tables(column), "units.col.reboiler.duty", round(found, -3), found * 2e-3)

    @pytest.mark.parametrize(("address", "value", "step"), [
        ("units.col.efficiency", 0.7, 2e-3),
        ("feeds.side2.temperature", 306.0, 0.2),
        ("units.col.side_draws.0.flow", 2.0, 5e-3),
        ("units.col.stage_duties.0.duty", -2.0e4, 50.0),
        ("units.col.pressure_drop", 5e3, 50.0),
        ("heat_data.ammonia.gas_heat_capacity", 35.8, 0.2),
    ])  # fmt: skip
    def test_wash(self, tmp_path, address, value, step):
        self.agrees(tmp_path, columns.tables(WASH), address, value, step)


class TestBinary:
    """Two components of constant relative volatility and equal latent heat: flows are constant from stage to stage."""

    alpha, latent, F, z, N, duty, reflux = 2.6, 32e3, 10.0, 0.42, 6, 240e3, 1.2

    def column(self):
        # heat capacities that are as good as none, so that only latent heat counts
        a = Species("a", None, 21.0, 2900.0, -50.0, 1e-7, 1e-7, self.latent)
        b = dataclasses.replace(a, name="b", a=a.a - np.log(self.alpha))
        return Column([a, b], self.N, [(1, "liquid", [self.F * self.z, self.F * (1 - self.z)], 320.0)], 1.5e5,
                      reboiler=("duty", self.duty), condenser=("reflux_ratio", self.reflux))

    def march(self):
        """Liquid fractions top to bottom, condenser and reboiler included."""
        V = self.duty / self.latent
        D = V / (1 + self.reflux)
        B = self.F - D
        L = B + V
        y = lambda x: self.alpha * x / (1 + (self.alpha - 1) * x)  # noqa: E731

        def up(bottom):
            x = [bottom]
            for _ in range(self.N):
                x.append((V * y(x[-1]) + B * bottom) / L)
            x.append((V * y(x[-1]) + B * bottom - self.F * self.z) / (self.reflux * D))
            return x

        gap = lambda bottom: V * y(up(bottom)[-2]) - D * y(up(bottom)[-1]) - self.reflux * D * up(bottom)[-1]  # noqa: E731
        tries = np.linspace(1e-4, self.z, 2000)
        good = [x for x in tries if 0 < up(x)[-1] < 1]
        bottom = brentq(gap, good[0], good[-1], xtol=1e-16, rtol=1e-15)
        return np.array(up(bottom)[::-1]), V, D, L

    def test_march(self, tmp_path):
        x, V, D, L = self.march()
        result = solved(columns.tables(self.column()), tmp_path).to_dict()["units"]["col"]
        profile = result["profile"]
        np.testing.assert_allclose(profile["x"]["a"], x, rtol=1e-8)
        np.testing.assert_allclose(profile["gas_mol_s"], [D] + [V] * (self.N + 1), rtol=1e-8)
        np.testing.assert_allclose(profile["liquid_mol_s"], [self.reflux * D] + [L] * self.N + [self.F - D], rtol=1e-8)
        column = self.column()
        a, b = column.species
        boils = [brentq(lambda T, x=x: x * a.k(T, 1.5e5) + (1 - x) * b.k(T, 1.5e5) - 1, 250, 500, xtol=1e-12) for x in x]
        np.testing.assert_allclose(profile["temperature_K"], boils, rtol=1e-9)
        assert result["results"]["condenser_duty_W"] == pytest.approx(-self.reflux * D * self.latent, rel=1e-7)
        assert result["results"]["boil_up"] == pytest.approx(V / (self.F - D), rel=1e-8)
