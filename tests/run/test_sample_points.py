"""The points at which a run evaluates: the second one lies beyond every threshold."""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path

import pytest

from ibpred.diffeq.derive import singular_locus
from ibpred.exact.grammar import parse_number, parse_rational
from ibpred.exact.rational import ring
from ibpred.report.export.material import system_of
from ibpred.run.folder.exports import folder_material
from ibpred.run.values.points import free_invariant, sample_points, zeros_along

ROOT = Path(__file__).parents[2]
FOLDERS = sorted(path for path in (ROOT / "solutions").iterdir() if path.is_dir())


def test_zeros_along_a_line() -> None:
    field = ring(("d", "s", "t", "m2"))
    letter = parse_rational("(s-4*m2)*(s^2-3*t^2)*(s^2+t^2)", field)
    found = zeros_along(letter, {"s": Fraction(0), "t": Fraction(1), "m2": Fraction(1, 2)}, "s")
    assert sorted(found) == pytest.approx([-(3**0.5), 3**0.5, 2])
    assert Fraction(2) in found


@pytest.mark.parametrize("folder", FOLDERS, ids=lambda path: path.name)
def test_second_point_is_beyond_all_thresholds(folder: Path) -> None:
    material = folder_material(folder)
    family = material.family
    free = free_invariant(family)
    if material.signs is None or free is None or free == family.unit:
        return
    first, second = ({n: parse_number(v) for n, v in t["point"].items()} for t in material.tables)
    assert second[free] * material.signs[free] < 0 < first[free] * material.signs[free]
    locus = singular_locus(system_of(material).matrices)
    for letter in locus:
        if "d" not in letter.variables():
            assert all(abs(zero) < abs(second[free]) for zero in zeros_along(letter, second, free))


def test_two_points_of_a_region_without_euclidean_one() -> None:
    """In s = 1, t = -x the points keep to one side of the singularities x = 0 and x = 1."""
    folder = next(folder for folder in FOLDERS if folder.name == "crossed-double-box")
    material = folder_material(folder)
    assert material.signs is None
    locus = [x for x in singular_locus(system_of(material).matrices) if "d" not in x.variables()]
    first, second = sample_points(material.family, {"s": 1, "t": -1}, False, locus)
    assert first == {"s": 1, "t": Fraction(-1, 3)}
    assert second == {"s": 1, "t": Fraction(-2, 3)}
