"""Values on curves and grids, their CSV and plots."""

from __future__ import annotations

import csv
import io
import json
from collections.abc import Iterator
from fractions import Fraction
from pathlib import Path

import pytest
from click.testing import CliRunner

from ibpred.cli.main import group
from ibpred.errors import InputError, PointError
from ibpred.progress import SILENT
from ibpred.report.grids import grid_csv, grid_data, grid_text
from ibpred.report.plots import curve_figure
from ibpred.run.chain.chain import Chain
from ibpred.run.storage.files import read_family_file
from ibpred.run.storage.store import Store
from ibpred.run.values.evaluate import evaluate, evaluate_points
from ibpred.run.values.grids import Axis, Grid, evaluate_grid

FAMILIES = Path(__file__).parents[2] / "families"


@pytest.fixture(scope="module")
def chain(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Chain]:
    definition = read_family_file(FAMILIES / "massless-box.toml")
    with Store(tmp_path_factory.mktemp("store")) as store:
        yield Chain(definition, store, SILENT, 1)


def axis(name: str, first: Fraction, last: Fraction, count: int) -> Axis:
    return Axis(name, tuple(first + (last - first) * Fraction(i, count - 1) for i in range(count)))


def data_of(chain: Chain, grid: Grid) -> dict[str, object]:
    axes = {a.name: a.values for a in grid.axes}
    return grid_data(chain.definition, axes, 20, grid.values, grid.left_out, grid.thresholds)


@pytest.fixture(scope="module")
def curve(chain: Chain) -> Grid:
    t = axis("t", Fraction(-2), Fraction(2), 41)
    return evaluate_grid(chain, {"s": Fraction(1)}, [t], (), 0, 20)


def test_a_grid_agrees_with_single_points(chain: Chain, curve: Grid) -> None:
    # the curve runs through all regions of the box, over s + t = 0 and t = 0
    for point, values in curve.values[::5]:
        for value, alone in zip(values, evaluate(chain, point, (), 0, 25), strict=True):
            assert value.powers == alone.powers
            assert value.epsilon.keys() == alone.epsilon.keys()
            for order, ball in value.epsilon.items():
                other = alone.epsilon[order]
                allowed = float(ball.radius) + float(other.radius)
                assert abs(Fraction(ball.re) - Fraction(other.re)) <= allowed
                assert abs(Fraction(ball.im) - Fraction(other.im)) <= allowed


def test_singular_points_are_named(curve: Grid) -> None:
    # at t = -1, where s + t = 0, the integrals have limits
    ((point, reason),) = curve.left_out
    assert point["t"] == 0
    assert reason.startswith("t = 0 is a singularity; massless-box(0,1,0,1) has no limit")
    assert any(point["t"] == -1 for point, _ in curve.values)
    assert curve.thresholds == (("s+t", Fraction(-1)), ("t", Fraction(0)))
    assert len(curve.values) == 40


def test_product_grid(chain: Chain) -> None:
    s = axis("s", Fraction(-2), Fraction(-1), 2)
    t = axis("t", Fraction(-3), Fraction(-1), 3)
    grid = evaluate_grid(chain, {}, [s, t], ((1, 1, 1, 1),), 0, 15)
    assert [(p["s"], p["t"]) for p, _ in grid.values] == [(a, b) for a in (-2, -1) for b in (-3, -2, -1)]
    # the massless box is symmetric in s and t
    at = {(p["s"], p["t"]): values[0].epsilon for p, values in grid.values}
    ball, other = (
        at[-2, -1][0],
        evaluate_points(chain, [{"s": Fraction(-1), "t": Fraction(-2)}], ((1, 1, 1, 1),), 0, 15)[0][
            0
        ].epsilon[0],
    )
    assert float(ball.re) == pytest.approx(float(other.re), rel=1e-13)


def test_csv_has_a_line_for_every_number(chain: Chain, curve: Grid) -> None:
    data = data_of(chain, curve)
    lines = list(csv.DictReader(io.StringIO(grid_csv(data))))
    assert len(lines) == sum(len(value.epsilon) for _, values in curve.values for value in values)
    assert set(lines[0]) == {"s", "t", "integral", "order", "re", "im", "radius", "certified", "route"}
    assert "left out: s = 1, t = 0" in grid_text(data)


@pytest.mark.parametrize(("kind", "start"), [("svg", b"<?xml"), ("png", b"\x89PNG"), ("pdf", b"%PDF")])
def test_plots(chain: Chain, curve: Grid, kind: str, start: bytes) -> None:
    data = data_of(chain, curve)
    picture = curve_figure(data, kind)
    assert picture.startswith(start)
    assert curve_figure(data, kind) == picture


def test_plots_that_cannot_be_made(chain: Chain, curve: Grid) -> None:
    data = data_of(chain, curve)
    with pytest.raises(InputError, match="svg, png, pdf"):
        curve_figure(data, "docx")
    with pytest.raises(InputError, match="exactly one"):
        curve_figure({**data, "grid": {"s": [], "t": []}}, "svg")


@pytest.mark.parametrize(
    ("fixed", "name"), [({"s": 1, "t": 1}, "t"), ({}, "t"), ({"s": 1}, "u"), ({"s": 1, "q": 2}, "t")]
)
def test_wrong_grids(chain: Chain, fixed: dict[str, int], name: str) -> None:
    exact = {key: Fraction(value) for key, value in fixed.items()}
    with pytest.raises(PointError):
        evaluate_grid(chain, exact, [axis(name, Fraction(1), Fraction(2), 2)], (), 0, 10)


def test_command(tmp_path: Path) -> None:
    family = tmp_path / "bubble.toml"
    family.write_text((FAMILIES / "bubble.toml").read_text(encoding="utf-8"), encoding="utf-8")
    table, picture = tmp_path / "bubble.csv", tmp_path / "bubble.svg"
    options = ["--quiet", "--json", "--digits", "15", "--grid", "s=-3:3:7"]
    options += ["--csv", str(table), "--plot", str(picture)]
    result = CliRunner().invoke(group, ["evaluate", str(family), *options], catch_exceptions=False)
    assert result.exit_code == 0
    data = json.loads(result.stdout)
    assert len(data["points"]) == 6
    assert len(data["left_out"]) == 1
    assert table.read_text(encoding="utf-8").startswith("s,integral,order")
    assert picture.read_bytes().startswith(b"<?xml")
    assert all(value["route"] == "epsilon-form" for entry in data["points"] for value in entry["integrals"])
