"""Probing a black box along a line: degrees and univariate fractions of all entries at once."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ibpred.errors import ReconstructionError
from ibpred.reconstruct.modular import Residues
from ibpred.reconstruct.sampling import Draws, Line
from ibpred.reconstruct.univariate import SURPLUS, Fraction_, rational_functions

_FIRST_COUNT = 12
_TRIED_FIRST = 24


@dataclass(frozen=True)
class Probe:
    """All entries along one line.

    Attributes
    ----------
    line
        The line with its samples.
    label
        (rows,): entries of equal label agree on the whole line.
    functions
        For every label the coprime pair (N(t), D(t)), D monic.
    """

    line: Line
    label: NDArray[np.int64]
    functions: tuple[Fraction_, ...]

    def degrees(self) -> NDArray[np.int64]:
        """(rows, 2): degrees of numerator and denominator; -1 for the zero numerator."""
        table = np.array(
            [(n.degree() if not n.is_zero() else -1, d.degree()) for n, d in self.functions], dtype=np.int64
        ).reshape(-1, 2)
        return table[self.label]

    def fraction(self, row: int) -> Fraction_:
        """The pair (N(t), D(t)) of one row."""
        return self.functions[self.label[row]]


def equal_rows(values: Residues) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Number the distinct rows of an array in order of appearance.

    Returns
    -------
    label, first
        Label of each row; index of the first row of each label.
    """
    seen: dict[bytes, int] = {}
    label = np.empty(len(values), dtype=np.int64)
    first: list[int] = []
    for i, row in enumerate(np.ascontiguousarray(values)):
        key = row.tobytes()
        if key not in seen:
            seen[key] = len(seen)
            first.append(i)
        label[i] = seen[key]
    return label, np.array(first, dtype=np.int64)


def probe(
    draws: Draws,
    base: Residues,
    direction: Residues,
    prime: int,
    rows: NDArray[np.int64],
    degree_limit: int,
    hint: int = 0,
) -> Probe:
    """Sample along a line until every entry is a univariate rational function there.

    Parameters
    ----------
    base, direction
        (variables,), residues.
    rows
        Which entries of the sampler.
    degree_limit
        Largest ``deg N + deg D`` to look for.
    hint
        Number of samples to begin with, when known.

    Raises
    ------
    ReconstructionError
        If some entry is no rational function within the degree limit.
    """
    line = draws.line(base, direction, prime, len(rows))
    count = max(hint, _FIRST_COUNT)
    most = degree_limit + 2 + SURPLUS
    while True:
        line = draws.along(line, min(count, most), rows)
        label, first = equal_rows(line.values)
        solved: dict[int, Fraction_] = {}
        # a few entries tell whether samples suffice before all of them are tried
        order = draws.random.permutation(len(first))
        for part in (order[:_TRIED_FIRST], order[_TRIED_FIRST:]):
            images = rational_functions(line.nodes, line.values[first[part]], prime)
            solved.update({int(i): image for i, image in zip(part, images, strict=True) if image is not None})
            failed = [int(i) for i, image in zip(part, images, strict=True) if image is None]
            if failed:
                break
        else:
            return Probe(line, label, tuple(solved[i] for i in range(len(first))))
        if count >= most:
            raise ReconstructionError(
                f"entry {int(rows[first[failed[0]]])} is no rational function with deg N + deg D <= "
                f"{degree_limit} along a random line modulo {prime} ({len(line.nodes)} samples); "
                "either the black box is not rational in its variables or the degree limit must be raised"
            )
        count = count * 3 // 2
