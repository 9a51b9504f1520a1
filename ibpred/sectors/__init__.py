"""Sectors of a family: order of integrals, zero sectors, symmetries and maps."""
