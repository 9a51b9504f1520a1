"""``ibpred reduce``: integrals, and sums of integrals, to masters."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from ibpred.cli.common import Shared, emit, open_joint, parse_integral, parse_list_file, several_families
from ibpred.errors import InputError, OutOfTimeError

if TYPE_CHECKING:
    from ibpred.identities.quantities import Integral
    from ibpred.reduction.sums import Sum
    from ibpred.run.chain.joint import Joint
    from ibpred.run.storage.rows import TableRows

_FORMATS = (".jsonl", ".csv")


@click.command()
@several_families
@click.option(
    "--integral",
    "integrals",
    multiple=True,
    metavar="POWERS",
    help='An integral, "1,1,1,-1"; of several families "box(1,1,1,-1)"; crossed "box.u(1,1,1,-1)".',
)
@click.option("--list", "list_file", metavar="FILE", help="A file with one integral a line.")
@click.option("--max-dots", type=click.IntRange(min=0), metavar="A", help="All integrals with <= A dots.")
@click.option("--max-rank", type=click.IntRange(min=0), metavar="B", help="All integrals with rank <= B.")
@click.option(
    "--sum",
    "sum_files",
    multiple=True,
    metavar="FILE",
    help='A file with lines "coefficient * integral", added up, such as "(d-2)/s*(k*p3)^2*box(1,1,1,1)".',
)
@click.option("--by-cuts", is_flag=True, help="One cut after the other: the same table, less memory.")
@click.option(
    "--check",
    type=click.IntRange(min=1),
    metavar="N",
    help="Check N random rows of the table by identities at a random point and prime.",
)
@click.option("--output", metavar="FILE", help="Write the table to FILE.jsonl or FILE.csv instead.")
def reduce(
    shared: Shared,
    integrals: tuple[str, ...],
    list_file: str | None,
    max_dots: int | None,
    max_rank: int | None,
    sum_files: tuple[str, ...],
    by_cuts: bool,
    check: int | None,
    output: str | None,
) -> None:
    """Reduce integrals to master integrals, those of several families to common ones.

    With --seconds the reductions known when the time is over are given.
    """
    from ibpred.report.json_common import common_reduction_data, reduction_entry, sums_data, without_families
    from ibpred.report.text import reduction_line

    named = [parse_integral(text, "--integral") for text in integrals]
    if list_file is not None:
        named += parse_list_file(Path(list_file))
    everything = max_dots is not None or max_rank is not None
    if sum_files and (named or everything or by_cuts or check):
        raise InputError("--sum is a task of its own: leave the options for a table of integrals out")
    if not sum_files and not named and not everything:
        raise InputError("nothing to reduce: give --integral, --list, --sum, or --max-dots and --max-rank")
    target = _target(output)
    with open_joint(shared) as joint:
        if sum_files:
            found = joint.sums(_read_sums([Path(name) for name in sum_files], joint))
            several = bool(shared.others) or _crossed(joint, found.masters)
            data = sums_data(joint.members, found)
            lines = data["sums"]
            shaped = data if several else without_families(data)
            if target is None:
                emit(shared, shaped, lambda: "\n".join(reduction_line(entry) for entry in lines))
            else:
                _write(shared, target, lines, several)
            return
        wanted = [joint.integral(each) for each in named]
        if everything:
            wanted += joint.integrals_within(max_dots or 0, max_rank or 0)
        wanted = list(dict.fromkeys(wanted))
        rows, over = _rows_in_time(joint, wanted, by_cuts)
        missing: set[Integral] = set()
        if over is not None:
            missing |= set(rows.missing(wanted))
            wanted = [integral for integral in wanted if integral not in missing]
        elif check is not None:
            _check(joint, rows, wanted, check)
        several = bool(shared.others) or _crossed(joint, [*wanted, *rows.masters])
        entries = (
            reduction_entry(joint.members, rows.masters, integral, rows.terms(integral))
            for integral in wanted
        )
        if target is not None:
            _write(shared, target, entries, several)
        elif shared.json:
            data = common_reduction_data(joint.members, rows.masters, entries)
            emit(shared, data if several else without_families(data), str)
        else:
            for entry in entries:
                click.echo(reduction_line(entry))
        if over is not None:
            raise OutOfTimeError(
                over.during, f"{len(wanted)} of {len(wanted) + len(missing)} integrals are given."
            )


def _rows_in_time(
    joint: Joint, wanted: Sequence[Integral], by_cuts: bool
) -> tuple[TableRows, OutOfTimeError | None]:
    """The reductions; where the time is over those that were known before, and the error that says so."""
    try:
        return joint.reduction(wanted, by_cuts), None
    except OutOfTimeError as over:
        # without the masters there is nothing to give: then this raises the same error again
        return joint.rows(wanted), over


def _crossed(joint: Joint, integrals: Sequence[Integral]) -> bool:
    return any(joint.members[number].crossing for number, _ in integrals)


def _target(output: str | None) -> Path | None:
    """The file to write, checked before anything is computed."""
    if output is None:
        return None
    path = Path(output)
    if path.suffix not in _FORMATS:
        raise InputError(f"--output {output}: a table is written as {' or '.join(_FORMATS)}")
    from ibpred.run.storage.files import check_writable

    check_writable(path.parent)
    return path


def _write(shared: Shared, path: Path, entries: Iterator[dict[str, Any]], several: bool) -> None:
    """Write a table row by row."""
    from ibpred.report.json_common import plain_entry
    from ibpred.report.tables import csv_lines, json_lines
    from ibpred.run.storage.files import write_pieces

    count = 0

    def counted() -> Iterator[dict[str, Any]]:
        nonlocal count
        for entry in entries:
            count += 1
            yield entry

    if path.suffix == ".csv":
        write_pieces(path, csv_lines(counted()))
    else:
        one_family = ({"family": entry.get("family"), **plain_entry(entry)} for entry in counted())
        write_pieces(path, json_lines(counted() if several else one_family))
    emit(shared, {"file": str(path), "written": count}, lambda: f"{count} rows written to {path}")


def _check(joint: Joint, rows: TableRows, wanted: Sequence[Integral], count: int) -> None:
    found = joint.check(rows, wanted, count)
    click.echo(
        f"ibpred: check: {len(found.integrals)} of {len(wanted)} rows agree with {found.identities} "
        f"identities at a random point modulo {found.prime}",
        err=True,
    )


def _read_sums(paths: Sequence[Path], joint: Joint) -> Mapping[str, Sum]:
    """Sums from files, each under its file's name."""
    from ibpred.run.python.amplitudes import sum_of_text

    sums: dict[str, Sum] = {}
    for path in paths:
        if path.stem in sums:
            raise InputError(f"two sums are called {path.stem}; rename one of the files")
        try:
            text = path.read_text(encoding="utf-8")
        except (OSError, UnicodeDecodeError) as error:
            raise InputError(f"the sum {path} cannot be read: {error}") from error
        sums[path.stem] = sum_of_text(text, str(path), joint.members)
    return sums
