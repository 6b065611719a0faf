"""Tray columns: diameter by flooding, trays by an efficiency, pressure drop and entrainment, on rows between stages."""

from __future__ import annotations

import numpy as np

from leanloop.hydraulics import efficiency, tray_geometry, tray_pressure, trays
from leanloop.hydraulics.ranges import outside
from leanloop.sizing.rows import Rows
from leanloop.sizing.spec import ColumnSpec

FLOOD, SPACING, HOLE_AREA, HOLE, WEIR = 0.8, 0.5, 0.1, 5e-3, 0.05
EPS = 1e-9
CAPACITIES = {"fair": (trays.fair_capacity, trays.FAIR), "treybal": (trays.treybal_capacity, trays.TREYBAL)}


def flood_velocity(spec: ColumnSpec, rows: Rows) -> np.ndarray:
    """Give the gas velocity at flood on the net area, (M, S) m/s."""
    capacity, _ = CAPACITIES[spec.words.get("capacity", "fair")]
    factor = capacity(
        rows.flow_parameter, spec.get("spacing", SPACING), rows.surface_tension, spec.get("hole_area", HOLE_AREA),
        spec.get("system_factor", 1.0),
    )  # fmt: skip
    return trays.flood_velocity(factor, rows.gas_density, rows.liquid_density)


def _share(spec: ColumnSpec, rows: Rows) -> np.ndarray:
    """Give the downcomer's part of the area; one for the column, the largest that a row asks for."""
    if "downcomer" in spec.numbers:
        return np.full((len(rows.count), 1), spec.numbers["downcomer"])
    return _most(tray_geometry.downcomer_share(rows.flow_parameter))


def _most(values: np.ndarray) -> np.ndarray:
    """Give the largest of each column, (M, 1); NaN where there is none."""
    found = np.where(np.isfinite(values), values, -np.inf).max(axis=1, keepdims=True)
    return np.where(np.isfinite(found), found, np.nan)


def diameters(spec: ColumnSpec, rows: Rows) -> np.ndarray:
    """Give the diameter that each row asks for, (M, S) m."""
    gas = spec.get("rate_margin", 1.0) * rows.gas_mass / rows.gas_density
    return tray_geometry.diameter(gas, flood_velocity(spec, rows), spec.get("flood", FLOOD), _share(spec, rows))


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
        ``flood`` (M, S), part of the flood velocity; ``efficiency`` overall; ``trays``; ``height_m``; ``drop_Pa``;
        ``entrainment`` (M, S), entrained over entrained and downflowing liquid; ``backup`` (M, S), of the liquid in the
        downcomer over spacing and weir.
    """
    with np.errstate(all="ignore"):
        wide = diameter[:, None]
        margin, share = spec.get("rate_margin", 1.0), _share(spec, rows)
        gas, liquid = margin * rows.gas_mass / rows.gas_density, margin * rows.liquid_mass / rows.liquid_density
        flood = tray_geometry.fraction_of_flood(gas, flood_velocity(spec, rows), wide, share)
        active = tray_geometry.active_area(wide, share)
        hole_area, weir_height = spec.get("hole_area", HOLE_AREA), spec.get("weir_height", WEIR)
        weir = tray_geometry.weir_length(wide, share)
        dry = tray_pressure.dry_head(gas / (hole_area * active), rows.gas_density, rows.liquid_density, hole_area)
        clear = tray_pressure.clear_liquid(liquid, weir, weir_height, gas / active, rows.gas_density, rows.liquid_density)
        bubble = tray_pressure.bubble_head(rows.surface_tension, rows.liquid_density, spec.get("hole_diameter", HOLE))
        drop = tray_pressure.pressure_drop(dry, clear, bubble, rows.liquid_density)
        apron = tray_pressure.apron_head(liquid, weir * 0.8 * weir_height)  # clearance below the apron; common practice, no source
        spacing = spec.get("spacing", SPACING)
        backup = tray_pressure.downcomer_backup(drop, rows.liquid_density, clear, apron) / (spacing + weir_height)
        each = np.where(rows.stages, efficiencies(spec, rows), np.nan)
        needed = np.nansum(1.0 / each, axis=1)
        needed = np.where(np.isfinite(each).sum(axis=1) == rows.count, needed, np.nan)
        trays_ = np.ceil(needed - EPS)
        return {
            "flood": flood,
            "efficiency": rows.count / needed,
            "trays": trays_,
            "height_m": trays_ * spacing + spec.get("ends", 0.0),
            "drop_Pa": _mean(drop) * trays_,
            "entrainment": trays.entrainment(rows.flow_parameter, flood),
            "backup": backup,
        }


def _mean(values: np.ndarray) -> np.ndarray:
    good = np.isfinite(values)
    return np.where(good, values, 0.0).sum(axis=1) / np.where(good.any(axis=1), good.sum(axis=1), np.nan)


def efficiencies(spec: ColumnSpec, rows: Rows) -> np.ndarray:
    """Give the overall efficiency around each row, (M, S): stages over trays."""
    if "efficiency" in spec.numbers:
        return np.full(rows.k.shape, spec.numbers["efficiency"])
    if "murphree" in spec.numbers:
        return efficiency.overall(spec.numbers["murphree"], rows.lam)
    group = efficiency.oconnell_group(rows.k, rows.liquid_molar_mass, rows.liquid_viscosity, rows.liquid_density)
    return efficiency.oconnell_absorber(group)


def cautions(spec: ColumnSpec, rows: Rows, found: dict[str, np.ndarray]) -> list[str]:
    """Say which correlation is used outside its range, and where a tray is loaded too much."""
    way = spec.words.get("capacity", "fair")
    values = {
        "flow_parameter": rows.flow_parameter, "spacing": spec.get("spacing", SPACING),
        "hole_area_ratio": spec.get("hole_area", HOLE_AREA), "surface_tension": rows.surface_tension,
        "hole_diameter": spec.get("hole_diameter", HOLE),
        "weir_to_spacing": spec.get("weir_height", WEIR) / spec.get("spacing", SPACING), "fraction_of_flood": found["flood"],
    }  # fmt: skip
    said = [f"flood ({way}): {item}" for item in outside(CAPACITIES[way][1], **values)]
    said += [f"entrainment: {item}" for item in outside(trays.ENTRAINMENT, **values)]
    if spec.words.get("oconnell"):
        group = efficiency.oconnell_group(rows.k, rows.liquid_molar_mass, rows.liquid_viscosity, rows.liquid_density)
        said += [f"efficiency (O'Connell): {item}" for item in outside(efficiency.OCONNELL, oconnell_group=group)]
        said.append("efficiency (O'Connell): its data scatter by some 12 percentage points.")
    if np.nanmax(found["backup"], initial=0.0) > 0.5:
        said.append(
            "the downcomer holds more than half of tray spacing and weir (common practice, no source): a wider spacing helps."
        )
    if np.nanmax(found["flood"], initial=0.0) > 1.0:
        said.append("the column floods.")
    return said
