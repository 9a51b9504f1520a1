"""Alphabets of whole families, from the file to the epsilon-form; sources beside them, from memory."""

from __future__ import annotations

import pytest
from solving import FAMILIES

from ibpred.diffeq.ratios import ratio_coordinates
from ibpred.epsform.factorise import factorise
from ibpred.epsform.form import EpsilonForm, Obstructed
from ibpred.epsform.places import degree
from ibpred.epsform.verify import is_integrable, verify
from ibpred.progress import SILENT
from ibpred.report.json_tables import letter_text, odd_letter_text
from ibpred.run.chain.chain import Chain
from ibpred.run.storage.files import read_family_file
from ibpred.run.storage.store import Store


def outcome(name, folder):
    """The connection and its epsilon-form."""
    with Store(folder) as store:
        chain = Chain(read_family_file(FAMILIES / f"{name}.toml"), store, SILENT, 1)
        return chain.connection(), chain.epsilon_form()


def verified(name, folder) -> EpsilonForm:
    connection, form = outcome(name, folder)
    assert isinstance(form, EpsilonForm), form.obstructions
    assert verify(connection, form)
    assert is_integrable(form)
    return form


def letters(form):
    return {letter_text(letter) for letter in form.letters}


@pytest.mark.parametrize("name", ["bubble-two-masses", "vertex-massive-fermion", "triangle-massive-loop"])
def test_one_loop_with_a_threshold(name, tmp_path):
    """Letters w and 1 + w with s = -m^2 (1-w)^2/w (e.g. Bonciani, Mastrolia, Remiddi, hep-ph/0301170)."""
    form = verified(name, tmp_path)
    assert form.variables == ("w",)
    assert letters(form) == {"w", "1+w"}


@pytest.mark.parametrize("name", ["kite-massive", "planar-vertex-massive-loop"])
def test_two_loops_with_a_threshold(name, tmp_path):
    """Letters w, 1 + w, 1 - w (Bonciani, Mastrolia, Remiddi, hep-ph/0301170)."""
    assert letters(verified(name, tmp_path)) == {"w", "1+w", "-1+w"}


@pytest.mark.slow
def test_two_loop_vertex_of_a_massive_fermion(tmp_path):
    """Letters w, 1 + w, 1 - w (Bonciani, Mastrolia, Remiddi, hep-ph/0301170)."""
    assert letters(verified("planar-vertex-massive-fermion", tmp_path)) == {"w", "1+w", "-1+w"}


def test_box_with_one_leg(tmp_path):
    """x, y, 1 - y, x - y, 1 + x - y with x = t/s, y = p^2/s (Gehrmann, Remiddi, hep-ph/0008287)."""
    assert letters(verified("box-one-leg", tmp_path)) == {"x", "y", "-1+y", "-y+x", "1-y+x"}


def test_triangle_with_three_legs(tmp_path):
    """z, zb, 1 - z, 1 - zb, z - zb (Chavez, Duhr, arXiv:1209.2722)."""
    form = verified("triangle-three-legs", tmp_path)
    assert form.variables == ("z", "zb")
    assert letters(form) == {"z", "zb", "-1+z", "-1+zb", "-zb+z"}


def test_box_with_a_massive_fermion(tmp_path):
    """The one-loop part of the alphabet of Bhabha scattering (Henn, Smirnov, arXiv:1307.4083)."""
    form = verified("box-massive-fermion", tmp_path)
    a, b = form.variables
    found = {str(letter) for letter in form.letters}
    assert found == {a, f"{a}+1", f"{a}-1", b, f"{b}+1", f"{a}+{b}", f"{a}*{b}+1"}


def in_the_ratios(name, folder) -> EpsilonForm:
    """The epsilon-form with its square roots, not in variables in which these are rational."""
    with Store(folder) as store:
        chain = Chain(read_family_file(FAMILIES / f"{name}.toml"), store, SILENT, 1)
        system = chain.derivation().system
        connection = chain.connection_in(ratio_coordinates(system, chain.signs()))
        form = factorise(connection, chain.primes, 1)
    assert isinstance(form, EpsilonForm), form.obstructions
    assert verify(connection, form)
    assert is_integrable(form)
    return form


def test_box_with_a_massive_loop(tmp_path):
    """Three roots, u, v and uv + u + v (Caron-Huot, Henn, arXiv:1404.2922)."""
    form = in_the_ratios("box-massive-loop", tmp_path)
    assert letters(form) == {"4+x", "4+y", "y+x", "4*y+4*x+x*y"}
    assert [str(r) for r in form.radicands] == ["x", "y", "x+4", "y+4", "x*y+4*x+4*y"]
    assert len({letter.roots for letter in form.odd_letters}) == 5
    assert "(x-sqrt(x*(4+x)))/(x+sqrt(x*(4+x)))" in {odd_letter_text(o, form) for o in form.odd_letters}


def test_box_with_a_massive_loop_in_rational_variables(tmp_path):
    """With z = w w3: w, z, 1-w^2, 1-z^2, w-z, w+z, 1-wz, 1+wz and two more (Caron-Huot, Henn, 1404.2922)."""
    form = verified("box-massive-loop", tmp_path)
    assert not any(form.tags)
    w3, w = form.variables
    rational = {w3, f"{w3}+1", f"{w3}-1", w, f"{w}+1", f"{w3}*{w}+1", f"{w3}*{w}-1"}
    assert rational < {str(letter) for letter in form.letters}
    # linear in the smallest variable
    assert all(degree(letter.numerator, form.ring, w) <= 1 for letter in form.letters)


def test_box_with_two_adjacent_legs(tmp_path):
    """One root, that of the Källén function of s and the two legs (Henn, Melnikov, Smirnov, 1402.7078)."""
    form = in_the_ratios("box-two-adjacent-legs", tmp_path)
    (radicand,) = form.radicands
    y, z = (form.ring.variable(n) for n in ("y", "z"))
    assert radicand == 1 + y**2 + z**2 - 2 * y - 2 * z - 2 * y * z


def test_box_with_three_legs(tmp_path):
    """Two roots of Källén functions; some letters are (A - B root)/(A + B root) with B a letter too."""
    form = in_the_ratios("box-three-legs", tmp_path)
    assert len(form.radicands) == 2
    assert sum(not letter.polynomial.is_polynomial() for letter in form.odd_letters) == 2


@pytest.mark.parametrize("name", ["bubble-distinct-masses", "box-two-adjacent-legs"])
def test_roots_of_the_kallen_function_become_rational(name, tmp_path):
    assert not any(verified(name, tmp_path).tags)


@pytest.mark.slow
def test_double_box_of_bhabha_scattering(tmp_path):
    """23 functions; the root Q is one that no change of variables makes rational (Henn, Smirnov, 1307.4083).

    There: x, 1 +- x, y, 1 +- y, x + y, 1 + xy, x + y - 4xy + x^2 y + x y^2 and three letters with
    Q^2 = (x + y)(1 + xy)/(x + y - 4xy + x^2 y + x y^2). That Q stays irrational: Festi, van Straten,
    arXiv:1809.04970.
    """
    form = verified("planar-double-box-massive-fermion", tmp_path)
    x, y = form.variables
    last = f"{x}^2*{y}+{x}*{y}^2-4*{x}*{y}+{x}+{y}"
    expected = {x, f"{x}+1", f"{x}-1", y, f"{y}+1", f"{y}-1", f"{x}+{y}", f"{x}*{y}+1", last}
    assert {str(letter) for letter in form.letters} == expected
    assert {str(radicand) for radicand in form.radicands} == {f"{x}+{y}", f"{x}*{y}+1", last}
    assert [tag for tag in form.tags if tag] == [(0, 1, 2)]
    assert len(form.odd_letters) == 3


@pytest.mark.slow
def test_pentagon_with_one_leg(tmp_path):
    """Five scales, the root of the Gram determinant and that of the Källén function."""
    form = verified("pentagon-one-leg", tmp_path)
    assert len({tag for tag in form.tags if tag}) == 2


@pytest.mark.slow
def test_pentagon_with_a_massive_loop(tmp_path):
    """22 functions of five ratios: bubbles, triangles, boxes and the pentagon have a root each, in all 11.

    The radicands are those of s(s+4) for five channels, of five boxes, and the Gram determinant. Those of the
    boxes are positive for equal ratios, though not for hierarchical ones.
    """
    form = in_the_ratios("pentagon-massive-loop", tmp_path)
    assert len(form.tags) == 22
    assert len({tag for tag in form.tags if tag}) == 11
    assert len(form.radicands) == 16
    equal = dict.fromkeys(form.variables, 1)
    assert all(radicand.substitute(equal).to_fraction() > 0 for radicand in form.radicands)


def test_sunrise_and_banana_are_told(tmp_path):
    """An elliptic curve; a K3 surface with the operator of Vanhove, arXiv:1401.6438."""
    _, found = outcome("sunrise-equal-masses", tmp_path / "two")
    assert isinstance(found, Obstructed)
    (only,) = found.obstructions
    assert only.operator == "x*(x+1)*(x+9)*D^2 + (3*x^2+20*x+9)*D + (x+3)"
    assert only.geometry is not None
    assert "elliptic" in only.geometry
    assert only.period_form is not None
    _, found = outcome("banana-three-loop", tmp_path / "three")
    (only,) = found.obstructions
    assert only.operator == ("x^2*(x+16)*(x+4)*D^3 + 6*x*(x^2+15*x+32)*D^2 + (7*x^2+68*x+64)*D + (x+4)")
    assert "K3" in only.geometry
    assert only.period_form is not None


@pytest.mark.slow
def test_four_loop_banana(tmp_path):
    """A Calabi-Yau threefold; periods 1, 5, 45, 545, ... (Bönisch et al., arXiv:2008.10574)."""
    _, found = outcome("banana-four-loop", tmp_path)
    (only,) = found.obstructions
    assert "Calabi-Yau variety of dimension 3" in only.geometry
    form = only.period_form
    assert form.point == "x = infinity"
    assert [abs(c) for c in form.period[:5]] == [1, 5, 45, 545, 7885]
