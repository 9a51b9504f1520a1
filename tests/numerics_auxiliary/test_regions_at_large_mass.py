"""Regions of large auxiliary mass: which there are, their vacuum integrals, and what contradicts them."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from pathlib import Path

import flint
import pytest

from ibpred.balls.context import precision
from ibpred.boundary.behaviour.gamma import gamma_form
from ibpred.errors import BoundaryError, PointError, UnfinishedError
from ibpred.exact.codec import from_data, to_data
from ibpred.exact.primes import first_primes
from ibpred.numerics.auxiliary.build import auxiliary_plan
from ibpred.numerics.auxiliary.families import at_point, with_mass
from ibpred.numerics.auxiliary.plan import AuxiliaryPlan
from ibpred.numerics.auxiliary.regions import regions, vacuum
from ibpred.numerics.auxiliary.solve import gamma_value, sampled
from ibpred.run.storage.files import read_family_file

FAMILIES = Path(__file__).parents[2] / "families"
PRIMES = first_primes(20)


def family(name: str, **point: int | Fraction) -> object:
    read = read_family_file(FAMILIES / f"{name}.toml")
    return at_point(read, {key: Fraction(value) for key, value in point.items()})


def test_regions_of_a_bubble_and_of_a_kite() -> None:
    assert [r.loops for r in regions(family("bubble", s=-1), 0)] == [0, 1]
    kite = regions(family("kite", s=-1), 2)
    # lines k1, k1-p | k2 (heavy) ...: no hard loop; one hard loop leaves a flat of soft lines; all hard
    assert sorted({r.loops for r in kite}) == [0, 1, 2]
    for region in kite:
        assert sorted(region.hard + region.soft) == [0, 1, 2, 3, 4]
        assert 2 in region.hard
        if region.loops == 1:
            assert region.soft_family is not None
            assert len(region.soft_family.loops) == 1
            assert all(any(q) for q in region.hard_momenta)


def test_soft_lines_form_a_flat() -> None:
    box = family("planar-double-box", s=-1, t=-2)
    found = [r for r in regions(box, 0) if r.loops == 1]
    # the heavy line k1 lies in the left loop: either k2 stays soft, or k1 - k2 does
    assert {r.soft for r in found} == {(4, 5, 6), (3,)}


@pytest.mark.parametrize(("mass", "massless"), [(1, 0), (1, 1), (2, 1), (2, 3), (3, 2)])
def test_hard_loop_is_the_tadpole_with_a_massless_power(mass: int, massless: int) -> None:
    # int d^dk/(i pi^(d/2)) (1-k^2)^-a (-k^2)^-b = Gamma(a+b-d/2) Gamma(d/2-b)/(Gamma(a) Gamma(d/2))
    bubble = family("bubble", s=-1)
    region = next(r for r in regions(bubble, 0) if r.loops == 1)
    eps = Fraction(1, 7)
    with precision(200):
        total = flint.acb(0)
        for part in vacuum(bubble, 0, region, (mass, massless)):
            form = gamma_form(part.family, part.powers)
            assert form is not None
            total = total + gamma_value(form, eps, 200) * part.factor
        half = flint.acb(2) - flint.acb(1) / 7
        expected = (mass + massless - half).gamma() * (half - massless).gamma()
        expected = expected / (flint.acb(mass).gamma() * half.gamma())
        expected = expected * (flint.arb.const_euler() / 7).exp()
        assert (total - expected).contains(0)
        assert (total - expected).abs_upper() < flint.arb(10) ** -50


def test_mass_is_added_to_one_line_only() -> None:
    box = family("massless-box", s=-1, t=-2)
    heavy = with_mass(box, 2)
    eta = heavy.kinematic_ring.variable("eta")
    for i, (before, after) in enumerate(zip(box.lines, heavy.lines, strict=True)):
        extra = eta if i == 2 else eta * 0
        assert after.constant == before.constant.to_ring(heavy.kinematic_ring) + extra


def test_points_are_checked() -> None:
    box = read_family_file(FAMILIES / "massless-box.toml")
    with pytest.raises(PointError, match="lacks a value for t"):
        at_point(box, {"s": Fraction(-1)})
    with pytest.raises(PointError, match="did you mean"):
        at_point(box, {"s": Fraction(-1), "tt": Fraction(1)})


def test_quadratic_expressions_are_refused() -> None:
    box = read_family_file(FAMILIES / "massless-box.toml")
    twice = replace(box.lines[0], momentum=None, text="-2*k^2")
    changed = replace(box, lines=(twice, *box.lines[1:]))
    point = {"s": Fraction(-1), "t": Fraction(-2)}
    with pytest.raises(UnfinishedError, match="given by an expression with products of loop momenta"):
        auxiliary_plan(changed, point, [(1, 1, 1, 1)], PRIMES, 1)


@pytest.fixture(scope="module")
def box_plan() -> AuxiliaryPlan:
    box = read_family_file(FAMILIES / "massless-box.toml")
    return auxiliary_plan(box, {"s": Fraction(-1), "t": Fraction(-1, 3)}, [(1, 1, 1, 1)], PRIMES, 1)


def test_plan_survives_the_store(box_plan: AuxiliaryPlan) -> None:
    again = from_data(AuxiliaryPlan, to_data(box_plan))
    assert again == box_plan
    assert sampled(again, Fraction(1, 50), 200)[0].overlaps(sampled(box_plan, Fraction(1, 50), 200)[0])


def test_wrong_differential_equation_contradicts_the_regions(box_plan: AuxiliaryPlan) -> None:
    flow = next(node.flow for node in box_plan.nodes if node.flow is not None)
    refused = 0
    for place, (row, column, value) in enumerate(flow.matrix):
        entries = list(flow.matrix)
        entries[place] = (row, column, value * Fraction(3, 2))
        wrong = replace(flow, matrix=tuple(entries))
        plan = replace(
            box_plan, nodes=tuple(replace(n, flow=wrong) if n.flow is not None else n for n in box_plan.nodes)
        )
        try:
            sampled(plan, Fraction(1, 50), 200)
        except (BoundaryError, UnfinishedError):
            refused += 1
    # redundant conditions catch most wrong entries (not all of them: those that only normalise)
    assert refused >= len(flow.matrix) // 2
