"""A differential system against a fresh reduction at random points modulo primes it was not made with."""

from __future__ import annotations

import random
from collections.abc import Sequence

import numpy as np

from ibpred.diffeq.checks import CheckResult
from ibpred.diffeq.system import DifferentialSystem
from ibpred.elimination.replaying import replay
from ibpred.family.definition import FamilyDefinition
from ibpred.family.units import set_unit
from ibpred.identities.derivatives import derivative_templates
from ibpred.identities.quantities import template_at
from ibpred.progress import SILENT, Progress
from ibpred.reduction.recording import record_quantities
from ibpred.sectors.analysis import SectorAnalysis

_POINTS = 4


def check_samples(
    system: DifferentialSystem,
    family: FamilyDefinition,
    analysis: SectorAnalysis,
    primes: Sequence[int],
    seed: int,
    progress: Progress = SILENT,
) -> CheckResult:
    """Derive the system anew at random points and compare every entry, zeros included.

    Parameters
    ----------
    system
        The system to be checked.
    family, analysis
        The family and its sectors.
    primes, seed
        Two engine primes that had no part in deriving the system, and the seed of the points.
    progress
        Told about the elimination.

    Raises
    ------
    UnfinishedError
        If the derivatives do not reduce to the masters.
    """
    name = "differential equation at fresh points"
    if not system.variables:
        return CheckResult(name, True, "the family has no invariant")
    templates = derivative_templates(family)
    quantities = [template_at(templates[v], m) for v in system.variables for m in system.masters]
    recorded = record_quantities(
        family, analysis, system.masters, quantities, primes, seed, progress=progress
    )
    prime = primes[1]
    source = random.Random(seed)
    names = family.internal_ring.names
    points = np.array([[source.randrange(2, prime) for _ in range(_POINTS)] for _ in names], np.uint64)
    values, good = replay(recorded.tape, points, prime)
    count = len(system.masters)
    given = {
        (v * count + row, column): set_unit(value, family)
        for v, variable in enumerate(system.variables)
        for row, column, value in system.matrices[variable]
    }
    fresh = {entry: values[k] for k, entry in enumerate(recorded.entries)}
    compared = 0
    for lane in np.flatnonzero(good):
        point = [int(value) for value in points[:, lane]]
        for entry in given.keys() | fresh.keys():
            expected = given[entry].modular(point, prime) if entry in given else 0
            found = int(fresh[entry][lane]) if entry in fresh else 0
            if expected != found:
                quantity, column = entry
                variable = system.variables[quantity // count]
                return CheckResult(
                    name,
                    False,
                    f"entry ({quantity % count + 1}, {column + 1}) of the matrix in {variable} differs "
                    f"from a fresh reduction modulo {prime}",
                )
            compared += 1
    return CheckResult(name, compared > 0, f"{compared} values modulo {prime} agree with a fresh reduction")
