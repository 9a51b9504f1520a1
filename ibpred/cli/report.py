"""``ibpred report``: a page and a LaTeX document about results."""

from __future__ import annotations

from pathlib import Path
from tempfile import TemporaryDirectory
from typing import TYPE_CHECKING

import click

from ibpred.cli.common import Shared, emit, open_chain, shared_options

if TYPE_CHECKING:
    from ibpred.report.dossier import Dossier


@click.command()
@shared_options
@click.option(
    "--output", metavar="DIR", help="Where the files go [default: the folder itself; for a family file here]"
)
@click.option("--digits", type=click.IntRange(1, 2000), default=30, show_default=True, metavar="N")
def report(shared: Shared, output: str | None, digits: int) -> None:
    """Write an HTML page, complete in one file, and a LaTeX document about results.

    Takes a folder that `run` wrote (then nothing is computed), or a family file, whose chain is run.
    """
    from ibpred.errors import OutOfTimeError
    from ibpred.run.folder.dossier import read_dossier
    from ibpred.run.folder.whole import run_whole

    if shared.file.is_dir():
        _write(shared, read_dossier(shared.file), Path(output) if output else shared.file)
        return
    with open_chain(shared) as chain, TemporaryDirectory() as place:
        folder = Path(place) / chain.definition.name
        done = run_whole(chain, shared.file, folder, digits)
        _write(shared, read_dossier(folder), Path(output) if output else Path())
        if done.stopped is not None:
            raise OutOfTimeError(done.stopped.during, "The report says what was reached.")


def _write(shared: Shared, dossier: Dossier, target: Path) -> None:
    from ibpred.report.article import latex_article
    from ibpred.report.page.build import html_page
    from ibpred.run.storage.files import check_writable, write_file

    check_writable(target)
    name = dossier.material.family.name
    page, document = target / f"{name}.html", target / f"{name}.tex"
    write_file(page, html_page(dossier))
    write_file(document, latex_article(dossier))
    data = {"family": name, "page": str(page), "latex": str(document)}
    emit(shared, data, lambda: f"{page}\n{document}")
