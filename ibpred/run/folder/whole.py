"""The whole chain of one family, and the folder of results it leaves."""

from __future__ import annotations

import json
import time
from collections.abc import Callable
from dataclasses import dataclass
from functools import partial
from pathlib import Path
from typing import Any, TypeVar

import ibpred
from ibpred.boundary.conditions.fix import Boundary
from ibpred.diffeq.checks import CheckResult, check_system
from ibpred.epsform.form import EpsilonForm, Obstructed
from ibpred.epsform.verify import verify
from ibpred.errors import IbpredError, OutOfTimeError, PointError, UnfinishedError
from ibpred.iterated.weights import weight_excesses
from ibpred.numerics.laurent.laurent_line import regular_locus
from ibpred.numerics.value import Route
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
from ibpred.run.chain.chain import Chain
from ibpred.run.chain.stages import SEED
from ibpred.run.constants.solved import completed_boundary
from ibpred.run.constants.solved import solution as solution_of
from ibpred.run.storage.files import check_writable, write_folder
from ibpred.run.values.evaluate import evaluate
from ibpred.run.values.points import sample_points
from ibpred.sectors.order import sector_of

_PICTURES_A_ROW = 5

Data = dict[str, Any]
R = TypeVar("R")


@dataclass(frozen=True)
class WholeRun:
    """What a whole run did.

    Attributes
    ----------
    data
        ``{"family", "folder", "complete", "stages"}``; `complete` unless a stage could not be done. A form
        that does not exist is no such stage: it is a result, and values are given all the same.
    stopped
        Why it ended early, for want of time.
    """

    data: Data
    stopped: OutOfTimeError | None


@dataclass
class _Journal:
    """What happened, stage by stage."""

    stages: list[Stage]
    files: dict[str, Data]
    checks: list[CheckResult]
    effort: Effort | None = None
    complete: bool = True

    def timed(self, compute: Callable[[], R]) -> tuple[R, float]:
        began = time.perf_counter()
        return compute(), time.perf_counter() - began

    def note(self, name: str, outcome: str, seconds: float) -> None:
        self.stages.append(Stage(name, outcome, f"{seconds:.2f}"))

    def not_done(self, name: str, error: IbpredError) -> None:
        """A stage that could not be done; those that do not need it go on."""
        self.note(name, f"not done: {error}", 0.0)
        self.complete = False


def run_whole(chain: Chain, source: Path, folder: Path, digits: int) -> WholeRun:
    """Run every stage and write the results.

    The folder holds the family file, one JSON file a stage (as the commands print them), the evidence,
    and a readable summary. Where a stage cannot be done the folder says so and holds the others. Where the
    time allowed is over it holds what was reached, with a file ``stopped.json`` that says so, unless a folder
    of a run that was not stopped is there, which then stays.

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

    Raises
    ------
    UnwritableError
        If the folder cannot be written; found out before the work starts.
    OutOfTimeError
        If the time is over before the differential equations are known, or where an earlier folder stays.
    """
    check_writable(folder)
    journal = _Journal([], {}, [])
    stopped: OutOfTimeError | None = None
    try:
        _derive(chain, journal)
        form = _form(chain, journal)
        _solve(chain, journal, form)
        _values(chain, journal, digits)
    except OutOfTimeError as over:
        if "diffeq.json" not in journal.files or _is_finished(folder):
            raise
        stopped = over
        journal.note("stopped", str(over), 0.0)
        journal.complete = False
        journal.files["stopped.json"] = {"family": chain.definition.name, "during": over.during}
    _write(chain, journal, source, folder)
    data = {
        "family": chain.definition.name,
        "folder": str(folder),
        "complete": journal.complete,
        "stages": [{"name": s.name, "outcome": s.outcome, "seconds": s.seconds} for s in journal.stages],
    }
    return WholeRun(data, stopped)


def _is_finished(folder: Path) -> bool:
    return folder.exists() and not (folder / "stopped.json").exists()


def _write(chain: Chain, journal: _Journal, source: Path, folder: Path) -> None:
    family, masters = chain.definition, chain.masters().masters
    journal.files["evidence.json"] = {
        "family": family.name,
        "version": ibpred.__version__,
        "seed": SEED,
        "checks": [{"name": c.name, "passed": c.passed, "detail": c.detail} for c in journal.checks],
    }
    chain.watcher.stage("writing results")
    files = {
        name: json.dumps(data, ensure_ascii=False, indent=1) + "\n" for name, data in journal.files.items()
    }
    files[f"{family.name}.toml"] = source.read_text(encoding="utf-8")
    files["summary.md"] = summary(family, masters, journal.files, journal.stages, journal.effort)
    if family.graph is not None:
        sectors = tuple(dict.fromkeys(sector_of(powers) for powers in masters))
        files["graphs.svg"] = sheet_svg(family, sectors, _PICTURES_A_ROW)
    write_folder(folder, files)


def _derive(chain: Chain, journal: _Journal) -> None:
    """Sectors, masters, differential equations."""
    family = chain.definition
    analysis, seconds = journal.timed(chain.analysis)
    journal.files["inspect.json"] = inspect_data(family, analysis)
    counts = f"{len(analysis.zero)} of {len(analysis.sectors)} vanish, {len(analysis.classes)} classes"
    journal.note("sectors", counts, seconds)
    masters, seconds = journal.timed(chain.masters)
    journal.files["masters.json"] = masters_data(family, masters)
    chosen, _ = masters.exchanged()
    choice = f", {len(chosen)} chosen so that denominators split" if chosen else ""
    journal.note("masters", f"{len(masters.masters)}{choice}", seconds)
    derivation, seconds = journal.timed(chain.derivation)
    outcome = "no invariant"
    if derivation.effort is not None:
        meter = chain.meter
        per_term = meter.seconds / meter.terms * 1e9 if meter.terms else None
        journal.effort = Effort(
            derivation.effort.rows,
            derivation.effort.multiply_adds,
            derivation.effort.samples,
            None if per_term is None else f"{per_term:.2f}",
        )
        outcome = (
            f"{derivation.effort.multiply_adds} multiply-adds a sample, {derivation.effort.samples} samples"
        )
    journal.checks += check_system(derivation.system, family, chain.primes[-2:], SEED)
    journal.files["diffeq.json"] = differential_data(derivation.system)
    journal.note("differential equation", outcome, seconds)


def _form(chain: Chain, journal: _Journal) -> EpsilonForm | Obstructed | None:
    """The epsilon-form, or what stands in its way; None where it was not found out."""
    if len(chain.definition.invariants) <= 1:
        return chain.solved_form()
    try:
        found, seconds = journal.timed(chain.epsilon_form)
    except UnfinishedError as error:
        journal.not_done("epsilon-form", error)
        return None
    journal.files["epsform.json"] = epsilon_data(
        chain.definition, chain.dimensionless(), found, chain.offered()
    )
    if isinstance(found, Obstructed):
        if not found.complete:
            raise OutOfTimeError("epsilon-form of the diagonal blocks")
        told = "; ".join(
            f"rows {', '.join(str(row + 1) for row in o.rows)}: {o.geometry or o.reason}"
            for o in found.obstructions
        )
        journal.note("epsilon-form", f"none exists: {told}", seconds)
        return found
    journal.note("epsilon-form", f"{len(found.letters) + len(found.odd_letters)} letters", seconds)
    passed = verify(chain.connection(), found)
    told = "exact substitution into the differential equation"
    journal.checks.append(CheckResult("epsilon-form", passed, told))
    return found


def _solve(chain: Chain, journal: _Journal, form: EpsilonForm | Obstructed | None) -> None:
    """Boundary constants and iterated integrals, where there is an epsilon-form."""
    if not isinstance(form, EpsilonForm):
        return
    family = chain.definition
    weight = 2 * len(family.loops)
    order = chain.order_of_weight(weight)
    try:
        boundary, seconds = journal.timed(lambda: completed_boundary(chain, order))
    except UnfinishedError as error:
        journal.not_done("boundary constants", error)
        return
    _judge_boundary(journal, boundary, seconds)
    try:
        solution, seconds = journal.timed(lambda: solution_of(chain, order))
    except UnfinishedError as error:
        journal.not_done("iterated integrals", error)
        return
    journal.files["solution.json"] = solution_data(family, boundary, solution)
    journal.note("iterated integrals", f"through weight {weight}", seconds)
    if form.variables:
        more = chain.heaviness()
        told = "the weight at each order is at most the order"
        told += f" and {more} for factors Gamma(1/2)" if more else ""
        journal.checks.append(CheckResult("weight", solution.weight_excess() <= more, told))
    if family.dimension == 4:
        beyond = weight_excesses(form.transformation, solution, len(family.loops))
        told = "every eps^k of every master has weight at most 2 L + k"
        if beyond:
            told = f"{chain.label(beyond[0].row)} has weight {beyond[0].weight} at eps^{beyond[0].order}"
        journal.checks.append(CheckResult("weight bound", not beyond, told))


def _judge_boundary(journal: _Journal, boundary: Boundary, seconds: float) -> None:
    confirming = sum(item.confirming for item in boundary.evidence)
    used = sum(item.independent for item in boundary.evidence)
    told = f"{used} conditions, {confirming} more confirm them" if used else "Gamma functions"
    if boundary.fitted:
        told += f"; {len(boundary.fitted)} constants fitted"
        worst = max(item.fit.odds for item in boundary.fitted)
        digits_held = min(item.fit.digits for item in boundary.fitted)
        supported = f"{digits_held} digits at least, odds of a chance hit at most 1e{worst}"
        journal.checks.append(CheckResult("fitted constants", True, supported))
    journal.note("boundary constants", told, seconds)
    if confirming:
        told = f"{confirming} redundant conditions hold exactly"
        journal.checks.append(CheckResult("boundary", True, told))


def _values(chain: Chain, journal: _Journal, digits: int) -> None:
    """The masters at a Euclidean and a physical point, by the route that is open."""
    family = chain.definition
    signs = chain.signs()
    locus = regular_locus(chain.derivation().system)
    tables, total, estimated = [], 0.0, set()
    for where in sample_points(family, signs, chain.is_euclidean(), locus):
        try:
            values, seconds = journal.timed(partial(evaluate, chain, where, (), 0, digits))
        except (UnfinishedError, PointError) as error:
            journal.not_done("values", error)
            continue
        total += seconds
        estimated |= {v.route.value for v in values if v.route is not None and not v.certified}
        tables.append(values_data(family, where, digits, values))
    if tables:
        journal.files["values.json"] = {"family": family.name, "tables": tables}
        told = f"{digits} digits at {len(tables)} points"
        if estimated - {Route.EPSILON_FORM.value}:
            told += f", estimated errors: by {' and '.join(sorted(estimated))}"
        journal.note("values", told, total)
