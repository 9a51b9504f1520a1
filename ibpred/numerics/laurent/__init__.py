"""Differential systems order by order in eps: along lines, and near singular points."""
