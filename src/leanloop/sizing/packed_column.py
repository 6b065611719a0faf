"""Packed columns: diameter by flooding or pressure drop, height by HETP or film coefficients, on rows between stages."""

from __future__ import annotations

import numpy as np

from leanloop.hydraulics import billet_schultes, films, flooding, robbins, stichlmair, transfer
from leanloop.hydraulics.ranges import outside
from leanloop.hydraulics.roots import bracketed
from leanloop.sizing.rows import Rows
from leanloop.sizing.spec import ColumnSpec

FLOOD = 0.7
LEAST, MOST = 1e-3, 0.99  # parts of flood between which a pressure drop is looked for
LEAST_WETTING = 0.08 / 3600  # m3 of liquid per m of packing's edge and s; common practice, no source
LEAST_RATIO = 10.0  # of column to packing diameter; common practice, no source


def flood_velocity(spec: ColumnSpec, rows: Rows) -> np.ndarray:
    """Give the superficial gas velocity at flood, (M, S) m/s."""
    packing, flow = spec.packing, rows.flow_parameter
    light, heavy, thin, thick = rows.gas_density, rows.liquid_density, rows.gas_viscosity, rows.liquid_viscosity
    way = spec.words.get("flood_by", "kister_gill")
    if way == "billet_schultes":
        found = billet_schultes.flooding(packing.billet_schultes, flow, light, heavy, thin, thick)[0]
    elif way == "stichlmair":
        found = stichlmair.flooding(packing.stichlmair, flow, light, heavy, thin)[0]
    elif way == "eckert":
        found = flooding.eckert_flood(flow, packing.older_factor, light, heavy, thick)
    elif way == "leva":
        found = flooding.leva_flood(flow, packing.kister_factor, light, heavy, thick)
    else:
        found = flooding.kister_gill_flood(flow, packing.kister_factor, light, heavy, thick)
    return found * spec.get("system_factor", 1.0)


def drop_method(spec: ColumnSpec) -> str:
    """Give the method of the pressure drop: the one asked for, else the first that has constants; empty for none."""
    if "drop_by" in spec.words:
        return spec.words["drop_by"]
    own = spec.packing.billet_schultes
    if own is not None and np.isfinite([own.pressure, own.holdup]).all():
        return "billet_schultes"
    return "stichlmair" if spec.packing.stichlmair is not None else ""


def drop(spec: ColumnSpec, rows: Rows, velocity: np.ndarray) -> np.ndarray:
    """Give the pressure drop of the irrigated packing at gas velocities (M, S) m/s, (M, S) Pa/m."""
    packing, way = spec.packing, drop_method(spec)
    light, heavy, thin, thick = rows.gas_density, rows.liquid_density, rows.gas_viscosity, rows.liquid_viscosity
    liquid = flooding.liquid_velocity(velocity, rows.flow_parameter, light, heavy)
    if way == "billet_schultes":
        return billet_schultes.pressure_drop(packing.billet_schultes, velocity, liquid, light, heavy, thin, thick)
    if way == "stichlmair":
        return stichlmair.pressure_drop(packing.stichlmair, velocity, liquid, light, heavy, thin)[0]
    if way == "robbins":
        factor = spec.numbers.get("packing_factor", packing.kister_factor)
        return robbins.pressure_drop(factor, velocity * light, liquid * heavy, light, heavy, thick)
    return np.full(velocity.shape, np.nan)


def diameters(spec: ColumnSpec, rows: Rows) -> np.ndarray:
    """Give the diameter that each row asks for, (M, S) m: by flooding, or by pressure drop where that asks for more."""
    with np.errstate(all="ignore"):
        flood = flood_velocity(spec, rows)
        part = np.full(flood.shape, spec.get("flood", FLOOD))
        if "most_drop" in spec.numbers:
            most = spec.numbers["most_drop"]

            def gap(share: np.ndarray) -> np.ndarray:
                there = drop(spec, rows, share * flood)
                return np.where(np.isfinite(there), there, np.inf * np.ones_like(share)) - most

            high = np.full(flood.shape, MOST)
            low = np.full(flood.shape, LEAST)
            slow = bracketed(lambda share: np.minimum(gap(share), 1e6), low, high)
            part = np.where(np.isfinite(slow), np.minimum(part, slow), part)
            part = np.where(gap(low) > 0, np.nan, part)  # no velocity is slow enough
        gas = spec.get("rate_margin", 1.0) * rows.gas_mass / rows.gas_density
        return np.sqrt(4.0 * gas / (np.pi * part * flood))


def at(spec: ColumnSpec, rows: Rows, diameter: np.ndarray) -> dict[str, np.ndarray]:
    """Rate columns of a given diameter.

    Parameters
    ----------
    spec : ColumnSpec
    rows : Rows
    diameter : (M,) m

    Returns
    -------
    dict of str to (M,) or (M, S) array
        ``flood`` (M, S), part of the flood velocity; ``hetp_m`` (M, S); ``height_m``; ``drop_Pa``; ``drop_Pa_m`` (M, S);
        ``wetting`` (M, S), liquid over the least that wets the packing.
    """
    with np.errstate(all="ignore"):
        area = (np.pi / 4.0 * diameter**2)[:, None]
        margin = spec.get("rate_margin", 1.0)
        velocity = margin * rows.gas_mass / (rows.gas_density * area)
        each = drop(spec, rows, velocity)
        height = np.where(rows.stages, heights(spec, rows, area), np.nan)
        packed = np.nansum(height, axis=1)
        packed = np.where(np.isfinite(height).sum(axis=1) == rows.count, packed, np.nan)
        lost = np.where(rows.stages, height * each, np.nan)
        whole = np.where(np.isfinite(lost).sum(axis=1) == rows.count, np.nansum(lost, axis=1), np.nan)
        liquid = rows.liquid_mass / (rows.liquid_density * area)
        return {
            "flood": velocity / flood_velocity(spec, rows),
            "hetp_m": height,
            "height_m": packed + spec.get("ends", 0.0),
            "drop_Pa": whole,
            "drop_Pa_m": each,
            "wetting": liquid / (spec.packing.specific_area * LEAST_WETTING),
        }


def heights(spec: ColumnSpec, rows: Rows, area: np.ndarray) -> np.ndarray:
    """Give the height that does for a stage, (M, S) m, in columns of given areas (M, 1) m2."""
    if "transfer" not in spec.words:
        return np.full(rows.k.shape, spec.numbers["hetp"])
    gas, liquid = rows.gas_mass / area, rows.liquid_mass / area  # kg/(m2 s)
    packing = spec.packing
    if spec.words["transfer"] == "onda":
        tension = spec.get("critical_tension", critical_tension(spec))
        size = packing.size
        wetted = films.onda_area(
            packing.specific_area, tension, rows.surface_tension, liquid, rows.liquid_density, rows.liquid_viscosity
        )
        k_liquid = films.onda_liquid(
            packing.specific_area, wetted, size, liquid, rows.liquid_density, rows.liquid_viscosity, rows.liquid_diffusivity
        )
        k_gas = films.onda_gas(
            packing.specific_area, size, gas, rows.gas_density, rows.gas_viscosity, rows.gas_diffusivity, rows.temperature
        )
    else:
        own = packing.billet_schultes
        speed, held_speed = gas / rows.gas_density, liquid / rows.liquid_density
        held = billet_schultes.holdup(own, held_speed, rows.liquid_density, rows.liquid_viscosity)
        wetted = films.billet_schultes_area(own, held_speed, rows.liquid_density, rows.liquid_viscosity, rows.surface_tension)
        k_liquid = films.billet_schultes_liquid(own, held_speed, held, rows.liquid_diffusivity)
        k_gas = films.billet_schultes_gas(
            own, speed, held, rows.gas_density, rows.gas_viscosity, rows.gas_diffusivity, rows.temperature
        )
    h_gas = transfer.gas_height(rows.gas_mol / area, k_gas, wetted, rows.pressure)
    concentration = rows.liquid_density / rows.liquid_molar_mass
    h_liquid = transfer.liquid_height(rows.liquid_mol / area, k_liquid, wetted, concentration)
    return transfer.hetp(transfer.overall_height(h_gas, h_liquid, rows.lam), rows.lam)


def critical_tension(spec: ColumnSpec) -> float:
    """Give the critical surface tension of the packing's material, N/m; NaN where it is not known."""
    material = {"metal": "steel", "plastic": "polyethylene"}.get(spec.packing.material, spec.packing.material)
    return films.CRITICAL_TENSIONS.get(material, np.nan)


def cautions(spec: ColumnSpec, rows: Rows, found: dict[str, np.ndarray], diameter: float) -> list[str]:
    """Say which correlation is used outside its range, and what common practice would not do."""
    way, by = spec.words.get("flood_by", "kister_gill"), drop_method(spec)
    ranges = {
        "kister_gill": flooding.KISTER_GILL, "leva": flooding.LEVA, "eckert": flooding.ECKERT,
        "billet_schultes": billet_schultes.RANGES, "stichlmair": stichlmair.RANGES, "robbins": robbins.RANGES,
    }  # fmt: skip
    with np.errstate(all="ignore"):
        area = np.pi / 4.0 * diameter**2
        values = {
            "flow_parameter": rows.flow_parameter, "pressure": rows.pressure, "kister_factor": spec.packing.kister_factor,
            "gas_density": rows.gas_density, "liquid_density": rows.liquid_density,
            "liquid_viscosity": rows.liquid_viscosity, "gas_velocity": rows.gas_mass / (rows.gas_density * area),
            "liquid_velocity": rows.liquid_mass / (rows.liquid_density * area),
            "liquid_reynolds": rows.liquid_mass / area / (spec.packing.specific_area * rows.liquid_viscosity),
        }  # fmt: skip
    said = [f"flood ({way}): {item}" for item in outside(ranges[way], **values)]
    if by == "robbins":
        said.append("pressure drop (robbins): the packing factor of flooding stands for that of the dry bed.")
    if by:
        said += [f"pressure drop ({by}): {item}" for item in outside(ranges[by], **values)]
    else:
        said.append(f"pressure drop: no method has constants of {spec.packing.name}.")
    if spec.words.get("transfer") == "onda":
        said += [f"transfer (onda): {item}" for item in outside(films.ONDA, **values)]
        said.append("transfer (onda): its data scatter by 20 to 30 %.")
    if np.isfinite(spec.packing.size) and diameter < LEAST_RATIO * spec.packing.size:
        said.append("the column is narrower than ten packing pieces (common practice, no source): take smaller ones.")
    if np.nanmin(found["wetting"], initial=np.inf) < 1.0:
        said.append("the liquid may not wet the packing: below 0.08 m3/(m h) of its surface (common practice, no source).")
    if np.nanmax(found["flood"], initial=0.0) > 1.0:
        said.append("the column floods.")
    return said
