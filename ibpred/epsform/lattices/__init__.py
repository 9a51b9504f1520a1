"""Lattices at the singular points and global sections, modulo primes: do coupled blocks have a form."""
