"""Iterated integrals: words, exact constants, multiple zeta values, solutions order by order."""
