"""Epsilon-forms of systems with known answer, and obstructions that are really there."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from random import Random

import pytest
from synthetic_systems import RING, canonical, connection, gauged, matrix, scrambled

from ibpred.epsform.exponents import exponents
from ibpred.epsform.factorise import factorise, root_cover
from ibpred.epsform.form import Connection, EpsilonForm, Obstructed
from ibpred.epsform.matrices import added, derivative, inverse, product
from ibpred.epsform.verify import canonical_matrix, is_integrable, verify, verify_modular
from ibpred.errors import ReconstructionError, UnfinishedError
from ibpred.exact.grammar import parse_rational
from ibpred.exact.primes import first_primes
from ibpred.exact.rational import ring

PRIMES = first_primes(20, bits=62)
ENGINE_PRIMES = first_primes(20)


def solved(system, primes=PRIMES) -> EpsilonForm:
    form = factorise(system, primes, seed=1)
    assert isinstance(form, EpsilonForm), form.obstructions
    assert verify(system, form)
    assert verify_modular(system, form, PRIMES[0], seed=5)
    return form


def spectra(form: EpsilonForm) -> dict[str, list[str]]:
    return {point: sorted(values) for point, values in exponents(form)}


def massless_box():
    """Bubble in s, bubble in t, box at s = -1, x = t/s, d = 4 - 2 eps; as the identities give it."""
    return connection(
        matrix(
            [
                ["0", "0", "0"],
                ["0", "-eps/x", "0"],
                ["2*(2*eps-1)/(x*(x+1))", "-2*(2*eps-1)/(x^2*(x+1))", "-(1+eps+x)/(x*(x+1))"],
            ]
        )
    )


def test_massless_box_has_the_published_letters_and_residues() -> None:
    """Letters x and 1 + x with exponents 0, -1, -1 and 0, 0, 1 (Henn, arXiv:1412.2296; from memory)."""
    form = solved(massless_box())
    assert [str(letter) for letter in form.letters] == ["x", "x+1"]
    at_zero, at_minus_one = form.matrices
    assert [at_zero[i][i] for i in range(3)] == [0, -1, -1]
    assert [at_minus_one[i][i] for i in range(3)] == [0, 0, 1]
    # the pure functions: both bubbles with the same factor 1 - 2 eps, the box with eps x
    inverse = form.inverse
    assert inverse[0][0] == inverse[1][1] == parse_rational("1-2*eps", RING)
    assert inverse[2][2] == parse_rational("eps*x", RING)
    assert not any(inverse[i][j] for i in range(3) for j in range(3) if i != j)


def test_exponents_at_all_points() -> None:
    found = spectra(solved(massless_box()))
    assert found == {"x = 0": ["-1", "-1", "0"], "x = -1": ["0", "0", "1"], "x = infinity": ["0", "0", "1"]}


@pytest.mark.parametrize("seed", range(4))
def test_triangular_systems_are_recovered(seed: int) -> None:
    system, _ = scrambled(Random(seed), [1] * 6, [0, -1, 2])
    solved(system)


@pytest.mark.parametrize(
    ("seed", "sizes"), [(0, [2]), (1, [2]), (2, [3]), (3, [1, 2, 1]), (4, [4]), (5, [2, 1, 3, 1])]
)
def test_coupled_systems_are_recovered(seed: int, sizes: list[int]) -> None:
    system, original = scrambled(Random(seed), sizes, [0, -1, 3])
    form = solved(system)
    # traces of the residues do not depend on the basis
    x = RING.variable("x")
    for letter, residue in zip(form.letters, form.matrices, strict=True):
        root = x - letter / letter.derivative("x")
        trace = sum((original[i][i] for i in range(len(original))), RING.zero) * (x - root)
        expected = trace.substitute({"x": root})
        assert expected == RING.variable("eps") * sum(residue[i][i] for i in range(len(residue)))


def test_twelve_functions() -> None:
    system, _ = scrambled(Random(12), [1, 1, 2, 1, 1, 2, 1, 1, 1, 1], [0, -1], 0.6)
    form = solved(system)
    heights = [max(abs(v.numerator), v.denominator) for a in form.matrices for row in a for v in row]
    assert max(heights) < 10**4


def test_engine_primes_serve_as_well() -> None:
    system, _ = scrambled(Random(3), [1, 2, 1], [0, -1, 2])
    assert solved(system, ENGINE_PRIMES) == solved(system)


def test_conjugate_exponents() -> None:
    """Residues at infinity with eigenvalues eps (1 +- sqrt(5))/2 do not stand in the way."""
    system = canonical({"x": [[0, 1], [0, 0]], "x-1": [[0, 0], [1, 1]]})
    change = matrix([["1", "1/x"], ["eps/(x-1)", "x"]])
    form = solved(connection(gauged(system, change), (2,)))
    assert dict(exponents(form))["x = infinity"] == ("b with b^2+b-1 = 0",)


def test_pole_that_moves_with_eps() -> None:
    system = canonical({"x": [[1, 2], [0, -1]], "x+1": [[0, 0], [1, 2]]})
    change = matrix([["x+3*eps", "1"], ["eps", "1/(1-2*eps)"]])
    solved(connection(gauged(system, change), (2,)))


def test_quadratic_letter() -> None:
    system = canonical(
        {"x": [[1, 0, 0], [0, 0, 0], [1, 1, 1]], "x^2+x+1": [[-1, 0, 0], [1, 2, 0], [3, 0, -1]]}
    )
    change = matrix([["1/(x^2+x+1)", "0", "0"], ["x/(x^2+x+1)^2", "1", "0"], ["eps", "1/(x^2+x+1)", "eps*x"]])
    form = solved(connection(gauged(system, change)))
    assert [str(letter) for letter in form.letters] == ["x", "x^2+x+1"]


def test_quadratic_letter_in_a_coupled_block() -> None:
    system = canonical({"x": [[1, 2], [0, -1]], "x^2+1": [[0, 0], [1, 2]]})
    change = matrix([["1/(x^2+1)", "1"], ["eps", "x"]])
    solved(connection(gauged(system, change), (2,)))


def test_rows_in_any_order() -> None:
    """The block structure is found, whatever the order of the masters."""
    system, _ = scrambled(Random(8), [1, 2, 1, 1], [0, -1])
    order = [3, 1, 4, 0, 2]
    rows = system.matrices["x"]
    shuffled = connection(tuple(tuple(rows[i][j] for j in order) for i in order), (5,))
    solved(shuffled)


def test_system_without_letters() -> None:
    form = solved(connection(matrix([["0", "0"], ["1", "0"]])))
    assert form.letters == ()


def test_a_wrong_form_fails_the_checks() -> None:
    system = massless_box()
    form = solved(system)
    rows = [list(row) for row in form.matrices[0]]
    rows[2][0] += 1
    wrong = tuple(map(tuple, rows))
    broken = replace(form, matrices=(wrong, *form.matrices[1:]))
    assert not verify(system, broken)
    assert not verify_modular(system, broken, PRIMES[0], seed=5)
    broken = replace(form, inverse=form.transformation)
    assert not verify(system, broken)
    assert not verify_modular(system, broken, PRIMES[0], seed=5)


def obstruction(rows: list[list[str]], blocks: tuple[int, ...] | None = None) -> Obstructed:
    found = factorise(connection(matrix(rows), blocks), PRIMES, seed=1)
    assert isinstance(found, Obstructed)
    return found


SUNRISE = [["0", "1"], ["-(x+3)/(x*(x+1)*(x+9))", "-(3*x^2+20*x+9)/(x*(x+1)*(x+9))"]]
"""Equal-mass sunrise in two dimensions, x = -p^2/m^2: a period of an elliptic curve (Laporta, Remiddi,
hep-ph/0406160; operator from memory)."""


def test_sunrise_is_obstructed_by_its_bundle() -> None:
    found = obstruction(SUNRISE, (2,))
    (only,) = found.obstructions
    assert only.rows == (0, 1)
    assert "O(1) + O(-1)" in only.reason
    assert "elliptic" in only.reason
    assert only.operator == "x*(x+1)*(x+9)*D^2 + (3*x^2+20*x+9)*D + (x+3)"
    assert found.rows == ()
    assert found.solved is None


def test_rows_beside_an_obstruction_are_solved() -> None:
    rows = [
        ["eps/x", "0", "0", "0", "0"],
        ["0", *SUNRISE[0], "0", "0"],
        ["1", *SUNRISE[1], "0", "0"],
        ["eps/(1+x)", "0", "0", "1/x", "0"],
        ["0", "1", "0", "1", "eps/x"],
    ]
    found = obstruction(rows)
    assert [o.rows for o in found.obstructions] == [(1, 2)]
    assert found.rows == (0, 3)
    assert found.solved is not None
    assert len(found.solved.transformation) == 2


def test_irregular_points_are_named() -> None:
    assert "x = 0 is an irregular" in obstruction([["1/x^2+eps/x"]]).obstructions[0].reason
    assert "x = infinity is an irregular" in obstruction([["eps/x+1"]]).obstructions[0].reason
    coupled = obstruction([["1/(x-2)^3", "eps"], ["eps/x", "eps"]], (2,)).obstructions[0].reason
    assert "x = 2 is an irregular" in coupled


def test_half_integer_exponents_become_tags() -> None:
    form = solved(connection(matrix([["-1/2/x-1/2/(x-4)+eps/x"]])))
    assert [str(r) for r in form.radicands] == ["x", "-x+4"]
    assert form.tags == ((0, 1),)
    third = obstruction([["1/3/x"]]).obstructions[0]
    assert "a root of order 3" in third.reason


def test_half_integer_exponents_of_coupled_rows_are_named_with_the_remedy() -> None:
    """The two-loop sunrise with one massless line and massive legs off shell, as the identities give it."""
    rows = [
        ["-(4*eps*x+4*eps-3*x-2)/(x*(x+4))", "6*(eps-1)/(x*(x+4))"],
        ["-(eps-1)", "(eps-1)/x"],
    ]
    system = connection(matrix(rows), (2,))
    (found,) = obstruction(rows, (2,)).obstructions
    assert "exponent 1/2 at x = 0: a square root is needed" in found.reason
    assert "x = (w-1)^2/w" in found.reason
    cover = root_cover(system, PRIMES, seed=1)
    assert cover is not None
    assert {str(letter) for letter in solved(cover.connection).letters} == {"w", "w+1", "w-1"}


def test_exponents_that_are_not_linear_in_eps() -> None:
    assert "not of the form" in obstruction([["1/(1+eps)/x"]]).obstructions[0].reason
    found = obstruction([["0", "1/x"], ["(1+eps)/x", "0"]], (2,)).obstructions[0]
    assert "at x = 0" in found.reason
    assert "not of the form" in found.reason


def test_singularity_that_moves_with_eps() -> None:
    assert "depends on eps" in obstruction([["eps/(x-eps)"]]).obstructions[0].reason
    found = obstruction([["eps/x", "0"], ["1/(x-eps)", "eps/x"]]).obstructions[0]
    assert found.rows == (1,)
    assert "depends on eps" in found.reason


def test_coupling_whose_eps_cannot_be_factored_out() -> None:
    """Two letters with different functions of eps: f2' = (1/x + eps/(x-1)) f1 has no common factor."""
    found = obstruction([["0", "0"], ["1/x+eps/(x-1)", "0"]]).obstructions[0]
    assert found.rows == (1,)
    assert "constant" in found.reason


MASSIVE_BUBBLE = [["0", "0"], ["2*(1-eps)/(x*(x+4))", "-(2+eps*x)/(x*(x+4))"]]
"""A bubble with massive lines over a tadpole, x = -s/m^2."""


def test_square_root_of_a_single_function() -> None:
    """sqrt(x (x+4)) times the bubble, with the letter (x - root)/(x + root) over the tadpole."""
    form = solved(connection(matrix(MASSIVE_BUBBLE)))
    assert [str(r) for r in form.radicands] == ["x", "x+4"]
    assert form.tags == ((), (0, 1))
    assert [str(letter) for letter in form.letters] == ["x+4"]
    (odd,) = form.odd_letters
    assert (str(odd.polynomial), odd.roots) == ("x", (0, 1))
    ((_, _), (off, _)) = form.odd_matrices[0]
    assert abs(off) == 1
    broken = replace(form, odd_matrices=(((Fraction(0), Fraction(0)), (off, Fraction(1))),))
    assert not verify(connection(matrix(MASSIVE_BUBBLE)), broken)


def test_square_root_on_the_double_cover() -> None:
    """x = (1-w)^2/w, letters w and 1 + w."""
    cover = root_cover(connection(matrix(MASSIVE_BUBBLE)), PRIMES, seed=1)
    assert cover is not None
    assert str(cover.substitution) == "(w^2-2*w+1)/w"
    form = solved(cover.connection)
    assert [str(letter) for letter in form.letters] == ["w", "w+1"]
    assert root_cover(massless_box(), PRIMES, seed=1) is None


SUNRISE_SQUARED = [
    ["0", "2", "0"],
    [SUNRISE[1][0], SUNRISE[1][1], "1"],
    ["0", f"2*({SUNRISE[1][0]})", f"2*({SUNRISE[1][1]})"],
]
"""Products (f^2, f f', f'^2) of two solutions of the sunrise's equation: the symmetric square."""


def test_symmetric_square_has_the_symmetric_square_of_the_bundle() -> None:
    found = obstruction(SUNRISE_SQUARED, (3,)).obstructions[0]
    assert "O(2) + O(0) + O(-2)" in found.reason
    assert "K3" in found.reason


def test_coupled_block_with_a_square_root_that_stays_obstructed() -> None:
    """The sunrise times the root of (x-2)(x-5); its double cover pulls the bundle back by degree two."""
    root = "1/2/(x-2)+1/2/(x-5)"
    rows = [[root, "1"], [SUNRISE[1][0], f"{SUNRISE[1][1]}+{root}"]]
    found = obstruction(rows, (2,)).obstructions[0]
    assert "exponent 1/2 at x = 2" in found.reason
    assert "but even then" in found.reason
    assert "nontrivial bundle" in found.reason


TWO = ring(("eps", "x", "y"))


def two_ratios(letters: dict[str, list[list[int]]], change_rows: list[list[str]]) -> Connection:
    """The system of ``I = S f`` in two ratios from the canonical system of f."""
    change = tuple(tuple(parse_rational(e, TWO) for e in row) for row in change_rows)
    back, size = inverse(change, TWO), len(change)
    matrices = {}
    for name in ("x", "y"):
        logs = {t: parse_rational(t, TWO).derivative(name) / parse_rational(t, TWO) for t in letters}
        residues = {t: tuple(tuple(map(Fraction, row)) for row in rows) for t, rows in letters.items()}
        system = canonical_matrix(residues, logs, size, TWO)
        whole = added(product(change, system, TWO), derivative(change, name))
        matrices[name] = product(whole, back, TWO)
    return Connection(("x", "y"), TWO, matrices, (1,) * size, tuple(f"I{i}" for i in range(size)))


ONE_LEG_BOX = {
    "x": [[0, 0, 0, 0], [0, 0, 0, 0], [0, 0, -1, 0], [0, 0, 0, -1]],
    "x-y": [[0, 0, 0, 0], [0, 0, 0, 0], [0, 0, 0, 0], [0, -2, 2, 0]],
    "x-y+1": [[0, 0, 0, 0], [0, 0, 0, 0], [0, 0, 0, 0], [-2, 2, -2, 1]],
    "y": [[0, 0, 0, 0], [0, -1, 0, 0], [0, 0, 0, 0], [0, 2, 0, 0]],
    "y-1": [[0, 0, 0, 0], [0, 0, 0, 0], [0, 0, 0, 0], [2, -2, 0, 0]],
}
"""Box with one off-shell leg, x = t/s, y = m^2/s: integrable residues, obtained from its identities."""


def test_two_ratios() -> None:
    change = [
        ["1/(1-2*eps)", "0", "0", "0"],
        ["0", "1/(1-2*eps)/y", "0", "0"],
        ["1/(x-y)", "y/(x-y+1)^2", "x/(1-2*eps)", "0"],
        ["eps/(y-1)", "1", "x^2/y", "1/(eps*x)"],
    ]
    form = solved(two_ratios(ONE_LEG_BOX, change))
    assert {str(letter) for letter in form.letters} == set(ONE_LEG_BOX)
    assert [point for point, _ in exponents(form)] == ["x = 0", "x-y = 0", "x-y+1 = 0", "y = 0", "y = 1"]


COUPLED = [["1", "0", "0", "0"], ["0", "1", "0", "0"], ["0", "1/(x-y)", "1", "1/x"], ["eps", "0", "y", "eps"]]


def test_coupled_rows_in_two_ratios() -> None:
    form = solved(two_ratios(ONE_LEG_BOX, COUPLED), ENGINE_PRIMES)
    assert {str(letter) for letter in form.letters} == set(ONE_LEG_BOX)


def test_coupled_rows_in_two_ratios_with_a_moving_pole() -> None:
    change = [*COUPLED[:2], ["0", "1", "x-eps*y", "1"], ["eps", "0", "eps*y", "x/(1-2*eps)"]]
    solved(two_ratios(ONE_LEG_BOX, change), ENGINE_PRIMES)


def test_coupled_rows_in_two_ratios_need_engine_primes() -> None:
    with pytest.raises(ReconstructionError, match="I2, I3"):
        factorise(two_ratios(ONE_LEG_BOX, COUPLED), PRIMES, seed=1)


def test_obstruction_on_a_line_in_two_ratios() -> None:
    """The sunrise with a spectator ratio: obstructed on the line of x, or on that of y at fixed x."""
    for name, other in (("x", "y"), ("y", "x")):
        rows = tuple(tuple(parse_rational(e.replace("x", name), TWO) for e in row) for row in SUNRISE)
        zero = ((TWO.zero, TWO.zero),) * 2
        found = factorise(
            Connection(("x", "y"), TWO, {name: rows, other: zero}, (2,), ("a", "b")), ENGINE_PRIMES, 1
        )
        assert isinstance(found, Obstructed)
        assert "O(1) + O(-1)" in found.obstructions[0].reason


def test_system_without_ratios_is_refused() -> None:
    none = ring(("eps",))
    with pytest.raises(UnfinishedError, match="without ratios"):
        factorise(Connection((), none, {}, (1,), ("I",)), PRIMES, seed=1)


def test_time_that_is_over() -> None:
    """Uncoupled rows are solved; coupled ones are named as not looked at."""
    system, _ = scrambled(Random(3), [1, 2, 1], [0, -1, 2])
    found = factorise(system, PRIMES, 1, None, lambda: True)
    assert isinstance(found, Obstructed)
    assert not found.complete
    assert all("time" in o.reason for o in found.obstructions)
    assert found.solved is not None
    assert factorise(system, PRIMES, 1, None, lambda: False) == solved(system)


def test_square_root_that_multiplies_a_whole_block() -> None:
    """sqrt(x (x-5)) times two coupled functions is a tag of both."""
    system, _ = scrambled(Random(5), [2], [0, -1, 2])
    root = matrix([["-1/2/x-1/2/(x-5)" if i == j else "0" for j in range(2)] for i in range(2)])
    form = solved(connection(added(system.matrices["x"], root), (2,)))
    assert [str(r) for r in form.radicands] == ["x", "-x+5"]
    assert form.tags == ((0, 1), (0, 1))


def test_square_root_of_a_block_in_two_ratios() -> None:
    """The root of x y - 1 times the two coupled rows of the box with one leg, uncoupled from the others."""
    letters = {text: [row[2:] for row in rows[2:]] for text, rows in ONE_LEG_BOX.items()}
    letters = {text: rows for text, rows in letters.items() if any(v for row in rows for v in row)}
    whole = two_ratios(letters, [["1", "1/x"], ["y", "eps"]])
    root = parse_rational("x*y-1", TWO)
    matrices = {
        name: tuple(
            tuple(e - (root.derivative(name) / root / 2 if i == j else 0) for j, e in enumerate(row))
            for i, row in enumerate(rows)
        )
        for name, rows in whole.matrices.items()
    }
    form = solved(replace(whole, matrices=matrices), ENGINE_PRIMES)
    assert [str(r) for r in form.radicands] == ["-x*y+1"]
    assert form.tags == ((0,), (0,))
    assert is_integrable(form)


def test_time_that_runs_out_inside_a_block() -> None:
    """The deadline comes with the third sample: the block is named, not half done."""
    asked = iter(range(100))
    system, _ = scrambled(Random(7), [3], [0, 1])
    found = factorise(system, PRIMES, 1, None, lambda: next(asked) > 3)
    assert isinstance(found, Obstructed)
    assert not found.complete
    assert "time" in found.obstructions[0].reason
