"""Sparse systems, their discovery and pruning, the recorded tape and its replay."""
