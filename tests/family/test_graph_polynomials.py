"""U and F against graphs, against hand results, and against the definition by completing the square."""

from fractions import Fraction
from pathlib import Path

import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from ibpred.errors import InputError
from ibpred.exact.grammar import parse_rational
from ibpred.exact.rational import Rational
from ibpred.family.definition import FamilyDefinition
from ibpred.family.forests import agrees_with_graph, forest_polynomials
from ibpred.family.polynomials import ParameterPolynomial, first_symanzik, second_symanzik, symanzik
from ibpred.family.reading import read_family
from ibpred.family.signs import euclidean_signs

FAMILIES = sorted((Path(__file__).parents[2] / "families").glob("*.toml"))

NO_EUCLIDEAN_REGION = {"crossed-double-box", "post-minkowskian-two-loop"}


def load(name: str) -> FamilyDefinition:
    path = next(path for path in FAMILIES if path.stem == name)
    return read_family(path.read_text(), path.name, path.stem)


def terms(family: FamilyDefinition, **coefficients: str) -> dict[tuple[int, ...], Rational]:
    """``x12="s"`` is the term s*x1*x2."""
    result = {}
    for monomial, value in coefficients.items():
        exponents = [0] * len(family.lines)
        for digit in monomial[1:]:
            exponents[int(digit) - 1] += 1
        result[tuple(exponents)] = parse_rational(value, family.kinematic_ring)
    return result


def test_bubble_with_masses_by_hand() -> None:
    """F = -s x1 x2 + (x1 + x2)(m1^2 x1 + m2^2 x2)."""
    family = load("bubble-two-masses")
    first, second = symanzik(family)
    assert first.terms == terms(family, x1="1", x2="1")
    assert second.terms == terms(family, x11="m2", x22="m2", x12="2*m2-s")


def test_box_by_hand() -> None:
    family = load("massless-box")
    first, second = symanzik(family)
    assert first.terms == terms(family, x1="1", x2="1", x3="1", x4="1")
    assert second.terms == terms(family, x13="-s", x24="-t")


def test_sunrise_by_hand() -> None:
    family = load("sunrise-equal-masses")
    first, second = symanzik(family)
    assert first.terms == terms(family, x12="1", x13="1", x23="1")
    assert second.terms == terms(
        family, x112="m2", x113="m2", x122="m2", x133="m2", x223="m2", x233="m2", x123="3*m2-s"
    )


def test_double_box_by_hand() -> None:
    """U pairs lines of two loops, F lists the cuts in s and the one in t (by hand)."""
    family = load("planar-double-box")
    first, second = symanzik(family)
    left, middle, right = "123", "4", "567"
    pairs = [a + b for a in left for b in right]
    pairs += [a + middle for a in left] + [middle + a for a in right]
    assert first.terms == terms(family, **{f"x{pair}": "1" for pair in pairs})
    cut_s = ["134", "135", "136", "137", "561", "562", "563", "564", "345", "146"]
    expected = terms(family, **{f"x{cut}": "-s" for cut in cut_s}, x247="-t")
    assert second.terms == expected


def test_static_line_by_hand() -> None:
    """k^2 and 2 v.k + 2 w: U has only the quadratic line, F = x2^2 - 2 w x1 x2."""
    family = load("heavy-quark-self-energy")
    assert symanzik(family)[0].terms == terms(family, x1="1")
    assert symanzik(family)[1].terms == terms(family, x22="1", x12="-2*w")
    assert [line.dimension for line in family.lines] == [2, 1]


GRAPHS = {
    "box": ([(1, 2), (2, 3), (3, 4), (4, 1)], [1, 2, 3, 4]),
    "double box": ([(1, 2), (2, 5), (5, 6), (6, 1), (5, 3), (3, 4), (4, 6)], [1, 2, 3, 4]),
    "crossed double box": ([(1, 2), (2, 5), (1, 6), (5, 3), (5, 4), (6, 3), (6, 4)], [1, 2, 3, 4]),
    "pentagon-triangle": ([(1, 2), (2, 3), (3, 4), (4, 5), (5, 6), (6, 1), (6, 4)], [1, 2, 3, 5]),
    "triple box": (
        [(1, 2), (2, 3), (3, 4), (4, 5), (5, 6), (6, 7), (7, 8), (8, 1), (3, 8), (4, 7)],
        [1, 2, 5, 6],
    ),
    "tadpole on a box": ([(1, 2), (2, 3), (3, 4), (4, 1), (1, 1)], [1, 2, 3, 4]),
    "melon": ([(1, 2)] * 4, [1, 1, 1, 2]),
}


def graph_family(name: str, masses: tuple[int, ...] = ()) -> FamilyDefinition:
    edges, legs = GRAPHS[name]
    text = """
[momenta]
external = ["p1", "p2", "p3"]
[kinematics]
invariants = { s = 2, t = 2, m = 1, q = 2 }
equations = ["p1^2 = 0", "p2^2 = m^2", "p3^2 = 0", "(p1+p2)^2 = s", "(p2+p3)^2 = t", "(p1+p2+p3)^2 = q/3"]
unit = "m"
[legs]
"""
    text += "\n".join(f"p{i + 1} = {vertex}" for i, vertex in enumerate(legs))
    for number, (a, b) in enumerate(edges):
        text += f"\n[[edge]]\njoins = [{a}, {b}]\n"
        if number in masses:
            text += 'mass2 = "m^2"\n'
    return read_family(text, f"{name}.toml", name)


@pytest.mark.parametrize("name", GRAPHS)
@pytest.mark.parametrize("masses", [(), (0, 2)])
def test_forests_agree_with_determinants(name: str, masses: tuple[int, ...]) -> None:
    family = graph_family(name, masses)
    assert agrees_with_graph(family)
    assert len(family.lines) == len(family.loops) * (len(family.loops) + 1) // 2 + 3 * len(family.loops)


@pytest.mark.parametrize("name", GRAPHS)
def test_routed_momenta_are_conserved_at_every_vertex(name: str) -> None:
    """With suitable orientations, which exist iff the squares agree; here by trying them out of a tree."""
    family = graph_family(name)
    graph = family.graph
    assert graph is not None
    size = len(family.loops) + len(family.external)
    inflow = {vertex: [Fraction(0)] * size for edge in graph.edges for vertex in edge}
    for e, (_, vertex) in enumerate(graph.legs):
        inflow[vertex][len(family.loops) + e] += 1
        inflow[graph.rest][len(family.loops) + e] -= 1  # type: ignore[index]
    signs: dict[int, int] = {}

    def conserved(vertex: int) -> bool:
        total = list(inflow[vertex])
        for number, (a, b) in enumerate(graph.edges):
            if a == b or vertex not in (a, b):
                continue
            sign = signs[number] * (1 if vertex == b else -1)
            q = family.lines[number].momentum
            assert q is not None
            total = [x + sign * y for x, y in zip(total, q, strict=True)]
        return not any(total)

    def search(number: int) -> bool:
        if number == len(graph.edges):
            return all(conserved(vertex) for vertex in inflow)
        for sign in (1, -1):
            signs[number] = sign
            done = [v for v in inflow if all(n <= number for n, e in enumerate(graph.edges) if v in e)]
            if all(conserved(v) for v in done if v in graph.edges[number]) and search(number + 1):
                return True
        return False

    assert search(0)


def test_forests_need_a_graph() -> None:
    with pytest.raises(InputError, match="comes from no graph"):
        forest_polynomials(load("heavy-quark-self-energy"))


def test_vacuum_graph() -> None:
    text = '[kinematics]\ninvariants = { m2 = 2 }\n[[edge]]\njoins = [1, 1]\nmass2 = "m2"'
    family = read_family(text, "v.toml", "v")
    assert agrees_with_graph(family)
    assert symanzik(family)[1].terms == terms(family, x11="m2")


@pytest.mark.parametrize("path", FAMILIES, ids=lambda path: path.stem)
def test_shipped_family(path: Path) -> None:
    family = load(path.stem)
    first, second = symanzik(family)
    loops = len(family.loops)
    assert {sum(e) for e in first.terms} == {loops}
    assert {sum(e) for e in second.terms} == {loops + 1}
    if family.graph:
        assert agrees_with_graph(family)
    assert (euclidean_signs(family) is None) == (path.stem in NO_EUCLIDEAN_REGION)


@settings(max_examples=25, deadline=None)
@given(st.data())
def test_f_is_what_completing_the_square_leaves(data: st.DataObject) -> None:
    """At numbers x_i the form sum x_i D_i, stationary in the loop momenta, has the value F/U.

    The stationary point k = -M^-1 Q is found by elimination over Q, with no determinant in sight.
    """
    family = load(data.draw(st.sampled_from([path.stem for path in FAMILIES])))
    loops, external = len(family.loops), len(family.external)
    x = {i: Fraction(data.draw(st.integers(1, 9))) for i in family.propagators}
    point = {v.name: Fraction(data.draw(st.integers(-7, 7).filter(bool))) for v in family.invariants}

    def value(r: Rational) -> Fraction:
        return r.substitute(point).to_fraction()

    def total(coefficient: object) -> Fraction:
        return sum((x[i] * coefficient(family.lines[i]) for i in x), start=Fraction(0))  # type: ignore[operator]

    quadratic = [[total(lambda n, i=i, j=j: n.quadratic[i][j]) for j in range(loops)] for i in range(loops)]
    linear = [[total(lambda n, i=i, e=e: n.linear[i][e]) for e in range(external)] for i in range(loops)]
    constant = total(lambda n: value(n.constant))
    # d/dk_i: 2 sum_j quadratic_ij k_j + sum_e linear_ie p_e = 0, k_j = sum_e k[j][e] p_e
    rows = [[2 * a for a in quadratic[i]] + [-b for b in linear[i]] for i in range(loops)]
    for i in range(loops):
        pivot = next((r for r in range(i, loops) if rows[r][i]), None)
        assume(pivot is not None)
        rows[i], rows[pivot] = rows[pivot], rows[i]  # type: ignore[index]
        rows[i] = [a / rows[i][i] for a in rows[i]]
        for r in range(loops):
            if r != i:
                rows[r] = [a - rows[r][i] * b for a, b in zip(rows[r], rows[i], strict=True)]
    k = [row[loops:] for row in rows]
    gram = [[value(g) for g in row] for row in family.gram]

    def product(a: list[Fraction], b: list[Fraction]) -> Fraction:
        return sum(
            (a[e] * gram[e][f] * b[f] for e in range(external) for f in range(external)), start=Fraction(0)
        )

    stationary = constant
    for i in range(loops):
        stationary += product(linear[i], k[i])
        stationary += sum(quadratic[i][j] * product(k[i], k[j]) for j in range(loops))

    def at(polynomial: ParameterPolynomial) -> Fraction:
        result = Fraction(0)
        for exponents, coefficient in polynomial.terms.items():
            term = value(coefficient)
            for i, e in enumerate(exponents):
                term *= x.get(i, Fraction(1)) ** e
            result += term
        return result

    first, second = symanzik(family)
    assert at(second) == at(first) * stationary


def test_subsectors_by_restriction_are_those_of_the_smaller_family() -> None:
    family = load("planar-double-box")
    for sector in (0b0001111, 0b1011010, 0b0110011):
        first, second = first_symanzik(family, sector), second_symanzik(family, sector)
        small = FamilyDefinition(
            **{
                **{name: getattr(family, name) for name in family.__dataclass_fields__},
                "lines": tuple(line for i, line in enumerate(family.lines[:7]) if sector >> i & 1),
            }
        )
        inside = [i for i in range(7) if sector >> i & 1]
        for big, little in zip((first, second), symanzik(small), strict=True):
            assert {tuple(e[i] for i in inside): c for e, c in big.terms.items()} == little.terms
    with pytest.raises(InputError, match="no propagators"):
        first_symanzik(family, 1 << 7)
    with pytest.raises(InputError, match="no propagators"):
        second_symanzik(family, 1 << 9)


def test_text() -> None:
    assert symanzik(load("massless-box"))[1].text() == "-s*x1*x3-t*x2*x4"
    assert symanzik(load("bubble-two-masses"))[1].text() == "m2*x1^2+(-s+2*m2)*x1*x2+m2*x2^2"
    assert symanzik(load("bubble"))[0].restrict(0).text() == "0"


def test_euclidean_signs() -> None:
    assert euclidean_signs(load("massless-box")) == {"s": -1, "t": -1}
    assert euclidean_signs(load("bubble-one-mass")) == {"s": -1, "m2": 1}
    assert euclidean_signs(load("triangle-two-legs")) == {"s": -1, "p2sq": -1}


def test_no_euclidean_signs_for_a_crossed_box() -> None:
    """With s + t + u = 0 and all three in F no signs do (J. B. Tausk, hep-ph/9909506)."""
    text = (Path(FAMILIES[0]).parent / "massless-box.toml").read_text().split("[[line]]")[0]
    text = text.replace('loop = ["k"]', 'loop = ["k1", "k2"]') + "[legs]\np1 = 1\np2 = 2\np3 = 3\np4 = 4\n"
    for a, b in GRAPHS["crossed double box"][0]:
        text += f"[[edge]]\njoins = [{a}, {b}]\n"
    family = read_family(text, "crossed.toml", "crossed")
    assert agrees_with_graph(family)
    assert euclidean_signs(family) is None


def test_unused_invariants_keep_their_usual_sign() -> None:
    text = (FAMILIES[0].parent / "bubble.toml").read_text().replace("{ s = 2 }", "{ s = 2, z = 2 }")
    assert euclidean_signs(read_family(text, "b.toml", "b")) == {"s": -1, "z": -1}
    opposite = text.replace("p^2 = s", "p^2 = -s")
    assert euclidean_signs(read_family(opposite, "b.toml", "b")) == {"s": 1, "z": -1}
