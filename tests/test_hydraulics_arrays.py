"""Every function of the hydraulics layer on arrays: broadcasting, bad cases that spoil only themselves, no warnings."""

import ast
import inspect
import pkgutil
from importlib import import_module

import numpy as np
import pytest

import leanloop.hydraulics
from leanloop.hydraulics import packings, ranges

# Arguments by name, in an ordinary case.
COMMON = {
    "flow_parameter": 0.1, "liquid_mass": 3.0, "gas_mass": 1.5, "gas_density": 1.2, "liquid_density": 998.0, "spacing": 0.5,
    "surface_tension": 0.05, "hole_area_ratio": 0.09, "system_factor": 0.85, "clear_liquid": 0.05, "hole_diameter": 5e-3,
    "capacity": 0.08, "fraction_of_flood": 0.8, "share": 0.12, "diameter": 1.5, "length": 1.0, "lost": 0.1, "gas_flow": 2.0,
    "flood_velocity": 1.8, "fraction": 0.8, "hole_velocity": 15.0, "orifice": 0.7, "liquid_flow": 0.006, "weir_length": 1.0,
    "active_velocity": 1.4, "weir_height": 0.05, "clearance_area": 0.05, "dry": 0.03, "clear": 0.04, "bubble": 0.005,
    "tray_drop": 700.0, "apron": 0.01, "kister_factor": 150.0, "packing_factor": 150.0, "older_factor": 150.0,
    "liquid_viscosity": 1.1e-3, "gas_viscosity": 1.8e-5, "gas_velocity": 1.1, "liquid_velocity": 0.004, "loading_holdup": 0.06,
    "dry_factor": 150.0, "gas_flux": 1.3, "liquid_flux": 4.0, "drop": 200.0, "k": 1.7, "molar_mass": 0.2, "viscosity": 2e-3,
    "density": 850.0, "group": 5.0, "henry": 20.0, "pressure": 1.1e5, "murphree": 0.6, "overall": 0.5, "lam": 0.7, "liquid": 0.5,
    "vapour": 0.5, "coefficient": 1e-4, "area": 100.0, "concentration": 5e4, "gas": 0.4, "height": 0.8, "hetp": 0.6,
    "gas_in": 0.05, "gas_out": 0.02, "gas_at_liquid_in": 0.001, "specific_area": 200.0, "critical_tension": 0.061, "size": 0.025,
    "wetted_area": 150.0, "liquid_diffusivity": 2e-9, "gas_diffusivity": 1.6e-5, "temperature": 300.0, "holdup": 0.05,
    "schmidt_power": 1 / 3, "first_mass": 0.03, "second_mass": 0.044, "first_volume": 2e-5, "second_volume": 3e-5,
    "solvent_mass": 0.018, "solvent_viscosity": 1e-3, "solute_volume": 5e-5, "association": 2.6,
}  # fmt: skip
VECTORS = {
    "fractions": [0.3, 0.7], "molar_masses": [0.03, 0.05], "viscosities": [1e-5, 3e-5], "densities": [900.0, 700.0],
    "tensions": [0.02, 0.03],
}  # fmt: skip
NO_LEAST = {"gas_in", "gas_out", "gas_at_liquid_in"}  # of any sign
ZERO_IS_FINE = {"lost", "dry", "clear", "bubble", "apron", "tray_drop", "fractions"}
ZERO_HERE = {("stichlmair", "liquid_velocity"), ("robbins", "liquid_flux"), ("transfer", "gas"), ("transfer", "liquid"),
             ("tray_geometry.diameter", "share"), ("tray_geometry.fraction_of_flood", "share")}
ENDLESS = {("billet_schultes", "diameter")}  # infinite: no wall
NOT_OF_NUMBERS = {"ranges", "arrays", "roots", "packings", "packing_data"}


def functions():
    for module in pkgutil.iter_modules(leanloop.hydraulics.__path__):
        if module.name in NOT_OF_NUMBERS:
            continue
        loaded = import_module(f"leanloop.hydraulics.{module.name}")
        tree = ast.parse(inspect.getsource(loaded))
        for node in tree.body:
            if isinstance(node, ast.FunctionDef) and not node.name.startswith("_"):
                yield pytest.param(module.name, getattr(loaded, node.name), id=f"{module.name}.{node.name}")


ALL = list(functions())


def arguments(module, function):
    found = {}
    for name in inspect.signature(function).parameters:
        if name == "packing":
            kind = packings.find("pall_metal_25")
            found[name] = kind.stichlmair if module == "stichlmair" else kind.billet_schultes
        else:
            found[name] = np.array(VECTORS[name]) if name in VECTORS else COMMON[name]
    return found


def results(function, given):
    found = function(**given)
    return [np.asarray(item) for item in (found if isinstance(found, tuple) else (found,))]


def bad_values(module, function, name):
    values = [np.nan]
    if (module, name) not in ENDLESS:
        values += [np.inf]
    if name in NO_LEAST:
        return values
    values += [-1.0]
    zero = name in ZERO_IS_FINE or (module, name) in ZERO_HERE or (f"{module}.{function.__name__}", name) in ZERO_HERE
    return values if zero else [*values, 0.0]


@pytest.mark.parametrize(("module", "function"), ALL)
class TestArrays:
    def test_one_bad_case_spoils_only_itself(self, module, function):
        given = arguments(module, function)
        single = results(function, given)
        assert all(np.isfinite(item).all() and item.shape == () for item in single)
        spoilt = {}
        for name in given:
            if name == "packing":
                continue
            for value in bad_values(module, function, name):  # an exception or a warning fails, too
                many = np.stack([np.asarray(given[name], dtype=float)] * 3)
                many[1] = value
                found = results(function, {**given, name: many})
                for item, one in zip(found, single):
                    assert item.shape == (3,), name
                    assert item[[0, 2]] == pytest.approx(np.full(2, one), rel=1e-12), name
                spoilt[name, value] = any(np.isnan(item[1]) for item in found)
        missed = [key for key, lost in spoilt.items() if not lost]
        assert missed == []

    def test_broadcasts(self, module, function):
        given = arguments(module, function)
        names = [name for name in given if name != "packing"]
        shapes = [(3, 1), (4,)]
        wide = dict(given)
        for index, name in enumerate(names[:2]):
            shape = shapes[index] if len(names) > 1 else (3, 4)
            own = np.asarray(given[name], dtype=float)
            wide[name] = np.broadcast_to(own, shape + own.shape) * np.linspace(0.98, 1.0, int(np.prod(shape))).reshape(
                shape + (1,) * own.ndim)
        for place in ((0, 0), (2, 3), (1, 2)):
            own = dict(given)
            for index, name in enumerate(names[:2]):
                at = place if len(names) == 1 else (place[0], 0) if index == 0 else (place[1],)
                own[name] = wide[name][at]
            for many, one in zip(results(function, wide), results(function, own)):
                assert many.shape == (3, 4)
                assert many[place] == pytest.approx(one, rel=1e-12)


def test_constants_of_packings_may_be_arrays_too():
    from leanloop.hydraulics import billet_schultes

    kinds = [packings.find(name).billet_schultes for name in ("pall_metal_25", "pall_plastic_50")]
    both = packings.BilletSchultes(*(np.array([getattr(kind, word) for kind in kinds]) for word in vars(kinds[0])))
    found = billet_schultes.flooding(both, 0.1, 1.2, 998.0, 1.8e-5, 1e-3)[0]
    assert found == pytest.approx([billet_schultes.flooding(kind, 0.1, 1.2, 998.0, 1.8e-5, 1e-3)[0] for kind in kinds], rel=1e-12)


def test_every_range_is_in_order_and_names_a_quantity():
    derived = {"weir_to_spacing", "liquid_reynolds", "oconnell_group", "kessler_wankat_group"}  # of other functions, or ratios
    seen = 0
    for module in pkgutil.iter_modules(leanloop.hydraulics.__path__):
        for value in vars(import_module(f"leanloop.hydraulics.{module.name}")).values():
            for item in value if isinstance(value, tuple) else ():
                if isinstance(item, ranges.Range):
                    seen += 1
                    assert item.low < item.high
                    assert item.name in {*COMMON, *derived}
    assert seen > 25
