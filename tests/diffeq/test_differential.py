"""Differential equations: exact checks, published forms, change to ratios."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from functools import cache
from pathlib import Path

import numpy as np
import pytest

from ibpred.diffeq.checks import check_integrability, check_scaling, check_system, sample_system
from ibpred.diffeq.derive import Derivation, differential_system
from ibpred.diffeq.jets import matrix_jets
from ibpred.diffeq.ratios import changed, dimensionless, ratio_coordinates, ratio_names
from ibpred.errors import InputError
from ibpred.exact.primes import first_primes
from ibpred.exact.rational import ring
from ibpred.family.definition import FamilyDefinition
from ibpred.family.reading import read_family
from ibpred.family.signs import euclidean_signs
from ibpred.reduction.masters import find_masters
from ibpred.sectors.analysis import analyse

FAMILIES = Path(__file__).parents[2] / "families"
PRIMES = first_primes(20)


@cache
def derived(name: str, preferred: tuple[tuple[int, ...], ...] = ()) -> tuple[FamilyDefinition, Derivation]:
    file = FAMILIES / f"{name}.toml"
    family = read_family(file.read_text(encoding="utf-8"), file.name, name)
    analysis = analyse(family)
    masters = find_masters(family, analysis, PRIMES[0], 1, preferred=preferred).masters
    return family, differential_system(family, analysis, masters, PRIMES, 7)


@pytest.mark.parametrize(
    "name",
    [
        "tadpole",
        "bubble-one-mass",
        "bubble-two-masses",
        "triangle-two-legs",
        "massless-box",
        "box-one-leg",
        "pentagon",
        "sunrise-equal-masses",
        "kite",
        "crossed-vertex",
        "heavy-quark-self-energy",
        "planar-double-box",
    ],
)
def test_scaling_and_integrability(name: str) -> None:
    family, found = derived(name)
    for result in check_system(found.system, family, PRIMES[-2:], 3):
        assert result.passed, result.detail


def test_checks_notice_a_wrong_entry() -> None:
    family, found = derived("massless-box")
    system = found.system
    row, column, value = system.matrices["t"][1]
    spoiled = (system.matrices["t"][0], (row, column, value * 2), *system.matrices["t"][2:])
    wrong = replace(system, matrices={**system.matrices, "t": spoiled})
    samples = sample_system(wrong, PRIMES[-2:], 3)
    assert not check_scaling(wrong, family, samples).passed
    assert "column" in check_scaling(wrong, family, samples).detail
    assert not check_integrability(wrong, samples).passed


def test_derivatives_at_points_are_those_of_the_functions() -> None:
    _, found = derived("planar-double-box")
    prime, system = PRIMES[-1], found.system
    point = (12345, 678910, 1112131415)
    jets = matrix_jets(system.matrices["t"], 8, np.array([[x] for x in point], np.uint64), prime)
    for row, column, value in system.matrices["t"]:
        assert jets.values[0, row, column] == value.modular(point, prime)
        for v, name in enumerate(system.ring.names):
            assert jets.derivatives[0, v, row, column] == value.derivative(name).modular(point, prime)


def test_singular_locus_of_the_double_box() -> None:
    _, found = derived("planar-double-box")
    assert {str(f) for f in found.system.singular_locus} == {"s", "t", "s+t"}


def test_massless_box_in_canonical_form() -> None:
    """f = (eps x I_t, eps I_s, eps^2 x I_box) with dotted bubbles at s = -1, x = t/s.

    Matrices as in Henn, arXiv:1412.2296, section 2 (from memory; rescaled to this basis they follow
    from one-loop bubbles and the triangle of residues, and the eps-form itself is the check).
    """
    family, found = derived("massless-box", ((2, 0, 1, 0), (0, 2, 0, 1)))
    signs = euclidean_signs(family)
    assert signs == {"s": -1, "t": -1}
    system = dimensionless(found.system, ratio_coordinates(found.system, signs))
    assert system.ratios == ("x",)
    assert system.definitions == ("t/s",)
    ring = system.ring
    x, eps = ring.variable("x"), ring.variable("eps")
    # rows: s bubble, t bubble, box
    scale = [eps, eps * x, eps**2 * x]
    a0 = [[0, 0, 0], [0, -1, 0], [0, -2, -1]]
    a1 = [[0, 0, 0], [0, 0, 0], [2, 2, 1]]
    for i in range(3):
        for j in range(3):
            entry = system.matrices["x"][i][j] * scale[i] / scale[j]
            if i == j:
                entry = entry + scale[i].derivative("x") / scale[i]
            assert entry == eps * (ring.constant(a0[i][j]) / x + ring.constant(a1[i][j]) / (x + 1))


def test_one_scale_families_know_their_dimension() -> None:
    # kite family at d = 4 - 2 eps: I ~ (-s)^(d - sum of powers)
    _, found = derived("kite")
    ring = found.system.ring
    d, s = ring.variable("d"), ring.variable("s")
    for row, column, value in found.system.matrices["s"]:
        assert row == column
        assert value == (d - sum(found.system.masters[row])) / s


def test_equal_mass_sunrise_is_singular_at_its_thresholds() -> None:
    # threshold 9 m^2, pseudothreshold m^2: Laporta, Remiddi, hep-ph/0406160
    _, found = derived("sunrise-equal-masses")
    assert {str(f) for f in found.system.singular_locus} == {"m2", "s", "s-9*m2", "s-m2"}


def test_massive_tadpole_closed_form() -> None:
    # Gamma(1 - d/2) (m^2)^(d/2 - 1)
    _, found = derived("tadpole")
    ((_, _, value),) = found.system.matrices["m2"]
    d, m2 = found.system.ring.variable("d"), found.system.ring.variable("m2")
    assert value == (d - 2) / (2 * m2)


def test_ratios_take_signs_and_dimensions_into_account() -> None:
    family, found = derived("bubble-two-masses")
    signs = euclidean_signs(family)
    assert signs == {"s": -1, "m2": 1}
    system = dimensionless(found.system, ratio_coordinates(found.system, signs))
    # at the point x = 3 the matrix is the chain rule's image of the original one
    unit = found.system.unit
    (other,) = (name for name in system.coordinates.values if name != unit)
    point = {"d": Fraction(17, 5), unit: Fraction(signs[unit]), other: Fraction(3 * signs[other])}
    eps = (found.system.dimension - Fraction(17, 5)) / 2
    dense = {(i, j): v for i, j, v in found.system.matrices[other]}
    for i in range(2):
        for j in range(2):
            ours = system.matrices["x"][i][j].substitute({"x": 3, "eps": eps}).to_fraction()
            theirs = dense[i, j].substitute(point).to_fraction() if (i, j) in dense else Fraction(0)
            assert ours == theirs * signs[other]
    with pytest.raises(InputError, match="sign of"):
        ratio_coordinates(found.system, {unit: 1})


def test_substitution_of_a_variable_is_the_chain_rule() -> None:
    family, found = derived("bubble-two-masses")
    first = ratio_coordinates(found.system, euclidean_signs(family))
    w = ring(("eps", "w")).variable("w")
    second = changed(first, ("w",), ((1 - w) ** 2 / w,), ("w",))
    assert second.definitions == ("-s/m2 = (w-1)^2/w",)
    old, new = dimensionless(found.system, first), dimensionless(found.system, second)
    slope = (w * w - 1) / w**2
    for i in range(2):
        for j in range(2):
            image = old.matrices["x"][i][j].substitute({"x": (1 - w) ** 2 / w})
            assert new.matrices["w"][i][j] == image * slope


def test_ratio_names_avoid_those_taken() -> None:
    assert ratio_names(4, ("d", "eps")) == ("x", "y", "z", "x4")
    assert ratio_names(2, ("x",)) == ("y", "z")


def test_blocks_are_sectors() -> None:
    family, found = derived("planar-double-box")
    signs = euclidean_signs(family)
    system = dimensionless(found.system, ratio_coordinates(found.system, signs))
    assert system.blocks == (1, 1, 1, 1, 1, 1, 2)
    start = 0
    for size in system.blocks:
        for row in range(start, start + size):
            assert not any(system.matrices["x"][row][start + size :])
        start += size
