"""Masters by identities against critical points of U + F (Lee, Pomeransky, arXiv:1308.6676)."""

from __future__ import annotations

from pathlib import Path

import pytest

from ibpred.exact.primes import first_primes
from ibpred.family.reading import read_family
from ibpred.reduction.independent import compare_counts
from ibpred.reduction.masters import find_masters
from ibpred.sectors.analysis import analyse

FAMILIES = Path(__file__).parents[2] / "families"
(PRIME,) = first_primes(1)


def counts_of(name: str):
    family = read_family((FAMILIES / f"{name}.toml").read_text(encoding="utf-8"), f"{name}.toml", name)
    analysis = analyse(family)
    masters = find_masters(family, analysis, PRIME, 1).masters
    return compare_counts(family, analysis, masters, PRIME, 1)


@pytest.mark.parametrize(
    "name",
    [
        "massless-box",
        "box-four-legs",
        "pentagon",
        "kite",
        "planar-vertex",
        "crossed-vertex",
        "sunrise-distinct-masses",
        "planar-double-box",
        "crossed-double-box",
        "propagator-non-planar",
        "static-quark-cusp-two-loop",
        pytest.param("pentabox", marks=pytest.mark.slow),
    ],
)
def test_every_sector_agrees(name: str) -> None:
    for count in counts_of(name):
        assert count.points == count.masters, count
        assert count.note == ""


@pytest.mark.parametrize(
    "name", ["sunrise-equal-masses", "sunrise-two-masses", "kite-massive", "banana-three-loop"]
)
def test_symmetries_explain_what_is_missing(name: str) -> None:
    differing = [count for count in counts_of(name) if not count.agrees]
    assert differing
    for count in differing:
        assert count.points > count.masters
        assert "symmetries of the sector" in count.note
