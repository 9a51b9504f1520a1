"""``ibpred export``: results for other programs."""

from __future__ import annotations

from pathlib import Path

import click

from ibpred.cli.common import Shared, emit, open_chain, shared_options

_FORMATS = ("json", "latex", "sympy", "wolfram", "pari", "numpy", "c")


@click.command()
@shared_options
@click.option("--to", "target", type=click.Choice(_FORMATS), required=True, help="The target.")
@click.option("--output", metavar="FILE", help="[default: NAME with the target's ending, here]")
@click.option("--digits", type=click.IntRange(1, 2000), default=30, show_default=True, metavar="N")
@click.option(
    "--order",
    type=int,
    default=0,
    show_default=True,
    metavar="K",
    help="Highest power of eps of boundary values.",
)
def export(shared: Shared, target: str, output: str | None, digits: int, order: int) -> None:
    """Write results for other programs: papers, algebra systems, numerical solvers.

    Takes a family file, or a folder that `run` wrote (then nothing is computed).
    """
    from ibpred.report.export.formats import Format, exported
    from ibpred.run.folder.exports import chain_material, folder_material
    from ibpred.run.storage.files import write_file

    if shared.file.is_dir():
        material = folder_material(shared.file)
    else:
        with open_chain(shared) as chain:
            material = chain_material(chain, order, digits)
    name, text = exported(material, Format(target))
    path = Path(output) if output else Path(name)
    write_file(path, text)
    emit(shared, {"family": material.family.name, "to": target, "path": str(path)}, lambda: str(path))
