"""A C source file (C99) for numerical solvers of the differential system."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from ibpred.report.export.expressions import Dialect, translated
from ibpred.report.export.material import Material, checked_names, conventions
from ibpred.report.export.solver import Entry, SolverParts, solver_parts

_HEAD = r"""#include <complex.h>
#include <math.h>
#include <stdio.h>
#include <string.h>
"""

_FUNCTIONS = r"""
/* Point and velocity at 0 <= place <= 1 on the way from start to end, bent into the complex space along
   the -i0 of the lines so that it meets no singular point; bend = 0 goes straight. */
void @_path(double place, const double start[VARIABLES], const double end[VARIABLES], double bend,
            double complex point[VARIABLES], double complex velocity[VARIABLES])
{
    double size = 0;
    for (int v = 0; v < VARIABLES; v++)
        size = fmax(size, fmax(fabs(start[v]), fabs(end[v])));
    for (int v = 0; v < VARIABLES; v++) {
        double complex turn = I * bend * size * turns[v];
        point[v] = start[v] + place * (end[v] - start[v]) + place * (1 - place) * turn;
        velocity[v] = end[v] - start[v] + (1 - 2 * place) * turn;
    }
}

/* d(masters)/d(place) on the path, at numeric eps. */
void @_right_hand_side(double place, const double complex values[MASTERS], const double start[VARIABLES],
                       const double end[VARIABLES], double complex eps, double bend,
                       double complex found[MASTERS])
{
    double complex point[VARIABLES], velocity[VARIABLES];
    static double complex a[VARIABLES][MASTERS][MASTERS];
    @_path(place, start, end, bend, point, velocity);
    @_matrices(point, eps, a);
    for (int i = 0; i < MASTERS; i++) {
        found[i] = 0;
        for (int v = 0; v < VARIABLES; v++)
            for (int j = 0; j < MASTERS; j++)
                found[i] += velocity[v] * a[v][i][j] * values[j];
    }
}

/* d(values)/d(place) on the path, order by order: values[k][i] is the coefficient of eps^(START + k) of
   eps^shifts[i] times master i. */
void @_laurent_right_hand_side(double place, const double complex values[ORDERS][MASTERS],
                               const double start[VARIABLES], const double end[VARIABLES], double bend,
                               double complex found[ORDERS][MASTERS])
{
    double complex point[VARIABLES], velocity[VARIABLES];
    static double complex a[ORDERS][VARIABLES][MASTERS][MASTERS];
    @_path(place, start, end, bend, point, velocity);
    @_expanded_matrices(point, a);
    for (int k = 0; k < ORDERS; k++)
        for (int i = 0; i < MASTERS; i++) {
            double complex total = 0;
            for (int l = 0; l <= k; l++)
                for (int v = 0; v < VARIABLES; v++)
                    for (int j = 0; j < MASTERS; j++)
                        total += velocity[v] * a[l][v][i][j] * values[k - l][j];
            found[k][i] = total;
        }
}

/* Laurent coefficients at a point of the table, in the order of the right-hand side. */
void @_boundary_values(int number, double complex values[ORDERS][MASTERS])
{
    memset(values, 0, sizeof(double complex) * ORDERS * MASTERS);
    for (int n = 0; n < VALUES; n++) {
        if (boundary[n].point != number)
            continue;
        int place = boundary[n].order + shifts[boundary[n].row] - START;
        if (place < ORDERS)
            values[place][boundary[n].row] = boundary[n].re + I * boundary[n].im;
    }
}

static void runge_kutta(double complex y[ORDERS][MASTERS], const double start[VARIABLES],
                        const double end[VARIABLES], int steps)
{
    static double complex k[4][ORDERS][MASTERS], z[ORDERS][MASTERS];
    const double shares[4] = {0, 0.5, 0.5, 1}, h = 1.0 / steps;
    for (int step = 0; step < steps; step++) {
        for (int part = 0; part < 4; part++) {
            for (int o = 0; o < ORDERS; o++)
                for (int i = 0; i < MASTERS; i++)
                    z[o][i] = y[o][i] + (part ? shares[part] * h * k[part - 1][o][i] : 0);
            const double complex(*at)[MASTERS] = (const double complex(*)[MASTERS])z;
            @_laurent_right_hand_side((step + shares[part]) * h, at, start, end, 1.0, k[part]);
        }
        for (int o = 0; o < ORDERS; o++)
            for (int i = 0; i < MASTERS; i++)
                y[o][i] += h / 6 * (k[0][o][i] + 2 * k[1][o][i] + 2 * k[2][o][i] + k[3][o][i]);
    }
}

static double distance(double complex a[ORDERS][MASTERS], double complex b[ORDERS][MASTERS])
{
    double worst = 0, size = 0;
    for (int o = 0; o < ORDERS; o++)
        for (int i = 0; i < MASTERS; i++) {
            worst = fmax(worst, cabs(a[o][i] - b[o][i]));
            size = fmax(size, cabs(b[o][i]));
        }
    return worst / size;
}

/* Carry the values from the first point to the others and compare: the largest relative deviation;
   negative where the solver did not converge. */
double @_self_test(double tolerance)
{
    static double complex found[ORDERS][MASTERS], before[ORDERS][MASTERS], wanted[ORDERS][MASTERS];
    double worst = 0;
    for (int number = 1; number < POINTS; number++) {
        for (int steps = 64;; steps *= 2) {
            @_boundary_values(0, found);
            runge_kutta(found, points[0], points[number], steps);
            if (steps > 64 && distance(before, found) <= tolerance / 10)
                break;
            if (steps > 200000)
                return -1;
            memcpy(before, found, sizeof found);
        }
        @_boundary_values(number, wanted);
        worst = fmax(worst, distance(found, wanted));
    }
    return worst;
}

#ifdef SELF_TEST
int main(void)
{
    if (POINTS < 2) {
        puts("fewer than two points with known values: nothing to compare");
        return 0;
    }
    double worst = @_self_test(1e-8);
    printf("largest relative deviation %.1e\n", worst);
    return worst < 0 || worst > 1e-8;
}
#endif
"""


def c_source(material: Material) -> str:
    """Right-hand sides (at numeric eps and order by order), boundary values and a self-test.

    Compile with ``cc -std=c99 -DSELF_TEST FILE.c -lm`` for a program that runs the self-test.
    """
    parts = solver_parts(material)
    name = material.identifier
    names = checked_names(parts.variables)
    dialect = _dialect(names)
    lines = [
        *(f"/* {line.replace('*/', '* /').replace('/*', '/ *')} */" for line in conventions(material)),
        f"/* self-test: cc -std=c99 -DSELF_TEST {name}.c -lm && ./a.out */",
        _HEAD,
        f"/* masters: {'; '.join(','.join(map(str, powers)) for powers in parts.masters)} */",
        f"#define MASTERS {len(parts.masters)}",
        f"/* invariants, in this order: {', '.join(names)} */",
        f"#define VARIABLES {len(names)}",
        f"#define ORDERS {len(parts.layers)}",
        f"#define START ({parts.start})",
        *_tables(parts),
        "",
        "static double complex power(double complex x, int n)",
        "{",
        "    double complex total = 1;",
        "    for (int i = 0; i < (n < 0 ? -n : n); i++)",
        "        total *= x;",
        "    return n < 0 ? 1 / total : total;",
        "}",
        "",
        "/* the matrices of dI/dv = A_v I for every invariant v at numeric eps */",
        f"void {name}_matrices(const double complex point[VARIABLES], double complex eps,",
        "    double complex a[VARIABLES][MASTERS][MASTERS])",
        "{",
        *(f"    const double complex v_{n} = point[{i}];" for i, n in enumerate(names)),
        "    memset(a, 0, sizeof(double complex) * VARIABLES * MASTERS * MASTERS);",
        *_unused(names),
        "    (void)eps;",
        *(f"    a[{v}][{i}][{j}] = {translated(text, dialect)};" for v, i, j, text in parts.entries),
        "}",
        "",
        "/* coefficients of eps^0, eps^1, ... of the rescaled system */",
        f"void {name}_expanded_matrices(const double complex point[VARIABLES],",
        "    double complex a[ORDERS][VARIABLES][MASTERS][MASTERS])",
        "{",
        *(f"    const double complex v_{n} = point[{i}];" for i, n in enumerate(names)),
        "    memset(a, 0, sizeof(double complex) * ORDERS * VARIABLES * MASTERS * MASTERS);",
        *_unused(names),
        *_assignments(parts.layers, dialect),
        "}",
    ]
    return "\n".join(lines) + "\n" + _FUNCTIONS.replace("@", name)


def _unused(names: Sequence[str]) -> list[str]:
    return [f"    (void)v_{name};" for name in names]


def _dialect(names: Sequence[str]) -> Dialect:
    known = {"eps": "eps", **{name: f"v_{name}" for name in names}}

    def symbol(name: str) -> str:
        if name not in known:
            raise KeyError(name, *known)
        return known[name]

    def number(value: Fraction) -> str:
        if value.denominator == 1:
            return f"{value.numerator}.0"
        return f"({value.numerator}.0/{value.denominator}.0)"

    return Dialect(
        number, symbol, lambda base, power: f"power({base}, {power})", lambda text: f"csqrt({text})"
    )


def _assignments(layers: Sequence[Sequence[Entry]], dialect: Dialect) -> list[str]:
    return [
        f"    a[{order}][{v}][{i}][{j}] = {translated(text, dialect)};"
        for order, layer in enumerate(layers)
        for v, i, j, text in layer
    ]


def _tables(parts: SolverParts) -> list[str]:
    count = sum(len(table.values) for table in parts.tables)
    lines = [
        f"#define POINTS {len(parts.tables)}",
        f"#define VALUES {count}",
        "/* direction of the imaginary part of each invariant that keeps the -i0 of the lines (0: none) */",
        f"static const int turns[VARIABLES] = {{{', '.join(map(str, parts.turns))}}};",
        "/* order by order: eps^shifts[i] times master i */",
        f"static const int shifts[MASTERS] = {{{', '.join(map(str, parts.shifts))}}};",
        f"static const double points[{max(len(parts.tables), 1)}][VARIABLES] = {{",
        *(f"    {{{', '.join(repr(float(x)) for x in table.point)}}}," for table in parts.tables),
        *(["    {0}"] if not parts.tables else []),
        "};",
        "static const struct { int point, row, order; double re, im; }",
        f"boundary[{max(count, 1)}] = {{",
    ]
    for number, table in enumerate(parts.tables):
        lines += [f"    {{{number}, {row}, {order}, {re}, {im}}}," for row, order, re, im in table.values]
    if not count:
        lines.append("    {0, 0, 0, 0, 0}")
    return [*lines, "};"]
