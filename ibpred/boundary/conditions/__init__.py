"""Conditions on the constants at corners and edges, and the linear system that they make."""
