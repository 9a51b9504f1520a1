"""The chain of a shipped family, and comparison of its values with published ones."""

from fractions import Fraction
from pathlib import Path

from mpmath import mpf

from ibpred.progress import SILENT
from ibpred.run.chain.chain import Chain
from ibpred.run.storage.files import read_family_file
from ibpred.run.storage.store import Store
from ibpred.run.values.evaluate import evaluate

FAMILIES = Path(__file__).parents[2] / "families"


def values(name, folder, point, order, digits, wanted=()):
    """Values of the masters, or of the integrals wanted, by their powers.

    Stages are kept in `folder`, so that a family is solved once for several points.
    """
    family = read_family_file(FAMILIES / f"{name}.toml")
    exact = {invariant: Fraction(value) for invariant, value in point.items()}
    with Store(folder) as store:
        found = evaluate(Chain(family, store, SILENT, 1), exact, tuple(wanted), order, digits)
    return {value.powers: value for value in found}


def compare(value, expected, digits):
    """Every coefficient against a complex number: within its radius, and known to the digits.

    A power that is not printed must vanish in `expected`, and none outside `expected` may be printed.
    """
    for power, reference in expected.items():
        if power not in value.epsilon:
            assert abs(reference) < mpf(10) ** -digits, (power, reference)
            continue
        ball = value.epsilon[power]
        slack = (abs(reference) + 1) * mpf(10) ** (-digits - 5)  # error of the reference itself
        assert abs(mpf(ball.re) - reference.real) <= mpf(ball.radius) + slack, (power, ball, reference)
        assert abs(mpf(ball.im) - reference.imag) <= mpf(ball.radius) + slack, (power, ball, reference)
        assert mpf(ball.radius) <= mpf(10) ** -digits * max(abs(reference), 1)
    assert set(value.epsilon) <= set(expected)
