"""Enthalpies of components in gas and liquid, from heat data of the file or built in."""

from leanloop.enthalpy.heat import Heat
from leanloop.enthalpy.heat_data import ComponentHeat
from leanloop.enthalpy.read_heat import read

__all__ = ["ComponentHeat", "Heat", "read"]
