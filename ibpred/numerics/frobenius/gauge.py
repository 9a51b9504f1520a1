"""Integer diagonal gauges that leave a simple pole.

With ``f_i = x^m_i g_i`` the entry A_ij becomes ``x^(m_j - m_i) A_ij``; simple poles everywhere mean
``m_i - m_j <= val(A_ij) + 1``, a system of difference constraints solved by shortest paths.
"""

from __future__ import annotations

from collections.abc import Mapping

import flint

from ibpred.errors import UnfinishedError
from ibpred.numerics.frobenius.system import Entry, RationalSystem, entry_valuation, fmpq, reduced_entry

Gauge = tuple[int, ...]
"""``f_i = x^gauge[i] g_i``."""


def simple_pole_gauge(system: RationalSystem, place: str) -> Gauge:
    """A gauge after which the system has at most a simple pole at zero.

    Parameters
    ----------
    system
        In the local variable.
    place
        Name of the point, for messages.

    Raises
    ------
    UnfinishedError
        If no diagonal gauge does it: the point may be irregular.
    """
    return pole_gauge(system.size, {at: entry_valuation(e) for at, e in system.entries.items()}, place)


def pole_gauge(size: int, valuations: Mapping[tuple[int, int], int], place: str) -> Gauge:
    """As `simple_pole_gauge`, from the orders of vanishing of the entries at zero."""
    bounds = [(i, j, value + 1) for (i, j), value in valuations.items() if i != j]
    stubborn = [i for (i, j), value in valuations.items() if i == j and value < -1]
    powers = [0] * size
    for _ in range(size + 1):
        changed = False
        for i, j, bound in bounds:
            if powers[i] > powers[j] + bound:
                powers[i] = powers[j] + bound
                changed = True
        if not changed:
            break
    else:
        changed = True
    if stubborn or changed:
        rows = ", ".join(str(i + 1) for i in stubborn) or "a cycle of functions"
        raise UnfinishedError(
            f"at {place} the differential system has poles of higher order ({rows}) that no integer powers of"
            " the local variable remove; choose other master integrals"
        )
    return tuple(powers)


def gauged(system: RationalSystem, gauge: Gauge) -> RationalSystem:
    """The system of g with ``f_i = x^gauge[i] g_i``."""
    found = dict(conjugated(system, gauge).entries)
    x = flint.fmpq_poly([0, 1])
    for i, power in enumerate(gauge):
        if not power:
            continue
        p, q = found.pop((i, i), (flint.fmpq_poly([]), flint.fmpq_poly([1])))
        top = p * x - q * fmpq(power)
        if not top.is_zero():
            found[i, i] = reduced_entry(top, q * x)
    return RationalSystem(system.size, found)


def conjugated(system: RationalSystem, gauge: Gauge) -> RationalSystem:
    """The entries ``x^(gauge[j] - gauge[i]) A_ij`` alone, without what the derivative of the gauge adds."""
    found: dict[tuple[int, int], Entry] = {}
    for (i, j), (p, q) in system.entries.items():
        shift = gauge[j] - gauge[i]
        if shift > 0:
            p = p.left_shift(shift)
        elif shift < 0:
            q = q.left_shift(-shift)
        found[i, j] = reduced_entry(p, q)
    return RationalSystem(system.size, found)
