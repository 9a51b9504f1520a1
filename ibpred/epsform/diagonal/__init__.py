"""Diagonal blocks brought to epsilon-form."""
