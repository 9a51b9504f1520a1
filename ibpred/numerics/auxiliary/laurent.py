"""Laurent coefficients from values at several small eps, with an error that one more eps checks.

With n values at eps of size r the coefficient of order j past the leading pole has an error of about
r^(n-j), and loses j log10(1/r) digits of the values: few tiny eps at raised precision do best. The truncation
is not in the balls, so the difference of the fits with and without the last value is the error given, never
called certified.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import ceil

import flint

from ibpred.balls.accuracy import bits_for, is_accurate
from ibpred.balls.context import Ball, precision
from ibpred.balls.decimal import DecimalBall, decimal_ball
from ibpred.errors import PrecisionError
from ibpred.numerics.auxiliary.plan import AuxiliaryPlan
from ibpred.numerics.auxiliary.solve import sampled
from ibpred.numerics.frobenius.system import fmpq
from ibpred.numerics.value import Route, Value
from ibpred.progress import SILENT, Progress

_SPARE_DIGITS = 6
_PATIENCE = 6  # how far the working precision is raised, as a factor
_ROUNDS = 3
_TOLD = 8  # bits known of a value that tell how many were lost
_SPARE_BITS = 24
_SPARE_SHARE = 16  # and one of so many bits
_EXACT = 1 << 30  # bits known of an exact value


@dataclass(frozen=True)
class Task:
    """One eps of a plan.

    Attributes
    ----------
    eps
        The value.
    digits
        Relative digits of every integral.
    start_bits
        Working precision to begin with.
    """

    eps: Fraction
    digits: int
    start_bits: int


Sampler = Callable[[AuxiliaryPlan, Sequence[Task]], Iterable[tuple[Ball, ...]]]
"""Works on the tasks of a plan, in order: `one_by_one`, or something that shares them out."""


def one_by_one(plan: AuxiliaryPlan, tasks: Sequence[Task]) -> Iterator[tuple[Ball, ...]]:
    """The sampler without helpers."""
    return (accurate_sample(plan, task) for task in tasks)


@dataclass(frozen=True)
class Sampling:
    """Which eps are used, and how accurate values must be.

    Attributes
    ----------
    points
        The values of eps; the last one is the check.
    digits
        Relative digits of every value.
    """

    points: tuple[Fraction, ...]
    digits: int


def choose_sampling(orders: int, digits: int, extra: int) -> Sampling:
    """Values of eps for coefficients through `orders` past the lowest power.

    Parameters
    ----------
    orders
        How many orders lie between the lowest and the highest power wanted.
    digits
        Digits wanted of the highest one.
    extra
        Further values, where fewer did not suffice.
    """
    count = 2 * orders + 4 + extra
    goal = digits + _SPARE_DIGITS
    exponent = ceil(goal / (count - 1 - orders)) + 1
    unit = Fraction(1, 10**exponent)
    # alternating signs keep the values close together
    points = tuple(unit * ((i // 2 + 1) * (-1) ** i) for i in range(count))
    return Sampling(points, goal + orders * exponent + _SPARE_DIGITS)


def accurate_sample(plan: AuxiliaryPlan, task: Task) -> tuple[Ball, ...]:
    """The wanted integrals at one eps to the digits of the task.

    Raises
    ------
    PrecisionError
        If they are not reached.
    """
    return _accurate(plan, task)[0]


def _accurate(plan: AuxiliaryPlan, task: Task) -> tuple[tuple[Ball, ...], int]:
    """The values, and a working precision that suffices for them with little to spare."""
    bits, most = task.start_bits, _PATIENCE * task.start_bits
    wanted = bits_for(task.digits)
    while True:
        known = 0
        try:
            values = sampled(plan, task.eps, bits)
        except PrecisionError:
            if bits >= most:
                raise
        else:
            # the bits lost on the way are about the same at any precision
            known = min((_known_bits(value) for value in values), default=wanted)
            enough = bits + wanted - known + bits // _SPARE_SHARE + _SPARE_BITS
            if all(is_accurate(value, task.digits) for value in values):
                return values, min(bits, enough)
            if bits >= most:
                raise PrecisionError(
                    f"{plan.family}: the integrals at eps = {task.eps} are not known to {task.digits} digits "
                    f"at {bits} bits; ask for fewer digits"
                )
        bits = min(most, enough if known > _TOLD else bits + bits // 2)


def _known_bits(ball: Ball) -> int:
    """Bits of a ball that are known, relative to its modulus, or absolutely where it holds zero."""
    if not ball.is_finite():
        return 0
    with precision(64):
        radius = flint.arb(ball.real.rad().max(ball.imag.rad()))
        if not radius > 0:
            return _EXACT
        lower = ball.abs_lower()
        size = flint.arb(lower) if lower > 0 else flint.arb(1)
        return int(float(((size / radius).log() / flint.arb.const_log2()).lower()))


def auxiliary_values(
    plan: AuxiliaryPlan,
    order: int,
    digits: int,
    sampler: Sampler = one_by_one,
    progress: Progress = SILENT,
) -> tuple[Value, ...]:
    """Laurent coefficients of the wanted integrals of a plan.

    Parameters
    ----------
    plan
        See `ibpred.numerics.auxiliary.build.auxiliary_plan`.
    order
        Highest power of eps.
    digits
        Digits wanted of every coefficient, relative to its modulus (absolute where it vanishes).
    sampler
        Works on several eps, possibly at the same time.
    progress
        Told about the values of eps done.

    Returns
    -------
    One value an integral, with estimated radii (`certified` is False).

    Raises
    ------
    PrecisionError
        If the digits are not reached with the most values of eps tried.
    BoundaryError
        If regions and differential equations contradict each other.
    """
    lowest = -2 * plan.loops
    if order < lowest:
        return tuple(Value(powers, {}, False, Route.AUXILIARY_MASS) for powers in plan.wanted)
    missing = 0
    for round_ in range(_ROUNDS):
        sampling = choose_sampling(order - lowest, digits, 2 * round_)
        progress.stage("auxiliary mass")
        balls = _samples(plan, sampling, sampler, progress)
        bits = bits_for(4 * sampling.digits)
        fits = [
            fitted(sampling.points, [values[i] for values in balls], lowest, order, bits)
            for i in range(len(plan.wanted))
        ]
        missing = sum(not _is_good(ball, digits) for fit in fits for ball in fit.values())
        if not missing:
            return tuple(
                Value(powers, _decimals(fit, digits), False, Route.AUXILIARY_MASS)
                for powers, fit in zip(plan.wanted, fits, strict=True)
            )
    raise PrecisionError(
        f"{plan.family}: {missing} coefficients did not settle to {digits} digits when eps were added;"
        " ask for fewer digits"
    )


def _samples(
    plan: AuxiliaryPlan, sampling: Sampling, sampler: Sampler, progress: Progress
) -> list[tuple[Ball, ...]]:
    # nearly equal exponents, eps apart, cost several times the digits of eps
    tiny = len(str(sampling.points[0].denominator)) - 1
    start = bits_for(sampling.digits + 12 * tiny + 15)
    first, *others = sampling.points
    # the first value tells what precision the others take
    values, bits = _accurate(plan, Task(first, sampling.digits, start))
    found = [values]
    progress.advance(1, len(sampling.points))
    for values in sampler(plan, [Task(eps, sampling.digits, bits) for eps in others]):
        found.append(values)
        progress.advance(len(found), len(sampling.points))
    return found


def fitted(
    points: Sequence[Fraction], values: Sequence[Ball], lowest: int, order: int, bits: int
) -> dict[int, Ball]:
    """Coefficients of eps^lowest ... eps^order; each ball holds the fits with and without the last point.

    Parameters
    ----------
    points, values
        Values of eps and of the function there.
    lowest
        The lowest power that can occur.
    order
        The highest power wanted.
    bits
        Working precision.
    """
    with precision(bits):
        scaled = [
            value * flint.arb(fmpq(eps ** (-lowest))) for eps, value in zip(points, values, strict=True)
        ]
        full = _interpolated(points, scaled)
        short = _interpolated(points[:-1], scaled[:-1])
        found = {}
        for j in range(order - lowest + 1):
            difference = flint.arb((full[j] - short[j]).abs_upper())
            margin = flint.arb(0, difference)
            found[lowest + j] = full[j] + flint.acb(margin, margin)
        return found


def _interpolated(points: Sequence[Fraction], values: Sequence[Ball]) -> list[Ball]:
    size = len(points)
    matrix = flint.fmpq_mat([[fmpq(x**j) for j in range(size)] for x in points])
    inverse = flint.acb_mat(matrix.inv())
    return list((inverse * flint.acb_mat([[value] for value in values])).entries())


def _is_good(ball: Ball, digits: int) -> bool:
    with precision(64):
        radius = ball.real.rad().max(ball.imag.rad())
        size = ball.mid().abs_upper()
        goal = flint.arb(10) ** (-digits)
        return bool(radius <= goal * size) or bool(ball.contains(0) and radius <= goal)


def _decimals(fit: dict[int, Ball], digits: int) -> dict[int, DecimalBall]:
    found = {}
    leading = True
    for power, ball in fit.items():
        leading = leading and ball.contains(0)
        if not leading:
            found[power] = decimal_ball(ball, digits + 3)
    return found
