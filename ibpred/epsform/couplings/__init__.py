"""Everything off the diagonal, by exact triangular elimination."""
