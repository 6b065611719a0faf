"""Flowsheets: structure, order, loops, requirements and results."""
