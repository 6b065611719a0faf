"""Flowsheet files."""
