"""Work that is stopped for want of time: it says so, keeps what is done, and goes on to the same bytes."""

from __future__ import annotations

import json
from fractions import Fraction
from pathlib import Path

import pytest

from ibpred.cli.common import guarded
from ibpred.cli.main import group
from ibpred.epsform.form import EpsilonForm, Obstructed
from ibpred.errors import OutOfTimeError, UnfinishedError
from ibpred.exact.codec import to_data
from ibpred.progress import SILENT, Expired, Limited
from ibpred.run.chain.chain import Chain
from ibpred.run.chain.deadline import told
from ibpred.run.constants.solved import solution, solved_in_time
from ibpred.run.folder.whole import run_whole
from ibpred.run.storage.files import read_family_file
from ibpred.run.storage.store import Store
from ibpred.run.values.evaluate import evaluate
from ibpred.run.values.grids import Axis, evaluate_grid

ROOT = Path(__file__).parents[2]
FAMILIES = ROOT / "families"


def after(reports: int) -> Expired:
    """A deadline that comes after so many questions for it."""
    left = iter(range(reports))
    return lambda: next(left, None) is None


def chain_of(name: str, store: Store, expired: Expired) -> Chain:
    return Chain(read_family_file(FAMILIES / f"{name}.toml"), store, SILENT, 1, (), expired)


def test_limited_progress_stops_at_the_first_report_after_the_deadline() -> None:
    limited = Limited(SILENT, after(2))
    limited.stage("counting")
    limited.advance(1, 10)
    with pytest.raises(OutOfTimeError, match="counting") as caught:
        limited.advance(2, 10)
    assert not isinstance(caught.value, UnfinishedError)  # no other way is tried
    assert caught.value.exit_code == 1


def test_any_moment_of_stopping_leads_to_the_same_result(tmp_path: Path) -> None:
    """The deadline comes later and later; what is kept serves the next attempt."""
    with Store(tmp_path / "whole") as store:
        expected = to_data(solution(chain_of("massless-box", store, lambda: False), 2))
    stops = 0
    found = None
    with Store(tmp_path / "parts") as store:
        for reports in range(0, 200, 7):
            chain = chain_of("massless-box", store, after(reports))
            try:
                with told(chain):
                    found = to_data(solution(chain, 2))
                break
            except OutOfTimeError:
                stops += 1
        assert found == expected
    assert stops >= 3


def test_epsilon_form_goes_on_block_by_block(tmp_path: Path) -> None:
    with Store(tmp_path / "parts") as store:
        full = chain_of("massless-box", store, lambda: False)
        full.coordinates()
        reached = chain_of("massless-box", store, lambda: True)
        assert isinstance(reached.masters().masters, tuple)
        with pytest.raises(OutOfTimeError):
            reached.epsilon_form()  # no block is coupled; the couplings between them are left
        assert isinstance(full.epsilon_form(), EpsilonForm)


def test_blocks_not_looked_at_are_named(tmp_path: Path) -> None:
    with Store(tmp_path) as store:
        chain_of("sunrise-equal-masses", store, lambda: False).coordinates()
        stopped = chain_of("sunrise-equal-masses", store, lambda: True).epsilon_form()
        assert isinstance(stopped, Obstructed)
        assert not stopped.complete
        assert "time" in stopped.obstructions[0].reason
        again = chain_of("sunrise-equal-masses", store, lambda: False).epsilon_form()
        assert isinstance(again, Obstructed)
        assert again.complete


def test_solution_is_given_as_far_as_it_was_reached(tmp_path: Path) -> None:
    with Store(tmp_path) as store:
        full = chain_of("massless-box", store, lambda: False)
        low = solution(full, 1)
        chain = chain_of("massless-box", store, after(60))
        with told(chain):
            found = solved_in_time(chain, 4)
        assert found.stopped is not None
        assert "eps^4" in found.stopped.statement
        reached = len(found.solution.orders) - 1
        assert 1 <= reached < 4
        assert found.solution.orders[:2] == low.orders


def command(*words: str) -> int:
    return guarded(lambda: group.main(args=[*words, "--quiet"], standalone_mode=False))


def test_double_box_within_seconds(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Budgets of a second, then as long as it takes: the files are those of the run that was not stopped."""
    family = str(FAMILIES / "planar-double-box.toml")
    where = ["--work", str(tmp_path / "work"), "--output", str(tmp_path / "out")]
    stopped = command("run", family, *where, "--seconds", "0.5")
    told_ = capsys.readouterr().err
    assert stopped == 1
    assert "the time allowed is over" in told_
    assert "same command goes on" in told_
    assert command("run", family, *where, "--seconds", "1") in (0, 1)
    assert command("run", family, *where) == 0
    for file in (ROOT / "solutions" / "planar-double-box").glob("*.json"):
        assert (tmp_path / "out" / file.name).read_bytes() == file.read_bytes()
    assert not (tmp_path / "out" / "stopped.json").exists()


def test_stopped_run_leaves_a_finished_folder_alone(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    family = str(FAMILIES / "massless-box.toml")
    out = tmp_path / "out"
    assert command("run", family, "--work", str(tmp_path / "a"), "--output", str(out)) == 0
    before = (out / "values.json").read_bytes()
    again = command("run", family, "--work", str(tmp_path / "b"), "--output", str(out), "--seconds", "0")
    assert again == 1
    assert (out / "values.json").read_bytes() == before
    capsys.readouterr()


def test_partial_folder_says_what_it_lacks(tmp_path: Path) -> None:
    source, out = FAMILIES / "massless-box.toml", tmp_path / "out"
    with Store(tmp_path / "work") as store:
        chain_of("massless-box", store, lambda: False).derivation()
        chain_of("massless-box", store, lambda: False).coordinates()
        done = run_whole(chain_of("massless-box", store, after(1)), source, out, 20)
        assert done.stopped is not None
        assert done.data["complete"] is False
        assert json.loads((out / "stopped.json").read_text())["family"] == "massless-box"
        assert "the time allowed is over" in (out / "summary.md").read_text()
        assert (out / "diffeq.json").exists()
        assert not (out / "values.json").exists()
        assert run_whole(chain_of("massless-box", store, lambda: False), source, out, 20).stopped is None
    assert (out / "values.json").exists()
    assert not (out / "stopped.json").exists()


def test_grid_is_given_as_far_as_it_was_reached(tmp_path: Path) -> None:
    places = tuple(Fraction(-1, n) for n in range(2, 42))
    with Store(tmp_path) as store:
        first: dict[str, Fraction] = {"s": Fraction(-1), "t": places[0]}
        evaluate(chain_of("massless-box", store, lambda: False), first, ((1, 1, 1, 1),), 0, 10)
        chain = chain_of("massless-box", store, after(2))
        grid = evaluate_grid(chain, {"s": Fraction(-1)}, [Axis("t", places)], [(1, 1, 1, 1)], 0, 10)
    assert grid.stopped is not None
    assert len(grid.values) == 16
    assert len(grid.values) + len(grid.left_out) == len(places)
    assert grid.left_out[-1][1] == "the time allowed was over"


def test_reduce_gives_the_rows_that_are_known(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    family = str(FAMILIES / "massless-box.toml")
    words = ["reduce", family, "--work", str(tmp_path), "--json", "--integral", "2,1,1,1"]
    assert command(*words) == 0
    known = json.loads(capsys.readouterr().out)
    assert command(*words, "--integral", "1,1,1,-2", "--seconds", "0") == 1
    out, err = capsys.readouterr()
    assert json.loads(out) == known
    assert "1 of 2 integrals" in err


def test_verify_prints_the_checks_done(capsys: pytest.CaptureFixture[str]) -> None:
    folder = str(ROOT / "solutions" / "planar-double-box")
    assert command("verify", folder, "--json", "--seconds", "1") == 1
    out, err = capsys.readouterr()
    assert all(check["passed"] for check in json.loads(out)["checks"])
    assert "the time allowed is over" in err
