"""The massless two-loop kite with its lines in a fixed order, and its values in Gamma functions."""

from __future__ import annotations

import mpmath

TEXT = """
title = "Kite"
[momenta]
loop = ["k1", "k2"]
external = ["p"]
[kinematics]
invariants = { s = 2 }
equations = ["p^2 = s"]
[[line]]
momentum = "k1"
[[line]]
momentum = "k2"
[[line]]
momentum = "k1+p"
[[line]]
momentum = "k2+p"
[[line]]
momentum = "k1-k2"
"""

_ALONG = {0: (2, 3, 1), 2: (0, 1, 3), 1: (3, 2, 0), 3: (1, 0, 2)}
"""Contracted line -> (line that forms a bubble with the middle, line it is chained with, the other)."""


def bubble_value(a, b, d):
    """Massless bubble at p^2 = -1 (textbook; e.g. Smirnov, Evaluating Feynman Integrals, appendix A)."""
    top = mpmath.gamma(d / 2 - a) * mpmath.gamma(d / 2 - b) * mpmath.gamma(a + b - d / 2)
    return top / (mpmath.gamma(a) * mpmath.gamma(b) * mpmath.gamma(d - a - b))


def kite_value(powers, d):
    """A kite with a contracted line at p^2 = -1: products and chains of bubbles."""
    if powers[4] == 0:
        return bubble_value(powers[0], powers[2], d) * bubble_value(powers[1], powers[3], d)
    gone = powers.index(0)
    stays, along, other = _ALONG[gone]
    inner = bubble_value(powers[stays], powers[4], d)
    return inner * bubble_value(powers[along] + powers[stays] + powers[4] - d / 2, powers[other], d)
