"""The page of a folder: complete in itself, harmless, and its formulas are those of the files."""

from __future__ import annotations

import json
import re
import xml.etree.ElementTree as ET
from collections.abc import Callable
from dataclasses import replace
from fractions import Fraction
from functools import cache
from html.parser import HTMLParser
from pathlib import Path

import pytest

from ibpred.cli.common import guarded
from ibpred.cli.main import group
from ibpred.errors import ExpressionError, InputError
from ibpred.exact.grammar import parse_number, parse_rational
from ibpred.exact.rational import ring
from ibpred.report.article import latex_article
from ibpred.report.citations import citations
from ibpred.report.page.build import html_page
from ibpred.report.page.formula import Call, Number, Power, Quotient, read_formula
from ibpred.report.page.mathml import Typesetter
from ibpred.run.folder.dossier import read_dossier

ROOT = Path(__file__).parents[2]
SOLUTIONS = ROOT / "solutions"
NAMES = ("massless-box", "planar-double-box", "sunrise-equal-masses", "kite-massive", "tadpole")
VOID = {"meta", "br", "link", "img", "hr", "input"}


class Page(HTMLParser):
    """Checks that elements are closed in order; notes ids, links and what would load something."""

    def __init__(self) -> None:
        super().__init__()
        self.open: list[str] = []
        self.ids: list[str] = []
        self.targets: list[str] = []
        self.loading: list[str] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        if tag not in VOID:
            self.open.append(tag)
        for name, value in attrs:
            if name == "id":
                self.ids.append(value or "")
            if tag == "a" and name == "href":
                self.targets.append(value or "")
            elif name in ("src", "href", "srcset", "data") or name.startswith("on"):
                self.loading.append(f"{tag} {name}={value}")
        if tag in ("script", "iframe", "object", "embed", "link", "base"):
            self.loading.append(tag)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.handle_starttag(tag, attrs)
        if tag not in VOID:
            self.open.pop()

    def handle_endtag(self, tag: str) -> None:
        assert self.open
        assert self.open.pop() == tag


@cache
def page_of(name: str) -> str:
    return html_page(read_dossier(SOLUTIONS / name))


@pytest.mark.parametrize("name", NAMES)
def test_page_is_complete_in_itself(name: str) -> None:
    text = page_of(name)
    page = Page()
    page.feed(text)
    page.close()
    assert not page.open
    assert not page.loading
    assert "url(" not in text
    assert "@import" not in text
    assert {target.removeprefix("#") for target in page.targets} <= set(page.ids)


def test_the_same_bytes_every_time() -> None:
    assert html_page(read_dossier(SOLUTIONS / "massless-box")) == page_of("massless-box")


def test_text_of_the_family_is_no_markup() -> None:
    dossier = read_dossier(SOLUTIONS / "massless-box")
    family = replace(dossier.material.family, title="<script>alert(1)</script> & <b>")
    page = html_page(replace(dossier, material=replace(dossier.material, family=family)))
    assert "<script>" not in page
    assert "&lt;script&gt;" in page


def test_values_and_digits_are_all_there() -> None:
    dossier = read_dossier(SOLUTIONS / "sunrise-equal-masses")
    page = page_of("sunrise-equal-masses")
    for table in dossier.material.tables:
        for value in table["integrals"]:
            for part in value["epsilon"].values():
                assert part["re"] in page
                assert part["radius"] in page
    assert "rigorous balls" in page
    assert "Picard–Fuchs operator" in page


def infix(element: ET.Element) -> str:
    """MathML back to an expression."""
    children = [infix(child) for child in element]
    tag = element.tag
    if tag == "mfrac":
        return f"(({children[0]})/({children[1]}))"
    if tag == "msup":
        return f"({children[0]})^({children[1]})"
    if tag == "msub":
        return "".join(children)
    if tag == "mspace":
        return "*"
    if tag == "mo":
        return {"−": "-"}.get(element.text or "", element.text or "")
    if tag in ("mi", "mn", "mtext"):
        return {"ε": "eps"}.get(element.text or "", element.text or "")
    return "".join(children)


@pytest.mark.parametrize("name", ["planar-double-box", "sunrise-equal-masses"])
def test_drawn_coefficients_are_those_of_the_file(name: str) -> None:
    data = json.loads((SOLUTIONS / name / "diffeq.json").read_text(encoding="utf-8"))
    field = ring(("d", *data["variables"]))
    setter = Typesetter(data["variables"])
    count = 0
    for variable in data["variables"]:
        for _, _, text in data["matrices"][variable]:
            drawn = setter.expression(text)
            assert drawn is not None
            again = infix(ET.fromstring(f"<math>{drawn}</math>"))
            assert parse_rational(again, field) == parse_rational(text, field)
            count += 1
    assert count > 5


def test_trees() -> None:
    assert read_formula("G(0,1;x)") == Call("G", tuple(map(read_formula, ("0", "1", "x"))), (",", ";"))
    assert read_formula("2*x/3/y") == Quotient(
        (Number("2"), read_formula("x")), (Number("3"), read_formula("y"))
    )
    assert read_formula("x^-2") == Power(read_formula("x"), "-2")
    for wrong in ("", "1+", "x^y", "(x", "x)", "f(1,", "$", "x y"):
        with pytest.raises(ExpressionError):
            read_formula(wrong)


def test_what_is_too_long_or_no_expression_is_shown_as_it_stands() -> None:
    setter = Typesetter(())
    assert setter.inline("x <& y") == "<code>x &lt;&amp; y</code>"
    assert setter.inline("+".join(["x"] * 5000)).startswith("<code>")


def test_names() -> None:
    setter = Typesetter(["m2"])
    assert setter.name("m2") == "<mi>m2</mi>"
    assert setter.name("x12") == "<msub><mi>x</mi><mn>12</mn></msub>"
    assert setter.name("zeta53") == "<msub><mi>ζ</mi><mn>5,3</mn></msub>"


def braces(text: str) -> int:
    return text.count("{") - text.count("}")


@pytest.mark.parametrize("name", NAMES)
def test_document(name: str) -> None:
    text = latex_article(read_dossier(SOLUTIONS / name))
    plain = text.replace(r"\{", "").replace(r"\}", "")
    assert braces(plain) == 0
    begun, ended = (sorted(re.findall(rf"\\{word}\{{(\w+\*?)\}}", text)) for word in ("begin", "end"))
    assert begun == ended
    assert "Evidence" in text
    assert "arXiv:" in text
    assert text.isascii() or not set(text) & set("εγπ−×²")


def test_citations_follow_the_route() -> None:
    def methods(name: str) -> set[str]:
        return {c.method for c in citations(read_dossier(SOLUTIONS / name).material)}

    assert "auxiliary mass" not in methods("massless-box")
    assert "expansion by regions" in methods("massless-box")
    material = read_dossier(SOLUTIONS / "massless-box").material
    text = json.dumps(material.tables).replace('"epsilon-form"', '"auxiliary mass"')
    estimated = replace(material, tables=tuple(json.loads(text)))
    assert "auxiliary mass" in {c.method for c in citations(estimated)}
    assert "multiple polylogarithms, numerically" in methods("massless-box")
    assert "ε-form with periods" in methods("sunrise-equal-masses")
    assert "ε-factorised form" not in methods("tadpole")


def command(*words: str) -> int:
    return guarded(lambda: group.main(args=[*words, "--quiet"], standalone_mode=False))


def test_command_on_a_folder(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    words = ["report", str(SOLUTIONS / "massless-box"), "--output", str(tmp_path / "out"), "--json"]
    assert command(*words) == 0
    data = json.loads(capsys.readouterr().out)
    assert data["family"] == "massless-box"
    assert Path(data["page"]).read_text(encoding="utf-8").startswith("<!DOCTYPE html>")
    assert Path(data["latex"]).read_text(encoding="utf-8").startswith(r"\documentclass")


def test_command_on_a_family_file(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    family = str(ROOT / "families" / "bubble.toml")
    words = ["report", family, "--work", str(tmp_path / "work"), "--output", str(tmp_path / "out")]
    assert command(*words) == 0
    assert (tmp_path / "out" / "bubble.html").exists()
    capsys.readouterr()


def test_folder_of_something_else(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="no folder of results"):
        read_dossier(tmp_path)


def test_numbers_survive() -> None:
    """A check of the test's own reader: signs, powers, quotients."""
    setter = Typesetter(())
    evaluate: Callable[[str], Fraction] = parse_number
    for text in ("-3/4", "2*(1-3)^3/5", "1/(2*3)^2-7"):
        drawn = setter.expression(text)
        assert drawn is not None
        assert evaluate(infix(ET.fromstring(f"<math>{drawn}</math>"))) == evaluate(text)
