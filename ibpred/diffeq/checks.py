"""Checks of a differential system: scaling and integrability.

Both say that some rational functions vanish. They are evaluated at random points modulo two primes: a
function that is not zero but vanishes there has a chance of its degree over the prime, each time
(Schwartz, J. ACM 27 (1980) 701; Zippel, EUROSAM 1979), so far below 10^-20 for all points together.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import combinations

import numpy as np

from ibpred.diffeq.jets import MatrixJets, curvature, matrix_jets, weighted_sum
from ibpred.diffeq.system import DifferentialSystem
from ibpred.errors import UnfinishedError
from ibpred.family.definition import FamilyDefinition
from ibpred.family.units import integral_dimension
from ibpred.reconstruct.modular import Residues, multiply

_POINTS = 2  # modulo each prime
_ATTEMPTS = 5


@dataclass(frozen=True)
class CheckResult:
    """Outcome of a check.

    Attributes
    ----------
    name
        What was checked.
    passed
        Whether it holds.
    detail
        A sentence: what holds, or the first entry that fails.
    """

    name: str
    passed: bool
    detail: str


@dataclass(frozen=True)
class SystemSamples:
    """The matrices of a system at random points modulo a prime.

    Attributes
    ----------
    prime
        The prime.
    points
        uint64 (variables of the ring, B).
    jets
        The matrix of each of the system's variables.
    """

    prime: int
    points: Residues
    jets: tuple[MatrixJets, ...]


def sample_system(system: DifferentialSystem, primes: Sequence[int], seed: int) -> tuple[SystemSamples, ...]:
    """The matrices and their derivatives at random points modulo two primes.

    Parameters
    ----------
    system
        The system.
    primes, seed
        At least two engine primes, better none that the system was made with; the seed of the points.

    Raises
    ------
    UnfinishedError
        If the points drawn keep hitting a pole.
    """
    generator = np.random.default_rng(seed)
    size, width = len(system.masters), len(system.ring.names)
    found = []
    for prime in primes[:2]:
        for _ in range(_ATTEMPTS):
            points = generator.integers(1, prime, size=(width, _POINTS), dtype=np.uint64)
            try:
                jets = tuple(
                    matrix_jets(system.matrices.get(v, ()), size, points, prime) for v in system.variables
                )
            except ZeroDivisionError:
                continue
            found.append(SystemSamples(prime, points, jets))
            break
        else:
            raise UnfinishedError(f"{system.family}: random points modulo {prime} keep hitting poles")
    return tuple(found)


def check_scaling(
    system: DifferentialSystem, family: FamilyDefinition, samples: Sequence[SystemSamples]
) -> CheckResult:
    """``sum_v dim_v v A_v`` is diagonal with the mass dimensions of the masters."""
    dimensions = [integral_dimension(family, powers) for powers in system.masters]
    places = [system.ring.index(name) for name in system.variables]
    for sample in samples:
        if not sample.jets:
            continue
        prime, points = sample.prime, sample.points
        sizes = np.array([n % prime for n in system.dimensions], dtype=np.uint64)
        weights = multiply(points[places], sizes[:, None], prime)
        total = weighted_sum(sample.jets, weights, prime)
        half = pow(2, -1, prime)
        for lane, d in enumerate(points[system.ring.index("d")].tolist()):
            # d = d0 - 2 eps, so eps = (d0 - d) / 2
            eps = (system.dimension - d) * half
            for row, (constant, slope) in enumerate(dimensions):
                weight = (slope * eps + constant) % prime
                total[lane, row, row] = (int(total[lane, row, row]) - weight) % prime
        if total.any():
            _, row, column = np.argwhere(total)[0].tolist()
            return CheckResult(
                "scaling",
                False,
                f"the dimension of master {row + 1} is violated in column {column + 1} modulo {prime}",
            )
    return CheckResult("scaling", True, f"{len(system.masters)} masters {_where(samples)}")


def check_integrability(system: DifferentialSystem, samples: Sequence[SystemSamples]) -> CheckResult:
    """``dA_w/dv - dA_v/dw + A_w A_v - A_v A_w = 0`` for every pair of invariants."""
    pairs = list(combinations(range(len(system.variables)), 2))
    places = [system.ring.index(name) for name in system.variables]
    for sample in samples:
        for v, w in pairs:
            rest = curvature(sample.jets[v], sample.jets[w], places[v], places[w], sample.prime)
            if rest.any():
                _, row, column = np.argwhere(rest)[0].tolist()
                return CheckResult(
                    "integrability",
                    False,
                    f"the derivatives in {system.variables[v]} and {system.variables[w]} do not commute on "
                    f"entry ({row + 1}, {column + 1}) modulo {sample.prime}",
                )
    return CheckResult("integrability", True, f"{len(pairs)} pairs of invariants {_where(samples)}")


def _where(samples: Sequence[SystemSamples]) -> str:
    primes = ", ".join(str(sample.prime) for sample in samples)
    return f"at {_POINTS * len(samples)} random points modulo {primes}"


def check_system(
    system: DifferentialSystem, family: FamilyDefinition, primes: Sequence[int], seed: int
) -> tuple[CheckResult, ...]:
    """All checks of a differential system.

    Parameters
    ----------
    system, family
        The system and the family of its masters.
    primes, seed
        At least two engine primes, better none that the system was made with; the seed of the points.
    """
    samples = sample_system(system, primes, seed)
    return check_scaling(system, family, samples), check_integrability(system, samples)
