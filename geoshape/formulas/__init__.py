"""Formulas on rings, in NumPy only."""
