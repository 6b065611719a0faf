"""Reading of `[sizing.columns]`: what a column is made of, and whether its methods have what they need."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.entries import Context, Entry, read_values, shown_key, shown_name
from leanloop.errors import nearest
from leanloop.hydraulics import films, packings
from leanloop.sizing import spec
from leanloop.sizing.spec import ColumnSpec

if TYPE_CHECKING:
    from leanloop.flowsheet.sheet import Flowsheet


def read_column(
    sheet: Flowsheet, name: str, raw: Any, known: Mapping[str, Mapping[str, float]], hold: tuple[str, ...], context: Context
) -> ColumnSpec | None:
    """Read ``[sizing.columns.NAME]``.

    Parameters
    ----------
    sheet : Flowsheet
    name : str
    raw : mapping
        As written.
    known : mapping of str to mapping
        ``[properties]``, SI, by component.
    hold : tuple of str
        Requirements that every design meets.
    context : Context

    Returns
    -------
    ColumnSpec or None
        None after a fault.
    """
    where = f"sizing.columns.{shown_key(name)}"
    columns = [own for own, unit in sheet.units.items() if hasattr(unit, "cleans")]
    if name not in columns:
        context.fault(where, f"there is no column {shown_name(name)}", nearest(name, columns))
        return None
    faults = len(context.faults)
    unit = sheet.units[name]
    values = read_values(spec.COLUMN, raw, where, context.knowing(component=sheet.components.names))
    if len(context.faults) > faults:
        return None
    words, numbers = values.words, values.numbers
    packed = words["internals"] == "packing"
    for key in (spec.OF_TRAYS if packed else spec.OF_PACKING) & set(raw):
        context.fault(f"{where}.{key}", f"has no meaning with {words['internals']}", "leave it out")
    key = words.get("key") or _key(sheet, name, hold)
    if key not in unit.model_names:
        context.fault(f"{where}.key", f"'{key}' does not distribute in column '{name}'", nearest(key or "", unit.model_names))
    packing = None
    if packed:
        packing = _packing(words, numbers, where, context)
        _height(sheet, name, words, numbers, where, context)
    else:
        _efficiency(sheet, name, words, numbers, where, context)
    item = ColumnSpec(name, dict(words), dict(numbers), key or "", packing)
    if len(context.faults) == faults:
        _enough(sheet, item, known, where, context)
    return item if len(context.faults) == faults else None


def _key(sheet: Flowsheet, name: str, hold: tuple[str, ...]) -> str | None:
    """Give the component of a requirement that the column distributes, else the first of its table."""
    names = sheet.units[name].model_names
    for requirement in hold:
        parts = sheet.requirements[requirement].address.split(".") if requirement in sheet.requirements else []
        found = [part for part in parts if part in names]
        if found:
            return found[-1]
    return names[0] if names else None


def _packing(words: Mapping[str, Any], numbers: dict[str, float], where: str, context: Context) -> Any:
    own = ("specific_area", "void_fraction", "packing_factor")
    if "packing" in words:
        try:
            found = packings.find(words["packing"])
        except packings.UnknownPacking as error:
            problem, _, remedy = str(error).partition("; ")
            context.fault(f"{where}.packing", problem, remedy)
            return None
    else:
        missing = [key for key in own if key not in numbers]
        if missing:
            context.fault(f"{where}.packing", "entry is missing", f'name one such as "pall_metal_50", or give {", ".join(missing)}')
            return None
        found = packings.Packing("given", "given", "given", numbers.get("nominal_size", np.nan))
    changed = {
        "specific_area": "specific_area",
        "void_fraction": "void_fraction",
        "kister_factor": "packing_factor",
        "size": "nominal_size",
    }
    found = replace(found, **{field: numbers[key] for field, key in changed.items() if key in numbers})
    way = words.get("flood_by", "kister_gill")
    lacks = {
        "kister_gill": not np.isfinite(found.kister_factor), "leva": not np.isfinite(found.kister_factor),
        "eckert": not np.isfinite(found.older_factor), "stichlmair": found.stichlmair is None,
        "billet_schultes": found.billet_schultes is None or not np.isfinite(found.billet_schultes.flood),
    }  # fmt: skip
    if lacks[way]:
        can = [key for key, lack in lacks.items() if not lack]
        context.fault(f"{where}.flood_by", f"{way} has no constants of {found.name}", f"take one of {', '.join(can) or 'none'}")
    _drop(found, words, numbers, where, context)
    _films(found, words, numbers, where, context)
    return found


def _drop(found: packings.Packing, words: Mapping[str, Any], numbers: Mapping[str, float], where: str, context: Context) -> None:
    """Note that a pressure drop is asked for that no constants give."""
    billet = found.billet_schultes
    lacks = {
        "billet_schultes": billet is None or not np.isfinite([billet.pressure, billet.holdup, billet.void_fraction]).all(),
        "stichlmair": found.stichlmair is None, "robbins": not np.isfinite(found.kister_factor),
    }  # fmt: skip
    can = ", ".join(key for key, lack in lacks.items() if not lack)
    way = words.get("drop_by", "")
    if way and lacks[way]:
        remedy = f"take {can}" if can else "leave it out"
        context.fault(f"{where}.drop_by", f"{way} has no constants of {found.name}", remedy)
    elif "most_drop" in numbers and not way and lacks["billet_schultes"] and lacks["stichlmair"]:
        remedy = f'add drop_by = "{can}", or leave it out' if can else "leave it out, or take another packing"
        context.fault(f"{where}.most_drop", f"no pressure drop of {found.name} is known", remedy)


def _films(found: packings.Packing, words: Mapping[str, Any], numbers: Mapping[str, float], where: str, context: Context) -> None:
    """Note what film coefficients lack."""
    materials, billet = {"metal": "steel", "plastic": "polyethylene"}, found.billet_schultes
    if words.get("transfer") == "onda":
        if "critical_tension" not in numbers and materials.get(found.material, found.material) not in films.CRITICAL_TENSIONS:
            context.fault(f"{where}.critical_tension", "entry is missing", 'add critical_tension = "60 mN/m", of the material')
        if not np.isfinite(found.size):
            context.fault(f"{where}.nominal_size", "entry is missing", 'add nominal_size = "25 mm"')
        if not np.isfinite(found.specific_area):
            context.fault(f"{where}.specific_area", "entry is missing", f'add specific_area = "100 m2/m3", of {found.name}')
    if words.get("transfer") == "billet_schultes" and (
        billet is None or not np.isfinite([billet.liquid, billet.gas, billet.holdup, billet.void_fraction]).all()
    ):
        context.fault(f"{where}.transfer", f"billet_schultes has no constants of {found.name}", "take onda, or give hetp")


def _height(sheet: Flowsheet, name: str, words: Mapping[str, Any], numbers: dict[str, float], where: str, context: Context) -> None:
    own = sheet.numbers.get(f"units.{name}.hetp")
    if "hetp" in numbers and "transfer" in words:
        context.fault(f"{where}.hetp", "stands beside transfer", "keep one of the two")
    elif "hetp" not in numbers and "transfer" not in words:
        if own is None:
            context.fault(f"{where}.hetp", "entry is missing", 'add hetp = "0.6 m", or transfer = "onda"')
        else:
            numbers["hetp"] = own


def _efficiency(
    sheet: Flowsheet, name: str, words: Mapping[str, Any], numbers: dict[str, float], where: str, context: Context
) -> None:
    """Settle one way from stages to trays; stages with an efficiency of their own are trays already."""
    given = [key for key in ("efficiency", "murphree") if key in numbers] + (["oconnell"] if words.get("oconnell") else [])
    real = any(key == "efficiency" or key.startswith("efficiency.") for key in sheet.units[name].values.numbers)
    if real and given:
        context.fault(f"{where}.{given[0]}", "stands beside the efficiency of the column's own stages", "leave one of them out")
    elif len(given) > 1:
        context.fault(f"{where}.{given[1]}", f"stands beside {given[0]}", "keep one of them")
    elif not given and not real:
        context.fault(f"{where}.efficiency", "entry is missing", "add efficiency = 0.5, murphree = 0.6, or oconnell = true")
    elif real:
        numbers["efficiency"] = 1.0


def _enough(sheet: Flowsheet, item: ColumnSpec, known: Mapping[str, Mapping[str, float]], where: str, context: Context) -> None:
    """Note properties that the methods asked for would lack."""
    unit = sheet.units[item.unit]
    names = [name for name, there in zip(sheet.components.names, unit.present, strict=True) if there]
    in_liquid = [name for name in names if not unit.stays_gas[sheet.components.index[name]]]
    in_gas = [name for name in names if not unit.stays_liquid[sheet.components.index[name]]]
    for name in names:
        if sheet.components[name].molar_mass is None:
            context.fault(f"components.{name}.molar_mass", "entry is missing", f"column '{item.unit}' is sized by mass flows")
    for key, of in needs(item).items():
        if key in item.numbers:
            continue
        for name in in_liquid if of == "liquid" else in_gas if of == "gas" else [item.key]:
            own = known.get(name, {})
            instead = {"gas_diffusivity": "diffusion_volume", "liquid_diffusivity": "molar_volume"}.get(key)
            if key in own or (instead in own and (key == "liquid_diffusivity" or all(instead in known.get(n, {}) for n in in_gas))):
                continue
            shown = Entry(key, next(entry.sort for entry in spec.MIXTURE if entry.name == key))
            remedy = f"column '{item.unit}' needs it; or give {key} of the whole stream at {where}"
            context.fault(f"properties.{name}.{shown.name}", "entry is missing", remedy)


def needs(item: ColumnSpec) -> dict[str, str]:
    """Give the properties that a column's methods need, and whose: of the ``"liquid"``, the ``"gas"`` or the ``"key"``.

    Parameters
    ----------
    item : ColumnSpec
    """
    found = {"liquid_density": "liquid"}
    if item.trays:
        found["surface_tension"] = "liquid"
        if item.words.get("oconnell"):
            found["liquid_viscosity"] = "liquid"
        return found
    found["liquid_viscosity"] = "liquid"
    found["gas_viscosity"] = "gas"
    if "transfer" in item.words:
        found |= {"surface_tension": "liquid", "gas_diffusivity": "key", "liquid_diffusivity": "key"}
    return found
