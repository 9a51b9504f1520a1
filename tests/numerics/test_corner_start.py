"""Exact boundary values from the regions at a corner, against solved epsilon-forms and the equations."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from pathlib import Path

import pytest

from ibpred.balls.decimal import ball_of_decimal
from ibpred.boundary.behaviour.regions import parametric_family
from ibpred.errors import BoundaryError, UnfinishedError
from ibpred.exact.grammar import parse_rational
from ibpred.numerics.corner.classes import class_solutions
from ibpred.numerics.corner.field import FIELD, echelon, null_space, product
from ibpred.numerics.corner.start import corner_solution
from ibpred.numerics.corner.system import RaySystem
from ibpred.numerics.laurent.expanded import expanded_system
from ibpred.numerics.laurent.local_laurent import local_system
from ibpred.numerics.value import Route
from ibpred.progress import SILENT
from ibpred.run.chain.chain import Chain
from ibpred.run.storage.files import read_family_file
from ibpred.run.storage.store import Store
from ibpred.run.values.corner_start import corner_start, corner_values
from ibpred.run.values.evaluate import evaluate
from ibpred.run.values.rays import Ray

FAMILIES = Path(__file__).parents[2] / "families"
F = Fraction


def matrix(*rows):
    return [[parse_rational(text, FIELD) for text in row] for row in rows]


def chain_of(name, store):
    return Chain(read_family_file(FAMILIES / f"{name}.toml"), store, SILENT, 1)


def test_linear_algebra():
    given = matrix(["eps", "1", "0"], ["eps^2", "eps", "0"], ["1", "0", "1/(1-eps)"])
    rows, pivots = echelon(given, 3)
    assert pivots == (0, 1)
    vectors = null_space(given, 3)
    assert len(vectors[0]) == 1
    assert not any(value for row in product(given, vectors) for value in row)
    assert len(rows) == 3


def test_solutions_of_a_class():
    # g1' = (1 + 2 eps)/h g1, g2' = 2 eps/h g2 + g1/h: g1 = h^(1+2 eps), g2 = h^(1+2 eps) + c h^(2 eps)
    residue = matrix(["1+2*eps", "0"], ["1", "2*eps"])
    system = RaySystem((0, 0), (residue, matrix(["0", "0"], ["0", "0"])))
    found = class_solutions(system, F(0), F(2), 1)
    assert found.count == 2
    assert class_solutions(system, F(0), F(1), 1) is None
    # a source h^(2 eps) g1/h in g2' that meets its own exponent: a logarithm
    resonant = RaySystem((0, 0), (matrix(["2*eps", "0"], ["1", "2*eps"]), matrix(["0", "0"], ["0", "0"])))
    assert found.complete
    resonant_solutions = class_solutions(resonant, F(0), F(2), 0)
    assert (resonant_solutions.count, resonant_solutions.complete) == (1, False)


@pytest.mark.parametrize(
    "name",
    [
        "bubble-one-mass",
        "sunrise-one-mass",
        "triangle-two-legs",
        "triangle-massive-loop",
        pytest.param("planar-vertex-massive-loop", marks=pytest.mark.slow),
    ],
)
def test_against_solved_forms(name, tmp_path):
    with Store(tmp_path) as store:
        chain = chain_of(name, store)
        point, values = corner_values(chain, 1, 300)
        solved = evaluate(chain, point, (), 1, 30)
        for value, reference in zip(values, solved, strict=True):
            assert reference.route is Route.EPSILON_FORM
            for power in range(min(value), 2):
                if power in reference.epsilon:
                    assert value[power].overlaps(ball_of_decimal(reference.epsilon[power], 300))
                    assert float(value[power].rad()) < 1e-40
                else:
                    assert value[power].contains(0)


def test_logarithms_at_generic_eps_are_left_alone(tmp_path):
    # the collinear regions of the massless box at t = 0 need a further regulator
    with Store(tmp_path) as store, pytest.raises(UnfinishedError, match="logarithms at generic eps"):
        corner_start(chain_of("massless-box", store))


def test_redundant_conditions_expose_a_wrong_sign(tmp_path):
    with Store(tmp_path) as store:
        chain = chain_of("sunrise-equal-masses", store)
        start = corner_start(chain)
        assert start.solution.checks >= 10
        system = chain.derivation().system
        wrong = {name: tuple((i, j, -v) for i, j, v in entries) for name, entries in system.matrices.items()}
        ray = Ray({"s": F(-1), "m2": F(0)}, {"m2": F(1)})
        broken = replace(system, matrices=wrong)
        local = local_system(expanded_system(broken, 1), ray.place, ray.direction, "corner")
        with pytest.raises((BoundaryError, UnfinishedError)):
            corner_solution(broken, parametric_family(chain.definition, ray.images()), ray.images(), local)
