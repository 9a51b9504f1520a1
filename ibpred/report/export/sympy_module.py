"""A Python module of SymPy expressions."""

from __future__ import annotations

import keyword
from collections.abc import Iterable, Sequence
from fractions import Fraction

from ibpred.report.export.expressions import Dialect, translated
from ibpred.report.export.material import Data, Material, checked_names, conventions, ratio_equation, words_of

_TAKEN = {
    "Eq",
    "sqrt",
    "Matrix",
    "Rational",
    "Symbol",
    "Function",
    "SparseMatrix",
    "pi",
    "I",
    "zeta",
    "log",
    "polylog",
    "exp",
    "im",
    "word",
}
_CONSTANTS = {
    "I": "I",
    "pi": "pi",
    "log2": "log(2)",
    "log3": "log(3)",
    "sqrt3": "sqrt(3)",
    "clausen2": "im(polylog(2, exp(I*pi/3)))",
    "clausen4": "im(polylog(4, exp(I*pi/3)))",
    "logsine3": 'Symbol("logsine3")',
    "logsine4": 'Symbol("logsine4")',
    "li4half": "polylog(4, Rational(1, 2))",
    "li5half": "polylog(5, Rational(1, 2))",
    "li6half": "polylog(6, Rational(1, 2))",
    "li51half": 'Symbol("li51half")',
    "zeta53": 'Symbol("zeta53")',
    **{f"zeta{n}": f"zeta({n})" for n in (3, 5, 7, 9, 11)},
}


def sympy_module(material: Material) -> str:
    """Masters, differential equations, epsilon-form and solution as SymPy objects."""
    count = len(material.masters)
    lines = [*(f"# {line}" for line in conventions(material)), ""]
    lines.append(
        "from sympy import (Eq, Function, I, Rational, SparseMatrix, Symbol, exp, im, log, pi, polylog, "
        "sqrt, zeta)"
    )
    lines.append("")
    names = checked_names(["d", "eps", *material.variables])
    lines += [f'{_name(name)} = Symbol("{name}")' for name in names]
    dialect = _dialect(names)
    lines += ["", f"masters = {list(material.masters)!r}", "", "# dI/dv = A_v I", "derivatives = {"]
    for name in material.variables:
        matrix = _matrix(material.differential["matrices"][name], count, dialect)
        lines.append(f'    "{name}": {matrix},')
    lines.append("}")
    if material.epsilon is not None and material.epsilon["transformation"]:
        lines += _epsilon(material.epsilon, count, material.variables)
        if material.solution is not None:
            lines += _solution(material.solution, material.epsilon["variables"])
    return "\n".join(lines) + "\n"


def _name(name: str) -> str:
    return f"{name}_" if keyword.iskeyword(name) or name in _TAKEN else name


def _number(value: Fraction) -> str:
    return str(value) if value.denominator == 1 else f"Rational({value.numerator}, {value.denominator})"


def _dialect(names: Iterable[str]) -> Dialect:
    known = {name: _name(name) for name in names}

    def symbol(name: str) -> str:
        if name in known:
            return known[name]
        if name in _CONSTANTS:
            return _CONSTANTS[name]
        raise KeyError(name, *known, *_CONSTANTS)

    return Dialect(_number, symbol, _power, lambda text: f"sqrt({text})")


def _power(base: str, power: int) -> str:
    return f"{base}**{power}" if power >= 0 else f"{base}**({power})"


def _matrix(entries: Sequence[Sequence[object]], size: int, dialect: Dialect) -> str:
    pairs = ", ".join(f"({row}, {column}): {translated(str(text), dialect)}" for row, column, text in entries)
    return f"SparseMatrix({size}, {size}, {{{pairs}}})"


def _epsilon(data: Data, count: int, taken: Sequence[str]) -> list[str]:
    ratios = checked_names(data["variables"])
    dialect = _dialect(["eps", *ratios])
    definitions = _dialect([*taken, *ratios])
    lines = ["", "# epsilon-form: I = T f, df = eps * sum_l A_l dlog(l) f, in the ratios"]
    lines += [f'{_name(name)} = Symbol("{name}")' for name in ratios]
    sides = [ratio_equation(name, data["ratios"][name]) for name in ratios]
    equations = ", ".join(f"Eq({translated(a, definitions)}, {translated(b, definitions)})" for a, b in sides)
    lines.append(f"ratios = [{equations}]")
    lines.append("letters = {")
    for letter in data["letters"]:
        matrix = _matrix(data["matrices"][letter], count, dialect)
        lines.append(f"    {translated(letter, dialect)}: {matrix},")
    lines.append("}")
    lines.append(f"transformation = {_matrix(data['transformation'], count, dialect)}")
    return lines


def _solution(data: Data, ratios: Sequence[str]) -> list[str]:
    dialect = _dialect(ratios)
    lines = [
        "",
        "# word(x, l1, ..., ln) = int_0^x dlog(l1) word(x, l2, ..., ln), word(x, x, ..., x) = log(x)^n/n!",
        "# (with several ratios the first argument says which one runs from 0)",
        'word = Function("word")',
        "functions = {",
    ]
    for function in data["functions"]:
        lines.append(f"    {function['master']}: {{")
        for entry in function["orders"]:
            terms = []
            for term in entry["terms"]:
                factors = [f"({translated(term['coefficient'], dialect)})"]
                for variable, word in words_of(term, data):
                    letters = ", ".join(translated(letter, dialect) for letter in word)
                    factors.append(f"word({translated(variable, dialect)}, {letters})")
                terms.append("*".join(factors))
            lines.append(f"        {entry['order']}: {' + '.join(terms) or '0'},")
        lines.append("    },")
    lines.append("}")
    return lines
