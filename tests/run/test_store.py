"""The store: what is put in comes out, and damage is named."""

from __future__ import annotations

import sqlite3
from pathlib import Path

import pytest

from ibpred.errors import StoreError, UnwritableError
from ibpred.run.store import Store


def test_round_trip_and_persistence(tmp_path: Path) -> None:
    with Store(tmp_path / "w") as store:
        assert store.get("a") is None
        store.put("a", "masters", {"x": [1, "2"]})
    with Store(tmp_path / "w") as store:
        assert store.get("a") == {"x": [1, "2"]}


def test_two_runs_exclude_each_other(tmp_path: Path) -> None:
    with Store(tmp_path), pytest.raises(StoreError, match="another run"):
        Store(tmp_path)


def test_a_file_that_is_no_database(tmp_path: Path) -> None:
    (tmp_path / "store.sqlite").write_bytes(b"not a database at all, but long enough to look" * 40)
    with pytest.raises(StoreError, match="damaged"):
        Store(tmp_path)


def test_a_foreign_database(tmp_path: Path) -> None:
    database = sqlite3.connect(tmp_path / "store.sqlite")
    database.execute("create table cats (name text)")
    database.close()
    with pytest.raises(StoreError, match="no store of ibpred"):
        Store(tmp_path)


def test_another_version(tmp_path: Path) -> None:
    Store(tmp_path).close()
    database = sqlite3.connect(tmp_path / "store.sqlite", isolation_level=None)
    database.execute("update about set format = 'ibpred-store-99'")
    database.close()
    with pytest.raises(StoreError, match="ibpred-store-99"):
        Store(tmp_path)


def test_a_changed_entry(tmp_path: Path) -> None:
    with Store(tmp_path) as store:
        store.put("a", "masters", [1, 2, 3])
    database = sqlite3.connect(tmp_path / "store.sqlite", isolation_level=None)
    database.execute("update entry set body = x'00'")
    database.close()
    with Store(tmp_path) as store, pytest.raises(StoreError, match="masters"):
        store.get("a")


def test_a_folder_that_cannot_be_made(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("")
    with pytest.raises(UnwritableError, match="--work"):
        Store(tmp_path / "file" / "work")
