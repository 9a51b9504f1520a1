from itertools import permutations

from hypothesis import given, settings
from hypothesis import strategies as st

from ibpred.exact.labelling import (
    automorphism_generators,
    canonical_form,
    compose,
    group_elements,
    inverse,
    isomorphism,
)


def renamed(terms, perm):
    """Variable i becomes perm[i]."""
    back = inverse(perm)
    return [(tuple(e[back[j]] for j in range(len(e))), text) for e, text in terms]


@st.composite
def polynomials(draw, most=5):
    size = draw(st.integers(1, most))
    exponents = st.tuples(*[st.integers(0, 3)] * size)
    terms = draw(
        st.lists(st.tuples(exponents, st.sampled_from(["U 1", "F -s", "F m2"])), unique=True, max_size=8)
    )
    colours = draw(st.lists(st.sampled_from(["", "cut"]), min_size=size, max_size=size))
    return terms, colours


@given(polynomials(), st.randoms())
def test_form_does_not_depend_on_the_names(polynomial, random):
    terms, colours = polynomial
    perm = list(range(len(colours)))
    random.shuffle(perm)
    others = renamed(terms, perm)
    random.shuffle(others)
    new_colours = [colours[i] for i in inverse(perm)]
    a, b = canonical_form(terms, colours), canonical_form(others, new_colours)
    assert a.key == b.key
    found = isomorphism(a, b)
    assert set(renamed(terms, found)) == set(others)
    assert [new_colours[found[i]] for i in range(len(perm))] == colours


@given(polynomials(most=4), polynomials(most=4))
@settings(max_examples=60)
def test_equal_forms_if_and_only_if_some_renaming_works(first, second):
    (terms, colours), (others, other_colours) = first, second
    works = len(colours) == len(other_colours) and any(
        set(renamed(terms, perm)) == set(others)
        and all(other_colours[perm[i]] == c for i, c in enumerate(colours))
        for perm in permutations(range(len(colours)))
    )
    assert (canonical_form(terms, colours).key == canonical_form(others, other_colours).key) == works


@given(polynomials())
@settings(max_examples=60)
def test_symmetries_are_all_renamings_that_keep_the_polynomial(polynomial):
    terms, colours = polynomial
    size = len(colours)
    expected = {
        perm
        for perm in permutations(range(size))
        if set(renamed(terms, perm)) == set(terms)
        and all(colours[perm[i]] == c for i, c in enumerate(colours))
    }
    found = list(group_elements(automorphism_generators(terms, colours), size))
    assert found[0] == tuple(range(size))
    assert len(found) == len(set(found))
    assert set(found) == expected


def test_composition_and_inverse():
    a, b = (1, 2, 0), (0, 2, 1)
    assert compose(a, b) == (2, 1, 0)
    assert compose(a, inverse(a)) == (0, 1, 2)


def test_two_four_cycles_differ_from_an_eight_cycle():
    """Same degrees everywhere, so only a true isomorphism test tells them apart."""

    def cycle(members):
        pairs = zip(members, [*members[1:], members[0]], strict=True)
        return [(tuple(int(i in pair) for i in range(8)), "F 1") for pair in pairs]

    two = canonical_form(cycle([0, 1, 2, 3]) + cycle([4, 5, 6, 7]), [""] * 8)
    one = canonical_form(cycle(list(range(8))), [""] * 8)
    assert two.key != one.key
    assert len(list(group_elements(automorphism_generators(cycle(list(range(8))), [""] * 8), 8))) == 16
