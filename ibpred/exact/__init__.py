"""Exact arithmetic: primes, rings of rational functions, the expression grammar."""
