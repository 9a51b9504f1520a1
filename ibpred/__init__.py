"""From an integral family file to certified digits."""

__version__ = "0.1.0"
