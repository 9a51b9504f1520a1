"""Where a solution holds stands in all that is written about it."""

from __future__ import annotations

from pathlib import Path

import pytest

from ibpred.report.export.latex_document import latex_document
from ibpred.report.export.material import conventions
from ibpred.report.export.solver import solver_parts
from ibpred.report.page.parts import solution_part
from ibpred.report.text import solution_text
from ibpred.run.folder.exports import folder_material

SOLUTIONS = Path(__file__).parents[2] / "solutions"


@pytest.fixture(scope="module")
def crossed():
    return folder_material(SOLUTIONS / "crossed-double-box")


def test_the_region_is_told(crossed):
    told = "s > 0, t < 0, 0 < x < 1"
    assert f"The solution holds for {told}." in conventions(crossed)
    assert f"region: {told}" in solution_text(crossed.solution)
    assert solution_part(crossed.family, crossed.solution).region == told
    assert "hold for $s > 0$, $t < 0$, $0 < x < 1$." in latex_document(crossed, [])


def test_a_euclidean_region_is_not():
    usual = folder_material(SOLUTIONS / "massless-box")
    assert "region" not in usual.solution
    assert solution_part(usual.family, usual.solution).region == ""


def test_no_direction_is_claimed_to_keep_i0(crossed):
    assert solver_parts(crossed).turns == (0, 0)
    assert solver_parts(folder_material(SOLUTIONS / "massless-box")).turns == (1, 1)
