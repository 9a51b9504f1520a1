"""Fuchsian systems taken apart, and the constant matrix that factors eps out."""
