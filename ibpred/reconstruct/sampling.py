"""The black box and how it is sampled: along lines, along geometric sequences, at points."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from ibpred.errors import ReconstructionError
from ibpred.reconstruct.modular import Residues, add, multiply
from ibpred.reconstruct.plan import Watch

_CELLS = 2**22  # values per call of the sampler
PATIENCE = 64  # lanes that may be drawn for each good one, before the prime is given up


class Sampler(Protocol):
    """A black box: many rational functions of the same variables, sampled together.

    Attributes
    ----------
    variables
        Names, in the order of a point's coordinates.
    entries
        Number of functions.
    """

    @property
    def variables(self) -> tuple[str, ...]: ...

    @property
    def entries(self) -> int: ...

    def __call__(self, points: Residues, prime: int) -> tuple[Residues, NDArray[np.bool_]]:
        """Values (entries, B) at points (variables, B), and which of the B lanes are good."""
        ...


class UnluckyPrimeError(ReconstructionError):
    """Modulo this prime the black box yields (almost) no good samples."""

    def __init__(self, prime: int, drawn: int, good: int) -> None:
        self.prime = prime
        super().__init__(
            f"of {drawn} samples modulo {prime} only {good} were usable; the black box is singular there"
        )


class InconsistentError(ReconstructionError):
    """Samples contradict the degrees or factors found modulo `prime`."""

    def __init__(self, prime: int, problem: str) -> None:
        self.prime = prime
        super().__init__(problem)


@dataclass(frozen=True)
class Line:
    """The line ``base + t * direction`` modulo a prime, with samples on it.

    Attributes
    ----------
    base, direction
        (variables,).
    nodes
        (K,): the values of t.
    values
        (rows, K).
    """

    prime: int
    base: Residues
    direction: Residues
    nodes: Residues
    values: Residues

    def points(self, nodes: Residues) -> Residues:
        """Points (variables, B) of the line."""
        along = multiply(self.direction[:, None], nodes[None, :], self.prime)
        return add(self.base[:, None], along, self.prime)


class Draws:
    """Counts the samples of one reconstruction and redraws bad lanes.

    Parameters
    ----------
    sampler
        The black box.
    seed
        All random points follow from it.
    watch
        Told about every batch.

    Attributes
    ----------
    samples
        Points drawn so far.
    expected
        Points expected in all, where that is known.
    """

    def __init__(self, sampler: Sampler, seed: int, watch: Watch) -> None:
        self.sampler = sampler
        self.seed = seed
        self.random = np.random.default_rng(seed)
        self.watch = watch
        self.samples = 0
        self.expected: int | None = None
        self.doing = ""

    def begin(self, *part: int) -> None:
        """Start a part whose random points depend on the seed and its name only.

        So parts that an earlier run has finished can be left out.
        """
        self.random = np.random.default_rng([self.seed, *part])

    @property
    def variables(self) -> int:
        return len(self.sampler.variables)

    def residues(self, count: int, prime: int) -> Residues:
        """Random nonzero residues."""
        return self.random.integers(1, prime, size=count, dtype=np.uint64)

    def at(
        self, points: Residues, prime: int, rows: NDArray[np.int64] | None = None
    ) -> tuple[Residues, NDArray[np.bool_]]:
        """Values (rows, B) at the points and which lanes are good.

        Raises
        ------
        ReconstructionError
            If the sampler's answer has the wrong shape.
        """
        batch = max(32, _CELLS // max(1, self.sampler.entries))
        count = points.shape[1]
        size = self.sampler.entries if rows is None else len(rows)
        values = np.zeros((size, count), dtype=np.uint64)
        good = np.zeros(count, dtype=np.bool_)
        for start in range(0, count, batch):
            lanes = slice(start, min(count, start + batch))
            found, usable = self.sampler(np.ascontiguousarray(points[:, lanes]), prime)
            expected = (self.sampler.entries, lanes.stop - start)
            if found.shape != expected or usable.shape != expected[1:]:
                raise ReconstructionError(
                    f"the sampler returned values of shape {found.shape} and flags of shape "
                    f"{usable.shape} where {expected} and {expected[1:]} were due"
                )
            values[:, lanes] = found if rows is None else found[rows]
            good[lanes] = usable
            self.samples += lanes.stop - start
            if self.expected is not None:
                self.expected = max(self.expected, self.samples)
            self.watch.samples(self.doing, self.samples, self.expected)
        return values, good

    def line(self, base: Residues, direction: Residues, prime: int, rows: int) -> Line:
        """A line without samples yet."""
        empty = np.zeros(0, dtype=np.uint64)
        return Line(prime, base, direction, empty, np.zeros((rows, 0), dtype=np.uint64))

    def along(self, line: Line, count: int, rows: NDArray[np.int64] | None = None) -> Line:
        """The line with at least `count` good samples.

        Raises
        ------
        UnluckyPrimeError
            If bad lanes prevail.
        """
        prime = line.prime
        drawn = good_lanes = 0
        nodes, values = line.nodes, line.values
        while len(nodes) < count:
            fresh = self.residues(count - len(nodes), prime)
            fresh = np.setdiff1d(fresh, nodes)
            found, good = self.at(line.points(fresh), prime, rows)
            drawn += len(fresh)
            good_lanes += int(good.sum())
            nodes = np.concatenate([nodes, fresh[good]])
            values = np.concatenate([values, found[:, good]], axis=1)
            if drawn > PATIENCE * (good_lanes + 4):
                raise UnluckyPrimeError(prime, drawn, good_lanes)
        return Line(prime, line.base, line.direction, nodes, values)

    def scattered(
        self, count: int, prime: int, rows: NDArray[np.int64] | None = None
    ) -> tuple[Residues, Residues]:
        """`count` independent random points (variables, count) and the values there.

        Raises
        ------
        UnluckyPrimeError
            If bad lanes prevail.
        """
        points = np.zeros((self.variables, 0), dtype=np.uint64)
        size = self.sampler.entries if rows is None else len(rows)
        values = np.zeros((size, 0), dtype=np.uint64)
        drawn = 0
        while points.shape[1] < count:
            need = count - points.shape[1]
            fresh = self.residues(self.variables * need, prime).reshape(self.variables, need)
            found, good = self.at(fresh, prime, rows)
            drawn += need
            points = np.concatenate([points, fresh[:, good]], axis=1)
            values = np.concatenate([values, found[:, good]], axis=1)
            if drawn > PATIENCE * (points.shape[1] + 4):
                raise UnluckyPrimeError(prime, drawn, points.shape[1])
        return points, values
