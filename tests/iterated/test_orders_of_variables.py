"""Solutions at two corners: each derived from its own conditions, turned into each other as functions."""

from __future__ import annotations

from pathlib import Path

import pytest

from ibpred.errors import InputError
from ibpred.exact.rational import Rational
from ibpred.iterated.constants.constants import ONE, ZERO, Constant
from ibpred.iterated.polylogs.fibration import fibration_basis
from ibpred.iterated.solution import Function, Solution
from ibpred.iterated.words import shuffle
from ibpred.progress import Silent
from ibpred.run.chain.chain import Chain
from ibpred.run.constants.solved import solution
from ibpred.run.storage.files import read_family_file
from ibpred.run.storage.store import Store

FAMILIES = Path(__file__).parents[2] / "families"

Words = dict[tuple[tuple[Rational, ...], ...], Constant]


def words_of(
    function: Function, solution: Solution
) -> list[tuple[tuple[tuple[Rational, ...], ...], Constant]]:
    """Words with their letters in full."""
    roots = [level.roots() for level in solution.levels]
    return [
        (tuple(tuple(roots[j][a] for a in word) for j, word in enumerate(key)), constant)
        for key, constant in function
    ]


def times(left: Words, right: Words) -> Words:
    total: Words = {}
    for (a, b), x in left.items():
        for (c, d), y in right.items():
            for u, m in shuffle(a, c).items():
                for v, n in shuffle(b, d).items():
                    total[u, v] = total.get((u, v), ZERO) + x * y * (m * n)
    return total


@pytest.mark.parametrize("side", [1, -1])
@pytest.mark.parametrize(
    "name",
    [
        "box-one-leg",
        pytest.param("triangle-three-legs", marks=pytest.mark.slow),
        pytest.param("box-massive-fermion", marks=pytest.mark.slow),
    ],
)
def test_two_corners_agree(name: str, side: int, tmp_path: Path) -> None:
    """Exactly, constants included; what the words pick up at letters on their paths cancels."""
    with Store(tmp_path) as store:
        chain = Chain(read_family_file(FAMILIES / f"{name}.toml"), store, Silent(), 1)
        first = solution(chain, 4)
        before = tuple(level.variable for level in first.levels)
        after = before[::-1]
        second = solution(chain, 4, after)
    assert tuple(level.variable for level in second.levels) == after
    field = first.levels[0].letters[0].ring
    known: dict[object, Words] = {}
    for functions, others in zip(first.orders, second.orders, strict=True):
        for function, other in zip(functions, others, strict=True):
            total: Words = {}
            for key, constant in words_of(function, first):
                term: Words = {((), ()): constant}
                for name_, word in zip(before, key, strict=True):
                    if (name_, word) not in known:
                        basis = fibration_basis(word, field.variable(name_), after, side)
                        known[name_, word] = dict(basis.terms)
                    term = times(term, known[name_, word])
                for k, value in term.items():
                    total[k] = total.get(k, ZERO) + value
            expected = {k: v * ONE for k, v in words_of(other, second) if v}
            assert {k: v for k, v in total.items() if v} == expected


def test_orders_that_do_not_fit(tmp_path: Path) -> None:
    with Store(tmp_path / "a") as store:
        chain = Chain(read_family_file(FAMILIES / "box-one-leg.toml"), store, Silent(), 1)
        with pytest.raises(InputError, match="does not name the ratios x, y"):
            solution(chain, 0, ("x",))
    with Store(tmp_path / "b") as store:
        chain = Chain(read_family_file(FAMILIES / "bubble.toml"), store, Silent(), 1)
        with pytest.raises(InputError, match="no ratio"):
            solution(chain, 0, ("x",))
