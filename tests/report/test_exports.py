"""Exports: run, compiled or read back, and compared with the results they came from."""

from __future__ import annotations

import importlib.util
import json
import shutil
import subprocess
from collections.abc import Iterator
from fractions import Fraction
from pathlib import Path
from types import ModuleType

import numpy as np
import pytest
from scipy.integrate import solve_ivp

from ibpred.errors import ExpressionError, InputError
from ibpred.exact.grammar import parse
from ibpred.progress import SILENT
from ibpred.report.export.expressions import Dialect, translated
from ibpred.report.export.formats import Format, exported
from ibpred.report.export.material import Material
from ibpred.report.latex import expression_latex
from ibpred.run.chain.chain import Chain
from ibpred.run.folder.exports import chain_material, folder_material
from ibpred.run.folder.whole import run_whole
from ibpred.run.storage.files import read_family_file
from ibpred.run.storage.store import Store
from ibpred.run.values.evaluate import evaluate

FAMILIES = Path(__file__).parents[2] / "families"


@pytest.fixture(scope="module")
def chain(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Chain]:
    definition = read_family_file(FAMILIES / "massless-box.toml")
    with Store(tmp_path_factory.mktemp("store")) as store:
        yield Chain(definition, store, SILENT, 1)


@pytest.fixture(scope="module")
def material(chain: Chain) -> Material:
    return chain_material(chain, 1, 20)


def loaded(text: str, name: str, folder: Path) -> ModuleType:
    path = folder / f"{name}.py"
    path.write_text(text, encoding="utf-8")
    spec = importlib.util.spec_from_file_location(name, path)
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


@pytest.fixture(scope="module")
def box(material: Material, tmp_path_factory: pytest.TempPathFactory) -> ModuleType:
    name, text = exported(material, Format.NUMPY)
    assert name == "massless_box_numpy.py"
    return loaded(text, "box_numpy", tmp_path_factory.mktemp("numpy"))


def test_numpy_self_test_reaches_the_physical_region(box: ModuleType) -> None:
    # from s = -1 to s = 1 around the branch points with nothing but the differential system
    assert box.POINTS == ((-1.0, -1 / 3), (1.0, -1 / 3))
    assert box.self_test() < 1e-8


def test_numpy_order_by_order_with_scipy(box: ModuleType, chain: Chain) -> None:
    start, end = box.POINTS[0], (2.0, -0.7)
    solved = solve_ivp(
        box.laurent_right_hand_side,
        (0, 1),
        box.boundary_values(0),
        method="DOP853",
        args=(start, end),
        rtol=1e-11,
        atol=1e-11,
    )
    found = box.laurent(solved.y[:, -1])
    values = evaluate(chain, {"s": Fraction(2), "t": Fraction(-7, 10)}, (), 1, 15)
    for got, value in zip(found, values, strict=True):
        for order, ball in value.epsilon.items():
            assert got[order] == pytest.approx(complex(float(ball.re), float(ball.im)), abs=1e-8)


def test_numpy_at_numeric_eps_with_scipy(box: ModuleType) -> None:
    # the truncated Laurent series at small eps, carried at that eps, is again one up to the next order
    eps = 1e-3
    start, end = box.POINTS

    def summed(number: int) -> np.ndarray:
        coefficients = box.laurent(box.boundary_values(number))
        return np.array([sum(c * eps**k for k, c in row.items()) for row in coefficients])

    solved = solve_ivp(
        box.right_hand_side, (0, 1), summed(0), method="DOP853", args=(start, end, eps), rtol=1e-12, atol=1e-9
    )
    wanted = summed(1)
    assert np.abs(solved.y[:, -1] - wanted).max() < 2e3 * eps**2
    assert np.abs(wanted).max() > 1e6  # the leading pole


def test_expanded_matrices_are_the_expansion(box: ModuleType) -> None:
    point = np.array([-1.3 + 0.2j, 0.4 - 0.1j])
    layers = box.expanded_matrices(point)
    eps = 1e-2
    total = sum(layers[j] * eps**j for j in range(len(layers)))
    # the massless box is linear in eps and needs no rescaling
    assert np.abs(total - box.matrices(point, eps)).max() < 1e-12


def test_c_self_test(material: Material, tmp_path: Path) -> None:
    compiler = shutil.which("cc") or shutil.which("gcc")
    if compiler is None:
        pytest.skip("no C compiler")
    name, text = exported(material, Format.C)
    (tmp_path / name).write_text(text, encoding="utf-8")
    program = tmp_path / "self-test"
    command = [compiler, "-std=c99", "-Wall", "-Werror", "-DSELF_TEST", name, "-lm", "-o", str(program)]
    subprocess.run(command, cwd=tmp_path, check=True, capture_output=True)
    done = subprocess.run([program], capture_output=True, text=True, check=True)
    assert float(done.stdout.split()[-1]) < 1e-8


def test_sympy_module(material: Material, tmp_path: Path, chain: Chain) -> None:
    import sympy

    module = loaded(exported(material, Format.SYMPY)[1], "box_sympy", tmp_path)
    system = chain.derivation().system
    d, s, t, eps = sympy.symbols("d s t eps")
    at = {d: sympy.Rational(7, 3), s: 5, t: -2}
    values = {"d": Fraction(7, 3), "s": Fraction(5), "t": Fraction(-2)}
    for name in system.variables:
        for row, column, value in system.matrices[name]:
            wanted = value.substitute(values).to_fraction()
            got = module.derivatives[name][row, column].subs(at)
            assert Fraction(int(got.p), int(got.q)) == wanted
    # the canonical form by substitution: T^-1 (A T - dT/dx) = eps sum A_l dlog l
    x = sympy.Symbol("x")
    matrix = module.derivatives["t"].subs({d: 4 - 2 * eps, s: -1, t: -x}) * -1
    T = module.transformation
    canonical = T.inv() * (matrix * T - T.diff(x))
    wanted_matrix = sum(
        (A * sympy.diff(sympy.log(l), x) for l, A in module.letters.items()), sympy.zeros(3, 3)
    )
    assert (canonical - eps * wanted_matrix).applyfunc(sympy.simplify) == sympy.zeros(3, 3)
    assert module.functions[2][0] == 4
    assert module.functions[2][2] == -4 * sympy.pi**2 / 3


def test_other_algebra_systems_hold_every_entry(material: Material) -> None:
    wolfram = exported(material, Format.WOLFRAM)[1]
    pari = exported(material, Format.PARI)[1]
    for text in (wolfram, pari):
        assert text.count("(") == text.count(")")
        assert text.count("[") == text.count("]")
        assert text.count("{") == text.count("}")
        assert "2*(d - 3)/(s^2*(s + t))" in text
    assert "{3, 1} -> 2*(d - 3)/(s^2*(s + t))" in wolfram


def test_latex_is_balanced(material: Material) -> None:
    text = exported(material, Format.LATEX)[1]
    assert text.count("{") - text.count(r"\{") == text.count("}") - text.count(r"\}")
    assert text.count(r"\begin") == text.count(r"\end")
    assert text.startswith(r"\documentclass")


def test_json_document(material: Material) -> None:
    document = json.loads(exported(material, Format.JSON)[1])
    assert document["family"] == "massless-box"
    assert document["diffeq"] == json.loads(json.dumps(material.differential))
    assert len(document["evaluate"]) == 2


def test_a_folder_exports_without_computing(chain: Chain, tmp_path: Path) -> None:
    folder = tmp_path / "results"
    run_whole(chain, FAMILIES / "massless-box.toml", folder, 15)
    module = loaded(exported(folder_material(folder), Format.NUMPY)[1], "box_folder", tmp_path)
    assert module.self_test() < 1e-8
    with pytest.raises(InputError, match="no folder of results"):
        folder_material(tmp_path)


def test_text_of_a_file_is_never_code(material: Material) -> None:
    matrices = {**material.differential["matrices"], "s": [[0, 0, "__import__('os').getpid()"]]}
    bad = Material(
        material.family, {**material.differential, "matrices": matrices}, None, None, (), material.signs
    )
    for target in Format:
        if target not in (Format.JSON, Format.LATEX):
            with pytest.raises(ExpressionError):
                exported(bad, target)


@pytest.mark.parametrize(
    "text",
    [
        "-2*(d-3)/(s^2*(s+t))",
        "-(a-b)-(c-d)",
        "-a^2",
        "(-a)^2",
        "1/2*a/3",
        "a-(b+c)/-2",
        "2^3*a^-2",
        "-1/(2*a)",
    ],
)
def test_dialects_keep_the_value(text: str) -> None:
    # read the written text again with the same grammar
    def symbol(name: str) -> str:
        return name

    values = {name: Fraction(n, 7) for n, name in enumerate("abcdst", start=3)}
    dialect = Dialect(str, symbol, lambda base, power: f"{base}^({power})", str)

    def value_of(expression: str) -> Fraction:
        return parse(expression, lambda number: number, lambda name: values[name])

    assert value_of(translated(text, dialect)) == value_of(text)


def test_square_roots_and_other_variables(tmp_path: Path) -> None:
    import sympy

    with Store(tmp_path / "box") as store:
        family = read_family_file(FAMILIES / "triangle-massive-loop.toml")
        chain = Chain(family, store, SILENT, 1)
        triangle = chain_material(chain, 0, 15)
    for target in Format:
        exported(triangle, target)
    module = loaded(exported(triangle, Format.SYMPY)[1], "triangle_sympy", tmp_path)
    s, m2, w = sympy.symbols("s m2 w")
    assert sympy.Eq(-s / m2, (w - 1) ** 2 / w) in module.ratios
    assert loaded(exported(triangle, Format.NUMPY)[1], "triangle_numpy", tmp_path).self_test() < 1e-8
    text = "(x-sqrt(x*(4+x)))/(x+sqrt(x*(4+x)))"
    roots = Dialect(
        str, lambda name: name, lambda base, power: f"{base}^{power}", lambda inner: f"R[{inner}]"
    )
    assert translated(text, roots) == "(x - R[x*(4 + x)])/(x + R[x*(4 + x)])"
    assert expression_latex(text) == r"(x-\sqrt{x\,(4+x)})/(x+\sqrt{x\,(4+x)})"
    with pytest.raises(ExpressionError):
        translated("sqrt(x", roots)
