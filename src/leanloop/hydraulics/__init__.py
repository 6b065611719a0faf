"""Equilibrium stages and flows taken to equipment: capacity, diameter, pressure drop, efficiency and height."""
