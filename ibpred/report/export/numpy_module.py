"""A Python module with NumPy for numerical solvers of the differential system."""

from __future__ import annotations

import keyword
from collections.abc import Sequence
from fractions import Fraction

from ibpred.report.export.expressions import Dialect, translated
from ibpred.report.export.material import Material, checked_names, conventions
from ibpred.report.export.solver import Entry, SolverParts, solver_parts

_TAKEN = {"a", "np", "eps", "point"}

_FUNCTIONS = '''

def path(place, start, end, bend=1.0):
    """Point and velocity at 0 <= place <= 1 on the way from start to end.

    The way is bent into the complex space, along the -i0 of the lines, so that it meets no singular point
    between two real points. bend=0 goes straight.
    """
    start, end = np.asarray(start, dtype=complex), np.asarray(end, dtype=complex)
    size = bend * max(np.abs(start).max(), np.abs(end).max())
    turn = 1j * size * np.array(TURNS)
    return start + place * (end - start) + place * (1 - place) * turn, end - start + (1 - 2 * place) * turn


def right_hand_side(place, values, start, end, eps, bend=1.0):
    """d(masters)/d(place) on the path, at numeric eps."""
    point, velocity = path(place, start, end, bend)
    return np.tensordot(velocity, matrices(point, eps), 1) @ values


def laurent_right_hand_side(place, values, start, end, bend=1.0):
    """d(values)/d(place) on the path, order by order in eps.

    values[k * n + i] is the coefficient of eps^(START + k) of eps^SHIFTS[i] times master i, n masters.
    """
    point, velocity = path(place, start, end, bend)
    layers = np.tensordot(expanded_matrices(point), velocity, (1, 0))
    values = np.reshape(values, (ORDERS, len(MASTERS)))
    found = np.zeros(values.shape, dtype=complex)
    for j in range(ORDERS):
        found[j:] += values[: ORDERS - j] @ layers[j].T
    return found.ravel()


def boundary_values(number):
    """Laurent coefficients at POINTS[number], in the order of `laurent_right_hand_side`."""
    values = np.zeros((ORDERS, len(MASTERS)), dtype=complex)
    for row, order, value in VALUES[number]:
        place = order + SHIFTS[row] - START
        if place < ORDERS:
            values[place, row] = value
    return values.ravel()


def laurent(values):
    """For each master its Laurent coefficients {power of eps: value} from solved values."""
    values = np.reshape(values, (ORDERS, len(MASTERS)))
    return [
        {START + k - shift: complex(value) for k, value in enumerate(column)}
        for column, shift in zip(values.T, SHIFTS)
    ]


def _runge_kutta(values, start, end, steps):
    h = 1.0 / steps
    for step in range(steps):
        x = step * h
        k1 = laurent_right_hand_side(x, values, start, end)
        k2 = laurent_right_hand_side(x + h / 2, values + h / 2 * k1, start, end)
        k3 = laurent_right_hand_side(x + h / 2, values + h / 2 * k2, start, end)
        k4 = laurent_right_hand_side(x + h, values + h * k3, start, end)
        values = values + h / 6 * (k1 + 2 * k2 + 2 * k3 + k4)
    return values


def self_test(tolerance=1e-8):
    """Carry the values from the first point to the others and compare; the largest deviation.

    It is measured against the largest of the values at the point. Raises ArithmeticError if it exceeds the
    tolerance.
    """
    worst = 0.0
    for number in range(1, len(POINTS)):
        steps, before = 64, None
        while True:
            found = _runge_kutta(boundary_values(0), POINTS[0], POINTS[number], steps)
            if before is not None and np.abs(found - before).max() <= tolerance * np.abs(found).max() / 10:
                break
            if steps > 20000:
                raise ArithmeticError("no convergence; the points lie too close to a singularity")
            before, steps = found, 2 * steps
        wanted = boundary_values(number)
        worst = max(worst, float(np.abs(found - wanted).max() / np.abs(wanted).max()))
    if worst > tolerance:
        raise ArithmeticError(f"the values carried to another point deviate by {worst:.1e}")
    return worst


if __name__ == "__main__":
    if len(POINTS) < 2:
        print("fewer than two points with known values: nothing to compare")
    else:
        print(f"largest relative deviation {self_test():.1e}")
'''


def numpy_module(material: Material) -> str:
    """Right-hand sides (at numeric eps and order by order), boundary values and a self-test."""
    parts = solver_parts(material)
    names = checked_names(parts.variables)
    dialect = _dialect(names)
    lines = [*(f"# {line}" for line in conventions(material)), "", "import numpy as np", ""]
    lines += [
        f"MASTERS = {parts.masters!r}",
        f"INVARIANTS = {names!r}",
        "# direction of the imaginary part of each invariant that keeps the -i0 of the lines (0: none)",
        f"TURNS = {parts.turns!r}",
        "# order by order: eps^SHIFTS[i] * master i, powers eps^START ... eps^(START + ORDERS - 1)",
        f"SHIFTS = {parts.shifts!r}",
        f"START = {parts.start}",
        f"ORDERS = {len(parts.layers)}",
        "# points, and there (master, power of eps, coefficient)",
        *_tables(parts),
        "",
        "",
        "def matrices(point, eps):",
        '    """The matrices of dI/dv = A_v I at numeric eps: shape (variables, n, n)."""',
        f"    {_unpacked(names)} = point",
        "    a = np.zeros((len(INVARIANTS), len(MASTERS), len(MASTERS)), dtype=complex)",
        *(f"    a[{v}, {i}, {j}] = {translated(text, dialect)}" for v, i, j, text in parts.entries),
        "    return a",
        "",
        "",
        "def expanded_matrices(point):",
        '    """Coefficients of eps^0, eps^1, ... after rescaling: shape (ORDERS, variables, n, n)."""',
        f"    {_unpacked(names)} = point",
        "    a = np.zeros((ORDERS, len(INVARIANTS), len(MASTERS), len(MASTERS)), dtype=complex)",
        *_assignments(parts.layers, dialect),
        "    return a",
    ]
    return "\n".join(lines) + "\n" + _FUNCTIONS


def _name(name: str) -> str:
    return f"{name}_" if keyword.iskeyword(name) or name in _TAKEN else name


def _unpacked(names: Sequence[str]) -> str:
    return ", ".join(map(_name, names)) + ("," if len(names) == 1 else "")


def _dialect(names: Sequence[str]) -> Dialect:
    known = {"eps": "eps", **{name: _name(name) for name in names}}

    def symbol(name: str) -> str:
        if name not in known:
            raise KeyError(name, *known)
        return known[name]

    return Dialect(_number, symbol, _power, lambda text: f"np.sqrt({text})")


def _power(base: str, power: int) -> str:
    return f"{base}**{power}" if power >= 0 else f"{base}**({power})"


def _number(value: Fraction) -> str:
    if value.denominator == 1:
        return f"{value.numerator}.0"
    return f"({value.numerator}.0/{value.denominator}.0)"


def _assignments(layers: Sequence[Sequence[Entry]], dialect: Dialect) -> list[str]:
    return [
        f"    a[{order}, {v}, {i}, {j}] = {translated(text, dialect)}"
        for order, layer in enumerate(layers)
        for v, i, j, text in layer
    ]


def _tables(parts: SolverParts) -> list[str]:
    points = [tuple(float(x) for x in table.point) for table in parts.tables]
    lines = ["POINTS = (", *(f"    {point!r}," for point in points), ")", "VALUES = ("]
    for table in parts.tables:
        lines.append("    (")
        lines += [f"        ({row}, {order}, complex({re}, {im}))," for row, order, re, im in table.values]
        lines.append("    ),")
    return [*lines, ")"]
