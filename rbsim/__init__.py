"""Numerical twin of a Rayleigh–Bénard cell."""
