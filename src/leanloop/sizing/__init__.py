"""Sizing and rating: designs of coupled columns, from equilibrium stages to equipment and what it costs."""
