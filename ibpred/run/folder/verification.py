"""The evidence of a folder of results, run again from its files alone."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from fractions import Fraction
from pathlib import Path
from typing import Any

from ibpred.diffeq.checks import CheckResult, check_system
from ibpred.diffeq.recheck import check_samples
from ibpred.errors import InputError
from ibpred.exact.grammar import parse_number
from ibpred.exact.primes import first_primes
from ibpred.family.definition import FamilyDefinition
from ibpred.family.forests import agrees_with_graph
from ibpred.numerics.direct import direct_value
from ibpred.progress import Progress
from ibpred.reduction.masters import find_masters
from ibpred.report.export.material import Material, system_of
from ibpred.run.folder.carried_check import carried_check
from ibpred.run.folder.exports import folder_material
from ibpred.sectors.analysis import analyse

_FRESH = 200  # engine primes that no run uses
_SEED = 90_210
_SIGMAS = 6  # of the direct integration's error estimate

Data = Mapping[str, Any]


def verify_folder(folder: Path, samples: int, progress: Progress) -> tuple[CheckResult, ...]:
    """All checks of a folder; see `checks_of`."""
    return tuple(checks_of(folder, samples, progress))


def checks_of(folder: Path, samples: int, progress: Progress) -> Iterator[CheckResult]:
    """The checks of a folder, one after the other.

    Parameters
    ----------
    folder
        A folder that `run` wrote.
    samples
        Sample points of the direct integration.
    progress
        Told about each check.

    Raises
    ------
    InputError
        If it is no such folder.
    UnfinishedError
        If a check cannot be carried out.
    OutOfTimeError
        If the progress has a deadline and it is over.
    """
    yield from _checks(folder_material(folder), samples, progress)


def _checks(material: Material, samples: int, progress: Progress) -> Iterator[CheckResult]:
    family = material.family
    primes = first_primes(2, skip=_FRESH)
    progress.stage("graph polynomials")
    if family.graph is not None:
        agreed = agrees_with_graph(family)
        yield CheckResult("graph polynomials", agreed, "determinant against spanning trees and two-forests")
    progress.stage("masters")
    analysis = analyse(family)
    system = system_of(material)
    masters = find_masters(family, analysis, primes[0], _SEED, system.masters, progress)
    same = set(masters.masters) == set(system.masters)
    yield CheckResult(
        "masters", same, f"{len(masters.masters)} found anew modulo {primes[0]}, {len(system.masters)} listed"
    )
    progress.stage("differential equation")
    yield from check_system(system, family, primes, _SEED)
    yield check_samples(system, family, analysis, primes, _SEED, progress)
    if material.tables and system.variables:
        first, *others = material.tables
        progress.stage("continuation")
        for table in others:
            found = carried_check(system, material.signs, first, table, progress)
            if found is not None:
                yield found
    for table in material.tables:
        point = {name: parse_number(text) for name, text in table["point"].items()}
        signs = material.signs
        if signs is not None and all(signs[name] * value > 0 for name, value in point.items()):
            yield from _direct(family, point, table, samples, progress)


def _direct(
    family: FamilyDefinition, point: dict[str, Fraction], table: Data, samples: int, progress: Progress
) -> Iterator[CheckResult]:
    """Values in the Euclidean region against sector decomposition and quasi-Monte Carlo."""
    for done, value in enumerate(table["integrals"]):
        powers = tuple(int(a) for a in value["powers"])
        name = f"direct integration of {family.name}({','.join(map(str, powers))})"
        highest = max((int(order) for order in value["epsilon"]), default=0)
        try:
            progress.stage(f"integral {done + 1} of {len(table['integrals'])}")
            direct = direct_value(family, powers, point, highest, _SEED, samples, progress)
        except InputError:
            # no such representation: nothing is claimed
            continue
        parts = {int(order): float(ball["re"]) for order, ball in value["epsilon"].items()}
        size = max([abs(part) for part in parts.values()], default=1.0)
        worst, told = 0.0, 0.0
        for order, (number, error_bar) in direct.items():
            allowed = _SIGMAS * error_bar + 1e-10 * size
            worst = max(worst, abs(number - parts.get(order, 0.0)) / allowed)
            told = max(told, error_bar / size)
        detail = (
            f"agrees within {told:.0e} of its size" if worst <= 1 else f"off by {worst:.1f} times its error"
        )
        yield CheckResult(name, worst <= 1, detail)
