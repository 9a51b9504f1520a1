"""Boundary constants: Gamma-function closed forms, regions, regularity, and the linear system they give."""
