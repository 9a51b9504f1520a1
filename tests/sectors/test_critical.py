"""Numbers of critical points that are known in closed form."""

from __future__ import annotations

from functools import cache
from pathlib import Path

import pytest

from ibpred.exact.primes import first_primes
from ibpred.family.reading import read_family
from ibpred.sectors.analysis import analyse
from ibpred.sectors.critical import ON_EDGE, critical_points

FAMILIES = Path(__file__).parents[2] / "families"
(PRIME,) = first_primes(1)


@cache
def shipped(name: str):
    return read_family((FAMILIES / f"{name}.toml").read_text(encoding="utf-8"), f"{name}.toml", name)


def count(name: str, *lines: int):
    found = critical_points(shipped(name), sum(1 << i for i in lines), PRIME, 1)
    return found.count


def test_one_loop_sectors_have_at_most_one_master() -> None:
    """Massless box: bubbles and box, none in the triangles with one leg off shell."""
    family = shipped("massless-box")
    counts = {s: critical_points(family, s, PRIME, 1).count for s in analyse(family).representatives}
    assert counts == {0b0101: 1, 0b1010: 1, 0b0111: 0, 0b1011: 0, 0b1111: 1}


def test_bananas_with_distinct_masses() -> None:
    """2^(L+1) - L - 2 in the top sector of the L-loop banana: Bönisch et al., arXiv:2008.10574 (from memory).

    (The 2^(L+1) - 1 masters in all, Kalmykov, Kniehl, arXiv:1612.06637, less L + 1 tadpoles; from memory.)
    """
    assert count("sunrise-distinct-masses", 0, 1, 2) == 4
    assert count("banana-three-loop-distinct-masses", 0, 1, 2, 3) == 11


def test_equal_masses_do_not_change_the_count() -> None:
    """Masters fewer than points are the symmetries' doing."""
    assert count("sunrise-equal-masses", 0, 1, 2) == 4
    assert count("banana-three-loop", 0, 1, 2, 3) == 11


def test_double_boxes() -> None:
    """Two masters in the top sectors: Smirnov, Veretin, hep-ph/9907385; Tausk, hep-ph/9909506 (memory)."""
    assert count("planar-double-box", *range(7)) == 2
    assert count("crossed-double-box", *range(7)) == 2


def test_seed_and_prime_do_not_matter() -> None:
    family = shipped("sunrise-two-masses")
    found = {
        critical_points(family, 0b111, prime, seed).count for prime in first_primes(3) for seed in (1, 2)
    }
    assert len(found) == 1


def test_what_is_not_decided_says_why() -> None:
    family = shipped("box-massive-loop")
    flat = critical_points(family, 0b0011, PRIME, 1)
    assert (flat.count, flat.note) == (None, "the critical points are not isolated")
    edge = critical_points(family, 0b0111, PRIME, 1)
    assert (edge.count, edge.note) == (1, ON_EDGE)


@pytest.mark.parametrize("name", ["banana-four-loop"])
def test_limit(name: str) -> None:
    found = critical_points(shipped(name), 0b11111, PRIME, 1)
    assert found.count is None
    assert found.note == "the system is too large"
