"""Wrong flowsheets, each one small edit of a right one: every fault at its address, once, with a way out.

A fault that follows from another is not told, and a fault never hides another that has nothing to do with it.
"""

import itertools
import re
import subprocess
import sys

import numpy as np
import pytest

import leanloop
from leanloop.errors import InputError

RIGHT = """\
title = "Everything that can be written wrong"

[feeds.vent]
phase = "gas"
temperature = "26 degC"
pressure = "1.07 bar"
flow = "10 mol/s"
fractions = { air = "rest", toluene = 0.02, ethanol = "900 ppm" }

[feeds.steam]
phase = "gas"
temperature = "152 degC"
pressure = "1.01 bar"
flows = { steam = "1.0 mol/s" }

[feeds.dirt]
phase = "liquid"
temperature = "30 degC"
pressure = "1.1 bar"
flow = "1 mol/h"
ratios = { oil = "rest", tar = 0.5 }

[units.wash]
kind = "absorber"
gas_in = "vent"
liquid_in = "cool_lean"
gas_out = "cleaned"
liquid_out = "rich"
stages = 4
equilibrium = "cold"

[units.join]
kind = "mixer"
takes = ["rich", "dirt"]
gives = "dirty"

[units.preheat]
kind = "heater"
takes = "dirty"
gives = "hot_rich"
temperature = "150 degC"

[units.strip]
kind = "stripper"
liquid_in = "hot_rich"
gas_in = "steam"
gas_out = "overhead"
liquid_out = "lean"
stages = 3
equilibrium = "hot"

[units.divide]
kind = "splitter"
takes = "lean"
gives = ["bleed", "kept"]
shares = { bleed = 1e-2 }

[units.top_up]
kind = "makeup"
takes = "kept"
gives = "topped_lean"
hold = { oil = "1.60 mol/s" }

[units.trim]
kind = "cooler"
takes = "topped_lean"
gives = "cool_lean"
temperature = "26 degC"

[requirements.outlet]
quantity = "streams.cleaned.fraction.toluene"
equals = 2e-3
free = "units.top_up.hold.oil"
between = ["0.8 mol/s", "3 mol/s"]

[requirements.warmth]
quantity = "streams.hot_rich.temperature_K"
at_least = "140 degC"
free = "units.preheat.temperature"
between = ["120 degC", "160 degC"]

[components]
air = { molar_mass = "28.96 g/mol", stays_in = "gas" }
toluene = { molar_mass = "92.14 g/mol" }
ethanol = { molar_mass = "46.07 g/mol" }
oil = { molar_mass = "250 g/mol", stays_in = "liquid" }
tar = { molar_mass = "400 g/mol", stays_in = "liquid" }
steam = { molar_mass = "18.02 g/mol", stays_in = "gas" }

[equilibrium.cold]
toluene = { model = "table", x = [0, 0.1, 0.4], y = [0, 0.01, 0.05] }
ethanol = { model = "henry", constant = "0.9 bar", slope = "3000 K", at = "25 degC" }

[equilibrium.hot]
toluene = { model = "raoult", vapour_pressure = { form = "antoine", A = 6.95, B = 1345.0, C = 219.5, pressure = "mmHg", \
temperature = "degC" }, activity = { a = 0.1 } }
ethanol = { model = "polynomial", K = [2.0, 0.01], temperature = "degC", pressure = "1 bar" }

[loop]
method = "newton"
tolerance = 1e-9
tears = ["cool_lean"]

[basis]
gas = ["air", "steam"]

[groups]
organics = ["toluene", "ethanol"]
"""

VENT_PARTS = 'fractions = { air = "rest", toluene = 0.02, ethanol = "900 ppm" }'
DIRT_PARTS = 'ratios = { oil = "rest", tar = 0.5 }'
COLD_TOLUENE = 'toluene = { model = "table", x = [0, 0.1, 0.4], y = [0, 0.01, 0.05] }'
COLD_ETHANOL = 'ethanol = { model = "henry", constant = "0.9 bar", slope = "3000 K", at = "25 degC" }'
HOT_ETHANOL = 'ethanol = { model = "polynomial", K = [2.0, 0.01], temperature = "degC", pressure = "1 bar" }'
ANTOINE = 'vapour_pressure = { form = "antoine", A = 6.95, B = 1345.0, C = 219.5, pressure = "mmHg", temperature = "degC" }'
VENT_HEAD = '[feeds.vent]\nphase = "gas"\ntemperature = "26 degC"\npressure = "1.07 bar"\nflow = "10 mol/s"\n'
OUTLET = "requirements.outlet"
BETWEEN = 'between = ["0.8 mol/s", "3 mol/s"]'
QUANTITY = 'quantity = "streams.cleaned.fraction.toluene"'
HUGE = "0x" + "f" * 5000  # a whole number of 6,000 decimal digits, more than Python writes out

UNITS_FROM, UNITS_TO = RIGHT.index("[units.wash]"), RIGHT.index("[requirements.outlet]")
FEEDS_FROM = RIGHT.index("[feeds.vent]")
PARTS_FROM, TABLES_FROM, LOOP_FROM = (RIGHT.index(head) for head in ("[components]", "[equilibrium.cold]", "[loop]"))


def head(new):
    """An entry at the top of the file, before any section."""
    return ("title =", f"{new}\ntitle =")


def vent(old, new):
    assert old in VENT_HEAD
    return (VENT_HEAD, VENT_HEAD.replace(old, new))


def parts(new, form="fractions"):
    return (VENT_PARTS, f"{form} = {new}")


def cold(new):
    return (COLD_TOLUENE, f"toluene = {new}")


def asked(address, limit="equals = 2e-3"):
    return (f"{QUANTITY}\nequals = 2e-3", f'quantity = "{address}"\n{limit}')


def instead(old, new):
    return (old, new)


UNTORN = ('tears = ["cool_lean"]\n', "")  # where there is no such stream any more

# name: (edits, the faults: address and words that its line must hold)
FAULTS = {
    # the file's own sections
    "unknown section": ([instead("[groups]", "[group]")], [("group", "groups")]),
    "unknown entry before the sections": ([head("titel = 1")], [("titel", "title")]),
    "title of another type": ([instead('title = "Every', 'title = 5 # "Every')], [("title", "no text")]),
    "list for the loop": ([instead(RIGHT[LOOP_FROM : RIGHT.index("[basis]")], ""), head("loop = [1]")], [("loop", "no table")]),
    "number for the requirements": (
        [instead(RIGHT[UNITS_TO:PARTS_FROM], ""), head("requirements = 3")],
        [("requirements", "no table")],
    ),
    "table for a list of groups": (
        [instead('organics = ["toluene", "ethanol"]', "organics = { a = 1 }")],
        [("groups.organics", "no name")],
    ),
    "list for the basis": ([instead('[basis]\ngas = ["air", "steam"]', ""), head('basis = ["air"]')], [("basis", "no table")]),
    "date for the groups": (
        [instead('[groups]\norganics = ["toluene", "ethanol"]', ""), head("groups = 2024-02-28T00:00:00")],
        [("groups", "no table")],
    ),
    "no components": (
        [instead(RIGHT[PARTS_FROM:TABLES_FROM], ""), instead('[basis]\ngas = ["air", "steam"]', "")],
        [("components", "there is no component")],
    ),
    "number for the components": (
        [instead(RIGHT[PARTS_FROM:TABLES_FROM], ""), head("components = 6")],
        [("components", "no table")],
    ),
    "no units": ([instead(RIGHT[UNITS_FROM:UNITS_TO], ""), UNTORN], [("units", "there is no unit")]),
    "empty list for the units": ([instead(RIGHT[UNITS_FROM:UNITS_TO], ""), head("units = []"), UNTORN], [("units", "")]),
    "list of numbers for the units": (
        [instead(RIGHT[UNITS_FROM:UNITS_TO], ""), head("units = [1, 2]"), UNTORN],
        [("units", "no table")],
    ),
    "list of tables for a unit": ([instead("[units.trim]", "[[units.trim]]"), UNTORN], [("units.trim", "no table")]),
    "list of tables for a feed": ([instead("[feeds.steam]", "[[feeds.steam]]")], [("feeds.steam", "no table")]),
    "no equilibrium table": (
        [instead(RIGHT[TABLES_FROM:LOOP_FROM], "")],
        [("units.wash.equilibrium", "[equilibrium.NAME]"), ("units.strip.equilibrium", "[equilibrium.NAME]")],
    ),
    "flag for the equilibrium": (
        [instead(RIGHT[TABLES_FROM:LOOP_FROM], ""), head("equilibrium = true")],
        [("equilibrium", "no table")],
    ),
    "name that no address can hold": ([instead("[units.trim]", '[units."tr im"]')], [('units."tr im"', "letters, digits")]),
    "table with such a name": (
        [instead("[equilibrium.cold]", '[equilibrium."c:d"]'), instead('equilibrium = "cold"', 'equilibrium = "c:d"')],
        [('equilibrium."c:d"', "letters")],
    ),
    # feeds: phase, temperature, pressure, flow
    "missing phase": ([vent('phase = "gas"\n', "")], [("feeds.vent.phase", "missing")]),
    "misspelt phase": ([vent('"gas"', '"gsa"')], [("feeds.vent.phase", "'gas'")]),
    "list for a phase": ([vent('"gas"', '["gas"]')], [("feeds.vent.phase", "no name")]),
    "missing temperature": ([vent('temperature = "26 degC"\n', "")], [("feeds.vent.temperature", "missing")]),
    "misspelt temperature": ([vent("temperature", "temprature")], [("feeds.vent.temprature", "'temperature'")]),
    "unknown unit of measure": ([vent("26 degC", "26 degX")], [("feeds.vent.temperature", "'degX'")]),
    "temperature without a unit": ([vent("26 degC", "26")], [("feeds.vent.temperature", "26 degC")]),
    "plain number for a temperature": ([vent('"26 degC"', "299.15")], [("feeds.vent.temperature", "no unit")]),
    "wrong dimension": ([vent("26 degC", "26 bar")], [("feeds.vent.temperature", "a pressure")]),
    "below absolute zero": ([vent("26 degC", "-280 degC")], [("feeds.vent.temperature", "absolute zero")]),
    "a furnace for a feed": ([vent("26 degC", "26000 degC")], [("feeds.vent.temperature", "check its unit")]),
    "empty text for a temperature": ([vent("26 degC", "")], [("feeds.vent.temperature", "a number")]),
    "not a number": ([vent('"26 degC"', "nan")], [("feeds.vent.temperature", "nan")]),
    "infinite": ([vent('"26 degC"', "-inf")], [("feeds.vent.temperature", "inf")]),
    "too large": ([vent("26 degC", "1e999 degC")], [("feeds.vent.temperature", "too large")]),
    "date for a temperature": ([vent('"26 degC"', "1979-05-27")], [("feeds.vent.temperature", "1979-05-27")]),
    "no pressure at all": ([vent("1.07 bar", "0 bar")], [("feeds.vent.pressure", "above 0")]),
    "flag for a pressure": ([vent('"1.07 bar"', "false")], [("feeds.vent.pressure", "no pressure")]),
    "table for a flow": ([vent('"10 mol/s"', "{ air = 1 }")], [("feeds.vent.flow", "mol/s")]),
    "negative flow": ([vent("10 mol/s", "-10 mol/s")], [("feeds.vent.flow", "at least 0")]),
    "huge whole number": ([vent('"10 mol/s"', HUGE)], [("feeds.vent.flow", "no unit")]),
    "missing flow": ([vent('flow = "10 mol/s"\n', "")], [("feeds.vent.flow", "missing")]),
    "misspelt flow": ([vent("flow =", "flwo =")], [("feeds.vent.flwo", "'flow'")]),
    "volume of a liquid": ([instead('flow = "1 mol/h"', 'flow = "1 m3/h"')], [("feeds.dirt.flow", "density")]),
    "entry called name": ([vent("flow", 'name = "x"\nflow')], [("feeds.vent.name", "unknown entry")]),
    "entry called self": ([vent("flow", 'self = "x"\nflow')], [("feeds.vent.self", "unknown entry")]),
    "entry that is no plain name": ([vent("flow", '"a: b;\\n" = 1\nflow')], [('feeds.vent."a: b;\\n"', "unknown entry")]),
    # feeds: composition
    "no composition": ([instead(VENT_PARTS, "")], [("feeds.vent.fractions", "no form")]),
    "two forms of composition": (
        [instead(VENT_PARTS, VENT_PARTS + "\nratios = { air = 1 }")],
        [("feeds.vent.ratios", "fractions and ratios")],
    ),
    "flow beside flows": (
        [instead("flows = { steam", 'flow = "1 mol/s"\nflows = { steam')],
        [("feeds.steam.flow", "keep one")],
    ),
    "misspelt form": ([parts("{ air = 1 }", "fractoins")], [("feeds.vent.fractoins", "'fractions'")]),
    "list for fractions": ([parts("[0.5, 0.5]")], [("feeds.vent.fractions", "no table")]),
    "no parts": ([parts("{}")], [("feeds.vent.fractions", "no table")]),
    "no flows": ([instead('{ steam = "1.0 mol/s" }', "{}")], [("feeds.steam.flows", "nothing")]),
    "unknown component in flows": ([instead('{ steam = "1.0', '{ steem = "1.0')], [("feeds.steam.flows.steem", "'steam'")]),
    "negative part of a flow": (
        [instead('steam = "1.0 mol/s"', 'steam = "-1 mol/s"')],
        [("feeds.steam.flows.steam", "at least 0")],
    ),
    "unknown component in fractions": (
        [parts('{ air = "rest", tolune = 0.02 }')],
        [("feeds.vent.fractions.tolune", "'toluene'")],
    ),
    "fractions beyond one": ([parts("{ air = 0.9, toluene = 0.2 }")], [("feeds.vent.fractions", "sum to 1.1")]),
    "fractions short of one": ([parts("{ air = 0.9, toluene = 0.09 }")], [("feeds.vent.fractions", "sum to 0.99")]),
    "no room for the rest": ([parts('{ air = "rest", toluene = 1.2 }')], [("feeds.vent.fractions", "no rest")]),
    "hardly no room for the rest": ([parts('{ air = "rest", toluene = 1.0000001 }')], [("feeds.vent.fractions", "no rest")]),
    "two rests": ([parts('{ air = "rest", toluene = "rest" }')], [("feeds.vent.fractions.toluene", "rest already")]),
    "negative fraction": ([parts('{ air = "rest", toluene = -0.1 }')], [("feeds.vent.fractions.toluene", "at least 0")]),
    "negative ppm": ([parts('{ air = "rest", toluene = "-3 ppm" }')], [("feeds.vent.fractions.toluene", "at least 0")]),
    "molar mass for a fraction": (
        [parts('{ air = "rest", toluene = "92 g/mol" }')],
        [("feeds.vent.fractions.toluene", "mg/Nm3")],
    ),
    "pressure for a fraction": (
        [parts('{ air = "rest", toluene = "2 mbar" }')],
        [("feeds.vent.fractions.toluene", "a pressure")],
    ),
    "mg/Nm3 without molar mass": (
        [parts('{ air = "rest", toluene = "50 mg/Nm3" }'), instead('toluene = { molar_mass = "92.14 g/mol" }', "toluene = {}")],
        [("components.toluene.molar_mass", "missing")],
    ),
    "mass fractions without molar mass": (
        [
            parts('{ air = "rest", toluene = 0.1 }', "mass_fractions"),
            instead('air = { molar_mass = "28.96 g/mol", stays', "air = { stays"),
        ],
        [("components.air.molar_mass", "mass")],
    ),
    "mass flow without molar mass": (
        [vent("10 mol/s", "10 kg/s"), instead('ethanol = { molar_mass = "46.07 g/mol" }', "ethanol = {}")],
        [("components.ethanol.molar_mass", "mass")],
    ),
    "mg/Nm3 in a liquid": ([instead("tar = 0.5", 'tar = "5 mg/Nm3"')], [("feeds.dirt.ratios.tar", "gas")]),
    "loadings of a gas": ([parts("{ oil = 1 }", "loadings")], [("feeds.vent.loadings", "liquids")]),
    "ratios without their basis": ([instead(DIRT_PARTS, "ratios = { toluene = 0.5 }")], [("feeds.dirt.ratios", "sum to 0")]),
    "rest that is not of the basis": (
        [instead(DIRT_PARTS, 'ratios = { oil = 0.5, toluene = "rest" }')],
        [("feeds.dirt.ratios.toluene", "rest")],
    ),
    "saturated with an unknown component": (
        [vent("flow", 'saturated_with = "toluen"\nflow')],
        [("feeds.vent.saturated_with", "'toluene'")],
    ),
    "saturated with what has no vapour pressure": (
        [vent("flow", 'saturated_with = "oil"\nflow')],
        [("feeds.vent.saturated_with", "raoult")],
    ),
    "saturated with what boils": (
        [
            instead(
                'temperature = "26 degC"\npressure = "1.07 bar"',
                'saturated_with = "steam"\ntemperature = "126 degC"\npressure = "1.07 bar"',
            )
        ],
        [("feeds.vent.saturated_with", "boils")],
    ),
    "saturated liquid": (
        [instead('flow = "1 mol/h"', 'saturated_with = "steam"\nflow = "1 mol/h"')],
        [("feeds.dirt.saturated_with", "for a gas")],
    ),
    "saturated with what is given": (
        [vent("flow", 'saturated_with = "toluene"\nflow')],
        [("feeds.vent.saturated_with", "as well")],
    ),
    # units and their streams
    "missing kind": ([instead('kind = "mixer"\n', "")], [("units.join.kind", "absorber")]),
    "misspelt entry kind": ([instead('kind = "mixer"', 'knid = "mixer"')], [("units.join.knid", "'kind'")]),
    "misspelt kind": ([instead('kind = "mixer"', 'kind = "mixr"')], [("units.join.kind", "'mixer'")]),
    "number for a kind": ([instead('kind = "mixer"', "kind = 5")], [("units.join.kind", "no name")]),
    "unit that is a number": ([instead("[units.join]", "[units]\nnew = 1\n[units.join]")], [("units.new", "no table")]),
    "missing inlet": ([instead('gas_in = "vent"\n', "")], [("units.wash.gas_in", "missing")]),
    "misspelt inlet": ([instead('gas_in = "vent"', 'gas_inn = "vent"')], [("units.wash.gas_inn", "'gas_in'")]),
    "missing outlet": ([instead('gives = "hot_rich"\n', "")], [("units.preheat.gives", "missing")]),
    "missing list of outlets": ([instead('gives = ["bleed", "kept"]\n', "")], [("units.divide.gives", "missing")]),
    "number for outlets": ([instead('gives = ["bleed", "kept"]', "gives = 5")], [("units.divide.gives", "5")]),
    "flag for outlets": ([instead('gives = ["bleed", "kept"]', "gives = true")], [("units.divide.gives", "no name")]),
    "number among outlets": ([instead('gives = ["bleed", "kept"]', 'gives = ["bleed", 7]')], [("units.divide.gives[1]", "7")]),
    "outlet named twice": ([instead('["bleed", "kept"]', '["bleed", "kept", "kept"]')], [("units.divide.gives", "twice")]),
    "empty list of inlets": ([instead('takes = ["rich", "dirt"]', "takes = []")], [("units.join.takes", "empty")]),
    "inlet named twice": ([instead('["rich", "dirt"]', '["rich", "dirt", "rich"]')], [("units.join.takes", "twice")]),
    "empty name of a stream": ([instead('takes = "dirty"', 'takes = ""')], [("units.preheat.takes", "no name")]),
    "stream name with a dot": (
        [instead('liquid_out = "lean"', 'liquid_out = "le.an"'), instead('takes = "lean"', 'takes = "le.an"')],
        [("units.strip.liquid_out", "letters"), ("units.divide.takes", "letters")],
    ),
    "dangling stream": ([instead('takes = "dirty"', 'takes = "dirtyy"')], [("units.preheat.takes", "'dirty'")]),
    "stream given by two units": (
        [instead('gas_out = "overhead"', 'gas_out = "cleaned"')],
        [("units.strip.gas_out", "units.wash.gas_out")],
    ),
    "stream named like a feed": (
        [instead('gas_out = "overhead"', 'gas_out = "vent"')],
        [("units.strip.gas_out", "feeds.vent")],
    ),
    "stream taken by two units": ([instead('takes = "dirty"', 'takes = "rich"')], [("units.preheat.takes", "splitter")]),
    "feed that nobody takes": ([instead('["rich", "dirt"]', '["rich"]')], [("feeds.dirt", "no unit takes")]),
    "gas into a liquid port": (
        [
            instead('liquid_in = "cool_lean"\ngas_out', 'liquid_in = "vent"\ngas_out'),
            instead('gas_in = "vent"', 'gas_in = "cool_lean"'),
        ],
        [("units.wash.liquid_in", "is gas"), ("units.wash.gas_in", "is liquid")],
    ),
    "mixing gas and liquid": (
        [instead('["rich", "dirt"]', '["rich", "dirt", "overhead"]')],
        [("units.join.takes", "gas and liquid")],
    ),
    "missing stages": ([instead("stages = 4\n", "")], [("units.wash.stages", "stages = 8")]),
    "half a stage": ([instead("stages = 4", "stages = 4.5")], [("units.wash.stages", "whole number")]),
    "no stage": ([instead("stages = 4", "stages = 0")], [("units.wash.stages", "at least 1")]),
    "too many stages": ([instead("stages = 4", "stages = 6000")], [("units.wash.stages", "at most 5000")]),
    "flag for stages": ([instead("stages = 4", "stages = true")], [("units.wash.stages", "whole number")]),
    "huge number of stages": ([instead("stages = 4", f"stages = {HUGE}")], [("units.wash.stages", "whole number")]),
    "text for stages": ([instead("stages = 4", 'stages = "four"')], [("units.wash.stages", "'four'")]),
    "unknown equilibrium table": (
        [instead('equilibrium = "cold"', 'equilibrium = "clod"')],
        [("units.wash.equilibrium", "'cold'")],
    ),
    "heat that is not offered": (
        [instead("stages = 4", 'stages = 4\nheat = "isothermic"')],
        [("units.wash.heat", "'isothermal'")],
    ),
    "heater below absolute zero": ([instead('"150 degC"', '"-300 degC"')], [("units.preheat.temperature", "absolute zero")]),
    "misspelt entry of a heater": (
        [instead('"hot_rich"\ntemperature', '"hot_rich"\ntempreature')],
        [("units.preheat.tempreature", "'temperature'")],
    ),
    "shares beyond one": ([instead("bleed = 1e-2", "bleed = 0.7, kept = 0.5")], [("units.divide.shares", "1.2")]),
    "share beyond one": ([instead("bleed = 1e-2", "bleed = 1.2")], [("units.divide.shares.bleed", "at most 1")]),
    "share of an unknown outlet": ([instead("{ bleed = 1e-2", "{ bled = 1e-2")], [("units.divide.shares.bled", "'bleed'")]),
    "two outlets without a share": ([instead("{ bleed = 1e-2 }", "{}")], [("units.divide.shares", "bleed, kept")]),
    "percent of another thing": ([instead("bleed = 1e-2", 'bleed = "1 mol"')], [("units.divide.shares.bleed", "amount")]),
    "list for shares": ([instead("{ bleed = 1e-2 }", "[0.01]")], [("units.divide.shares", "no table")]),
    "unknown component held": (
        [instead('{ oil = "1.60 mol/s" }', '{ oill = "1.60 mol/s" }')],
        [("units.top_up.hold.oill", "'oil'")],
    ),
    "negative hold": ([instead('"1.60 mol/s"', '"-1.60 mol/s"')], [("units.top_up.hold.oil", "at least 0")]),
    "empty hold": ([instead('{ oil = "1.60 mol/s" }', "{}")], [("units.top_up.hold", "nothing")]),
    "missing hold": ([instead('hold = { oil = "1.60 mol/s" }\n', "")], [("units.top_up.hold", "missing")]),
    "hold by mass": ([instead('"1.60 mol/s"', '"1.60 kg/s"')], [("units.top_up.hold.oil", "a mass flow")]),
    # ways in and out
    "no bleed": (
        [
            instead(RIGHT[RIGHT.index("[units.divide]") : RIGHT.index("[units.top_up]")], ""),
            instead('takes = "kept"', 'takes = "lean"'),
        ],
        [("components.tar", "no way out")],
    ),
    "a circulation that nothing holds": (
        [
            instead(
                'kind = "makeup"\ntakes = "kept"\ngives = "topped_lean"\nhold = { oil = "1.60 mol/s" }',
                'kind = "heater"\ntakes = "kept"\ngives = "topped_lean"\ntemperature = "150 degC"',
            ),
            instead(RIGHT[RIGHT.index("[feeds.dirt]") : UNITS_FROM], ""),
            instead('["rich", "dirt"]', '["rich"]'),
            instead(RIGHT[UNITS_TO : RIGHT.index("[requirements.warmth]")], ""),
        ],
        [("units.wash.liquid_in", "makeup")],
    ),
    # components, groups, basis
    "component that is a text": (
        [instead('tar = { molar_mass = "400 g/mol", stays_in = "liquid" }', 'tar = "400 g/mol"')],
        [("components.tar", "no table")],
    ),
    "misspelt stays_in": (
        [instead('"28.96 g/mol", stays_in', '"28.96 g/mol", stays_inn')],
        [("components.air.stays_inn", "'stays_in'")],
    ),
    "phase that is none": (
        [instead('"28.96 g/mol", stays_in = "gas"', '"28.96 g/mol", stays_in = "gass"')],
        [("components.air.stays_in", "'gas'")],
    ),
    "molar mass of zero": ([instead("28.96 g/mol", "0 g/mol")], [("components.air.molar_mass", "above 0")]),
    "molar mass in kg": ([instead("28.96 g/mol", "28.96 kg")], [("components.air.molar_mass", "g/mol")]),
    "component with a blank": (
        [instead("tar = {", '"t ar" = {'), instead(DIRT_PARTS, 'ratios = { oil = "rest" }')],
        [('components."t ar"', "letters")],
    ),
    "group of an unknown component": (
        [instead('["toluene", "ethanol"]', '["toluene", "ethanl"]')],
        [("groups.organics[1]", "'ethanol'")],
    ),
    "group named like a component": ([instead("organics =", "toluene =")], [("groups.toluene", "rename")]),
    "group that names one twice": (
        [instead('["toluene", "ethanol"]', '["toluene", "toluene"]')],
        [("groups.organics", "twice")],
    ),
    "group with a dot": ([instead("organics =", '"or.ganics" =')], [('groups."or.ganics"', "letters")]),
    "basis with an unknown component": ([instead('gas = ["air", "steam"]', 'gas = ["airr"]')], [("basis.gas[0]", "'air'")]),
    "unknown basis": ([instead('gas = ["air", "steam"]', 'gass = ["air"]')], [("basis.gass", "'gas'")]),
    "empty basis": ([instead('gas = ["air", "steam"]', "gas = []")], [("basis.gas", "empty")]),
    # equilibrium
    "component without a model": ([instead(COLD_ETHANOL, "")], [("equilibrium.cold.ethanol", "column 'wash'")]),
    "unknown component with a model": (
        [instead('toluene = { model = "table"', 'tolune = { model = "table"')],
        [("equilibrium.cold.tolune", "'toluene'")],
    ),
    "model for a component that stays": (
        [instead(COLD_ETHANOL, COLD_ETHANOL + '\noil = { model = "constant", K = 0.1 }')],
        [("equilibrium.cold.oil", "stays in the liquid")],
    ),
    "stays_in beside a model": (
        [cold('{ model = "constant", K = 0.1, stays_in = "gas" }')],
        [("equilibrium.cold.toluene.stays_in", "not both")],
    ),
    "stays_in that is no phase": ([cold('{ stays_in = "liqid" }')], [("equilibrium.cold.toluene.stays_in", "'liquid'")]),
    "list for stays_in": ([cold('{ stays_in = ["gas"] }')], [("equilibrium.cold.toluene.stays_in", "no name")]),
    "number for a model": ([cold("0.1")], [("equilibrium.cold.toluene", "no table")]),
    "missing model": ([cold("{ K = 0.1 }")], [("equilibrium.cold.toluene.model", "missing")]),
    "misspelt entry model": ([cold('{ modle = "constant", K = 0.1 }')], [("equilibrium.cold.toluene.modle", "'model'")]),
    "misspelt model": ([cold('{ model = "constnat", K = 0.1 }')], [("equilibrium.cold.toluene.model", "'constant'")]),
    "list for a model": ([cold('{ model = ["constant"], K = 0.1 }')], [("equilibrium.cold.toluene.model", "no name")]),
    "list for a table": (
        [instead(RIGHT[TABLES_FROM : RIGHT.index("[equilibrium.hot]")], ""), head("equilibrium.cold = [1]")],
        [("equilibrium.cold", "no table")],
    ),
    "constant without K": ([cold('{ model = "constant" }')], [("equilibrium.cold.toluene.K", "missing")]),
    "negative K": ([cold('{ model = "constant", K = -0.1 }')], [("equilibrium.cold.toluene.K", "at least 0")]),
    "K with a unit": ([cold('{ model = "constant", K = "0.1 bar" }')], [("equilibrium.cold.toluene.K", "a pressure")]),
    "list for K": ([cold('{ model = "constant", K = [0.1] }')], [("equilibrium.cold.toluene.K", "no number")]),
    "unknown coordinates": (
        [cold('{ model = "constant", K = 0.1, basis = "ratios" }')],
        [("equilibrium.cold.toluene.basis", "'ratio'")],
    ),
    "table that falls": ([instead("x = [0, 0.1, 0.4]", "x = [0, 0.5, 0.4]")], [("equilibrium.cold.toluene.x[2]", "rising")]),
    "table of unequal lengths": (
        [instead("y = [0, 0.01, 0.05]", "y = [0, 0.01]")],
        [("equilibrium.cold.toluene.y", "one for each")],
    ),
    "table of one point": (
        [instead("x = [0, 0.1, 0.4], y = [0, 0.01, 0.05]", "x = [0.1], y = [0.01]")],
        [("equilibrium.cold.toluene.x", "two points")],
    ),
    "table beyond one": ([instead("x = [0, 0.1, 0.4]", "x = [0, 0.1, 1.4]")], [("equilibrium.cold.toluene.x[2]", "at most 1")]),
    "text in a table": ([instead("x = [0, 0.1, 0.4]", 'x = [0, "a", 0.4]')], [("equilibrium.cold.toluene.x[1]", "'a'")]),
    "table without a column": ([instead(", y = [0, 0.01, 0.05]", "")], [("equilibrium.cold.toluene.y", "missing")]),
    "table over two pairs": (
        [instead("y = [0, 0.01, 0.05]", "y = [0, 0.01, 0.05], X = [0, 1], Y = [0, 1]")],
        [("equilibrium.cold.toluene", "several pairs")],
    ),
    "table in a file that is not there": (
        [cold('{ model = "table", file = "points.csv" }')],
        [("equilibrium.cold.toluene.file", "'points.csv'")],
    ),
    "table in a file that cannot be": (
        [cold('{ model = "table", file = "a\\u0000b" }')],
        [("equilibrium.cold.toluene.file", "CSV")],
    ),
    "henry in both forms": (
        [instead('constant = "0.9 bar",', 'constant = "0.9 bar", solubility = "1e-4 mol/(m3 Pa)",')],
        [("equilibrium.cold.ethanol", "both forms")],
    ),
    "henry in no form": (
        [instead(COLD_ETHANOL, 'ethanol = { model = "henry", slope = "3000 K" }')],
        [("equilibrium.cold.ethanol", "neither")],
    ),
    "henry without its solvent": (
        [instead(COLD_ETHANOL, 'ethanol = { model = "henry", solubility = "1e-4 mol/(m3 Pa)" }')],
        [("equilibrium.cold.ethanol.solvent_concentration", "missing")],
    ),
    "antoine without C": ([instead("C = 219.5, ", "")], [("equilibrium.hot.toluene.vapour_pressure.C", "missing")]),
    "antoine in a unit of nothing": (
        [instead('"mmHg"', '"mol"')],
        [("equilibrium.hot.toluene.vapour_pressure.pressure", "mmHg")],
    ),
    "antoine over an unknown scale": (
        [instead('pressure = "mmHg", temperature = "degC"', 'pressure = "mmHg", temperature = "dgeC"')],
        [("equilibrium.hot.toluene.vapour_pressure.temperature", "'degC'")],
    ),
    "misspelt form of vapour pressure": (
        [instead('"antoine"', '"antonie"')],
        [("equilibrium.hot.toluene.vapour_pressure.form", "'antoine'")],
    ),
    "list for a vapour pressure": (
        [instead(ANTOINE, "vapour_pressure = [1]")],
        [("equilibrium.hot.toluene.vapour_pressure", "pressure such as")],
    ),
    "activity without a": ([instead("{ a = 0.1 }", "{ b = 100 }")], [("equilibrium.hot.toluene.activity.a", "missing")]),
    "number for an activity": (
        [instead("activity = { a = 0.1 }", "activity = 0.1")],
        [("equilibrium.hot.toluene.activity", "no table")],
    ),
    "polynomial of nothing": ([instead("K = [2.0, 0.01]", "K = []")], [("equilibrium.hot.ethanol.K", "no list")]),
    "polynomial of zeros": ([instead("K = [2.0, 0.01]", "K = [0, 0]")], [("equilibrium.hot.ethanol.K", "zero")]),
    "polynomial at no pressure": (
        [instead('pressure = "1 bar" }', 'pressure = "0 bar" }')],
        [("equilibrium.hot.ethanol.pressure", "above 0")],
    ),
    "range the wrong way round": (
        [instead(HOT_ETHANOL, HOT_ETHANOL[:-2] + ', valid = ["90 degC", "20 degC"] }')],
        [("equilibrium.hot.ethanol.valid", "lower and higher")],
    ),
    # requirements: the quantity
    "quantity of an unknown stream": ([asked("streams.cleand.fraction.toluene")], [(f"{OUTLET}.quantity", "'cleaned'")]),
    "quantity of an unknown unit": ([asked("units.wsh.results.removal.toluene")], [(f"{OUTLET}.quantity", "'wash'")]),
    "unknown quantity of a stream": ([asked("streams.cleaned.fracton.toluene")], [(f"{OUTLET}.quantity", "'fraction'")]),
    "unknown result of a unit": ([asked("units.wash.results.remval.toluene")], [(f"{OUTLET}.quantity", "'removal'")]),
    "quantity of an unknown component": ([asked("streams.cleaned.fraction.tolune")], [(f"{OUTLET}.quantity", "'toluene'")]),
    "quantity of a component that never gets there": (
        [asked("streams.cleaned.fraction.oil")],
        [(f"{OUTLET}.quantity", "never in")],
    ),
    "quantity without its component": ([asked("streams.cleaned.fraction")], [(f"{OUTLET}.quantity", "whole table")]),
    "whole table of a unit": ([asked("units.wash.results.removal")], [(f"{OUTLET}.quantity", "whole table")]),
    "whole stream": ([asked("streams.cleaned")], [(f"{OUTLET}.quantity", "whole stream")]),
    "whole unit": ([asked("units.wash")], [(f"{OUTLET}.quantity", "whole unit")]),
    "no quantity at all": ([asked("streams")], [(f"{OUTLET}.quantity", "streams.NAME")]),
    "quantity too deep": (
        [asked("streams.cleaned.fraction.toluene.x")],
        [(f"{OUTLET}.quantity", "stop at 'streams.cleaned.fraction.toluene'")],
    ),
    "number too deep": (
        [asked("streams.cleaned.pressure_Pa.x", 'equals = "1 bar"')],
        [(f"{OUTLET}.quantity", "stop at 'streams.cleaned.pressure_Pa'")],
    ),
    "quantity that is text": ([asked("streams.cleaned.phase")], [(f"{OUTLET}.quantity", "text")]),
    "unit's quantity that is text": ([asked("units.wash.kind")], [(f"{OUTLET}.quantity", "text")]),
    "quantity that is a list": ([asked("units.wash.profile.x.toluene")], [(f"{OUTLET}.quantity", "list by stage")]),
    "input for a quantity": ([asked("units.wash.stages")], [(f"{OUTLET}.quantity", "'stages'")]),
    "quantity of the balance": ([asked("balance.energy.closure")], [(f"{OUTLET}.quantity", "streams.NAME")]),
    "loading of a gas": ([asked("streams.cleaned.loading.toluene")], [(f"{OUTLET}.quantity", "gas")]),
    "dew point of a liquid": ([asked("streams.rich.dew_point_K", 'equals = "20 degC"')], [(f"{OUTLET}.quantity", "liquid")]),
    "number for a quantity": ([instead(QUANTITY, "quantity = 4")], [(f"{OUTLET}.quantity", "no name")]),
    "missing quantity": ([instead(QUANTITY + "\n", "")], [(f"{OUTLET}.quantity", "missing")]),
    "misspelt entry quantity": (
        [instead('quantity = "streams.cl', 'quantty = "streams.cl')],
        [(f"{OUTLET}.quantty", "'quantity'")],
    ),
    "same quantity twice": (
        [asked("streams.hot_rich.temperature_K", 'equals = "140 degC"')],
        [("requirements.warmth.quantity", OUTLET)],
    ),
    # requirements: the limit, the freed input and its bounds
    "no limit": ([instead("equals = 2e-3\n", "")], [(OUTLET, "equals, at_most, at_least")]),
    "misspelt limit": ([instead("equals = 2e-3", "equal = 2e-3")], [(f"{OUTLET}.equal", "'equals'")]),
    "two limits": ([instead("equals = 2e-3", "equals = 2e-3\nat_most = 2e-3")], [(OUTLET, "equals and at_most")]),
    "limit of another dimension": ([instead("equals = 2e-3", 'equals = "1 bar"')], [(f"{OUTLET}.equals", "a pressure")]),
    "limit without its unit": (
        [instead('at_least = "140 degC"', "at_least = 413")],
        [("requirements.warmth.at_least", "degC")],
    ),
    "limit that is not finite": ([instead("equals = 2e-3", "equals = inf")], [(f"{OUTLET}.equals", "finite")]),
    "list for a limit": ([instead("equals = 2e-3", "equals = [2e-3]")], [(f"{OUTLET}.equals", "no number")]),
    "unknown input": (
        [instead('"units.top_up.hold.oil"', '"units.topup.hold.oil"')],
        [(f"{OUTLET}.free", "'units.top_up.hold.oil'")],
    ),
    "missing free": ([instead('free = "units.top_up.hold.oil"\n', "")], [(f"{OUTLET}.free", "missing")]),
    "freeing a word": ([instead('"units.top_up.hold.oil"', '"units.top_up.kind"')], [(f"{OUTLET}.free", "no numeric input")]),
    "freeing a whole number": (
        [instead('"units.top_up.hold.oil"', '"units.wash.stages"')],
        [(f"{OUTLET}.free", "small amounts")],
    ),
    "freeing a list": (
        [instead('"units.top_up.hold.oil"', '"equilibrium.cold.toluene.x"')],
        [(f"{OUTLET}.free", "small amounts")],
    ),
    "freeing a target": (
        [instead('"units.top_up.hold.oil"', '"requirements.outlet.equals"')],
        [(f"{OUTLET}.free", "no numeric input")],
    ),
    "freed twice": (
        [
            instead(
                'free = "units.preheat.temperature"\nbetween = ["120 degC", "160 degC"]',
                f'free = "units.top_up.hold.oil"\n{BETWEEN}',
            )
        ],
        [("requirements.warmth.free", OUTLET)],
    ),
    "freed downstream only": ([asked("streams.vent.fraction.toluene")], [(f"{OUTLET}.free", "upstream")]),
    "bounds the wrong way round": (
        [instead(BETWEEN, 'between = ["3 mol/s", "0.8 mol/s"]')],
        [(f"{OUTLET}.between", "lower one first")],
    ),
    "one bound": ([instead(BETWEEN, 'between = ["3 mol/s"]')], [(f"{OUTLET}.between", "two bounds")]),
    "missing bounds": ([instead(BETWEEN + "\n", "")], [(f"{OUTLET}.between", "missing")]),
    "misspelt bounds": ([instead(BETWEEN, BETWEEN.replace("between", "betwen"))], [(f"{OUTLET}.betwen", "'between'")]),
    "bound of another dimension": (
        [instead(BETWEEN, 'between = ["0.8 bar", "3 mol/s"]')],
        [(f"{OUTLET}.between[0]", "a pressure")],
    ),
    "bounds without units": (
        [instead(BETWEEN, "between = [0.8, 3]")],
        [(f"{OUTLET}.between[0]", "no unit"), (f"{OUTLET}.between[1]", "no unit")],
    ),
    "bound outside what is allowed": (
        [instead(BETWEEN, 'between = ["-1 mol/s", "3 mol/s"]')],
        [(f"{OUTLET}.between[0]", "outside")],
    ),
    "bound on an open limit": (
        [instead('free = "units.top_up.hold.oil"\n' + BETWEEN, 'free = "feeds.vent.pressure"\nbetween = ["0 bar", "3 bar"]')],
        [(f"{OUTLET}.between[0]", "outside")],
    ),
    "requirement that is a number": (
        [instead("[requirements.warmth]", "[requirements]\nnew = 5\n[requirements.warmth]")],
        [("requirements.new", "no table")],
    ),
    "requirement with a blank": (
        [instead("[requirements.warmth]", '[requirements."warm th"]')],
        [('requirements."warm th"', "letters")],
    ),
    # the loop
    "tolerance of zero": ([instead("tolerance = 1e-9", "tolerance = 0")], [("loop.tolerance", "above 0")]),
    "text for a tolerance": ([instead("tolerance = 1e-9", 'tolerance = "fine"')], [("loop.tolerance", "'fine'")]),
    "unknown method": ([instead('"newton"', '"newten"')], [("loop.method", "'newton'")]),
    "number for a method": ([instead('"newton"', "1")], [("loop.method", "no name")]),
    "option of another method": ([instead("tolerance = 1e-9", "depth = 3")], [("loop.depth", "anderson")]),
    "option out of range": ([instead('"newton"', '"anderson"\ndepth = 0')], [("loop.depth", "at least 1")]),
    "misspelt entry of the loop": ([instead("tolerance =", "tolerence =")], [("loop.tolerence", "'tolerance'")]),
    "no pass allowed": ([instead("tolerance = 1e-9", "passes = 0")], [("loop.passes", "at least 1")]),
    "unknown tear": ([instead('["cool_lean"]', '["cool_leen"]')], [("loop.tears[0]", "'cool_lean'")]),
    "no tears": ([instead('["cool_lean"]', "[]")], [("loop.tears", "at least one")]),
    "tear on no loop": ([instead('["cool_lean"]', '["cool_lean", "cleaned"]')], [("loop.tears[1]", "cleaned")]),
    "tear that cuts nothing": ([instead('["cool_lean"]', '["vent"]')], [("loop.tears[0]", "vent")]),
    "tear named twice": ([instead('["cool_lean"]', '["cool_lean", "cool_lean"]')], [("loop.tears", "twice")]),
    "tears that leave a loop": (
        [
            instead('kind = "mixer"\ntakes = ["rich", "dirt"]', 'kind = "mixer"\ntakes = ["rich", "dirt", "again"]'),
            instead(
                "[units.preheat]",
                '[units.turn]\nkind = "splitter"\ntakes = "dirty"\ngives = ["again", "on"]\n'
                "shares = { again = 0.5 }\n[units.preheat]",
            ),
            instead('kind = "heater"\ntakes = "dirty"', 'kind = "heater"\ntakes = "on"'),
        ],
        [("loop.tears", "join")],
    ),
}

LINE = re.compile(
    r'(?P<source>[^\n]+?\.toml): (?P<address>(?:"(?:[^"\\\n]|\\.)*"|[^\s:;"])+|--set): (?P<problem>[^\n]+?); (?P<remedy>[^\n]+)'
)


def edited(edits):
    text = RIGHT
    for old, new in edits:
        assert text.count(old) == 1, old
        text = text.replace(old, new)
    return text


def faults_of(path, settings=()):
    """Addresses and lines, each of which must be whole and have the file's name."""
    with pytest.raises(InputError) as caught:
        leanloop.read(path, settings)
    lines = caught.value.lines()
    found = []
    for line in lines:
        match = LINE.fullmatch(line)
        assert match and match["source"] == str(path), line
        assert line.isprintable() and len(line) < len(str(path)) + 400, line
        assert match["remedy"].strip() and "None" not in line and "Traceback" not in line, line
        found.append((match["address"], line))
    assert len(set(lines)) == len(lines)
    return found


def expect(found, wanted):
    shown = "\n".join(line for _, line in found)
    assert sorted(address for address, _ in found) == sorted(address for address, _ in wanted), shown
    for address, word in wanted:
        assert any(place == address and word in line for place, line in found), f"{word!r} at {address} is not in\n{shown}"


def write(tmp_path, text, name="sheet.toml"):
    path = tmp_path / name
    path.write_bytes(text if isinstance(text, bytes) else text.encode("utf-8"))
    return path


def test_the_right_file_is_right(tmp_path):
    result = leanloop.read(write(tmp_path, RIGHT)).solve()
    assert result.status == "converged"
    assert result["streams.cleaned.fraction.toluene"] == pytest.approx(2e-3, rel=1e-7)


def test_a_mark_at_the_head_and_line_ends_of_any_sort_are_right(tmp_path):
    leanloop.read(write(tmp_path, b"\xef\xbb\xbf" + RIGHT.replace("\n", "\r\n").encode("utf-8")))


def test_there_are_enough():
    assert len(FAULTS) >= 80
    assert len({str(edits) for edits, _ in FAULTS.values()}) == len(FAULTS)


@pytest.mark.parametrize("name", FAULTS)
def test_one_thing_wrong(tmp_path, name):
    edits, wanted = FAULTS[name]
    expect(faults_of(write(tmp_path, edited(edits))), wanted)


# --- the file itself

NOT_READ = {
    "TOML syntax": (RIGHT.replace("stages = 4", "stages = = 4"), "line "),
    "key written twice": (RIGHT.replace("stages = 4", "stages = 4\nstages = 4"), "line "),
    "open bracket": (RIGHT + "[units.last", "TOML"),
    "not UTF-8": (RIGHT.replace("Everything", "\u00c4lles").encode("latin-1"), "UTF-8"),
    "UTF-16": (RIGHT.encode("utf-16"), "UTF-8"),
    "a picture": (bytes(range(256)), "UTF-8"),
    "nested a thousand deep": (RIGHT + "deep = " + "[" * 5000 + "]" * 5000, "nested"),
    "thousands of digits": (RIGHT.replace("stages = 4", "stages = " + "9" * 5000), "digits"),
}


@pytest.mark.parametrize("name", NOT_READ)
def test_a_file_that_cannot_be_read(tmp_path, name):
    text, word = NOT_READ[name]
    expect(faults_of(write(tmp_path, text)), [("file", word)])


def test_a_file_that_is_not_there_and_a_folder(tmp_path):
    expect(faults_of(tmp_path / "absent.toml"), [("file", "existing")])
    (tmp_path / "folder.toml").mkdir()
    expect(faults_of(tmp_path / "folder.toml"), [("file", "directory")])


@pytest.mark.parametrize("text", ["", "\n\n", "# nothing yet\n", 'title = "nothing yet"\n'])
def test_an_empty_file(tmp_path, text):
    expect(faults_of(write(tmp_path, text)), [("components", "add [components]"), ("units", "add [units.NAME]")])


def test_a_name_that_no_system_can_hold():
    with pytest.raises(InputError, match="cannot be read"):
        leanloop.read("a\0b.toml")


@pytest.mark.parametrize("old", ["stages = 4", 'form = "antoine"', 'method = "newton"'])
def test_a_value_nested_without_end(tmp_path, old):
    key = old.partition(" = ")[0]
    expect(faults_of(write(tmp_path, edited([(old, key + ".a" * 3000 + " = 1")]))), [("file", "nested")])
    (fault,) = faults_of(write(tmp_path, edited([(old, f"{key} = {HUGE}")])))
    assert fault[0].endswith(key) and "inf" in fault[1]


def test_points_in_a_file_that_is_wrong(tmp_path):
    cases = {
        b"x,y\n0,0\n0.1,a\n0.4,\n": ("'points.csv' line 3: 'a'", "'points.csv' line 4: ''"),
        b"X,z\n0,0\n1,1\n": ("its header is",),
        b"": ("its header is",),
        b"x,y\n0,0\n0.1,\xff\n": ("no CSV text",),
        b"x,y\n0,0\n0.4,0.05\n0.1,0.01\n": (),
        b"x,y\n0,0\n0.1,inf\n": (),
    }
    for text, words in cases.items():
        (tmp_path / "points.csv").write_bytes(text)
        found = faults_of(write(tmp_path, edited([cold('{ model = "table", file = "points.csv" }')])))
        assert found and all(address.startswith("equilibrium.cold.toluene.") for address, _ in found)
        for word in words:
            assert any(word in line for _, line in found), (word, found)


# --- several at once

COMPATIBLE = [
    "misspelt phase",
    "unknown component in flows",
    "missing kind",
    "unknown equilibrium table",
    "no stage",
    "shares beyond one",
    "negative hold",
    "missing flow",
    "group of an unknown component",
    "constant without K",
    "henry in both forms",
    "antoine without C",
    "unknown method",
    "polynomial of zeros",
    "misspelt entry of a heater",
    "molar mass in kg",
    "basis with an unknown component",
    "misspelt section",
]
EXTRA = {"misspelt section": ([("[requirements.warmth]", "[requirement.warmth]")], [("requirement", "requirements")])}
BATCHES = [COMPATIBLE[start::6] for start in range(6)] + [COMPATIBLE[n : n + 6] for n in range(0, 18, 3)] + [COMPATIBLE]


@pytest.mark.parametrize("names", BATCHES, ids=lambda names: f"{len(names)} from {names[0]}")
def test_all_are_told_each_once(tmp_path, names):
    chosen = [EXTRA[name] if name in EXTRA else FAULTS[name] for name in names]
    text = RIGHT
    if "misspelt phase" in names and "missing flow" in names:  # both are edits of the same lines
        chosen = [item for name, item in zip(names, chosen, strict=True) if name not in ("misspelt phase", "missing flow")]
        text = text.replace(VENT_HEAD, VENT_HEAD.replace('"gas"', '"gsa"').replace('flow = "10 mol/s"\n', ""))
        chosen.append(([], FAULTS["misspelt phase"][1] + FAULTS["missing flow"][1]))
    for old, new in itertools.chain.from_iterable(edits for edits, _ in chosen):
        assert text.count(old) == 1, old
        text = text.replace(old, new)
    expect(faults_of(write(tmp_path, text)), [fault for _, wanted in chosen for fault in wanted])


def test_there_are_enough_combinations():
    assert len(BATCHES) >= 10 and all(len(names) >= 2 for names in BATCHES)


def test_faults_of_several_requirements_are_told_together(tmp_path):
    names = ["misspelt limit", "misspelt bounds", "limit without its unit"]
    edits = [edit for name in names for edit in FAULTS[name][0]] + [("units.preheat.temperature", "units.preheat.temperatur")]
    wanted = [fault for name in names for fault in FAULTS[name][1]]
    expect(faults_of(write(tmp_path, edited(edits))), [*wanted, ("requirements.warmth.free", "'units.preheat.temperature'")])


# --- changes on the command line and from Python

SETTINGS = {
    "units.wsh.stages=3": ("units.wsh.stages", "'wash'"),
    "unit.wash.stages=3": ("unit.wash.stages", "'units'"),
    "stages=3": ("stages", "leads nowhere"),
    "units.wash.stages": ("--set", "ADDRESS=VALUE"),
    "=3": ("--set", "ADDRESS=VALUE"),
    "units=3": ("units", "whole section"),
    "units.wash=3": ("units.wash", "no table"),
    "units.wash.stgaes=3": ("units.wash.stgaes", "'stages'"),
    "units.wash.stages=many": ("units.wash.stages", "'many'"),
    "units.wash.stages.x=3": ("units.wash.stages.x", "no table"),
    "feeds.vent.flow=12": ("feeds.vent.flow", "no unit"),
    "feeds.vent.flow=12 mol/s\nx": ("feeds.vent.flow", "'x'"),
    "feeds.vent.flow=1\nother = 2": ("feeds.vent.flow", "'other = 2'"),
    "feeds.vent.flow=12 bar": ("feeds.vent.flow", "a pressure"),
    "feeds.vent.fractions.toluene=1.2": ("feeds.vent.fractions", "no rest"),
    "feeds.vnt.flow=12 mol/s": ("feeds.vnt.flow", "'vent'"),
    "components.airr.molar_mass=29 g/mol": ("components.airr.molar_mass", "'air'"),
    "units.top_up.hold.oill=1 mol/s": ("units.top_up.hold.oill", "'oil'"),
    "loop.method=newten": ("loop.method", "'newton'"),
    "loop.tolerance=[": ("loop.tolerance", "'['"),
    "requirements.outlet.equals=a lot": ("requirements.outlet.equals", "'a lot'"),
    "units.wash.stages=" + "9" * 5000: ("units.wash.stages", "whole number"),
    "units.wash.stages=" + "[" * 5000: ("units.wash.stages", "whole number"),
    "units..stages=3": ('units."".stages', "wash"),
    "units.wash.a\tb=3": ('units.wash."a\\tb"', "stages"),
}


@pytest.mark.parametrize("setting", SETTINGS, ids=lambda text: repr(text[:40]))
def test_a_wrong_setting(tmp_path, setting):
    expect(faults_of(write(tmp_path, RIGHT), [setting]), [SETTINGS[setting]])


def test_wrong_settings_do_not_hide_what_is_wrong_in_the_file(tmp_path):
    path = write(tmp_path, edited(FAULTS["misspelt kind"][0]))
    found = faults_of(path, ["units.wsh.stages=3", "feeds.vent.flow=12", "nonsense"])
    expect(
        found,
        [("units.join.kind", "'mixer'"), ("units.wsh.stages", "'wash'"), ("feeds.vent.flow", "no unit"), ("--set", "nonsense")],
    )


CHANGES = {
    "unknown address": ({"units.wash.stgaes": 3}, "units.wash.stgaes", "'units.wash.stages'"),
    "no text for an address": ({7: 3}, "7", "no numeric input"),
    "negative": ({"feeds.vent.flow": -1.0}, "feeds.vent.flow", "at least 0"),
    "nothing": ({"feeds.vent.flow": None}, "feeds.vent.flow", "None"),
    "a table": ({"feeds.vent.flow": {}}, "feeds.vent.flow", "mol/s"),
    "uneven lists": ({"feeds.vent.flow": [1.0, [2.0, 3.0]]}, "feeds.vent.flow", "uneven"),
    "too many axes": ({"feeds.vent.flow": np.ones((2, 2))}, "feeds.vent.flow", "2 axes"),
    "complex": ({"feeds.vent.flow": np.array([1j])}, "feeds.vent.flow[0]", "molar flow"),
    "another dimension": ({"feeds.vent.temperature": "2 bar"}, "feeds.vent.temperature", "a pressure"),
    "mass for moles": ({"feeds.vent.flow": "2 kg/s"}, "feeds.vent.flow", "molar flow"),
    "half a stage": ({"units.wash.stages": [3, 2.5]}, "units.wash.stages[1]", "2.5"),
    "endless stages": ({"units.wash.stages": [3, np.inf]}, "units.wash.stages[1]", "inf"),
    "one number for a list": ({"equilibrium.cold.toluene.x": 0.1}, "equilibrium.cold.toluene.x", "list of 3"),
    "a short list": ({"equilibrium.cold.toluene.x": [0.0, 0.1]}, "equilibrium.cold.toluene.x", "give 3"),
    "a text in a list": ({"equilibrium.cold.toluene.x": [0.0, "a", 0.3]}, "equilibrium.cold.toluene.x[1]", "'a'"),
    "a list that falls": ({"equilibrium.cold.toluene.x": [0.0, 0.3, 0.2]}, "equilibrium.cold.toluene.x", "rising"),
    "a list that falls in one case": (
        {"equilibrium.cold.toluene.x": [[0.0, 0.1, 0.2], [0.0, 0.3, 0.2]]},
        "equilibrium.cold.toluene.x",
        "rising",
    ),
    "zeros for a polynomial": ({"equilibrium.hot.ethanol.K": [0.0, 0.0]}, "equilibrium.hot.ethanol.K", "zero"),
}


@pytest.mark.parametrize("name", CHANGES)
def test_a_wrong_change_from_python(right, name):
    changes, address, word = CHANGES[name]
    with pytest.raises(InputError) as caught:
        right.solve(changes)
    (fault,) = caught.value.faults
    assert fault.address == address
    assert word in str(fault)


def test_wrong_changes_are_told_together(right):
    with pytest.raises(InputError) as caught:
        right.solve({"feeds.vent.flow": [1.0, 2.0], "feeds.steam.flows.steam": [1.0, 2.0, 3.0], "units.wash.stages": "x"})
    assert {fault.address for fault in caught.value.faults} == {
        "feeds.vent.flow",
        "feeds.steam.flows.steam",
        "units.wash.stages",
    }


@pytest.fixture(scope="module")
def right(tmp_path_factory):
    return leanloop.read(write(tmp_path_factory.mktemp("right"), RIGHT))


# --- the command line


def command(*arguments):
    return subprocess.run(
        [sys.executable, "-W", "error", "-m", "leanloop", *map(str, arguments)],
        capture_output=True,
        encoding="utf-8",
        timeout=120,
        check=False,
    )


@pytest.mark.parametrize(
    "name",
    ["misspelt kind", "huge whole number", "entry that is no plain name", "unknown result of a unit", "number for outlets"],
)
@pytest.mark.parametrize("word", ["solve", "check"])
def test_on_the_command_line(tmp_path, name, word):
    edits, wanted = FAULTS[name]
    path = write(tmp_path, edited(edits))
    done = command(word, path, "--json", tmp_path / "answer.json")
    assert (done.returncode, done.stdout) == (2, "")
    lines = done.stderr.splitlines()
    matches = [LINE.fullmatch(line) for line in lines]
    assert all(matches), done.stderr
    expect([(match["address"], match[0]) for match in matches], wanted)
    assert sorted(item.name for item in tmp_path.iterdir()) == ["sheet.toml"]


@pytest.mark.parametrize("name", ["not UTF-8", "nested a thousand deep", "thousands of digits"])
def test_an_unreadable_file_on_the_command_line(tmp_path, name):
    path = write(tmp_path, NOT_READ[name][0])
    done = command("solve", path)
    assert (done.returncode, done.stdout) == (2, "")
    (line,) = done.stderr.splitlines()
    assert LINE.fullmatch(line)["address"] == "file"
