"""Boundary constants that no condition fixes, from values; the solution with all constants."""
