"""What is exported: a family with whatever results of its chain there are."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import ibpred
from ibpred.diffeq.system import DifferentialSystem
from ibpred.errors import InputError
from ibpred.exact.grammar import nearest, parse_rational
from ibpred.exact.rational import ring
from ibpred.family.definition import FamilyDefinition

Data = Mapping[str, Any]


@dataclass(frozen=True)
class Material:
    """Results of a family, as the commands print them.

    Attributes
    ----------
    family
        The family.
    differential
        The differential equations of the masters (as `diffeq` prints them).
    epsilon, solution
        The epsilon-form and the iterated integrals; None where there are none.
    tables
        Values of the masters at points (as `evaluate` prints them).
    signs
        Euclidean signs of the invariants; None where the family has no Euclidean region.
    notes
        What is missing, and why.
    """

    family: FamilyDefinition
    differential: Data
    epsilon: Data | None
    solution: Data | None
    tables: tuple[Data, ...]
    signs: Mapping[str, int] | None
    notes: tuple[str, ...] = ()

    @property
    def masters(self) -> tuple[tuple[int, ...], ...]:
        return tuple(tuple(int(a) for a in powers) for powers in self.differential["masters"])

    @property
    def variables(self) -> tuple[str, ...]:
        return tuple(str(name) for name in self.differential["variables"])

    @property
    def identifier(self) -> str:
        """The family's name as a name of programming languages."""
        name = "".join(c if c.isascii() and c.isalnum() else "_" for c in self.family.name)
        return name if name[:1].isalpha() else f"family_{name}"


def system_of(material: Material) -> DifferentialSystem:
    """The differential system read back from its printed form.

    Raises
    ------
    InputError
        If the data do not fit the family.
    """
    family = material.family
    field = ring(("d", *(invariant.name for invariant in family.invariants)))
    count = len(material.masters)
    matrices = {}
    for name in material.variables:
        entries = []
        for row, column, text in material.differential["matrices"][name]:
            if not (0 <= row < count and 0 <= column < count):
                raise InputError(f"the matrix of {name} has an entry ({row}, {column}) of {count} masters")
            entries.append((row, column, parse_rational(text, field)))
        matrices[name] = tuple(entries)
    sizes = {invariant.name: invariant.dimension for invariant in family.invariants}
    unknown = [name for name in material.variables if name not in sizes]
    if unknown:
        raise InputError(f"{family.name} has no invariant {unknown[0]!r}; {nearest(unknown[0], list(sizes))}")
    return DifferentialSystem(
        family.name,
        material.masters,
        material.variables,
        tuple(sizes[name] for name in material.variables),
        family.unit,
        family.dimension,
        field,
        matrices,
        (),
    )


def conventions(material: Material) -> tuple[str, ...]:
    """Lines that say what the integrals are."""
    family = material.family
    loops = len(family.loops)
    factor = "exp(eps*EulerGamma)" if loops == 1 else f"exp({loops}*eps*EulerGamma)"
    lines = [
        f"Family {family.name}; written by ibpred {ibpred.__version__}.",
        f"d = {family.dimension} - 2*eps; measure {factor} * prod_l d^d k_l/(i pi^(d/2)).",
        "Lines D (each with -i0; m2 - q^2 for a momentum q):",
    ]
    for number, line in enumerate(family.lines, start=1):
        mass = f"; mass^2 {line.mass2}" if line.mass2 else ""
        lines.append(f"  {number}: {line.text}{mass}{' (numerator)' if line.numerator else ''}")
    if family.external:
        lines.append(f"External momenta {', '.join(family.external)} (incoming), products:")
        for i, row in enumerate(family.gram):
            for j in range(i + 1):
                lines.append(f"  {family.external[j]}.{family.external[i]} = {row[j]}")
    if material.solution is not None and "region" in material.solution:
        lines.append(f"The solution holds for {', '.join(material.solution['region'])}.")
    lines += [f"Note: {note}" for note in material.notes]
    return tuple(_harmless(line) for line in lines)


def _harmless(line: str) -> str:
    """A line that stays inside a comment of any language."""
    return "".join(c if c.isprintable() and c != "\\" else " " for c in line)


def ratio_equation(name: str, text: str) -> tuple[str, str]:
    """Both sides of the equation that defines a variable: ``x = t/s`` or ``-s/m2 = (1-w)^2/w``."""
    left, equals, right = text.partition("=")
    return (left.strip(), right.strip()) if equals else (name, text)


def words_of(term: Data, solution: Data) -> list[tuple[str, list[str]]]:
    """The words of a term, each with the variable it is an integral in; empty words are left out."""
    words = term["words"] if "words" in term else [term["word"]]
    variables = [str(level["variable"]) for level in solution["levels"]]
    return [(variable, list(word)) for variable, word in zip(variables, words, strict=False) if word]


def checked_names(names: Sequence[str]) -> tuple[str, ...]:
    """Names of symbols that are identifiers of ASCII letters, digits and underscores.

    Raises
    ------
    InputError
        For any other.
    """
    for name in names:
        if not (name.isascii() and name.isidentifier()):
            raise InputError(f"{name!r} is no name of a symbol")
    return tuple(names)
