"""A source file in the Wolfram language."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from fractions import Fraction

from ibpred.report.export.expressions import Dialect, translated
from ibpred.report.export.material import Data, Material, checked_names, conventions, ratio_equation, words_of

_CONSTANTS = {
    "I": "I",
    "pi": "Pi",
    "log2": "Log[2]",
    "log3": "Log[3]",
    "sqrt3": "Sqrt[3]",
    "clausen2": "Im[PolyLog[2, Exp[I*Pi/3]]]",
    "clausen4": "Im[PolyLog[4, Exp[I*Pi/3]]]",
    "logsine3": "logsine3",
    "logsine4": "logsine4",
    "li4half": "PolyLog[4, 1/2]",
    "li5half": "PolyLog[5, 1/2]",
    "li6half": "PolyLog[6, 1/2]",
    "li51half": "li51half",
    "zeta53": "zeta53",
    **{f"zeta{n}": f"Zeta[{n}]" for n in (3, 5, 7, 9, 11)},
}


def wolfram_package(material: Material) -> str:
    """Masters, differential equations, epsilon-form and solution as one association.

    Symbols of the file whose name begins with a capital (they might be built in) or has an underscore
    (which is a pattern there) are written ``v$Name`` with ``$`` for underscores.
    """
    count = len(material.masters)
    names = checked_names(["d", "eps", *material.variables])
    dialect = _dialect(names)
    masters = ", ".join(_list(powers) for powers in material.masters)
    matrices = ",\n    ".join(
        f'"{name}" -> {_matrix(material.differential["matrices"][name], count, dialect)}'
        for name in material.variables
    )
    fields = [
        f'"family" -> "{material.identifier}"',
        f'"masters" -> {{{masters}}}',
        f'"variables" -> {{{", ".join(map(_name, material.variables))}}}',
        f'"derivatives" -> <|\n    {matrices}|>',
    ]
    if material.epsilon is not None and material.epsilon["transformation"]:
        fields += _epsilon(material.epsilon, count, material.variables)
        if material.solution is not None:
            fields.append(_solution(material.solution, material.epsilon["variables"]))
    comment = "\n".join(
        f"(* {line.replace('*)', '* )').replace('(*', '( *')} *)" for line in conventions(material)
    )
    body = ",\n  ".join(fields)
    return f"{comment}\n(* dI/dv = A_v I; the value of this file is the association *)\n<|\n  {body}\n|>\n"


def _name(name: str) -> str:
    if "_" in name or name[0].isupper():
        return "v$" + name.replace("_", "$")
    return name


def _list(values: Iterable[object]) -> str:
    return "{" + ", ".join(map(str, values)) + "}"


def _dialect(names: Iterable[str]) -> Dialect:
    known = {name: _name(name) for name in names}

    def symbol(name: str) -> str:
        if name in known:
            return known[name]
        if name in _CONSTANTS:
            return _CONSTANTS[name]
        raise KeyError(name, *known, *_CONSTANTS)

    def number(value: Fraction) -> str:
        return str(value)

    return Dialect(number, symbol, _power, lambda text: f"Sqrt[{text}]")


def _power(base: str, power: int) -> str:
    return f"{base}^{power}" if power >= 0 else f"{base}^({power})"


def _matrix(entries: Sequence[Sequence[object]], size: int, dialect: Dialect) -> str:
    rules = ", ".join(
        f"{{{int(str(row)) + 1}, {int(str(column)) + 1}}} -> {translated(str(text), dialect)}"
        for row, column, text in entries
    )
    return f"SparseArray[{{{rules}}}, {{{size}, {size}}}]"


def _epsilon(data: Data, count: int, invariants: Sequence[str]) -> list[str]:
    ratios = checked_names(data["variables"])
    dialect = _dialect(["eps", *ratios])
    definitions = _dialect([*invariants, *ratios])
    matrices = ",\n    ".join(_matrix(data["matrices"][letter], count, dialect) for letter in data["letters"])
    sides = [ratio_equation(name, data["ratios"][name]) for name in ratios]
    ratio_text = ", ".join(f"{translated(a, definitions)} == {translated(b, definitions)}" for a, b in sides)
    return [
        f'"ratios" -> {{{ratio_text}}}',
        f'"letters" -> {_list(translated(letter, dialect) for letter in data["letters"])}',
        f'"letterMatrices" -> {{\n    {matrices}}}',
        f'"transformation" -> {_matrix(data["transformation"], count, dialect)}',
    ]


def _solution(data: Data, ratios: Sequence[str]) -> str:
    dialect = _dialect(ratios)
    functions = []
    for function in data["functions"]:
        orders = []
        for entry in function["orders"]:
            terms = []
            for term in entry["terms"]:
                factors = [f"({translated(term['coefficient'], dialect)})"]
                for variable, word in words_of(term, data):
                    letters = ", ".join(translated(letter, dialect) for letter in word)
                    factors.append(f"word[{translated(variable, dialect)}, {letters}]")
                terms.append("*".join(factors))
            orders.append(f"{entry['order']} -> {' + '.join(terms) or '0'}")
        functions.append("<|" + ", ".join(orders) + "|>")
    joined = ",\n    ".join(functions)
    return (
        "(* word[x, l1, ..., ln] is the integral over dlog(l1) of word[x, l2, ..., ln] from 0 to x, "
        f'word[x, x, ..., x] = Log[x]^n/n! *)\n  "functions" -> {{\n    {joined}}}'
    )
