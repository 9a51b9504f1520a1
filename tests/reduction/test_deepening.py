"""Seeds grow without a last step; what cannot be reduced is noticed and named."""

from __future__ import annotations

from itertools import islice, pairwise
from pathlib import Path

import pytest

from ibpred.errors import UnfinishedError
from ibpred.exact.primes import first_primes
from ibpred.family.reading import read_family
from ibpred.identities.rows import family_identities, write_rows
from ibpred.progress import SILENT
from ibpred.reduction import deepening, masters
from ibpred.reduction.deepening import deepen
from ibpred.reduction.masters import find_masters, random_point
from ibpred.reduction.seeds import depths, expected_entries, full_plans, growths
from ibpred.reduction.table import reduce_integrals
from ibpred.reduction.wanted import single
from ibpred.sectors.analysis import analyse

PRIMES = first_primes(20)
FILE = Path(__file__).parents[2] / "families" / "massless-box.toml"
FAMILY = read_family(FILE.read_text(encoding="utf-8"), FILE.name, FILE.stem)
ANALYSIS = analyse(FAMILY)
MEMBERS = family_identities([FAMILY], [ANALYSIS])
MASTERS = [(0, powers) for powers in find_masters(FAMILY, ANALYSIS, PRIMES[0], 1).masters]


def run(powers, known):
    point = random_point(FAMILY, PRIMES[0], 5)
    return deepen(MEMBERS, [single(FAMILY, powers)], [0], known, point, PRIMES[0], SILENT)


def test_steps_never_shrink_and_never_end() -> None:
    for before, after in pairwise(islice(growths(), 20)):
        assert after.dots >= before.dots
        assert after.rank >= before.rank
        assert after.rank_below >= before.rank_below
    for first, second in pairwise(islice(depths(), 20)):
        assert second.cover(first) == second != first


def test_many_dots_are_reached() -> None:
    """Seeds start at the dots of what is wanted, seven here."""
    assert run((5, 2, 2, 2), MASTERS).found.values.any()


def test_missing_master_is_named() -> None:
    with pytest.raises(UnfinishedError, match=r"massless-box\(2,1,1,1\) did not .*massless-box\(1,1,1,1\)"):
        run((2, 1, 1, 1), MASTERS[:2])


def test_limit_is_named(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(deepening, "LARGEST_SYSTEM", 10)
    with pytest.raises(UnfinishedError, match="more than 10 entries"):
        run((2, 1, 1, 1), MASTERS[:2])
    monkeypatch.setattr(masters, "LARGEST_SYSTEM", 10)
    with pytest.raises(UnfinishedError, match=r"did not settle .*more than 10 entries"):
        find_masters(FAMILY, ANALYSIS, PRIMES[0], 1)


def test_expected_entries_are_about_right() -> None:
    for depth in islice(depths(), 3):
        plans = full_plans(MEMBERS, [0], depth)
        entries = len(write_rows(MEMBERS, plans).column)
        assert entries / 2 < expected_entries(MEMBERS, plans) < 2 * entries


def test_dots_beyond_any_list() -> None:
    table = reduce_integrals(FAMILY, ANALYSIS, [(6, 1, 1, 1)], [powers for _, powers in MASTERS], PRIMES, 3)
    assert [master for master, _ in table.reductions[6, 1, 1, 1]][-1] == 2
