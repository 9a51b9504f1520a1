"""The public surface: what `import ibpred` offers, and the commands and their options."""

from __future__ import annotations

from pathlib import Path

import click

import ibpred
from ibpred.cli.main import group

FAMILIES = Path(__file__).parents[1] / "families"
SHARED = {"family", "work", "workers", "as_json", "quiet"}


def test_names() -> None:
    assert set(ibpred.__all__) == {"Families", "Family", "__version__", "load", "load_all"}
    for name in ibpred.__all__:
        assert getattr(ibpred, name)


def test_commands() -> None:
    assert {"inspect", "masters", "reduce", "diffeq", "epsform", "solve", "evaluate", "run"} <= set(
        group.commands
    )
    for command in group.commands.values():
        assert isinstance(command, click.Command)
        assert command.help
        names = {parameter.name for parameter in command.params}
        if command.name not in {"export", "verify", "report"}:  # these take a folder of results
            assert names >= SHARED, command.name


def test_methods(tmp_path: Path) -> None:
    family = ibpred.load(FAMILIES / "massless-box.toml", work=tmp_path)
    assert len(family.masters().masters) == 3
    table = family.reduce([(1, 1, 1, -1)])
    assert len(table.reductions[1, 1, 1, -1]) == 1
    assert family.differential_equation().variables == ("s", "t")
    assert len(family.epsilon_form().letters) == 2
    assert family.solve(weight=2).is_pure()
    (value,) = family.evaluate({"s": -1, "t": "-1/3"}, [(1, 1, 1, 1)], digits=20)
    assert value.epsilon[-2].re == "12"
