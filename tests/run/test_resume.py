"""Kill -9 in the middle of a run: the next one goes on where it was, and ends with the same bytes."""

from __future__ import annotations

import resource
import signal
import sqlite3
import subprocess
import sys
import time
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
FAMILIES = ROOT / "families"


def child(family: str, folder: Path, calls: int) -> subprocess.CompletedProcess[str]:
    script = Path(__file__).parent / "resumed.py"
    arguments = [sys.executable, str(script), str(FAMILIES / f"{family}.toml"), str(folder), str(calls)]
    return subprocess.run(arguments, capture_output=True, text=True, check=False, timeout=120)


def entries(folder: Path) -> dict[str, tuple[str, bytes]]:
    """All that a store holds; pieces of unfinished work among them."""
    database = sqlite3.connect(folder / "store.sqlite")
    found = database.execute("select key, part, kind, owner, body from entry").fetchall()
    database.close()
    return {f"{key} {part}": (f"{kind} {owner}", body) for key, part, kind, owner, body in found}


def test_a_run_killed_again_and_again(tmp_path: Path) -> None:
    whole = child("box-one-leg", tmp_path / "whole", 0)
    assert whole.returncode == 0, whole.stderr
    deaths = 0
    while True:
        found = child("box-one-leg", tmp_path / "parts", 9)
        if found.returncode == 0:
            break
        assert found.returncode == -signal.SIGKILL, found.stderr
        deaths += 1
        assert deaths < 30
    assert deaths >= 2
    assert int(found.stdout) < int(whole.stdout)  # what the dead ones did is not done again
    assert entries(tmp_path / "parts") == entries(tmp_path / "whole")
    assert not any("None" not in kind for kind, _ in entries(tmp_path / "whole").values())  # no work left


@pytest.mark.slow
def test_commands_killed_at_any_moment(tmp_path: Path) -> None:
    family = tmp_path / "planar-double-box.toml"
    family.write_text((FAMILIES / family.name).read_text())
    main = "from ibpred.cli.main import main; main()"
    command = [sys.executable, "-c", main, "reduce", str(family), "--max-rank", "2", "--quiet"]
    outputs, deaths = [], 0
    for work, patience in (("whole", 600.0), ("parts", 1.5)):
        target = tmp_path / f"{work}.jsonl"
        while True:
            process = subprocess.Popen([*command, "--work", str(tmp_path / work), "--output", str(target)])
            try:
                assert process.wait(patience) == 0
                break
            except subprocess.TimeoutExpired:
                process.kill()
                process.wait()
                patience *= 1.3
                deaths += 1
        outputs.append(target.read_bytes())
    assert deaths > 1
    assert outputs[0] == outputs[1]
    assert entries(tmp_path / "parts") == entries(tmp_path / "whole")


_FULL = """
import os, sys
from pathlib import Path
from ibpred.errors import StoreError
from ibpred.run.storage.store import Store
with Store(Path(sys.argv[1])) as store:
    store.put("first", "masters", [1, 2, 3])
    try:
        for i in range(100):
            store.put_bytes(str(i), "samples", os.urandom(20000), packed=False)
    except StoreError as error:
        print(i, error)
"""


def test_a_full_disk_is_named_and_nothing_is_lost(tmp_path: Path) -> None:
    from ibpred.run.storage.store import Store

    def limit() -> None:
        resource.setrlimit(resource.RLIMIT_FSIZE, (400_000, 400_000))

    found = subprocess.run(
        [sys.executable, "-c", _FULL, str(tmp_path / "w")],
        capture_output=True,
        text=True,
        check=False,
        preexec_fn=limit,
    )
    assert found.returncode == 0, found.stderr
    written, _, message = found.stdout.partition(" ")
    assert "the disk is full, a limit on the size of files is reached" in message
    assert "nothing stored before is lost" in message
    assert 5 < int(written) < 20
    with Store(tmp_path / "w") as store:
        assert store.get("first") == [1, 2, 3]
        for i in range(int(written)):
            body = store.get_bytes(str(i))
            assert body is not None
            assert len(body) == 20000
        store.put("next", "masters", [4])
        assert store.get("next") == [4]


def test_a_kill_while_writing_leaves_old_or_new(tmp_path: Path) -> None:
    """A process that only writes, killed at some moments: every entry is whole or absent."""
    from ibpred.run.storage.store import Store

    script = (
        "import os, sys\nfrom pathlib import Path\nfrom ibpred.run.storage.store import Store\n"
        "with Store(Path(sys.argv[1])) as store:\n"
        "    for i in range(10**6):\n"
        "        with store.transaction():\n"
        "            store.put_bytes(f'{i} a', 'samples', bytes([i % 256]) * 300_000, packed=False)\n"
        "            store.put_bytes(f'{i} b', 'samples', bytes([i % 256]) * 300_000, packed=False)\n"
    )
    for pause in (0.3, 0.55, 0.8):
        folder = tmp_path / str(pause)
        process = subprocess.Popen([sys.executable, "-c", script, str(folder)])
        while not (folder / "store.sqlite").exists():
            time.sleep(0.02)
        time.sleep(pause)
        process.kill()
        process.wait()
        with Store(folder) as store:
            i = 0
            while (body := store.get_bytes(f"{i} a")) is not None:
                assert body == store.get_bytes(f"{i} b") == bytes([i % 256]) * 300_000
                i += 1
            assert store.get_bytes(f"{i} b") is None
        assert i > 0
