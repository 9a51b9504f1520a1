"""The readable summary of a whole run, in Markdown with LaTeX formulas."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.report.latex import expression_latex, integral_latex, matrix_latex
from ibpred.report.text import values_text

Data = Mapping[str, Any]

_WORK = "## Work"


@dataclass(frozen=True)
class Stage:
    """A stage of the run: what came out, and how long it took (text, in seconds)."""

    name: str
    outcome: str
    seconds: str


@dataclass(frozen=True)
class Effort:
    """What the reduction of the derivatives took.

    Attributes
    ----------
    rows
        Equations written down.
    multiply_adds
        Of one replayed sample.
    samples
        Sample points.
    nanoseconds
        For one multiply-add of one sample, all threads together; None where the samples came from the store.
    """

    rows: int
    multiply_adds: int
    samples: int
    nanoseconds: str | None


def summary(
    family: FamilyDefinition,
    masters: Sequence[Powers],
    files: Mapping[str, Data],
    stages: Sequence[Stage],
    effort: Effort | None,
) -> str:
    """Markdown text of the summary."""
    parts = [f"# {family.title}", _conventions(family), _family(files["inspect.json"])]
    parts.append(_masters(family, masters))
    if "epsform.json" in files:
        parts.append(_epsilon(files["epsform.json"]))
    if "solution.json" in files:
        parts.append(_solution(files["solution.json"]))
    if "values.json" in files:
        parts.append(_values(files["values.json"]))
    parts.append(_evidence(files["evidence.json"]))
    parts.append(_stages(stages, effort))
    return "\n\n".join(parts) + "\n"


def _conventions(family: FamilyDefinition) -> str:
    loops = len(family.loops)
    return (
        f"Family `{family.name}`: $d={family.dimension}-2\\epsilon$, lines $D=m^2-q^2-i0$, measure "
        f"$e^{{{'' if loops == 1 else loops}\\epsilon\\gamma_E}}\\prod_l d^dk_l/(i\\pi^{{d/2}})$."
    )


def _family(data: Data) -> str:
    return "\n".join(
        [
            "## Family",
            "",
            f"- loops {data['loops']}, legs {data['legs']}",
            f"- $U = {expression_latex(data['U'])}$",
            f"- $F = {expression_latex(data['F'])}$",
            f"- {data['sectors']} sectors, {len(data['zero_sectors'])} vanish, "
            f"{len(data['sector_classes'])} classes of equivalent ones",
        ]
    )


def _masters(family: FamilyDefinition, masters: Sequence[Powers]) -> str:
    lines = ["## Masters", ""]
    for number, powers in enumerate(masters, start=1):
        lines.append(f"{number}. $I_{{{number}}} = {integral_latex(family.name, powers)}$")
    if family.graph is not None:
        lines += ["", "![The family's graph and those of the masters' sectors](graphs.svg)"]
    return "\n".join(lines)


def _epsilon(data: Data) -> str:
    lines = ["## ε-form", ""]
    for name, text in data["ratios"].items():
        lines.append(f"- ratio ${name} = {expression_latex(text)}$")
    for obstruction in data["obstructions"]:
        rows = ", ".join(str(row + 1) for row in obstruction["rows"])
        lines.append(f"- obstructed, rows {rows}: {obstruction['reason']}")
        if obstruction["operator"]:
            lines.append(f"  - Picard–Fuchs operator at ε = 0: `{obstruction['operator']}`")
        for place, exponents in obstruction["exponents"]:
            lines.append(f"  - exponents at {place}: {', '.join(exponents)}")
    if not data["letters"]:
        return "\n".join(lines)
    size = len(data.get("rows", ())) or 1 + max(entry[0] for entry in data["transformation"])
    lines += [f"- letters {', '.join(f'${expression_latex(letter)}$' for letter in data['letters'])}", ""]
    lines.append("$$df = \\epsilon\\sum_l A_l\\, d\\log(l)\\, f,\\qquad I = T f$$")
    for letter in data["letters"]:
        lines += [
            "",
            f"$$A_{{{expression_latex(letter)}}} = {matrix_latex(data['matrices'][letter], size)}$$",
        ]
    lines += ["", f"$$T = {matrix_latex(data['transformation'], size)}$$"]
    return "\n".join(lines)


def _solution(data: Data) -> str:
    lines = [
        "## Solution",
        "",
        "$G(a_1,\\dots,a_n;x)=\\int_0^x\\frac{dt}{t-a_1}G(a_2,\\dots,a_n;t)$, "
        "$G(0,\\dots,0;x)=\\log^n(x)/n!$."
        if data["letters"]
        else "The masters depend on no ratio; at the unit's Euclidean value of modulus one:",
    ]
    if data.get("named"):
        corner = " \\ll ".join((*data["corner"], "1"))
        lines += [
            "",
            "$I$ is the same with $d\\log l_k(t)$ in the place of $dt/(t-a)$ where a letter is named; at "
            f"zero the integral of $dt/t$ is regularised to $\\log x$. Roots are positive where ${corner}$.",
            "",
        ]
        for name, letter in data["named"].items():
            lines.append(f"- ${expression_latex(name)} = {expression_latex(letter)}$")
    if "region" in data:
        lines += [
            "",
            "These functions hold for " + ", ".join(f"${text}$" for text in data["region"]) + ".",
        ]
    symbol = "f" if data["letters"] else "I"
    for function in data["functions"]:
        lines.append("")
        for entry in function["orders"]:
            if entry["text"] != "0":
                text = expression_latex(entry["text"])
                lines.append(
                    f"- $[{symbol}_{{{function['master'] + 1}}}]_{{\\epsilon^{{{entry['order']}}}}} = {text}$"
                )
    return "\n".join(lines)


def _values(data: Data) -> str:
    lines = ["## Values", ""]
    for table in data["tables"]:
        lines += ["```", values_text(table), "```", ""]
    return "\n".join(lines).rstrip()


def _evidence(data: Data) -> str:
    lines = ["## Evidence", ""]
    for check in data["checks"]:
        mark = "holds" if check["passed"] else "**fails**"
        lines.append(f"- {check['name']}: {mark}; {check['detail']}")
    lines += [
        "",
        "Reductions and differential equations are reconstructed from samples modulo primes and confirmed at "
        "fresh primes and points: certain with overwhelming probability, not proved. Balls are rigorous "
        "given the ε-form and its boundary constants. Cross-check whatever enters a publication or an "
        "error budget.",
    ]
    return "\n".join(lines)


def read_stages(text: str) -> tuple[Stage, ...]:
    """The stages of a run from its summary; none where the summary has no such table."""
    found = []
    for line in text.partition(_WORK)[2].splitlines():
        cells = [cell.strip() for cell in line.strip("| ").split("|")]
        if line.startswith("|") and len(cells) == 3:
            found.append(Stage(*cells))
    return tuple(found[2:])  # after the head of the table and the line below it


def _stages(stages: Sequence[Stage], effort: Effort | None) -> str:
    lines = [_WORK, "", "| stage | outcome | seconds |", "| --- | --- | --- |"]
    # a cell of the table holds no line breaks and no bars
    lines += [f"| {s.name} | {' '.join(s.outcome.split()).replace('|', '/')} | {s.seconds} |" for s in stages]
    if effort is not None:
        lines += [
            "",
            f"Derivatives of the masters: {effort.rows} equations, "
            f"{effort.multiply_adds} multiply-adds a sample, {effort.samples} samples"
            + (f", {effort.nanoseconds} ns a multiply-add and sample." if effort.nanoseconds else "."),
        ]
    return "\n".join(lines)
