"""Differential equations of master integrals: derivation, checks, dimensionless ratios."""
