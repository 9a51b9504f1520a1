import random
from collections import defaultdict
from fractions import Fraction
from itertools import permutations, product
from pathlib import Path

import flint
import pytest
import sector_families as families
from hypothesis import given, settings
from hypothesis import strategies as st

from ibpred.exact.codec import from_data, to_data
from ibpred.family.polynomials import symanzik
from ibpred.family.reading import read_family
from ibpred.sectors.analysis import SectorAnalysis, analyse, analyse_together
from ibpred.sectors.closure import ChangeGroup
from ibpred.sectors.forms import square_of
from ibpred.sectors.legs import leg_maps
from ibpred.sectors.order import lines_of, sector_key

P = 2**31 - 1
SHIPPED = sorted((Path(__file__).parents[2] / "families").glob("*.toml"))

HALF_BUBBLE = families.make_family("half", "k", "p", "s m2", {"p p": "s"}, ["k+1/2*p|m2", "k-1/2*p|m2"])
EXPRESSIONS = families.make_family(
    "expressions", "k", "p", "s m2", {"p p": "s"}, ["k . -k|2*m2", "k+p . -k-p|2*m2"]
)
BY_HAND = [
    families.bubble("m2", "m2"),
    families.box(),
    families.box("m2"),
    families.sunrise("m2"),
    families.kite(),
    families.crossed_vertex(),
    families.heavy_self_energy(),
    families.double_box(),
    families.double_box("m2"),
    HALF_BUBBLE,
    EXPRESSIONS,
]


def expanded(family, line, loop_map=None, leg_map=None):
    """A line after a change of momenta, expanded in products of momenta with names.

    Returns a dictionary from unordered pairs of names (loop momentum involved) and ``()`` to
    coefficients, straight from the definition of a line.
    """
    ks, ps = family.loops, family.external
    names = (*ks, *ps)

    def image(i):
        if loop_map is None:
            return {names[i]: Fraction(1)}
        if i < len(ks):
            return dict(zip(names, loop_map[i], strict=True))
        return dict(zip(ps, leg_map[i - len(ks)], strict=True))

    ring = family.kinematic_ring
    total = defaultdict(lambda: ring.zero)
    total[()] = line.constant
    weights = [(i, j, x) for i, row in enumerate(line.quadratic) for j, x in enumerate(row)]
    weights += [(i, len(ks) + e, x) for i, row in enumerate(line.linear) for e, x in enumerate(row)]
    for i, j, weight in weights:
        for (a, x), (b, y) in product(image(i).items(), image(j).items()):
            if a in ps and b in ps:
                key, value = (), family.gram[ps.index(a)][ps.index(b)]
            else:
                key, value = tuple(sorted((a, b))), ring.one
            total[key] = total[key] + value * (weight * x * y)
    return {key: value for key, value in total.items() if value}


def parameter_polynomials(family, weights, constant, values):
    """U and F modulo P of ``constant + sum weights[i] D_i``, from the definition of the lines."""
    loops, external = range(len(family.loops)), range(len(family.external))

    def number(x):
        return x.numerator * pow(x.denominator, -1, P) % P

    a = [[0] * len(loops) for _ in loops]
    b = [[0] * len(external) for _ in loops]
    c = constant
    for line, weight in zip(family.lines, weights, strict=True):
        c += weight * line.constant.modular(values, P)
        for i in loops:
            for j in loops:
                a[i][j] += weight * number(line.quadratic[i][j])
            for e in external:
                b[i][e] += weight * number(line.linear[i][e]) * pow(2, -1, P)
    matrix = flint.nmod_mat(len(loops), len(loops), [int(x % P) for row in a for x in row], P)
    first = int(matrix.det())
    inverse = matrix.inv()
    square = 0
    for i, j in product(loops, repeat=2):
        for e, f in product(external, repeat=2):
            square += int(inverse[i, j]) * b[i][e] * b[j][f] * family.gram[e][f].modular(values, P)
    return first, first * (square - c) % P


def check_partial(source, target, found, renaming):
    """The numerators that have images, as further lines with parameters, leave U and F as they are."""
    rng = random.Random(5)
    values = [rng.randrange(2, P) for _ in source.kinematic_ring.names]
    reached = [i for i in range(len(source.lines)) if found.reaches(i)]
    assert len(reached) > len(renaming)
    assert set(renaming) < set(reached)
    for i, j in renaming.items():
        constant, parts = found.images[i]
        assert (str(constant), [(m, str(c)) for m, c in parts]) == ("0", [(j, "1")])
    before, after, constant = [0] * len(source.lines), [0] * len(target.lines), 0
    for i in reached:
        before[i] = rng.randrange(1, P)
        shift, parts = found.images[i]
        constant += before[i] * shift.modular(values, P)
        for m, c in parts:
            after[m] += before[i] * c.modular(values, P)
    assert parameter_polynomials(source, before, 0, values) == parameter_polynomials(
        target, after, constant, values
    )


def check_map(source, target, found):
    """Everything a map claims, from the definitions."""
    assert len(found.lines) == len(lines_of(found.source))
    assert sorted(found.lines) == sorted(lines_of(found.target))
    renaming = dict(zip(lines_of(found.source), found.lines, strict=True))
    for before, after in zip(symanzik(source), symanzik(target), strict=True):
        moved = {}
        for exponents, value in before.restrict(found.source).terms.items():
            new = [0] * len(target.lines)
            for i, j in renaming.items():
                new[j] = exponents[i]
            moved[tuple(new)] = str(value)
        assert moved == {e: str(v) for e, v in after.restrict(found.target).terms.items()}
    for i, j in renaming.items():
        assert source.lines[i].cut == target.lines[j].cut
    if found.kind == "scalar":
        assert (found.images, found.loop_map, found.leg_map) == ((), (), ())
        return
    if found.kind == "partial":
        check_partial(source, target, found, renaming)
        return
    assert found.kind == "momentum"
    loops = len(source.loops)
    block = [[flint.fmpq(x.numerator, x.denominator) for x in row[:loops]] for row in found.loop_map]
    assert abs(flint.fmpq_mat(block).det()) == 1
    for e, f in product(range(len(source.external)), repeat=2):
        new = source.kinematic_ring.zero
        for (a, x), (b, y) in product(enumerate(found.leg_map[e]), enumerate(found.leg_map[f])):
            new = new + target.gram[a][b] * (x * y)
        assert new == source.gram[e][f]
    for i, line in enumerate(source.lines):
        left = expanded(target, line, found.loop_map, found.leg_map)
        constant, parts = found.images[i]
        right = defaultdict(lambda: source.kinematic_ring.zero)
        right[()] = constant
        for m, coefficient in parts:
            assert coefficient
            for key, value in expanded(target, target.lines[m]).items():
                right[key] = right[key] + value * coefficient
        assert left == {key: value for key, value in right.items() if value}
        if i in renaming:
            sign = "-1" if i in found.flips else "1"
            assert (str(constant), [(m, str(c)) for m, c in parts]) == ("0", [(renaming[i], sign)])
    assert all(source.lines[i].cut and i in renaming for i in found.flips)


def check_analysis(family, analysis):
    assert analysis.sectors == tuple(sorted(analysis.sectors, key=sector_key))
    assert sorted(s for members in analysis.classes for s in members) == sorted(analysis.nonzero)
    for members in analysis.classes:
        assert members == tuple(sorted(members, key=sector_key))
    mapped = [(m.source, m.target) for m in analysis.maps if m.source != m.target]
    assert sorted(s for s, _ in mapped) == sorted(s for members in analysis.classes for s in members[1:])
    moved = {m.source for m in analysis.maps if m.source != m.target and m.kind == "momentum"}
    for found in analysis.maps:
        check_map(family, family, found)
        (members,) = (c for c in analysis.classes if found.source in c)
        assert found.target in members[: members.index(found.source) + 1]
        assert found.target not in moved
        if found.kind != "momentum" and found.source != found.target:
            assert found.target == members[0]
        if found.source == found.target:
            trivial = found.lines == lines_of(found.source) and all(
                [m for m, _ in parts] == [i] and parts[0][1].is_one() and not constant
                for i, (constant, parts) in enumerate(image or (None, ()) for image in found.images)
            )
            assert not trivial


@pytest.mark.parametrize("family", BY_HAND, ids=lambda family: family.name)
def test_maps_from_the_definitions(family):
    check_analysis(family, analyse(family))


@pytest.mark.parametrize("path", SHIPPED, ids=lambda path: path.stem)
def test_maps_of_shipped_families(path):
    family = read_family(path.read_text(), path.name, path.stem)
    check_analysis(family, analyse(family))


@pytest.mark.parametrize(
    "family",
    [families.box("m2"), families.kite(), families.crossed_vertex(), families.heavy_self_energy()],
    ids=lambda family: family.name,
)
def test_classes_by_trying_all_renamings(family):
    """Two sectors are in one class if and only if some renaming of lines carries U and F over."""
    analysis = analyse(family)
    U, F = symanzik(family)

    def polynomials(sector, order):
        return [
            {(tuple(e[i] for i in order), str(v)) for e, v in p.restrict(sector).terms.items()}
            for p in (U, F)
        ]

    for a, b in product(analysis.nonzero, repeat=2):
        if a < b and a.bit_count() == b.bit_count():
            goal = polynomials(b, lines_of(b))
            equal = any(polynomials(a, order) == goal for order in permutations(lines_of(a)))
            assert equal == any(a in members and b in members for members in analysis.classes)


def test_one_loop_box():
    analysis = analyse(families.box())
    assert analysis.classes == ((0b0101,), (0b1010,), (0b0111, 0b1101), (0b1011, 0b1110), (0b1111,))
    assert all(found.kind == "momentum" for found in analysis.maps)


def test_planar_double_box():
    analysis = analyse(families.double_box())
    assert (len(analysis.sectors), len(analysis.nonzero), len(analysis.classes)) == (128, 43, 18)
    assert all(found.kind == "momentum" for found in analysis.maps if found.source != found.target)


def test_vacuum_and_light_cone_sunrises_agree_where_numerators_see_no_more():
    """k1^2, k2^2, (k1-k2)^2 and k1 shifted by p1, p1^2 = 0: no common shift, but p1 -> 0 does it."""
    analysis = analyse(families.double_box("m2"))
    found = next(m for m in analysis.maps_from(0b0011010) if m.target != 0b0011010)
    assert (found.target, found.kind) == (0b0011001, "partial")
    assert not any(any(row[:1]) for row in found.leg_map)
    # the light-cone sunrises among themselves are related with their numerators
    (found,) = analysis.maps_from(0b1001100)
    assert (found.target, found.kind) == (0b0011010, "momentum")


def test_leg_maps_of_the_massless_box():
    """s and t stay under the four-group of double exchanges; each leg goes to any leg."""
    family = families.box()
    found = leg_maps(family, family)
    identity = ((1, 0, 0), (0, 1, 0), (0, 0, 1))
    assert found[0] == identity
    assert {m[0] for m in found} == {(1, 0, 0), (0, 1, 0), (0, 0, 1), (-1, -1, -1)}
    assert len(found) == 4


def test_leg_maps_by_trying_all_signed_legs():
    cases = [
        families.bubble(),
        families.crossed_vertex(),
        families.box(),
        # two velocities and a transfer orthogonal to both: the transfer may change sign alone
        families.make_family(
            "velocities", "k", "u v q", "y", {"u u": "1", "v v": "1", "u v": "y", "q q": "-1"}, []
        ),
    ]
    for family in cases:
        size = len(family.external)
        legs = [tuple(int(e == f) for f in range(size)) for e in range(size)]
        legs += [(-1,) * size] if size > 1 else []
        expected = set()
        for choice in permutations(legs, size):
            for signs in product((1, -1), repeat=size):
                rows = [tuple(s * x for x in leg) for leg, s in zip(choice, signs, strict=True)]
                if signs[:1] == (1,) and all(
                    sum(
                        (
                            family.gram[a][b] * (rows[e][a] * rows[f][b])
                            for a in range(size)
                            for b in range(size)
                        ),
                        start=family.kinematic_ring.zero,
                    )
                    == family.gram[e][f]
                    for e in range(size)
                    for f in range(size)
                ):
                    expected.add(tuple(rows))
        assert set(leg_maps(family, family)) == expected
        if family.name == "velocities":
            assert ((1, 0, 0), (0, 1, 0), (0, 0, -1)) in expected


def test_leg_maps_need_the_same_kinematics():
    assert leg_maps(families.box(), families.bubble()) == ()


def test_vacuum_family_has_the_trivial_leg_map():
    family = families.make_family("vacuum", "k1 k2", "", "m2", {}, ["k1|m2", "k2|m2", "k1-k2|m2"])
    assert leg_maps(family, family) == ((),)
    analysis = analyse(family)
    check_analysis(family, analysis)
    assert analysis.classes == ((0b011, 0b101, 0b110), (0b111,))
    assert all(found.kind == "momentum" for found in analysis.maps)


def test_cut_lines_stay_cut():
    lines = ["k|m2|cut", "k+p1|m2", "k+p1+p2|m2|cut", "k+p1+p2+p3|m2"]
    family = families.make_family("cut_box", "k", "p1 p2 p3", "s t m2", families.FOUR_LEGS, lines)
    analysis = analyse(family)
    check_analysis(family, analysis)
    assert analysis.classes == ((0b0101,), (0b0111, 0b1101), (0b1111,))


def test_cut_linear_lines_may_change_their_sign():
    """Two worldlines: k and q reversed turn both linear lines over, which only their cuts allow."""
    products = {"u u": "1", "v v": "1", "u v": "y", "q q": "-q2"}
    texts = ["k . u||cut", "k . v||{}", "k", "k-q"]
    for flag in ("cut", ""):
        lines = [text.format(flag) for text in texts]
        family = families.make_family("worldlines", "k", "u v q", "q2 y", products, lines)
        analysis = analyse(family)
        check_analysis(family, analysis)
        flips = {m.flips for m in analysis.maps_from(0b1111) if m.kind == "momentum"}
        assert ((0, 1) in flips) == (flag == "cut")


def test_self_maps_generate_all_symmetries():
    """Sunrise with equal masses: the group made by the self-maps is that of its three lines."""
    family = families.sunrise("m2")
    analysis = analyse(family)
    group = ChangeGroup(3)
    for found in analysis.maps_from(0b111):
        group.adjoin((*found.loop_map, *(((Fraction(0),) * 2 + row) for row in found.leg_map)))
    assert len(group) == 6


@given(
    st.permutations(range(4)),
    st.permutations(range(4)),
    st.lists(st.sampled_from([1, -1]), min_size=8, max_size=8),
)
@settings(max_examples=30, deadline=None)
def test_groups_by_closing_under_products(first, second, signs):
    """Signed permutations: Dimino's cosets against naive closure."""

    def matrix(perm, s):
        return tuple(tuple(Fraction(s[i] if perm[i] == j else 0) for j in range(4)) for i in range(4))

    generators = [matrix(first, signs[:4]), matrix(second, signs[4:])]
    group = ChangeGroup(4)
    for generator in generators:
        group.adjoin(generator)

    def times(a, b):
        return tuple(
            tuple(sum(x * y for x, y in zip(r, c, strict=True)) for c in zip(*b, strict=True)) for r in a
        )

    seen = {matrix(range(4), [1] * 4)}
    front = list(seen)
    while front:
        made = {times(a, g) for a in front for g in generators}
        front = list(made - seen)
        seen |= made
    classes = {frozenset((m, tuple(tuple(-x for x in row) for row in m))) for m in seen}
    assert len(group) == len(classes)
    assert all(m in group for m in seen)


def test_squares():
    line = HALF_BUBBLE.lines[0]
    assert square_of(line) == (Fraction(-1), (Fraction(1), Fraction(1, 2)))
    assert square_of(EXPRESSIONS.lines[1]) == (Fraction(-2), (Fraction(1), Fraction(1)))
    assert square_of(families.heavy_self_energy().lines[3]) is None


def test_bubbles_share_their_sectors():
    """A bubble routed in another way, mapped line by line onto the first."""
    other = families.make_family("other", "l", "p", "s m2 M2", {"p p": "s"}, ["p-l|M2", "l|m2"])
    first = families.bubble("m2", "M2")
    alone, joint = analyse_together([first, other])
    assert alone == analyse(first)
    found = joint.maps
    assert {m.target_family for m in found} == {"bubble"}
    assert [(m.source, m.target, m.kind) for m in found] == [
        (0b01, 0b10, "momentum"),
        (0b10, 0b01, "momentum"),
        (0b11, 0b11, "momentum"),
    ]
    for each in found:
        check_map(other, first, each)


def test_planar_and_crossed_vertex_share_sectors():
    planar = families.make_family(
        "planar_vertex",
        "k1 k2",
        "p1 p2",
        "s",
        families.THREE_LEGS,
        ["k1", "k2", "k1-k2", "k1+p1", "k2+p1", "k1+p1+p2", "k2+p1+p2"],
    )
    crossed = families.crossed_vertex()
    joint = analyse_together([planar, crossed])[1]
    found = [m for m in joint.maps if m.target_family == planar.name]
    sizes = [m.source.bit_count() for m in found]
    assert 3 in sizes  # the sunrise
    assert 6 not in sizes  # the crossed top sector is not planar
    for each in found:
        check_map(crossed, planar, each)
    # every sector is either mapped or the first of its kind
    mapped = {m.source for m in joint.maps if not m.is_symmetry}
    kinds = {len({m.source for m in analyse(crossed).maps if not m.is_symmetry}), len(mapped)}
    assert max(kinds) == len(mapped)


def test_sectors_that_see_a_part_of_the_legs():
    """The diagonal box of the pentabox with p4 and p5 exchanged: no map of all legs does that."""
    (path,) = (path for path in SHIPPED if path.stem == "pentabox")
    family = read_family(path.read_text(), path.name, path.stem)
    assert len(leg_maps(family, family)) == 1
    analysis = analyse(family)
    lesser = [m for m in analysis.maps if m.kind == "partial"]
    assert {m.is_symmetry for m in lesser} == {True, False}
    scalar = [m for m in analysis.maps if m.kind == "scalar"]
    # what is left are products of two loops, of which one is turned over
    assert all(m.is_symmetry for m in scalar)


def test_record_survives_the_store():
    analysis = analyse(families.kite())
    assert from_data(SectorAnalysis, to_data(analysis)) == analysis
