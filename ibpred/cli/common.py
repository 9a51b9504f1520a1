"""What all commands share: options, reading arguments, opening the chain, printing, exit codes."""

from __future__ import annotations

import json
import os
import sys
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, replace
from fractions import Fraction
from pathlib import Path
from typing import TYPE_CHECKING, Any, TypeVar

import click

from ibpred.errors import IbpredError, InputError, PointError
from ibpred.exact.grammar import parse_number

if TYPE_CHECKING:
    from ibpred.progress import Progress
    from ibpred.run.chain.chain import Chain
    from ibpred.run.chain.joint import Joint, NamedPowers
    from ibpred.run.storage.store import Store
    from ibpred.run.workers.local import Workers

C = TypeVar("C", bound=Callable[..., Any])


@dataclass(frozen=True)
class Shared:
    """The options that every command takes; `others` are the families after the first one."""

    file: Path
    work: Path | None
    workers: int
    json: bool
    quiet: bool
    others: tuple[Path, ...] = ()
    cluster: str | None = None
    masters: tuple[str, ...] = ()
    seconds: float | None = None


def shared_options(command: C) -> C:
    """Add the family file and the shared options to a command; it receives one `Shared`."""
    return _with_options(command, click.argument("family", nargs=1, metavar="FAMILY.toml"))


def several_families(command: C) -> C:
    """The same for a command that takes several family files."""
    return _with_options(
        command, click.argument("family", nargs=-1, required=True, metavar="FAMILY.toml ...")
    )


def _with_options(command: C, argument: Callable[[C], C]) -> C:
    def entry(
        family: str | tuple[str, ...],
        work: str | None,
        workers: int,
        as_json: bool,
        quiet: bool,
        cluster: str | None,
        masters: tuple[str, ...],
        seconds: float | None,
        **own: Any,
    ) -> Any:
        first, *others = (Path(name) for name in ([family] if isinstance(family, str) else family))
        folder = Path(work) if work else None
        shared = Shared(first, folder, workers, as_json, quiet, tuple(others), cluster, masters, seconds)
        return command(shared, **own)

    entry.__doc__ = command.__doc__
    entry.__name__ = command.__name__
    if hasattr(command, "__click_params__"):
        entry.__click_params__ = command.__click_params__  # type: ignore[attr-defined]
    for decorate in (
        click.option("--quiet", is_flag=True, help="Show no progress."),
        click.option("--json", "as_json", is_flag=True, help="Print the result as one JSON object."),
        click.option(
            "--master",
            "masters",
            multiple=True,
            metavar="POWERS",
            help="An integral that is to be a master (repeatable); the others are chosen.",
        ),
        click.option(
            "--seconds",
            type=click.FloatRange(min=0),
            metavar="S",
            help="Stop after about so many seconds with what was reached; the same command goes on.",
        ),
        click.option(
            "--cluster",
            metavar="ADDRESS",
            help="Hand the samples to the workers of a running Dask scheduler instead.",
        ),
        click.option(
            "--workers",
            type=click.IntRange(min=1),
            default=os.cpu_count() or 1,
            show_default=True,
            metavar="N",
            help="Threads that sample the reduction.",
        ),
        click.option(
            "--work", metavar="DIR", help="Work folder [default: .ibpred/NAME beside the family file]."
        ),
        argument,
    ):
        entry = decorate(entry)  # type: ignore[arg-type]
    return entry  # type: ignore[return-value]


@contextmanager
def open_chain(shared: Shared) -> Iterator[Chain]:
    """The chain of the family file, its store open and progress shown on standard error."""
    from ibpred.run.chain.chain import Chain
    from ibpred.run.chain.deadline import deadline, told
    from ibpred.run.storage.files import read_family_file

    definition = read_family_file(shared.file)
    preferred = tuple(_own_powers(text, definition.name) for text in shared.masters)
    with _opened(shared, definition.name) as (store, progress, workers):
        chain = Chain(definition, store, progress, workers, preferred, deadline(shared.seconds))
        with told(chain):
            yield chain


def each_family(shared: Shared) -> Iterator[Shared]:
    """The same command for one family after the other, each with its own masters.

    Of several families ``--master`` names the one that an integral belongs to.
    """
    if not shared.others:
        yield shared
        return
    files = (shared.file, *shared.others)
    owned: dict[str, list[str]] = {file.stem: [] for file in files}
    if len(owned) < len(files):
        raise InputError("two families have the same name; rename one of the files")
    for text in shared.masters:
        name, _ = parse_integral(text, "--master")
        if name not in owned:
            raise InputError(f"--master: {text!r} names none of the families {', '.join(owned)}")
        owned[name].append(text)
    for file in files:
        yield replace(shared, file=file, others=(), masters=tuple(owned[file.stem]))


def emit_each(shared: Shared, found: Sequence[Any], text: Callable[[Any], str]) -> None:
    """Print the results of `each_family`: of one family as ever, of several as a list."""
    data = {"families": list(found)} if shared.others else found[0]
    emit(shared, data, lambda: "\n\n".join(text(each) for each in found))


def _own_powers(text: str, family: str) -> tuple[int, ...]:
    name, powers = parse_integral(text, "--master")
    if name not in (None, family):
        raise InputError(f"--master: {text!r} does not belong to the family {family}")
    return powers


@contextmanager
def open_joint(shared: Shared) -> Iterator[Joint]:
    """The families of all files together, likewise."""
    from ibpred.run.chain.deadline import deadline, told
    from ibpred.run.chain.joint import Joint
    from ibpred.run.storage.files import read_family_file

    definitions = [read_family_file(file) for file in (shared.file, *shared.others)]
    with _opened(shared, definitions[0].name) as (store, progress, workers):
        preferred = [parse_integral(text, "--master") for text in shared.masters]
        joint = Joint(definitions, store, progress, workers, preferred, deadline(shared.seconds))
        with told(joint):
            yield joint


@contextmanager
def _opened(shared: Shared, name: str) -> Iterator[tuple[Store, Progress, Workers]]:
    from ibpred.cli.progress import terminal_progress
    from ibpred.progress import SILENT
    from ibpred.run.storage.store import Store
    from ibpred.run.workers.local import Threads

    with Store(shared.work or shared.file.parent / ".ibpred" / name) as store:
        workers: Workers = _cluster(shared.cluster) if shared.cluster else Threads(shared.workers)
        try:
            if shared.quiet:
                yield store, SILENT, workers
            else:
                with terminal_progress() as progress:
                    yield store, progress, workers
        finally:
            workers.close()


def _cluster(address: str) -> Workers:
    from ibpred.run.workers.cluster import Cluster

    return Cluster(address)


def emit(shared: Shared, data: Any, text: Callable[[], str]) -> None:
    """Print a result: JSON where it was asked for, else the readable text."""
    if shared.json:
        click.echo(json.dumps(data, ensure_ascii=False))
    else:
        click.echo(text())


def parse_integral(text: str, source: str) -> NamedPowers:
    """An integral with the name of its family, if it has one; see `ibpred.family.members.read_integral`."""
    from ibpred.family.members import read_integral

    return read_integral(text, source)


def parse_powers(text: str, source: str) -> tuple[int, ...]:
    """Powers of an integral of the only family; see `parse_integral`."""
    return parse_integral(text, source)[1]


def parse_list_file(path: Path) -> tuple[NamedPowers, ...]:
    """Integrals of a list file: one a line, ``#`` starts a comment.

    Raises
    ------
    InputError
        If the file cannot be read or a line is no integral.
    """
    try:
        text = path.read_text(encoding="utf-8")
    except (OSError, UnicodeDecodeError) as error:
        raise InputError(f"the list {path} cannot be read: {error}") from error
    found = []
    for number, line in enumerate(text.splitlines(), start=1):
        content = line.split("#", 1)[0].strip()
        if content:
            found.append(parse_integral(content, f"{path}:{number}"))
    if not found:
        raise InputError(f"the list {path} holds no integral")
    return tuple(found)


def parse_point(text: str) -> dict[str, Fraction]:
    """A kinematic point such as ``s=-1,t=-1/3``.

    Raises
    ------
    PointError
        If an entry is not ``name=number`` or a name comes twice.
    """
    point: dict[str, Fraction] = {}
    for part in text.split(","):
        name, equals, value = part.partition("=")
        name = name.strip()
        if not equals or not name:
            raise PointError(f"{part.strip()!r} is not NAME=NUMBER in the point {text!r}")
        if name in point:
            raise PointError(f"{name} is given twice in the point {text!r}")
        point[name] = parse_number(value.strip())
    return point


def guarded(run: Callable[[], Any]) -> int:
    """Run a command and turn its errors into a message and an exit code."""
    try:
        run()
    except IbpredError as error:
        click.echo(f"ibpred: {error}", err=True)
        return error.exit_code
    except click.ClickException as error:
        error.show()
        return error.exit_code
    except (KeyboardInterrupt, click.Abort):
        click.echo(
            "ibpred: interrupted; finished stages are kept, the same command goes on from there", err=True
        )
        return 130
    except BrokenPipeError:
        sys.stderr.close()
        return 0
    except MemoryError:
        click.echo("ibpred: out of memory; finished stages are kept", err=True)
        return 1
    return 0
