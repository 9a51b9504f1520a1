"""Cut linear lines: delta functions of k.u, which are even, and their derivatives."""

from __future__ import annotations

from ibpred.exact.primes import first_primes
from ibpred.family.reading import read_family
from ibpred.reduction.masters import find_masters
from ibpred.reduction.table import reduce_integrals
from ibpred.sectors.analysis import analyse

PRIMES = first_primes(20)
TEXT = """
[momenta]
loop = ["k"]
external = ["u", "v", "q"]
[kinematics]
invariants = { y = 0, q2 = 2 }
equations = ["u^2 = 1", "v^2 = 1", "u*v = y", "q^2 = -q2", "u*q = 0", "v*q = 0"]
unit = "q2"
[[line]]
expression = "2*k*u"
cut = true
[[line]]
expression = "2*k*v"
numerator = true
[[line]]
momentum = "k"
[[line]]
momentum = "k-q"
"""


def test_parity_of_a_cut_worldline() -> None:
    """Odd integrals vanish, and delta'(x) (y x + z) = -y delta(x) for an orthogonal component z."""
    family = read_family(TEXT, "worldline.toml", "worldline")
    analysis = analyse(family)
    masters = find_masters(family, analysis, PRIMES[0], 1).masters
    assert masters == ((1, 0, 1, 1),)
    wanted = [(1, -1, 1, 1), (2, 0, 1, 1), (2, -1, 1, 1), (1, -2, 1, 1), (3, 0, 1, 1), (0, -1, 1, 1)]
    table = reduce_integrals(family, analysis, wanted, masters, PRIMES, 1)
    for odd in ((1, -1, 1, 1), (2, 0, 1, 1), (0, -1, 1, 1)):
        assert table.reductions[odd] == ()
    # a power two of the cut line is minus the derivative of its delta function
    assert [(m, str(c)) for m, c in table.reductions[2, -1, 1, 1]] == [(0, "y")]
    for even in ((1, -2, 1, 1), (3, 0, 1, 1)):
        assert len(table.reductions[even]) == 1
