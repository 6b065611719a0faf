"""Columns with heat: flowsheet files from plain numbers, and plain numbers back from results."""

import json

import independent_rigorous as own
import numpy as np

import leanloop


def value(item):
    """One TOML value: tables inline, numbers with all digits."""
    if isinstance(item, dict):
        return "{ " + ", ".join(f"{key} = {value(inner)}" for key, inner in item.items()) + " }"
    if isinstance(item, list | tuple | np.ndarray):
        return "[" + ", ".join(value(inner) for inner in item) + "]"
    if isinstance(item, str):
        return json.dumps(item)
    return repr(item.item() if isinstance(item, np.generic) else item)


def q(number, unit):
    """A quantity as a file has it."""
    return f"{float(number)!r} {unit}"


def component(species):
    return {"stays_in": species.stays} if species.stays else {}


def model(species):
    return {"model": "raoult", "vapour_pressure": {"form": "antoine", "A": species.a / np.log(10), "B": species.b / np.log(10),
                                                   "C": species.c, "pressure": "Pa", "temperature": "K"}}


def heat(species):
    out = {}
    if species.stays != "liquid":
        out["gas_heat_capacity"] = q(species.cp_gas, "J/(mol K)")
    if species.stays != "gas":
        out["liquid_heat_capacity"] = q(species.cp_liquid, "J/(mol K)")
    if species.stays is None:
        out["heat_of_vaporisation"] = {"value": q(species.latent, "J/mol"), "at": q(species.at, "K")}
    return out


def tables(column, kind=None):
    """The file of a column as nested tables; feeds[0] is liquid_in, the first gas fed to the last stage is gas_in."""
    names = [s.name for s in column.species]
    data = {"components": {s.name: component(s) for s in column.species},
            "equilibrium": {"e": {s.name: model(s) for s in column.species if s.stays is None}}}
    if column.temperature is None:
        data["heat_data"] = {s.name: heat(s) for s in column.species}
    kind = kind or ("stripper" if column.reboiler or column.condenser else "absorber")
    unit = {"kind": kind, "gas_out": "top", "liquid_out": "bottom", "stages": column.stages, "equilibrium": "e",
            "pressure": q(column.pressure, "Pa"), "heat": "adiabatic" if column.temperature is None else "isothermal"}
    data["feeds"] = {}
    sides = []
    for place, (stage, phase, flows, T) in enumerate(column.feeds):
        if place == 0:
            name = unit["liquid_in"] = "lean"
        elif phase == "gas" and stage == column.stages and "gas_in" not in unit:
            name = unit["gas_in"] = "vent"
        else:
            name = f"side{place}"
            sides.append({"stream": name, "stage": stage})
        pressure = column.pressure
        data["feeds"][name] = {"phase": phase, "temperature": q(T, "K"), "pressure": q(pressure, "Pa"),
                               "flows": {n: q(f, "mol/s") for n, f in zip(names, flows) if f}}
    if sides:
        unit["side_feeds"] = sides
    if column.temperature is not None:
        unit["temperature"] = q(column.temperature, "K")
    if column.pressure_drop:
        unit["pressure_drop"] = q(column.pressure_drop, "Pa")
    if column.draws:
        unit["side_draws"] = [{"stream": f"draw{i}", "stage": s, "phase": p, "flow": q(f, "mol/s")}
                              for i, (s, p, f) in enumerate(column.draws)]
    if column.duties:
        unit["stage_duties"] = [{"stage": s, "duty": q(d, "W")} for s, d in column.duties]
    eff = np.asarray(column.efficiency, float)
    if eff.ndim == 0 and eff != 1:
        unit["efficiency"] = float(eff)
    elif eff.ndim == 1:
        unit["efficiency"] = {n: float(e) for n, e, s in zip(names, eff, column.species) if s.stays is None}
    elif eff.ndim == 2:
        unit["efficiency"] = [float(e) for e in eff[:, 0]]
    units = {"duty": "W", "temperature": "K"}
    for part in ("reboiler", "condenser"):
        given = getattr(column, part)
        if given:
            what, number = given
            unit[part] = {what: q(number, units[what]) if what in units else float(number)}
    if column.draw:
        unit["condenser"]["draw"] = {"stream": "condensate", "flow": q(column.draw, "mol/s")}
    data["units"] = {"col": unit}
    return data


def text(data):
    """A file from nested tables: sections two levels deep, the rest inline."""
    lines = []
    for section, entries in data.items():
        for name, table in entries.items():
            lines.append(f"[{section}.{name}]")
            lines += [f"{key} = {value(item)}" for key, item in table.items()]
    return "\n".join(lines) + "\n"


def read(data, folder, name="column.toml"):
    path = folder / name
    path.write_text(data if isinstance(data, str) else text(data), encoding="utf-8")
    return leanloop.read(path)


def profiles(result, column, unit="col"):
    """Liquid flows, gas flows (n, C) and temperatures (n,) from a result of one case; what is undefined is nothing."""
    told = result.to_dict()["units"][unit]["profile"]

    def flows(letter, total):
        total = np.array(told[total], float)
        parts = [told[letter].get(s.name) or [None] * len(total) for s in column.species]
        return np.nan_to_num(np.array(parts, float)).T * total[:, None]

    return flows("x", "liquid_mol_s"), flows("y", "gas_mol_s"), np.array(told["temperature_K"], float)


def flaws(result, column, tolerance=1e-8):
    """What does not hold of the stage equations in a solved result: a list of words, empty where all is right."""
    told = result.to_dict()
    l, v, T = profiles(result, column)
    profile, found = told["units"]["col"]["profile"], []
    if not (np.isfinite(T).all() and np.isfinite(l).all() and np.isfinite(v).all()):
        return ["not finite"]
    if min(l.min(), v.min()) < 0:
        found.append("negative flow")
    if not np.allclose(profile["pressure_Pa"], column.P, rtol=1e-12):
        found.append("pressures")
    fed = column.fed.sum(0)
    inside = np.maximum(l, v).max(0)
    gap = np.abs(column.balance(l, v)) / np.maximum(np.maximum(fed, inside), 1e-14 * fed.sum())
    if gap.max() > tolerance:
        found.append(f"balance {gap.max():.1e}")
    L, V = l.sum(1), v.sum(1)
    x, y = column.fractions(l, v)
    empty, dry = V <= 1e-12 * fed.sum(), L <= 1e-12 * fed.sum()
    K = column.k(T)
    moves = np.array([s.stays is None for s in column.species])
    gap = np.abs(column.equilibrium(l, v, T)) / np.maximum(y + K * x, 1e-9)
    fit = np.where((empty | dry)[:, None] | ~moves, 0, gap).max()
    if fit > tolerance:
        found.append(f"equilibrium {fit:.1e}")
    stay = [s.stays for s in column.species]
    wrong = [v[:, i] if s == "liquid" else l[:, i] for i, s in enumerate(stay) if s]
    if wrong and np.max(wrong) > 0:
        found.append("wrong phase")
    if (empty & dry).any():
        found.append("nothing leaves")
    bubble = (K * x).sum(1)
    if (bubble[empty & ~dry] > 1 + tolerance).any():
        found.append("gas is missing")
    if dry.any() and (np.where(moves, y / np.where(K == 0, np.inf, K), np.where(np.array(stay) == "liquid", np.inf, 0)).sum(1)[dry]
                      > 1 + tolerance).any():
        found.append("liquid is missing")
    if column.temperature is None:
        sizes = np.abs(np.array([s.h_gas(T) for s in column.species])).T * v + np.abs([s.h_liquid(T) for s in column.species]).T * l
        scale = sizes.sum(1).max() + 1e3 * fed.sum()
        duty = column.duty(l, v, T)
        rows = np.abs(column.specified(l, v, T)) * column.heat_scale / scale
        if rows.max() > tolerance:
            found.append(f"heat or specification {rows.max():.1e} on {rows.argmax() + column.top}")
        results = told["units"]["col"]["results"]
        for part, place in (("reboiler", -1), ("condenser", 0)):
            if getattr(column, part) and abs(duty[place] - results[f"{part}_duty_W"]) > tolerance * scale:
                found.append(f"{part} duty")
    else:
        if np.abs(T - column.temperature).max() > 1e-9:
            found.append("temperature")
    streams = told["streams"]
    gas, liquid = column.outlets(l, v)
    for name, flows in (("top", gas), ("bottom", liquid)):
        there = np.array([streams[name]["mol_s"].get(s.name) or 0.0 for s in column.species])
        if np.abs(there - flows).max() > tolerance * max(fed.sum(), 1e-300):
            found.append(f"stream {name}")
    return found


__all__ = ["component", "flaws", "heat", "model", "own", "profiles", "q", "read", "tables", "text", "value"]
