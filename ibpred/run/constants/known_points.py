"""Points at which the masters' values are known: kept in the store, so that other points start from them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from time import monotonic

from ibpred.balls.decimal import DecimalBall
from ibpred.digest import digest
from ibpred.exact.codec import from_data, to_data
from ibpred.numerics.auxiliary.build import auxiliary_plan
from ibpred.numerics.auxiliary.laurent import auxiliary_values
from ibpred.numerics.auxiliary.plan import AuxiliaryPlan
from ibpred.numerics.value import Value
from ibpred.run.chain.chain import Chain
from ibpred.run.chain.stages import SEED
from ibpred.run.workers.auxiliary_processes import process_sampler


@dataclass(frozen=True)
class KnownPoint:
    """Values of all masters at a point, with estimated errors.

    Attributes
    ----------
    point
        The invariants.
    order
        Every master is known through ``eps^order``.
    digits
        Digits that were asked for.
    values
        For each master power of eps -> coefficient; what is missing below the highest power vanishes.
    """

    point: Mapping[str, Fraction]
    order: int
    digits: int
    values: tuple[Mapping[int, DecimalBall], ...]


@dataclass(frozen=True)
class _Known:
    points: tuple[KnownPoint, ...]


def known_points(chain: Chain) -> tuple[KnownPoint, ...]:
    """All known points of a family."""
    stored = chain.store.get(_key(chain))
    return from_data(_Known, stored).points if stored is not None else ()


def _key(chain: Chain) -> str:
    return digest([chain.identity, "known points"])


def auxiliary_at(chain: Chain, point: Mapping[str, Fraction], order: int, digits: int) -> tuple[Value, ...]:
    """The masters at a point by the auxiliary-mass method.

    Raises
    ------
    PointError
        If the point is singular.
    UnfinishedError
        If the method does not apply to the family, or the digits are not reached.
    """
    begin = monotonic()
    plan = _plan(chain, point)
    middle = monotonic()
    values = auxiliary_values(plan, order, digits, process_sampler(chain.workers.width), chain.progress)
    reductions, series = middle - begin, monotonic() - middle
    chain.progress.stage(f"auxiliary mass: {reductions:.0f} s of reductions, {series:.0f} s of series")
    return values


def _plan(chain: Chain, point: Mapping[str, Fraction]) -> AuxiliaryPlan:
    """What the masters at a point need, exactly; it serves any number of digits and is kept."""
    masters = chain.masters().masters
    key = digest(
        [
            chain.identity,
            "auxiliary plan",
            to_data(masters),
            [[name, str(value)] for name, value in sorted(point.items())],
        ]
    )
    stored = chain.store.get(key)
    if stored is not None:
        return from_data(AuxiliaryPlan, stored)
    with chain.deck.working_for(key):
        plan = auxiliary_plan(
            chain.definition, point, masters, chain.primes, SEED, chain.deck, chain.progress
        )
    with chain.store.transaction():
        chain.store.put(key, "auxiliary plan", to_data(plan))
        chain.store.forget_work(key)
    return plan


def new_point(chain: Chain, point: Mapping[str, Fraction], order: int, digits: int) -> KnownPoint:
    """Compute the masters at a point by the auxiliary-mass method, and keep them; see `auxiliary_at`."""
    values = auxiliary_at(chain, point, order, digits)
    found = KnownPoint(dict(point), order, digits, tuple(value.epsilon for value in values))
    keep_point(chain, found)
    return found


def keep_point(chain: Chain, known: KnownPoint) -> None:
    """Keep the values at a point; those kept there before are replaced."""
    others = [other for other in known_points(chain) if dict(other.point) != dict(known.point)]
    with chain.store.transaction():
        chain.store.put(_key(chain), "known points", to_data(_Known((*others, known))))
