"""A script for PARI/GP."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence

from ibpred.report.export.expressions import Dialect, translated
from ibpred.report.export.material import Data, Material, checked_names, conventions, ratio_equation

_CONSTANTS = {
    "I": "I",
    "pi": "Pi",
    "log2": "log(2)",
    "log3": "log(3)",
    "sqrt3": "sqrt(3)",
    "clausen2": "imag(polylog(2, exp(I*Pi/3)))",
    "clausen4": "imag(polylog(4, exp(I*Pi/3)))",
    "logsine3": "(-intnum(t = 0, 2*Pi/3, log(2*sin(t/2))^2))",
    "logsine4": "(-intnum(t = 0, 2*Pi/3, log(2*sin(t/2))^3))",
    "li4half": "polylog(4, 1/2)",
    "li5half": "polylog(5, 1/2)",
    "li6half": "polylog(6, 1/2)",
    "li51half": "suminf(n = 2, 2.^-n/n^5*sum(m = 1, n - 1, 1/m))",
    "zeta53": "zetamult([5, 3])",
    **{f"zeta{n}": f"zeta({n})" for n in (3, 5, 7, 9, 11)},
}


def pari_script(material: Material) -> str:
    """Masters, differential equations, epsilon-form and solution as GP objects.

    Names of several letters might be those of GP functions and get the ending ``_v`` (but for ``eps``).
    """
    count = len(material.masters)
    names = checked_names(["d", "eps", *material.variables])
    dialect = _dialect(names)
    lines = [f"\\\\ {line}" for line in conventions(material)]
    renamed = [f"{name} is {_name(name)}" for name in names if _name(name) != name]
    if renamed:
        lines.append(f"\\\\ renamed: {', '.join(renamed)}")
    lines += ["", "masters = [" + ", ".join(str(list(p)) for p in material.masters) + "];"]
    for name in material.variables:
        lines.append(f"\\\\ dI/d{name} = derivative_{name} * I")
        entries = material.differential["matrices"][name]
        lines.append(f"derivative_{name} = {_matrix(entries, count, dialect)};")
    if material.epsilon is not None and material.epsilon["transformation"]:
        lines += _epsilon(material.epsilon, count, material.variables)
        if material.solution is not None:
            lines += _solution(material.solution, material.epsilon)
    return "\n".join(lines) + "\n"


def _name(name: str) -> str:
    plain = name == "eps" or any(c.isdigit() for c in name) or (len(name) == 1 and name.islower())
    return name if plain and not name.startswith("_") else f"{name.lstrip('_')}_v"


def _dialect(names: Iterable[str], roots: dict[str, str] | None = None) -> Dialect:
    """The dialect; square roots get names, since GP has none of rational functions."""
    named = {} if roots is None else roots
    known = {name: _name(name) for name in names}

    def symbol(name: str) -> str:
        if name in known:
            return known[name]
        if name in _CONSTANTS:
            return _CONSTANTS[name]
        raise KeyError(name, *known, *_CONSTANTS)

    return Dialect(str, symbol, _power, lambda text: named.setdefault(text, f"root{len(named) + 1}"))


def _power(base: str, power: int) -> str:
    return f"{base}^{power}" if power >= 0 else f"{base}^({power})"


def _matrix(entries: Sequence[Sequence[object]], size: int, dialect: Dialect) -> str:
    grid = [["0"] * size for _ in range(size)]
    for row, column, text in entries:
        grid[int(str(row))][int(str(column))] = translated(str(text), dialect)
    return "[" + "; ".join(", ".join(line) for line in grid) + "]"


def _epsilon(data: Data, count: int, invariants: Sequence[str]) -> list[str]:
    ratios = checked_names(data["variables"])
    roots: dict[str, str] = {}
    dialect = _dialect(["eps", *ratios], roots)
    definitions = _dialect([*invariants, *ratios])
    lines = ["", "\\\\ epsilon-form: I = T f, df = eps sum_l A_l dlog(l) f"]
    for name in ratios:
        left, right = ratio_equation(name, data["ratios"][name])
        lines.append(f"\\\\ {translated(left, definitions)} = {translated(right, definitions)}")
    lines.append("letters = [" + ", ".join(translated(letter, dialect) for letter in data["letters"]) + "];")
    matrices = ", ".join(_matrix(data["matrices"][letter], count, dialect) for letter in data["letters"])
    lines.append(f"letter_matrices = [{matrices}];")
    lines.append(f"transformation = {_matrix(data['transformation'], count, dialect)};")
    for text, name in roots.items():
        lines.append(f"\\\\ {name} = sqrt({text})")
    return lines


def _numbers(term: Data, number: Mapping[str, int]) -> list[object]:
    """Numbers of the letters of a word, or of the words of all levels."""
    if "words" in term:
        return [[number[letter] for letter in word] for word in term["words"]]
    return [number[letter] for letter in term["word"]]


def _solution(data: Data, epsilon: Data) -> list[str]:
    dialect = _dialect(epsilon["variables"])
    number = {letter: i for i, letter in enumerate(data["letters"], start=1)}
    lines = [
        "",
        "\\\\ functions[i] = list of [order, [[coefficient, word], ...]]; a word lists the numbers of its",
        "\\\\ letters, the one integrated last first; integrals are from 0, [x, ..., x] is log(x)^n/n!",
        f"\\\\ with several ratios one word for each of [{', '.join(v['variable'] for v in data['levels'])}]",
        f"wordletters = [{', '.join(translated(letter, dialect) for letter in data['letters'])}];",
        "{functions = [",
    ]
    functions = []
    for function in data["functions"]:
        orders = []
        for entry in function["orders"]:
            terms = [
                f"[{translated(term['coefficient'], dialect)}, {_numbers(term, number)}]"
                for term in entry["terms"]
            ]
            orders.append(f"[{entry['order']}, [{', '.join(terms)}]]")
        functions.append(f"  [{', '.join(orders)}]")
    lines.append(",\n".join(functions))
    lines.append("];}")
    return lines
