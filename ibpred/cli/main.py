"""The command ``ibpred``."""

from __future__ import annotations

import sys

import click

import ibpred
from ibpred.cli.common import guarded
from ibpred.cli.diffeq import diffeq
from ibpred.cli.epsform import epsform
from ibpred.cli.evaluate import evaluate
from ibpred.cli.export import export
from ibpred.cli.inspect import inspect
from ibpred.cli.masters import masters
from ibpred.cli.reduce import reduce
from ibpred.cli.report import report
from ibpred.cli.run import run
from ibpred.cli.solve import solve
from ibpred.cli.verify import verify


@click.group(context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100})
@click.version_option(ibpred.__version__, prog_name="ibpred")
def group() -> None:
    """From an integral family to certified digits.

    Each command takes a family file. The stages build on each other: inspect, masters, reduce,
    diffeq, epsform, solve, evaluate; run does them all. Finished stages are kept in the work folder.
    """


for command in (inspect, masters, reduce, diffeq, epsform, solve, evaluate, export, run, report, verify):
    group.add_command(command)


def main() -> None:
    """Entry point: run the command line and exit with its code."""
    sys.exit(guarded(lambda: group.main(standalone_mode=False)))
