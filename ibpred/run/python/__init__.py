"""The Python interface."""
