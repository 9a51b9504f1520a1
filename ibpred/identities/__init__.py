"""Identities between integrals as templates, and their instantiation as sparse rows."""
