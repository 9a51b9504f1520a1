"""What stands in the sections of the page, as HTML fragments and plain rows for the template."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from functools import partial
from typing import Any

from markupsafe import Markup, escape

from ibpred.family.definition import FamilyDefinition
from ibpred.report.drawing import family_svg, sector_svg
from ibpred.report.export.material import ratio_equation
from ibpred.report.json_common import Labelled
from ibpred.report.page.formula import Name, read_formula, total
from ibpred.report.page.mathml import Typesetter, derivative, displayed, indexed, integral
from ibpred.report.text import integral_text
from ibpred.sectors.order import sector_of

Data = Mapping[str, Any]

_LARGEST_MATRIX = 14
_SHORT_LETTER = 40  # characters of a letter that fits into a title


@dataclass(frozen=True)
class MasterRow:
    """A master: its symbol, the integral, a picture of its sector (empty for none)."""

    symbol: Markup
    integral: str
    picture: Markup


@dataclass(frozen=True)
class Titled:
    """Formulas under a title; `note` says what is not shown."""

    title: Markup
    formulas: tuple[Markup, ...]
    note: str = ""


@dataclass(frozen=True)
class Obstacle:
    """A block without epsilon-form: what is known of it, as (name, text)."""

    rows: str
    reason: str
    facts: tuple[tuple[str, str], ...]


@dataclass(frozen=True)
class Offered:
    """Variables in which some square roots are rational; whether all letters are linear in them."""

    roots: tuple[Markup, ...]
    variables: tuple[Markup, ...]
    linear: bool


@dataclass(frozen=True)
class ConstantRow:
    """A boundary constant and where it comes from."""

    function: Markup
    order: Markup
    value: Markup
    provenance: str


@dataclass(frozen=True)
class ValueRow:
    """An integral at a point: its coefficients as (order, real part, imaginary part, radius)."""

    integral: Markup
    provenance: str
    certified: bool
    coefficients: tuple[tuple[str, str, str, str], ...]


@dataclass(frozen=True)
class ValueTable:
    """Values at one point."""

    point: str
    rows: tuple[ValueRow, ...]


def typesetter(family: FamilyDefinition) -> Typesetter:
    """A typesetter that leaves the invariants whole: in ``m2`` the digit is no index."""
    return Typesetter([invariant.name for invariant in family.invariants])


def _math(body: str) -> Markup:
    return Markup(f"<math>{body}</math>")


def picture(family: FamilyDefinition) -> Markup:
    """The family's graph; empty where it comes from no graph."""
    return Markup(family_svg(family)) if family.graph is not None else Markup("")


def master_rows(family: FamilyDefinition, masters: Sequence[Sequence[int]]) -> tuple[MasterRow, ...]:
    """The masters."""
    pictures: dict[int, Markup] = {}
    rows = []
    for number, powers in enumerate(masters, start=1):
        sector = sector_of(tuple(powers))
        if sector not in pictures:
            drawn = sector_svg(family, sector, "") if family.graph is not None else ""
            pictures[sector] = Markup(drawn)
        symbol = _math(indexed("I", number))
        rows.append(MasterRow(symbol, integral_text(family.name, powers), pictures[sector]))
    return tuple(rows)


def derivatives(data: Data, setter: Typesetter) -> tuple[Titled, ...]:
    """The differential equations, one group for each invariant."""
    groups = []
    for name in data["variables"]:
        variable = setter.name(name)
        formulas, left_out = _equations(data["matrices"][name], "I", setter, partial(_derivative, variable))
        note = f"{left_out} long rows are left out here; they are in diffeq.json." if left_out else ""
        title = Markup(f"Derivatives in <math>{variable}</math>")
        groups.append(Titled(title, formulas, note))
    return tuple(groups)


def _derivative(variable: str, row: int) -> str:
    return derivative("I", row, variable)


def _equations(
    entries: Sequence[Sequence[Any]], symbol: str, setter: Typesetter, left: Callable[[int], str]
) -> tuple[tuple[Markup, ...], int]:
    """A sparse matrix as equations ``left(row) = sum of entries times symbols``; and rows left out."""
    rows: dict[int, list[tuple[str, Name]]] = {}
    for row, column, text in entries:
        rows.setdefault(row, []).append((text, Name(f"{symbol}{column + 1}")))
    formulas, left_out = [], 0
    for row, terms in sorted(rows.items()):
        if sum(len(text) for text, _ in terms) > _LONGEST_ROW:
            left_out += 1
            continue
        formulas.append(Markup(setter.display(left(row + 1), total(terms))))
    return tuple(formulas), left_out


_LONGEST_ROW = 4000


def reductions(data: Labelled, setter: Typesetter) -> tuple[tuple[Markup, ...], int]:
    """Integrals or sums in terms of the masters, and how many are left out for their length."""
    formulas, left_out = [], 0
    for name, terms in data.rows:
        if sum(len(text) for _, text in terms) > _LONGEST_ROW:
            left_out += 1
            continue
        right = total([(text, Name(f"I{index + 1}")) for index, text in terms])
        formulas.append(Markup(setter.display(f"<mtext>{escape(name)}</mtext>", right)))
    return tuple(formulas), left_out


def ratios(data: Data, setter: Typesetter) -> tuple[Markup, ...]:
    """The variables of the epsilon-form."""
    found = []
    for name, text in data["ratios"].items():
        left, right = ratio_equation(name, text)
        found.append(_math(f"{_drawn(left, setter)}<mo>=</mo>{_drawn(right, setter)}"))
    return tuple(found)


def _drawn(text: str, setter: Typesetter) -> str:
    body = setter.expression(text)
    return body if body is not None else f"<mtext>{escape(text)}</mtext>"


def letters(data: Data, setter: Typesetter) -> tuple[Markup, ...]:
    """The alphabet, numbered."""
    return tuple(
        _math(f"{indexed('l', number)}<mo>=</mo>{_drawn(letter, setter)}")
        for number, letter in enumerate(data["letters"], start=1)
    )


def offered(data: Data, setter: Typesetter) -> Offered | None:
    """Variables in which square roots are rational, where they are not used."""
    offer = data.get("offered_variables")
    if offer is None:
        return None
    roots = tuple(Markup(setter.inline(f"sqrt({radicand})")) for radicand in offer["radicands"])
    return Offered(roots, ratios({"ratios": offer["variables"]}, setter), bool(offer["letters_linear"]))


def canonical(data: Data, setter: Typesetter) -> tuple[Titled, ...]:
    """The matrices of the letters and the transformation."""
    if not data["letters"]:
        return ()
    size = len(data.get("rows", ())) or 1 + max(entry[0] for entry in data["transformation"])
    groups = []
    for number, letter in enumerate(data["letters"], start=1):
        entries = data["matrices"][letter]
        title = f"<math>{indexed('l', number)}</math>"
        if len(letter) <= _SHORT_LETTER:
            title += f" = {setter.inline(letter)}"
        title = Markup(f"Residues at {title}")
        if size <= _LARGEST_MATRIX:
            matrix = setter.matrix(entries, size)
            groups.append(Titled(title, (Markup(displayed(matrix)),)))
        else:
            formulas, _ = _equations(entries, "f", setter, lambda row: f"<mi>d</mi>{indexed('f', row)}")
            groups.append(Titled(title, formulas))
    formulas, left_out = _equations(data["transformation"], "f", setter, lambda row: indexed("I", row))
    note = f"{left_out} long rows are left out here; they are in epsform.json." if left_out else ""
    groups.append(Titled(Markup("Masters in canonical functions"), formulas, note))
    return tuple(groups)


def obstacles(data: Data) -> tuple[Obstacle, ...]:
    """The blocks without epsilon-form."""
    found = []
    for item in data["obstructions"]:
        facts = []
        if item["operator"]:
            facts.append(("Picard–Fuchs operator at ε = 0", str(item["operator"])))
        if len(item["factors"]) > 1:
            facts.append(("factors", "; ".join(item["factors"])))
        if item["geometry"]:
            facts.append(("geometry", str(item["geometry"])))
        form = item["period_form"]
        if form:
            told = f"at {form['point']} in t = {form['t']}; see epsform.json, or `ibpred epsform`"
            facts.append(("ε-form with periods", told))
        for place, exponents in item["operator_exponents"] or item["exponents"]:
            facts.append((f"exponents at {place}", ", ".join(exponents)))
        rows = ", ".join(str(row + 1) for row in item["rows"])
        found.append(Obstacle(rows, str(item["reason"]), tuple(facts)))
    return tuple(found)


def functions(data: Data, setter: Typesetter) -> tuple[Titled, ...]:
    """The canonical functions by order, zeros left out; without letters the masters themselves."""
    symbol = "f" if data["letters"] else "I"
    groups = []
    for function in data["functions"]:
        formulas, left_out = [], 0
        number = function["master"] + 1
        for entry in function["orders"]:
            if entry["text"] == "0":
                continue
            body = setter.expression(entry["text"])
            if body is None:
                left_out += 1
                continue
            left = f"<msubsup><mi>{symbol}</mi><mn>{number}</mn>{_order(entry['order'])}</msubsup>"
            formulas.append(Markup(displayed(f"{left}<mo>=</mo>{body}")))
        note = f"{left_out} long orders are left out here; they are in solution.json." if left_out else ""
        groups.append(Titled(_math(indexed(symbol, number)), tuple(formulas), note))
    return tuple(groups)


def _order(order: int) -> str:
    sign = "<mo>−</mo>" if order < 0 else ""
    return f'<mrow><mo stretchy="false">(</mo>{sign}<mn>{abs(order)}</mn><mo stretchy="false">)</mo></mrow>'


def constants(data: Data, setter: Typesetter) -> tuple[ConstantRow, ...]:
    """The boundary constants with their provenance."""
    symbol = "f" if data["letters"] else "I"
    rows = []
    for constant in data["constants"]:
        fit = constant.get("fitted")
        provenance = "derived"
        if fit is not None:
            provenance = f"fitted: {fit['digits']} digits support it, odds of a chance hit {fit['odds']}"
        rows.append(
            ConstantRow(
                _math(indexed(symbol, constant["master"] + 1)),
                _math(f"<msup><mi>ε</mi><mn>{constant['order']}</mn></msup>"),
                Markup(setter.inline(constant["value"])),
                provenance,
            )
        )
    return tuple(rows)


def value_tables(family: str, data: Sequence[Data]) -> tuple[ValueTable, ...]:
    """Values at points, with how they were obtained."""
    tables = []
    for table in data:
        point = ", ".join(f"{name} = {value}" for name, value in table["point"].items())
        rows = []
        for value in table["integrals"]:
            route = str(value.get("route", ""))
            kind = "rigorous balls" if value["certified"] else "estimated errors"
            coefficients = tuple(
                (order, part["re"], part["im"], part["radius"])
                for order, part in sorted(value["epsilon"].items(), key=lambda item: int(item[0]))
            )
            rows.append(
                ValueRow(
                    _math(integral(family, value["powers"])),
                    f"{kind}, {route}" if route else kind,
                    bool(value["certified"]),
                    coefficients,
                )
            )
        tables.append(ValueTable(point or "no invariants", tuple(rows)))
    return tuple(tables)


def polynomials(inspection: Data, setter: Typesetter) -> tuple[Markup, ...]:
    """U and F."""
    found = []
    for name in ("U", "F"):
        body = setter.expression(inspection[name])
        if body is None:
            found.append(Markup(f"<code>{name} = {escape(inspection[name])}</code>"))
        else:
            found.append(_math(f"<mi>{name}</mi><mo>=</mo>{body}"))
    return tuple(found)


def products(family: FamilyDefinition, setter: Typesetter) -> tuple[Markup, ...]:
    """The products of the external momenta."""
    found = []
    for i, row in enumerate(family.gram):
        for j in range(i + 1):
            first, second = setter.name(family.external[j]), setter.name(family.external[i])
            left = f"<msup>{first}<mn>2</mn></msup>" if i == j else f"<mrow>{first}<mo>·</mo>{second}</mrow>"
            found.append(_math(f"{left}<mo>=</mo>{setter.formula(read_formula(str(row[j])))}"))
    return tuple(found)
