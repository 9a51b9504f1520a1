"""Blocks without an epsilon-form: their operators, geometry, and forms with periods."""
