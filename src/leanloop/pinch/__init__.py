"""Least rates, pinches and the window of a closed pair, at equilibrium stages without limit."""
