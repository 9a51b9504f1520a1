"""Square roots: tags, odd letters, covers and rational parametrisations, parity."""
