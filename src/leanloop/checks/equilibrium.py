"""What every equilibrium model must keep: reading, a gas that follows the liquid, derivatives, numbers by argument."""

from __future__ import annotations

import copy
from dataclasses import replace

import numpy as np

from leanloop.checks.base import Suite, documented, require, well_formed
from leanloop.checks.model import PARTS, WHERE, Model
from leanloop.checks.slopes import difference, miss
from leanloop.entries import Context
from leanloop.equilibrium import MODELS
from leanloop.equilibrium.base import COMPLEX_STEP, EquilibriumModel, Proportional

ROUND = 1e-12

SUITE = Suite(MODELS, lambda plugin: plugin.examples(), Model)
check = SUITE.check


@check("files, messages and the catalogue are made of entries", "declare each entry with a sort and a line of doc", whole=True)
def entries(plugin: type[EquilibriumModel]) -> None:
    """The class is documented and its entries can be read."""
    documented(plugin, "name")
    well_formed(plugin.entries)


@check("without an example nothing is checked", "let examples() give one table or more that reads without a fault", whole=True)
def examples(plugin: type[EquilibriumModel]) -> None:
    """There are tables, and each is read without a fault."""
    tables = plugin.examples()
    require(tables, "examples() gives none")
    for table in tables:
        own = Model(plugin, table)
        require(own.model.coordinates in ("fraction", "ratio"), f"coordinates is {own.model.coordinates!r}")


@check("a slip of the pen must be found, with its place", "let read() note every fault in the context, at its address")
def faults_have_addresses(own: Model) -> None:
    """An unknown and a wrong entry give a fault at their address, and no model."""
    table = dict(own.table)
    for odd, name in [({**table, "no_such": 1.0}, "no_such")] + [({**table, key: object()}, key) for key in table]:
        context = Context()
        read = own.plugin.read(odd, WHERE, context)
        found = [fault.address for fault in context.faults]
        require(any(item.startswith(f"{WHERE}.{name}") for item in found), f"no fault at {WHERE}.{name}: {found}")
        require(read is None, f"read() gives a model in spite of {found}")


@check("a coordinate is an amount", "mend the formula, or let outside() say where it is stretched")
def gas_positive(own: Model) -> None:
    """The gas is finite and not negative wherever the model is not stretched."""
    gas = own.gas()
    require(own.inside.any(), "outside() is true at every point tried, so that nothing is checked: 274 to 369 K, liquid to 1")
    for case, place in np.argwhere(own.inside & ~(np.isfinite(gas) & (gas >= 0)))[:1]:
        at = f"{own.at[0][case, 0]:g} K, {own.at[1][case, 0]:g} Pa, liquid {own.at[2][case, place]:g}"
        require(False, f"the gas is {gas[case, place]:g} at {at}")


@check("absent components are ordinary", "write the formula so that a liquid of zero is regular")
def zero_is_regular(own: Model) -> None:
    """The gas over a liquid without the component is finite."""
    gas = own.gas(own.shifted(2, np.zeros_like(own.at[2])))
    require(np.isfinite(gas).all(), f"the gas over a liquid without the component is {gas.ravel()[0]:g}")


@check("a second liquid with less gas has two answers for one gas", "use a rising curve")
def gas_rises(own: Model) -> None:
    """The gas never falls where the liquid rises."""
    gas = np.where(own.inside, own.gas(), np.nan)
    falls = np.diff(gas, axis=1) < -ROUND * np.abs(gas[:, 1:])
    require(not falls.any(), f"the gas falls where the liquid rises, at {own.at[0][falls.any(axis=1)].ravel()} K")


@check("the column skips what does not matter", "let uses name everything that gas/liquid depends on")
def uses_truthful(own: Model) -> None:
    """Gas over liquid follows nothing that `uses` does not name."""
    odd = own.model.uses - set(PARTS)
    require(not odd, f"uses names {sorted(odd)}; known: {', '.join(PARTS)}")
    ratio = own.gas() / own.at[2]
    for part, name in enumerate(PARTS):
        if name not in own.model.uses:
            at = own.shifted(part, own.at[part] * 0.97)
            same = np.allclose(own.gas(at) / at[2], ratio, rtol=ROUND, atol=0)
            require(same, f"gas/liquid depends on the {name}, which uses does not name")


@check("Newton's method and sensitivities follow them", "mend slopes(), or gas() for complex numbers")
def slopes_right(own: Model) -> None:
    """The slopes agree with differences."""
    with np.errstate(all="ignore"):
        slopes = own.model.slopes(*own.at, own.numbers)
    for part, name in enumerate(PARTS):
        require(np.shape(slopes[part]) == own.at[2].shape, f"the slope along the {name} has the shape {np.shape(slopes[part])}")
        off = miss(slopes[part], *own.slope(part))
        require(off <= 1, f"the slope along the {name} is off {off:.1e} times what is allowed")


@check("the column differentiates by complex steps", "use no abs, max or comparison on complex values, or set complex_safe = False")
def complex_truthful(own: Model) -> None:
    """Complex steps agree with differences, where the model is said to take them."""
    if not own.model.complex_safe:
        require(type(own.model).slopes is not EquilibriumModel.slopes, "complex_safe is False and slopes() is not its own")
        return
    for part, name in enumerate(PARTS):
        moved = own.gas(own.shifted(part, own.at[part] + 1j * COMPLEX_STEP))
        off = miss(np.imag(moved) / COMPLEX_STEP, *own.slope(part))
        require(off <= 1, f"the complex step along the {name} is off {off:.1e} times what is allowed")
        require(np.allclose(np.real(moved), own.gas(), rtol=ROUND, atol=0), f"a complex {name} changes the real part")
    flat = np.ones(own.at[2].size)
    for key in own.free:
        value = own.numbers[key]
        moved = own.gas(numbers={**own.numbers, key: value + 1j * COMPLEX_STEP})
        size = abs(value) or 1.0

        def call(now: np.ndarray, key: str = key) -> list[np.ndarray]:
            return [own.gas(numbers={**own.numbers, key: now.reshape(own.at[2].shape)}).ravel()]

        found = difference(call, value * flat, size * flat)[0].reshape(own.at[2].shape)
        off = miss(np.imag(moved) / COMPLEX_STEP, found, np.abs(own.gas()) / size)
        require(off <= 1, f"the complex step along number '{key}' is off {off:.1e} times what is allowed")


@check("a batch has one number for each case", "combine numbers with the arguments by plain formulas that broadcast")
def numbers_broadcast(own: Model) -> None:
    """Numbers by case give in a batch what they give alone."""
    spread = 1 + 0.01 * np.cos(np.arange(len(own.at[0])))[:, None]
    wide = own.gas(numbers={**own.numbers, **{key: own.numbers[key] * spread for key in own.free}})
    for case in range(len(spread)):
        at = tuple(item[case] for item in own.at)
        one = own.gas(at, {**own.numbers, **{key: own.numbers[key] * spread[case, 0] for key in own.free}})
        require(np.allclose(wide[case], one, rtol=ROUND, atol=0), f"case {case} of a batch is not what it is alone")


@check("one instance serves every case", "take every number from the argument, and keep none in the constructor")
def numbers_by_argument(own: Model) -> None:
    """A changed number is honoured by an instance that was made with another."""
    before, kept = dict(vars(own.model)), copy.deepcopy(own.model.values)
    for key, value in own.numbers.items():
        changed = [1.01 * item for item in value] if isinstance(value, list) else type(value)(1.01 * value)
        numbers = {**own.numbers, key: changed}
        other = type(own.model)(replace(own.model.values, numbers=numbers))
        with np.errstate(all="ignore"):
            wanted = np.broadcast_to(other.gas(*own.at, numbers), own.at[2].shape)
            swapped = np.broadcast_to(other.gas(*own.at, own.numbers), own.at[2].shape)
        same = np.array_equal(own.gas(numbers=numbers), wanted, equal_nan=True)
        require(same and np.array_equal(swapped, own.gas(), equal_nan=True), f"number '{key}' is not taken from the argument")
    require(vars(own.model) == before and own.model.values == kept, "the model is changed by using it")


@check("a proportional model is solved without a look at the liquid", "derive from EquilibriumModel where K depends on the liquid")
def proportional_is_linear(own: Model) -> None:
    """A proportional model gives twice the gas over twice the liquid."""
    if isinstance(own.model, Proportional):
        require("liquid" not in own.model.uses, "it is Proportional, and uses names the liquid")
        double = own.gas(own.shifted(2, 2 * own.at[2]))
        require(np.allclose(double, 2 * own.gas(), rtol=ROUND, atol=0), "twice the liquid does not give twice the gas")


@check("the start of a column and traces rest on it", "give the slope at zero, or leave ratio_at_zero() to the base class")
def ratio_at_zero_is_the_limit(own: Model) -> None:
    """The ratio at zero is the slope there."""
    with np.errstate(all="ignore"):
        ratio = own.model.ratio_at_zero(own.at[0], own.at[1], own.numbers)
    require(np.shape(ratio) == own.at[0].shape, f"ratio_at_zero() has the shape {np.shape(ratio)}, not {own.at[0].shape}")
    zero, size = np.zeros(own.at[0].size), np.full(own.at[0].size, 1e-3)
    found = difference(lambda value: [np.ravel(own.gas((own.at[0], own.at[1], value[:, None])))], zero, size)[0]
    off = miss(np.ravel(ratio), found, np.abs(own.gas()[:, 3]) + np.abs(found))
    require(off <= 1, f"ratio_at_zero() is off {off:.1e} times what is allowed")


@check("results say where they are extrapolated", "broadcast all three arguments, and give bool")
def outside_is_bool(own: Model) -> None:
    """The judgement of the table has the right form."""
    outside = np.asarray(own.model.outside(*own.at, own.numbers))
    require(np.shape(outside) == own.at[2].shape and outside.dtype == bool, f"outside() gives {np.shape(outside)} {outside.dtype}")


@check("readers rely on what is said", "give a list of sentences, [] for none")
def cautions_are_sentences(own: Model) -> None:
    """Cautions have the right form."""
    for factor in (1.0, 3.0):
        said = own.model.cautions(factor * own.at[0], own.at[1], own.at[2])
        require(isinstance(said, list) and all(isinstance(item, str) and item for item in said), f"cautions() gives {said!r}")
