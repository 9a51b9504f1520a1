"""Progress lines: the plan with its time, and what is left at the pace so far."""

from __future__ import annotations

import pytest

from ibpred.cli import progress
from ibpred.cli.progress import duration, terminal_progress


def test_plan_and_pace(monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> None:
    clock = [100.0]
    monkeypatch.setattr(progress.time, "monotonic", lambda: clock[0])
    with terminal_progress() as told:
        told.stage("identities")
        clock[0] += 7
        told.advance(1, 4)  # nothing was planned: no guess at what is left
        told.stage("samples: degrees")
        clock[0] += 2
        told.advance(100, None)
        told.plan("2 variables", 100, 6100)  # 2 s for 100 samples: 120 s for 6000 more
        told.stage("samples: numerators")
        clock[0] += 58
        told.advance(3100, 6100)  # 60 s for 3100
    lines = capsys.readouterr().err.splitlines()
    assert lines == [
        "ibpred: identities",
        "ibpred: identities: 1 of 4",
        "ibpred: samples: degrees",
        "ibpred: plan: 2 variables; about 2 min",
        "ibpred: samples: numerators",
        "ibpred: samples: numerators: 3100 of 6100, about 58 s left",
    ]


@pytest.mark.parametrize(
    ("seconds", "words"),
    [
        (0.2, "less than 1 s"),
        (59, "59 s"),
        (119, "119 s"),
        (600, "10 min"),
        (9000, "2 h"),
        (200_000, "2 days"),
    ],
)
def test_durations(seconds: float, words: str) -> None:
    assert duration(seconds) == words
