"""Results as readable text for a terminal."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

Data = dict[str, Any]


def integral_text(family: str, powers: Sequence[int]) -> str:
    """An integral as ``box(1,1,1,1)``."""
    return f"{family}({','.join(map(str, powers))})"


def columns(rows: Sequence[Sequence[str]], gap: str = "  ") -> list[str]:
    """Lines of left-aligned columns."""
    if not rows:
        return []
    widths = [max(len(row[i]) for row in rows) for i in range(len(rows[0]))]
    return [
        gap.join(cell.ljust(width) for cell, width in zip(row, widths, strict=True)).rstrip() for row in rows
    ]


def inspect_text(data: Data) -> str:
    """The family at a glance."""
    lines = [
        f"family   {data['family']}",
        f"loops    {data['loops']}",
        f"legs     {data['legs']}",
        f"U        {data['U']}",
        f"F        {data['F']}",
        f"sectors  {data['sectors']}, of which {len(data['zero_sectors'])} vanish",
        f"classes of equivalent sectors: {len(data['sector_classes'])}",
    ]
    for members in data["sector_classes"]:
        first, *others = ("".join(map(str, sector)) for sector in members)
        lines.append(f"  {first}" + (f"  =  {', '.join(others)}" if others else ""))
    return "\n".join(lines)


def masters_text(data: Data) -> str:
    """The masters, one a line."""
    lines = [f"{data['count']} master integral{'s' if data['count'] != 1 else ''}"]
    rows = [
        [f"  {number}", integral_text(data["family"], master["powers"]), f"{master['lines']} lines"]
        for number, master in enumerate(data["masters"], start=1)
    ]
    lines += columns(rows)
    if "chosen" in data:
        chosen, others = (
            ", ".join(integral_text(data["family"], powers) for powers in data["chosen"][key])
            for key in ("masters", "instead_of")
        )
        lines.append(f"chosen so that denominators split: {chosen}; the total order gives {others}")
    return "\n".join(lines)


def named_integral(integral: Data) -> str:
    """An integral of several families' tables."""
    name = integral["family"] + (f".{integral['crossing']}" if "crossing" in integral else "")
    return integral_text(name, integral["powers"])


def counts_text(data: Data) -> str:
    """The independent count of the masters, with the sectors where it differs."""
    lines = [
        f"independent count: critical points of U + F agree in {data['agreeing']} of {data['sectors']} "
        "classes of sectors"
    ]
    for other in data["others"]:
        sector = "".join(map(str, other["sector"]))
        points = "?" if other["critical_points"] is None else other["critical_points"]
        lines.append(f"  {sector}: {other['masters']} masters, {points} points: {other['note']}")
    return "\n".join(lines)


def common_masters_text(data: Data) -> str:
    """The masters of several families, one a line."""
    lines = [f"{data['count']} master integral{'s' if data['count'] != 1 else ''}"]
    rows = [
        [f"  {number}", named_integral(master), f"{master['lines']} lines"]
        for number, master in enumerate(data["masters"], start=1)
    ]
    return "\n".join(lines + columns(rows))


def combination_text(terms: Sequence[tuple[str, str]]) -> str:
    """A sum of (coefficient, object)."""
    if not terms:
        return "0"
    parts = []
    for coefficient, name in terms:
        if coefficient == "1":
            parts.append(f"+ {name}")
        elif coefficient == "-1":
            parts.append(f"- {name}")
        elif coefficient.startswith("-") and not _is_sum(coefficient[1:]):
            parts.append(f"- {coefficient[1:]} * {name}")
        elif _is_sum(coefficient):
            parts.append(f"+ ({coefficient}) * {name}")
        else:
            parts.append(f"+ {coefficient} * {name}")
    text = " ".join(parts)
    return text[2:] if text.startswith("+ ") else text


def _is_sum(text: str) -> bool:
    depth = 0
    for i, character in enumerate(text):
        depth += (character == "(") - (character == ")")
        if depth == 0 and character in "+-" and i > 0:
            return True
    return False


def reduction_line(entry: Data) -> str:
    """One integral or named sum in terms of the masters."""
    terms = [(t["coefficient"], named_integral(t["master"])) for t in entry["terms"]]
    return f"{entry['name'] if 'name' in entry else named_integral(entry)} = {combination_text(terms)}"


def differential_text(data: Data) -> str:
    """The differential equations, one row a line."""
    names = [integral_text(data["family"], powers) for powers in data["masters"]]
    if not data["variables"]:
        return "the family has no invariant, so there is no differential equation"
    lines = [f"I{i + 1} = {name}" for i, name in enumerate(names)]
    for variable in data["variables"]:
        by_row: dict[int, list[tuple[str, str]]] = {}
        for row, column, value in data["matrices"][variable]:
            by_row.setdefault(row, []).append((value, f"I{column + 1}"))
        lines.append("")
        lines += [f"d I{row + 1} / d {variable} = {combination_text(by_row[row])}" for row in sorted(by_row)]
    return "\n".join(lines)


def epsilon_text(data: Data) -> str:
    """The canonical system, or what stands in its way."""
    lines = [
        f"variable {name} with {text}" if "=" in text else f"ratio {name} = {text}"
        for name, text in data["ratios"].items()
    ]
    if data["obstructions"]:
        lines.append("no ε-form was found:" if data.get("complete", True) else "not finished in the time:")
        for obstruction in data["obstructions"]:
            lines.append(
                f"  rows {', '.join(str(r + 1) for r in obstruction['rows'])}: {obstruction['reason']}"
            )
            if obstruction["operator"]:
                lines.append(f"    Picard–Fuchs operator at eps = 0: {obstruction['operator']}")
            if len(obstruction["factors"]) > 1:
                lines.append(f"    factors: {'; '.join(obstruction['factors'])}")
            if obstruction["geometry"]:
                lines.append(f"    {obstruction['geometry']}")
            for place, exponents in obstruction["operator_exponents"]:
                lines.append(f"    exponents of the operator at {place}: {', '.join(exponents)}")
            for place, exponents in obstruction["exponents"]:
                lines.append(f"    exponents of the block at {place}: {', '.join(exponents)}")
            if obstruction["period_form"]:
                lines += _period_lines(obstruction["period_form"])
        return "\n".join(lines + _offer_lines(data))
    lines.append(f"letters: {', '.join(data['letters']) or 'none'}")
    for letter in data["letters"]:
        by_row: dict[int, list[tuple[str, str]]] = {}
        for row, column, value in data["matrices"][letter]:
            by_row.setdefault(row, []).append((value, f"f{column + 1}"))
        lines.append("")
        lines.append(f"eps dlog({letter}):")
        lines += [f"  d f{row + 1}: {combination_text(by_row[row])}" for row in sorted(by_row)]
    lines.append("")
    lines.append("I = T f with")
    by_row = {}
    for row, column, value in data["transformation"]:
        by_row.setdefault(row, []).append((value, f"f{column + 1}"))
    lines += [f"  I{row + 1} = {combination_text(by_row[row])}" for row in sorted(by_row)]
    return "\n".join(lines + _offer_lines(data))


def _offer_lines(data: Data) -> list[str]:
    """Variables in which the square roots are rational, where they are not used."""
    offer = data.get("offered_variables")
    if offer is None:
        return []
    roots = ", ".join(f"sqrt({radicand})" for radicand in offer["radicands"])
    letters = "all letters linear" if offer["letters_linear"] else "not all letters linear"
    lines = ["", f"variables in which {roots} are rational ({letters}), not used by itself:"]
    return lines + [f"  {name} with {text}" for name, text in offer["variables"].items()]


def _period_lines(form: Data) -> list[str]:
    """The epsilon-form of a block with periods as functions."""

    def series(terms: Sequence[str]) -> str:
        powers = ("", "t", *(f"t^{k}" for k in range(2, len(terms))))
        parts = [
            t if not power else power if t == "1" else f"-{power}" if t == "-1" else f"{t}*{power}"
            for t, power in zip(terms, powers, strict=False)
            if t != "0"
        ]
        return "+".join(parts).replace("+-", "-") + "+..."

    closed = {(i, j): text for i, j, text in form["closed"]}
    lines = [
        f"    eps-form with periods at {form['point']}, t = {form['t']}, theta = t*d/dt: "
        "theta M = eps B M, where",
        f"      psi0 = t^({form['exponent']})*({series(form['psi0'])})",
    ]
    for i, j, terms in form["matrix"]:
        lines.append(f"      B{i + 1}{j + 1} = {closed.get((i, j), series(terms))}")
    return lines


def solution_text(data: Data) -> str:
    """The canonical functions order by order."""
    lines = [f"letters: {', '.join(data['letters']) or 'none'}"]
    lines += [f"{name} = {letter}" for name, letter in data.get("named", {}).items()]
    if "region" in data:
        lines.append(f"region: {', '.join(data['region'])}")
    for function in data["functions"]:
        lines.append("")
        for entry in function["orders"]:
            lines.append(f"f{function['master'] + 1} at eps^{entry['order']}: {entry['text']}")
    return "\n".join(lines)


def values_text(data: Data) -> str:
    """Values, one power of eps a line."""
    point = ", ".join(f"{name} = {value}" for name, value in data["point"].items())
    lines = [f"at {point}" if point else "no invariants"]
    for value in data["integrals"]:
        kind = accuracy_text(value)
        reached = value.get("digits_reached")
        if reached is not None:
            kind += f", {reached} digits" + (
                f" of {data['digits']} wanted" if reached < data["digits"] else ""
            )
        lines.append("")
        lines.append(f"{integral_text(data['family'], value['powers'])}   ({kind})")
        rows = [
            [f"  eps^{order}", part["re"], part["im"] + " i", f"+/- {part['radius']}"]
            for order, part in sorted(value["epsilon"].items(), key=lambda item: int(item[0]))
        ]
        lines += columns(rows)
    return "\n".join(lines)


_STARTS = ("regions at a corner", "limit of the expansion there")


def accuracy_text(value: Data) -> str:
    """What the radii of a value mean, and how it was obtained."""
    route = value.get("route")
    if route == "epsilon-form":
        kind = "rigorous balls" if value["certified"] else "balls given fitted constants"
        return f"{kind}, from the {route}"
    kind = "rigorous balls" if value["certified"] else "estimated errors"
    if not route:
        return kind
    return f"{kind}, {'from the' if route in _STARTS else 'by'} {route}"


def run_text(data: Data) -> str:
    """What a whole run did."""
    rows = [[stage["name"], stage["outcome"], f"{stage['seconds']} s"] for stage in data["stages"]]
    return "\n".join([*columns(rows), f"results in {data['folder']}"])


def checks_text(data: Data) -> str:
    """Checks, one a line."""
    rows = [["holds" if c["passed"] else "FAILS", c["name"], c["detail"]] for c in data["checks"]]
    return "\n".join(columns(rows))
