"""Equilibrium flash: a stream split into gas and liquid at a temperature, an enthalpy or a share of gas."""
