"""Black boxes made of known rational functions must be given back exactly."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from ibpred.errors import ReconstructionError
from ibpred.exact.codec import from_data, to_data
from ibpred.exact.grammar import parse_rational
from ibpred.exact.primes import first_primes
from ibpred.exact.rational import Rational, Ring, ring
from ibpred.reconstruct import Plan, reconstruct
from ibpred.reconstruct.sampling import UnluckyPrimeError
from ibpred.reconstruct.support import size_within

Residues = NDArray[np.uint64]


class Known:
    """A black box that evaluates given functions point by point, in plain integers.

    `spoil` marks lanes as bad that are not.
    """

    def __init__(
        self,
        functions: list[Rational],
        names: tuple[str, ...],
        spoil: Callable[[list[int]], bool] | None = None,
    ) -> None:
        self.functions = functions
        self.variables = names
        self.entries = len(functions)
        self.spoil = spoil
        self.bad = 0

    def __call__(self, points: Residues, prime: int) -> tuple[Residues, NDArray[np.bool_]]:
        values = np.zeros((self.entries, points.shape[1]), dtype=np.uint64)
        good = np.ones(points.shape[1], dtype=np.bool_)
        for lane in range(points.shape[1]):
            point = [int(x) for x in points[:, lane]]
            try:
                values[:, lane] = [f.modular(point, prime) for f in self.functions]
            except ZeroDivisionError:
                good[lane] = False
            if self.spoil is not None and self.spoil(point):
                good[lane] = False
                values[:, lane] = 12345
        self.bad += int((~good).sum())
        return values, good


def read(texts: list[str], names: tuple[str, ...]) -> list[Rational]:
    return [parse_rational(text, ring(names)) for text in texts]


def recovered(functions: list[Rational], names: tuple[str, ...], count: int = 8) -> bool:
    result = reconstruct(Known(functions, names), first_primes(count), 5, ring(names))
    return result.entries == tuple(functions)


CASES = {
    "one variable": (("d",), ["1/(d-3)", "(d-4)^3/(2*d-7)", "7", "0", "(d^2+1)/(d^2-2)", "d^9"]),
    "denominators that split": (
        ("d", "x"),
        ["(3*d-8)*(x^2+1)/((d-5)^2*(x+1)*x)", "0", "3/7", "(3*d-8)*(x^2+1)/((d-5)^2*(x+1)*x)", "x^3/(2*d-9)"],
    ),
    "denominators that do not split": (
        ("d", "x"),
        ["x/(d*x-3)", "(d-x)^5/(1+x+d*x^2)^3", "(d*x-3)^2/(x^2+x*d+d^2+5)", "1/((d*x-3)*(1+x+d*x^2))"],
    ),
    "three variables": (
        ("d", "x", "y"),
        [
            "(d-1)*(x+y)^4/((x-y)*(1+x+y)*(2*d-9))",
            "1/(x^2+y^2-3*d)",
            "x*y*d",
            "(x-y)^3/(x^2+y^2+1-2*x-2*y-2*x*y)",
        ],
    ),
    "six variables": (
        ("d", "a", "b", "c", "e", "f"),
        ["(a*b-c*e)/((a+b+c+e+f)*(d-4))", "a^4*f^4/(e-f)", "(d*a+1)*(b-c)^2/(1+c)", "d*a*b*c*e*f"],
    ),
    "no variable": ((), ["3/5", "0", "-2"]),
    "homogeneous, singular at the origin": (("x", "y"), ["(x^2+y^2)/(x*y)", "x/(x+y)^3", "(x-y)/(x+y)"]),
    "factors only over the integers": (("d", "x"), ["1/(6*d*x+4)", "(2*x+4)/(9*d+3)", "(4*x-6)/(10*d)"]),
}


@pytest.mark.parametrize("case", CASES)
def test_known_functions_come_back(case: str) -> None:
    names, texts = CASES[case]
    assert recovered(read(texts, names), names)


@pytest.mark.parametrize("case", CASES)
def test_bad_lanes_are_redrawn(case: str) -> None:
    names, texts = CASES[case]
    functions = read(texts, names)
    if not names:
        pytest.skip("there is one point only")
    box = Known(functions, names, lambda point: sum(point) % 11 == 3)
    result = reconstruct(box, first_primes(8), 2, ring(names))
    assert box.bad > 0
    assert result.entries == tuple(functions)


def polynomials(target: Ring, degree: int, size: int) -> st.SearchStrategy[Rational]:
    exponents = st.tuples(*(st.integers(0, degree) for _ in target.names))
    terms = st.dictionaries(exponents, st.integers(-size, size), max_size=6)
    return terms.map(
        lambda t: target.fraction(target.polynomial(t), target.polynomial({(0,) * len(target.names): 1}))
    )


@given(st.data(), st.integers(1, 3), st.integers(0, 2**16))
@settings(max_examples=25, deadline=None)
def test_random_functions_come_back(data: st.DataObject, variables: int, seed: int) -> None:
    names = ("d", "x", "y")[:variables]
    target = ring(names)
    poly = polynomials(target, 3, 10**6)
    functions = []
    for _ in range(data.draw(st.integers(1, 4))):
        below = data.draw(poly)
        functions.append(data.draw(poly) / (below if below else target.one))
    result = reconstruct(Known(functions, names), first_primes(20), seed, target)
    assert result.entries == tuple(functions)


def test_evidence_says_what_was_found() -> None:
    names = ("d", "x")
    functions = read(["(d-4)/((d-3)*(x+1))", "0", "(d-4)/((d-3)*(x+1))", "x^2"], names)
    primes = first_primes(6)
    box = Known(functions, names)
    result = reconstruct(box, primes, 1, ring(names))
    evidence = result.evidence
    assert evidence.distinct == 3
    assert evidence.degrees == ((1, 2), (-1, 0), (1, 2), (2, 0))
    assert set(evidence.factors) == {"d-3", "x+1"}
    assert evidence.data_primes == primes[:1]
    assert evidence.structure_primes == primes[:2]
    assert set(evidence.confirmed) == {primes[2]}
    assert result.entries[0] is result.entries[2]


def test_equal_arguments_give_equal_results_and_samples() -> None:
    names = ("d", "x")
    functions = read(["(d-x)^3/(d*x-3)", "x/d"], names)
    runs = [reconstruct(Known(functions, names), first_primes(6), 9, ring(names)) for _ in range(2)]
    assert runs[0] == runs[1]


def test_result_may_live_in_a_larger_ring() -> None:
    functions = read(["(d-x)^3/(2*x-d)", "-x/(3*d)"], ("d", "x"))
    target = ring(("x", "s", "d"))
    result = reconstruct(Known(functions, ("d", "x")), first_primes(6), 9, target)
    assert result.entries == tuple(f.to_ring(target) for f in functions)


def test_large_coefficients_need_several_primes() -> None:
    names = ("d", "x")
    big = 10**60 + 7
    functions = read([f"({big}*d-x)/(x+{big})", f"x^2/{big}+d", "d-1"], names)
    result = reconstruct(Known(functions, names), first_primes(16), 3, ring(names))
    assert result.entries == tuple(functions)
    assert len(result.evidence.data_primes) > 4
    with pytest.raises(ReconstructionError, match="give more primes"):
        reconstruct(Known(functions, names), first_primes(4), 3, ring(names))


def test_coefficients_that_vanish_modulo_the_primes_in_use() -> None:
    names = ("d", "x")
    first, second, third, *_ = primes = first_primes(14)
    # the first prime hides a term, a whole entry, a degree, and makes a denominator drop out
    for texts in (
        [f"{first}*d+x"],
        [f"{first}*d*x^2+d+x^5+x+1"],
        [f"{first}*d", "x"],
        [f"d^4*{first}+d*x"],
        [f"(d*x-1)/({first}*d+x^2)"],
        [f"(d+1)/(x*{third}+1)", f"{second}*{third}*d*x+x^3"],
    ):
        functions = read(texts, names)
        assert reconstruct(Known(functions, names), primes, 3, ring(names)).entries == tuple(functions)


def test_a_prime_in_a_denominator_is_skipped() -> None:
    names = ("d",)
    primes = first_primes(6)
    for bad in primes[:3]:
        functions = read([f"d/{bad}"], names)
        assert reconstruct(Known(functions, names), primes, 3, ring(names)).entries == tuple(functions)


def test_sparse_numerators_need_few_samples() -> None:
    names = ("d", "x", "y")
    functions = read(["d^20*x+x^20*y^19+y^3-7", "x^17*d^5*y^9/(1+x)"], names)
    result = reconstruct(Known(functions, names), first_primes(6), 1, ring(names))
    assert result.entries == tuple(functions)
    assert result.evidence.samples < 600  # dense interpolation alone would take 8,820


class Wrong(Known):
    """Not a rational function: `value` computes the one entry."""

    def __init__(self, value: Callable[[list[int], int], int]) -> None:
        self.value = value
        super().__init__([ring(("d", "x")).one], ("d", "x"))

    def __call__(self, points: Residues, prime: int) -> tuple[Residues, NDArray[np.bool_]]:
        values = [[self.value([int(x) for x in lane], prime) % prime for lane in points.T]]
        return np.array(values, dtype=np.uint64).reshape(1, -1), np.ones(points.shape[1], dtype=np.bool_)


@pytest.mark.parametrize(
    ("value", "message"),
    [
        (lambda point, prime: pow(point[0], prime // 3, prime) + point[1], "entry 0 is no rational function"),
        (lambda point, prime: hash(tuple(point)), "entry 0 is no rational function"),
        (lambda point, prime: pow(prime, 3) // 1000 + point[0], "not confirmed"),
        (lambda point, prime: 2**700 + point[0], "not confirmed"),
        (lambda point, prime: pow(2, prime // 1000, prime) * point[0], "not confirmed"),
        (lambda point, prime: pow(point[0] + pow(2, prime // 1000, prime), -1, prime), "was not lifted"),
    ],
)
def test_wrong_black_boxes_are_detected(value: Callable[[list[int], int], int], message: str) -> None:
    target = ring(("d", "x"))
    with pytest.raises(ReconstructionError, match=message):
        reconstruct(Wrong(value), first_primes(6), 1, target, degree_limit=60)


def test_a_box_that_changes_its_mind_is_detected() -> None:
    calls = []

    def value(point: list[int], prime: int) -> int:
        calls.append(1)
        return point[0] + point[1] * (1 if len(calls) < 30 else point[0])

    with pytest.raises(ReconstructionError):
        reconstruct(Wrong(value), first_primes(6), 1, ring(("d", "x")))


def test_a_box_without_good_lanes_is_named_singular() -> None:
    functions = read(["d"], ("d",))
    box = Known(functions, ("d",), lambda point: True)
    with pytest.raises(ReconstructionError, match="primes were not enough"):
        reconstruct(box, first_primes(4), 1, ring(("d",)))
    assert issubclass(UnluckyPrimeError, ReconstructionError)


def test_wrong_shapes_and_primes_are_refused() -> None:
    functions = read(["d", "1"], ("d",))
    box = Known(functions, ("d",))
    box.entries = 3
    with pytest.raises(ValueError, match="bits"):
        reconstruct(box, [2**61 - 1], 1, ring(("d",)))
    with pytest.raises(ValueError, match="bits"):
        reconstruct(box, [101, 103, 107], 1, ring(("d",)))
    with pytest.raises(ValueError, match="distinct"):
        reconstruct(box, [*first_primes(1), *first_primes(1)], 1, ring(("d",)))
    with pytest.raises((ReconstructionError, ValueError)):
        reconstruct(box, first_primes(4), 1, ring(("d",)))


class Listener:
    """Remembers what a reconstruction tells."""

    def __init__(self) -> None:
        self.told: list[tuple[str, int, int | None]] = []
        self.plans: list[Plan] = []

    def samples(self, step: str, done: int, expected: int | None) -> None:
        self.told.append((step, done, expected))

    def plan(self, plan: Plan, done: int) -> None:
        assert done == self.told[-1][1]
        self.plans.append(plan)


def test_the_plan_is_told_and_kept_true() -> None:
    listener = Listener()
    functions = read(["d/(x*d-1)", "1", "(7*d^3*x-5/3*x^2)/(d-4)"], ("d", "x"))
    box = Known(functions, ("d", "x"))
    result = reconstruct(box, first_primes(4), 1, ring(("d", "x")), watch=listener)
    (plan,) = listener.plans
    assert (plan.variables, plan.entries, plan.distinct, plan.degrees) == (("d", "x"), 3, 3, (4, 2))
    assert plan.primes == len(result.evidence.data_primes) == 1
    assert plan.samples >= result.evidence.samples
    assert "2 variables (d, x)" in plan.text()
    assert listener.told[-1][1] == result.evidence.samples
    assert {"degrees", "denominators", "sizes", "numerators", "confirmation"} == {t[0] for t in listener.told}
    for _, done, expected in listener.told:
        assert expected is None or done <= expected <= plan.samples


def test_mixed_degrees_save_samples() -> None:
    """A product of functions of different variables does not fill its box of exponents."""
    names = ("x", "y", "z", "w")
    listener = Listener()
    functions = read(["(x-y+1)^6*(z+3*w-2)^6", "1/(x*y-z)"], names)
    found = reconstruct(Known(functions, names), first_primes(8), 3, ring(names), watch=listener)
    assert list(found.entries) == functions
    assert "mixed degrees" in {step for step, _, _ in listener.told}
    (plan,) = listener.plans
    assert plan.terms == 28 * 28 < size_within([6, 6, 6, 6], 12) / 1.5


def test_similar_numerators_that_do_not_fit_into_one_system() -> None:
    """Together they have more monomials than there are samples for each of them."""
    target = ring(("x", "y"))
    random = np.random.default_rng(6)

    def dense(a: int, b: int) -> Rational:
        terms = {(i, j): int(random.integers(1, 99)) for i in range(a + 1) for j in range(b + 1)}
        return target.fraction(target.polynomial(terms), target.context.constant(1))

    functions = [dense(6, 5), dense(5, 6)]
    found = reconstruct(Known(functions, target.names), first_primes(4), 1, target)
    assert list(found.entries) == functions
    assert len(found.evidence.data_primes) == 1


def test_primes_of_large_coefficients_are_foreseen() -> None:
    for digits in (30, 100, 300):
        listener = Listener()
        number = 10**digits + 7
        functions = read([f"({number}*d+x)/(d*x-1)", f"x/{number}"], ("d", "x"))
        found = reconstruct(
            Known(functions, ("d", "x")), first_primes(40), 2, ring(("d", "x")), watch=listener
        )
        (plan,) = listener.plans
        assert abs(plan.primes - len(found.evidence.data_primes)) <= 1


class Memory:
    """Notes in JSON data, as a store keeps them; the black box may be cut off after some samples."""

    def __init__(self) -> None:
        self.notes: dict[str, object] = {}

    def kept(self, name, kind, compute):
        if name not in self.notes:
            self.notes[name] = to_data(compute())
        return from_data(kind, self.notes[name])


class CutError(Exception):
    pass


@dataclass
class Cut:
    box: Known
    left: int

    @property
    def variables(self) -> tuple[str, ...]:
        return self.box.variables

    @property
    def entries(self) -> int:
        return self.box.entries

    def __call__(self, points, prime):
        self.left -= points.shape[1]
        if self.left < 0:
            raise CutError
        return self.box(points, prime)


def test_an_interrupted_reconstruction_goes_on_from_its_notes() -> None:
    """Cut at many places and resumed it gives what an undisturbed one gives, evidence included."""
    number = 10**60 + 7
    functions = read([f"({number}*d^2+x)/(d*x-1)", f"x/{number}", "d^3/(x-2)"], ("d", "x"))
    box, primes, target = Known(functions, ("d", "x")), first_primes(20), ring(("d", "x"))
    listener = Listener()
    whole = reconstruct(box, primes, 5, target, watch=listener)
    structure = min(done for step, done, _ in listener.told if step == "numerators")
    for allowed in range(structure, whole.evidence.samples, 37):
        memory = Memory()
        runs = 1
        while True:
            try:
                found = reconstruct(Cut(box, allowed), primes, 5, target, notes=memory)
                break
            except CutError:
                runs += 1
                assert runs < 30
        assert runs > 1
        assert found == whole


def test_two_hundred_entries_of_degree_six() -> None:
    """Shared sampling: the number of samples does not grow with the number of entries."""
    random = np.random.default_rng(4)
    names = ("d", "x")
    target = ring(names)
    d, x = target.variable("d"), target.variable("x")
    below = [d - 3, 2 * d - 7, 3 * d - 10, d - 5, x, x + 1, x - 1, d * x - 3]
    functions = []
    for _ in range(200):
        above = target.polynomial(
            {(i, j): int(random.integers(-999, 1000)) for i in range(7) for j in range(7)}
        )
        denominator = target.one
        for k in random.integers(0, len(below), size=6):
            denominator = denominator * below[k]
        functions.append(target.fraction(above, denominator.numerator))

    class Fast(Known):
        def __call__(self, points: Residues, prime: int) -> tuple[Residues, NDArray[np.bool_]]:
            good = np.ones(points.shape[1], dtype=np.bool_)
            values = np.zeros((self.entries, points.shape[1]), dtype=np.uint64)
            for lane, point in enumerate(points.T):
                powers = [[pow(int(c), k, prime) for k in range(16)] for c in point]
                table = {}
                for i in range(16):
                    for j in range(16):
                        table[i, j] = powers[0][i] * powers[1][j] % prime
                for row in range(self.entries):
                    top, bottom = (sum(int(c) * table[m] for m, c in part) for part in self.parts[row])
                    values[row, lane] = top * pow(bottom, -1, prime) % prime
            return values, good

    box = Fast(functions, names)
    box.parts = [  # type: ignore[attr-defined]
        ([*f.numerator.to_dict().items()], [*f.denominator.to_dict().items()]) for f in functions
    ]
    result = reconstruct(box, first_primes(6), 1, target)
    assert result.entries == tuple(functions)
    assert result.evidence.samples < 350
