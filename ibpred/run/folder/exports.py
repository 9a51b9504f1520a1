"""What is exported, from a folder of results or from the chain."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

from ibpred.errors import InputError, UnfinishedError
from ibpred.family.signs import euclidean_signs
from ibpred.numerics.laurent.laurent_line import regular_locus
from ibpred.report.export.material import Material
from ibpred.report.json_tables import differential_data, epsilon_data, solution_data, values_data
from ibpred.run.chain.chain import Chain
from ibpred.run.constants.solved import completed_boundary
from ibpred.run.constants.solved import solution as solution_of
from ibpred.run.storage.files import read_family_file
from ibpred.run.values.evaluate import evaluate
from ibpred.run.values.points import sample_points

Data = dict[str, Any]


def folder_material(folder: Path) -> Material:
    """The results in a folder that `run` wrote.

    Raises
    ------
    InputError
        If it is no such folder.
    """
    families = sorted(folder.glob("*.toml"))
    if len(families) != 1:
        raise InputError(
            f"{folder} is no folder of results: it holds {len(families)} family files instead of one; "
            "give a folder that `ibpred run` wrote, or a family file"
        )
    family = read_family_file(families[0])
    differential = document(folder / "diffeq.json")
    if differential is None:
        raise InputError(f"{folder} holds no diffeq.json; run `ibpred run {families[0]}` first")
    values = document(folder / "values.json")
    tables = tuple(values["tables"]) if values is not None else ()
    notes = () if tables else ("the folder holds no values, so there are no boundary values.",)
    return Material(
        family,
        differential,
        document(folder / "epsform.json"),
        document(folder / "solution.json"),
        tables,
        euclidean_signs(family),
        notes,
    )


def document(path: Path) -> Data | None:
    """The JSON object of a file; None where there is no file.

    Raises
    ------
    InputError
        If it cannot be read.
    """
    if not path.exists():
        return None
    try:
        data = json.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError) as error:
        raise InputError(f"{path} cannot be read: {error}") from error
    if not isinstance(data, dict):
        raise InputError(f"{path} holds no JSON object")
    return data


def chain_material(chain: Chain, order: int, digits: int) -> Material:
    """The results of a chain, computed where they are not yet there.

    Parameters
    ----------
    order
        Highest power of eps of the boundary values.
    digits
        Digits of the boundary values.
    """
    family = chain.definition
    differential = differential_data(chain.derivation().system)
    signs = euclidean_signs(family)
    notes = []
    epsilon: Data | None = None
    solution: Data | None = None
    if len(family.invariants) > 1:
        found = chain.epsilon_form()
        epsilon = epsilon_data(family, chain.dimensionless(), found, chain.offered())
    highest = chain.order_of_weight(2 * len(family.loops))
    try:
        solved = solution_of(chain, highest)
        solution = solution_data(family, completed_boundary(chain, highest), solved)
    except UnfinishedError as error:
        notes.append(f"no solution in iterated integrals: {error}")
    locus = regular_locus(chain.derivation().system)
    tables = []
    try:
        for point in sample_points(family, chain.signs(), signs is not None, locus):
            values = evaluate(chain, point, (), order, digits)
            tables.append(values_data(family, point, digits, values))
    except UnfinishedError as error:
        notes.append(f"no boundary values: {error}")
    return Material(family, differential, epsilon, solution, tuple(tables), signs, tuple(notes))
