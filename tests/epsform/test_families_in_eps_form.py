"""Epsilon-forms of the differential equations that the shipped families have."""

from __future__ import annotations

from pathlib import Path

import pytest

from ibpred.diffeq.derive import differential_system
from ibpred.diffeq.ratios import dimensionless, ratio_coordinates
from ibpred.epsform.exponents import exponents
from ibpred.epsform.factorise import factorise, root_cover
from ibpred.epsform.form import Connection, EpsilonForm, Obstructed
from ibpred.epsform.verify import verify
from ibpred.exact.primes import first_primes
from ibpred.family.reading import read_family
from ibpred.family.signs import euclidean_signs
from ibpred.reduction.masters import find_masters
from ibpred.sectors.analysis import analyse

pytestmark = pytest.mark.slow

PRIMES = first_primes(20)
FAMILIES = Path(__file__).parents[2] / "families"


def connection_of(name: str) -> Connection:
    path = FAMILIES / f"{name}.toml"
    family = read_family(path.read_text(encoding="utf-8"), path.name, name)
    analysis = analyse(family)
    masters = find_masters(family, analysis, PRIMES[0], 1).masters
    system = differential_system(family, analysis, masters, PRIMES, 1).system
    signs = euclidean_signs(family) or {i.name: 1 for i in family.invariants}
    whole = dimensionless(system, ratio_coordinates(system, signs))
    return Connection(whole.ratios, whole.ring, whole.matrices, whole.blocks, tuple(map(str, masters)))


def solved(connection: Connection) -> EpsilonForm:
    form = factorise(connection, PRIMES, seed=1)
    assert isinstance(form, EpsilonForm), form.obstructions
    assert verify(connection, form)
    return form


def test_planar_double_box() -> None:
    """Letters x and 1 + x (Henn, arXiv:1304.1806; from memory); exponents of the eight functions."""
    form = solved(connection_of("planar-double-box"))
    assert [str(letter) for letter in form.letters] == ["x", "x+1"]
    table = dict(exponents(form))
    assert table["x = 0"] == ("-2", "-2", "-2", "-2", "0", "0", "0", "1")
    assert table["x = -1"] == ("0", "0", "0", "0", "0", "1", "1", "2")


def test_crossed_double_box() -> None:
    """Twelve masters, letters x and 1 + x (functions: Tausk, hep-ph/9909506; from memory)."""
    form = solved(connection_of("crossed-double-box"))
    assert [str(letter) for letter in form.letters] == ["x", "x+1"]


def test_double_box_with_one_leg_in_two_ratios() -> None:
    """Eighteen masters, coupled sectors; alphabet of Gehrmann, Remiddi, hep-ph/0008287 (from memory)."""
    form = solved(connection_of("planar-double-box-one-leg"))
    found = {str(letter) for letter in form.letters}
    assert found == {"x", "x+1", "x-y", "x-y+1", "y", "y-1"}


def test_equal_mass_sunrise_is_elliptic() -> None:
    found = factorise(connection_of("sunrise-equal-masses"), PRIMES, seed=1)
    assert isinstance(found, Obstructed)
    assert [o.rows for o in found.obstructions] == [(1, 2)]
    assert "O(1) + O(-1)" in found.obstructions[0].reason
    assert found.rows == (0,)


def test_massive_kite_on_the_double_cover() -> None:
    cover = root_cover(connection_of("kite-massive"), PRIMES, seed=1)
    assert cover is not None
    form = solved(cover.connection)
    assert {str(letter) for letter in form.letters} == {"w", "w-1", "w+1"}
