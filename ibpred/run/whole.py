"""The whole chain of one family, and the folder of results it leaves."""

from __future__ import annotations

import json
import time
from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction
from functools import partial
from pathlib import Path
from typing import Any, TypeVar

import ibpred
from ibpred.diffeq.checks import CheckResult, check_system
from ibpred.epsform.form import EpsilonForm, Obstructed
from ibpred.epsform.verify import verify
from ibpred.errors import UnfinishedError
from ibpred.iterated.solution import letter_roots
from ibpred.iterated.weights import weight_excesses
from ibpred.report.drawing import sheet_svg
from ibpred.report.json_tables import (
    differential_data,
    epsilon_data,
    inspect_data,
    masters_data,
    solution_data,
    values_data,
)
from ibpred.report.summary import Effort, Stage, summary
from ibpred.run.chain import Chain
from ibpred.run.files import check_writable, write_folder
from ibpred.run.points import euclidean_point, physical_point
from ibpred.run.stages import SEED
from ibpred.sectors.order import sector_of

_PICTURES_A_ROW = 5

Data = dict[str, Any]
R = TypeVar("R")


@dataclass
class _Journal:
    """What happened, stage by stage."""

    stages: list[Stage]
    files: dict[str, Data]

    def timed(self, compute: Callable[[], R]) -> tuple[R, float]:
        began = time.perf_counter()
        return compute(), time.perf_counter() - began

    def note(self, name: str, outcome: str, seconds: float) -> None:
        self.stages.append(Stage(name, outcome, f"{seconds:.2f}"))


def run_whole(chain: Chain, source: Path, folder: Path, digits: int) -> Data:
    """Run every stage and write the results.

    The folder holds the family file, one JSON file a stage (as the commands print them), the evidence,
    and a readable summary. Where a stage cannot be done the folder says so and holds what came before.

    Parameters
    ----------
    chain
        The family's chain.
    source
        The family file, copied into the folder.
    folder
        Where the results go; replaced as a whole at the end.
    digits
        Digits of the values.

    Returns
    -------
    A summary: ``{"family", "folder", "stages", "complete"}``.

    Raises
    ------
    UnwritableError
        If the folder cannot be written; found out before the work starts.
    """
    check_writable(folder)
    journal = _Journal([], {})
    checks: list[CheckResult] = []
    family = chain.definition
    analysis, seconds = journal.timed(chain.analysis)
    journal.files["inspect.json"] = inspect_data(family, analysis)
    counts = f"{len(analysis.zero)} of {len(analysis.sectors)} vanish, {len(analysis.classes)} classes"
    journal.note("sectors", counts, seconds)
    masters, seconds = journal.timed(chain.masters)
    journal.files["masters.json"] = masters_data(family, masters)
    journal.note("masters", f"{len(masters.masters)}", seconds)
    derivation, seconds = journal.timed(chain.derivation)
    journal.files["diffeq.json"] = differential_data(derivation.system)
    checks += check_system(derivation.system, family, chain.primes[-2:], SEED)
    effort = None
    if derivation.effort is not None:
        meter = chain.meter
        per_term = meter.seconds / meter.terms * 1e9 if meter.terms else None
        effort = Effort(
            derivation.effort.rows,
            derivation.effort.multiply_adds,
            derivation.effort.samples,
            None if per_term is None else f"{per_term:.2f}",
        )
        outcome = (
            f"{derivation.effort.multiply_adds} multiply-adds a sample, {derivation.effort.samples} samples"
        )
    else:
        outcome = "no invariant"
    journal.note("differential equation", outcome, seconds)
    complete = _solve(chain, journal, checks, digits)
    journal.files["evidence.json"] = {
        "family": family.name,
        "version": ibpred.__version__,
        "seed": SEED,
        "checks": [{"name": c.name, "passed": c.passed, "detail": c.detail} for c in checks],
    }
    chain.progress.stage("writing results")
    text = summary(family, masters.masters, journal.files, journal.stages, effort)
    files = {
        name: json.dumps(data, ensure_ascii=False, indent=1) + "\n" for name, data in journal.files.items()
    }
    files[f"{family.name}.toml"] = source.read_text(encoding="utf-8")
    files["summary.md"] = text
    if family.graph is not None:
        sectors = tuple(dict.fromkeys(sector_of(powers) for powers in masters.masters))
        files["graphs.svg"] = sheet_svg(family, sectors, _PICTURES_A_ROW)
    write_folder(folder, files)
    return {
        "family": family.name,
        "folder": str(folder),
        "complete": complete,
        "stages": [{"name": s.name, "outcome": s.outcome, "seconds": s.seconds} for s in journal.stages],
    }


def _solve(chain: Chain, journal: _Journal, checks: list[CheckResult], digits: int) -> bool:
    """The stages from the epsilon-form on; False where one of them cannot be done."""
    family = chain.definition
    try:
        if len(family.invariants) > 1:
            found, seconds = journal.timed(chain.epsilon_form)
            journal.files["epsform.json"] = epsilon_data(family, chain.dimensionless(), found)
            journal.note("epsilon-form", _epsilon_outcome(found), seconds)
            if isinstance(found, EpsilonForm):
                checks.append(_substitution(chain, found))
        weight = 2 * len(family.loops)
        order = chain.order_of_weight(weight)
        boundary, seconds = journal.timed(lambda: chain.completed_boundary(order))
        confirming = sum(item.confirming for item in boundary.evidence)
        used = sum(item.independent for item in boundary.evidence)
        told = f"{used} conditions, {confirming} more confirm them" if used else "Gamma functions"
        if boundary.fitted:
            told += f"; {len(boundary.fitted)} constants fitted"
            worst = max(item.fit.odds for item in boundary.fitted)
            digits_held = min(item.fit.digits for item in boundary.fitted)
            supported = f"{digits_held} digits at least, odds of a chance hit at most 1e{worst}"
            checks.append(CheckResult("fitted constants", True, supported))
        journal.note("boundary constants", told, seconds)
        if confirming:
            checks.append(CheckResult("boundary", True, f"{confirming} redundant conditions hold exactly"))
        solution, seconds = journal.timed(lambda: chain.solution(order))
        form = chain.solved_form()
        journal.files["solution.json"] = solution_data(family, boundary, solution)
        journal.note("iterated integrals", f"through weight {weight}", seconds)
        if form.variables:
            more = chain.heaviness()
            told = "the weight at each order is at most the order"
            told += f" and {more} for factors Gamma(1/2)" if more else ""
            checks.append(CheckResult("weight", solution.weight_excess() <= more, told))
        if family.dimension == 4:
            beyond = weight_excesses(form.transformation, solution, len(family.loops))
            told = "every eps^k of every master has weight at most 2 L + k"
            if beyond:
                told = f"{chain.label(beyond[0].row)} has weight {beyond[0].weight} at eps^{beyond[0].order}"
            checks.append(CheckResult("weight bound", not beyond, told))
        journal.files["values.json"] = _values(chain, journal, form, digits)
    except UnfinishedError as error:
        journal.note("stopped", str(error), 0.0)
        return False
    return True


def _epsilon_outcome(found: EpsilonForm | Obstructed) -> str:
    if isinstance(found, Obstructed):
        return f"obstructed in {len(found.obstructions)} block(s)"
    return f"{len(found.letters)} letters"


def _substitution(chain: Chain, form: EpsilonForm) -> CheckResult:
    passed = verify(chain.connection(), form)
    return CheckResult("epsilon-form", passed, "exact substitution into the differential equation")


def _values(chain: Chain, journal: _Journal, form: EpsilonForm, digits: int) -> Data:
    family = chain.definition
    signs = chain.euclidean_signs()
    singular: list[Fraction] = []
    if form.variables:
        singular = [root for root in letter_roots(form.letters, form.variables[0]) if root is not None]
    points = [euclidean_point(family, signs), physical_point(family, signs, singular)]
    tables = []
    total = 0.0
    for point in points:
        if point is not None:
            values, seconds = journal.timed(partial(chain.evaluate, point, (), 0, digits))
            total += seconds
            tables.append(values_data(family, point, digits, values))
    journal.note("values", f"{digits} digits at {len(tables)} points", total)
    return {"family": family.name, "tables": tables}
