"""The store: what is put in comes out, and damage is named."""

from __future__ import annotations

import sqlite3
from pathlib import Path

import pytest

from ibpred.errors import StoreError, UnwritableError
from ibpred.run.storage.store import Store


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


def test_work_goes_with_its_owner(tmp_path: Path) -> None:
    with Store(tmp_path) as store:
        store.put_bytes("a", "samples", b"1", owner="x")
        store.put_bytes("b", "samples", b"2", owner="y")
        store.put_bytes("c", "masters", b"3")
        store.forget_work("x")
        assert [store.get_bytes(key) for key in "abc"] == [None, b"2", b"3"]
        assert [store.has(key) for key in "abc"] == [False, True, True]


def test_entries_in_parts(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("ibpred.run.storage.store._PART", 10)
    body = bytes(range(95))
    with Store(tmp_path) as store:
        for packed in (True, False):
            store.put_bytes("a", "tape", body, packed=packed)
            assert store.get_bytes("a") == body
        store.put_bytes("a", "tape", body[:5])
        assert store.get_bytes("a") == body[:5]
        store.put_bytes("a", "tape", body)
    database = sqlite3.connect(tmp_path / "store.sqlite", isolation_level=None)
    database.execute("delete from entry where part = 9")
    database.close()
    with Store(tmp_path) as store, pytest.raises(StoreError, match="'tape' is damaged"):
        store.get_bytes("a")


def test_a_transaction_is_whole_or_nothing(tmp_path: Path) -> None:
    with Store(tmp_path) as store:

        def fail() -> None:
            with store.transaction():
                store.put("a", "masters", [1])
                raise RuntimeError

        with pytest.raises(RuntimeError):
            fail()
        assert store.get("a") is None
        with store.transaction():
            store.put("a", "masters", [1])
            store.put("b", "masters", [2])
        assert (store.get("a"), store.get("b")) == ([1], [2])
