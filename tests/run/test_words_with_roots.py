"""The words of solutions with square roots, integrated as the text says, against the continued functions."""

from fractions import Fraction
from pathlib import Path

import pytest
from mpmath import mp, mpf

from ibpred.balls.context import precision
from ibpred.exact.rational import Rational
from ibpred.iterated.alphabet import RootLetter
from ibpred.iterated.solution import solve_orders
from ibpred.iterated.symbol import Symbol, is_integrable, symbols_of_form
from ibpred.numerics.forms.path import Target
from ibpred.numerics.forms.rooted_paths import evaluate_rooted
from ibpred.progress import SILENT
from ibpred.run.chain.chain import Chain
from ibpred.run.storage.files import read_family_file
from ibpred.run.storage.store import Store

FAMILIES = Path(__file__).parents[2] / "families"
BITS = 160


def number(value: Rational, point):
    at = value.substitute({**point, "eps": Fraction(0)}).to_fraction()
    return mpf(at.numerator) / at.denominator


def polynomial(value: Rational, variable, point):
    """A polynomial in one variable, the others fixed, as a function of a real number."""
    fixed = {name: v for name, v in point.items() if name != variable}
    seen = value.substitute(fixed)
    place = seen.ring.index(variable)
    terms = {int(e[place]): int(c) for e, c in seen.numerator.to_dict().items()}
    below = int(seen.denominator.leading_coefficient())
    return lambda t: sum(c * t**k for k, c in terms.items()) / mpf(below)


def logarithm(letter, variable, point):
    """``log`` of the letter less that of its leading coefficient at zero, ``dlog``, the order at zero."""
    if not isinstance(letter, RootLetter):
        p = polynomial(letter, variable, point)
        start = p(mpf(0))
        slope = polynomial(letter.derivative(variable), variable, point)
        return (
            lambda t: mp.log(p(t) / start if start else t),
            lambda t: slope(t) / p(t),
            0 if start else 1,
        )
    p, q = (polynomial(v, variable, point) for v in (letter.polynomial, letter.square))
    dp, dq = (polynomial(v.derivative(variable), variable, point) for v in (letter.polynomial, letter.square))

    norm = polynomial(letter.norm(), variable, point)

    def value(t):
        # without cancellations
        r = mp.sqrt(q(t))
        return norm(t) / (p(t) + r) ** 2 if p(t) > 0 else (p(t) - r) ** 2 / norm(t)

    def kernel(t):
        r = mp.sqrt(q(t))
        return (2 * q(t) * dp(t) - p(t) * dq(t)) / (r * norm(t))

    # the leading term c t^n at zero
    tiny = mpf(10) ** -40
    with mp.workdps(120):
        n = mp.nint(mp.log(abs(value(10 * tiny) / value(tiny))) / mp.log(10))
        leading = value(tiny) / tiny**n
    return lambda t: mp.log(value(t) / leading), kernel, int(n)


def integral(word, level, point):
    """A word of length at most two, by quadrature."""
    if not word:
        return mpf(1)
    end = mpf(point[level.variable].numerator) / point[level.variable].denominator
    last, _, m = logarithm(level.letters[word[-1]], level.variable, point)
    if len(word) == 1:
        return last(end)
    if word[0] == word[1]:
        return last(end) ** 2 / 2
    _, kernel, n = logarithm(level.letters[word[0]], level.variable, point)

    def integrand(v):
        # t = v^2; the integral of log(t)/t is log(t)^2/2
        return 2 * v * (kernel(v * v) * last(v * v) - n * m * mp.log(v * v) / (v * v))

    return mp.quad(integrand, [0, mp.sqrt(end) / 4, mp.sqrt(end)]) + n * m * mp.log(end) ** 2 / 2


def test_symbols_with_roots_are_integrable(tmp_path):
    with Store(tmp_path) as store:
        chain = Chain(read_family_file(FAMILIES / "box-massive-loop.toml"), store, SILENT, 1)
        form, boundary = chain.ratio_form(), chain.ratio_boundary(0)
    leading = [c.to_fraction() for c in boundary.constants[0]]
    symbols = symbols_of_form(form, leading, 3)
    for symbol in symbols[1:]:
        assert symbol.terms
        assert is_integrable(symbol, form.variables)
    # discontinuities begin at the thresholds in s and t only
    firsts = {entry.square for symbol in symbols[1:] for entry in symbol.first_entries()}
    x, y = (form.ring.variable(name) for name in form.variables)
    assert firsts == {x * (x + 4), y * (y + 4)}
    broken = dict(symbols[-1].terms)
    del broken[next(iter(broken))]
    assert not is_integrable(Symbol(broken), form.variables)


@pytest.mark.parametrize("name", ["bubble-distinct-masses", "box-massive-loop"])
def test_words_are_the_functions(name, tmp_path):
    with Store(tmp_path) as store:
        chain = Chain(read_family_file(FAMILIES / f"{name}.toml"), store, SILENT, 1)
        form, boundary = chain.ratio_form(), chain.ratio_boundary(2)
    solution = solve_orders(form, boundary.corner, boundary.constants, boundary.start + 2, boundary.start)
    point = dict(zip(form.variables, (Fraction(1, 3), Fraction(1, 7)), strict=True))
    with precision(BITS):
        constants = tuple(tuple(c.ball(BITS) for c in vector) for vector in boundary.constants[:3])
    targets = {ratio: Target(value, 0) for ratio, value in point.items()}
    found = evaluate_rooted(form, boundary.corner, constants, targets, BITS)
    with mp.workdps(40):
        known = {}
        for k, functions in enumerate(solution.orders):
            for i, function in enumerate(functions):
                total = mpf(0)
                for product, constant in function:
                    term = mpf(constant.ball(BITS).real.mid().str(40, radius=False))
                    for word, level in zip(product, solution.levels, strict=True):
                        key = word, level.variable
                        if key not in known:
                            known[key] = integral(word, level, point)
                        term *= known[key]
                    total += term
                for index in form.tags[i]:
                    total /= mp.sqrt(number(form.radicands[index], point))
                value = mpf(found[k][i].real.mid().str(40, radius=False))
                assert abs(total - value) < mpf(10) ** -15, (i, k, total, value)


@pytest.mark.slow
def test_constants_at_different_corners_are_those_of_one_function(tmp_path):
    with Store(tmp_path) as store:
        chain = Chain(read_family_file(FAMILIES / "box-four-legs.toml"), store, SILENT, 1)
        form = chain.solved_form()
        boundaries = [chain.boundary(2, corner) for corner in ((), ("x", "y", "z", "x4", "x5"))]
    assert any(form.tags)
    sizes = (Fraction(1, 3), Fraction(2, 7), Fraction(3, 11), Fraction(5, 13), Fraction(1, 5))
    targets = {name: Target(size, 0) for name, size in zip(form.variables, sizes, strict=True)}
    found = []
    for boundary in boundaries:
        constants = tuple(tuple(c.ball(BITS) for c in vector) for vector in boundary.constants[:3])
        found.append(evaluate_rooted(form, boundary.corner, constants, targets, BITS))
    for left, right in zip(*found, strict=True):
        assert all(a.overlaps(b) for a, b in zip(left, right, strict=True))
