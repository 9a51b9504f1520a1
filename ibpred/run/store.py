"""The store: a work folder with one SQLite file that holds every finished result under its digest.

Each entry carries a checksum. Writing is one transaction, so a kill at any moment leaves either the
old state or the new one. One process at a time works in a folder (an advisory lock says so).
"""

from __future__ import annotations

import fcntl
import hashlib
import json
import sqlite3
import zlib
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from types import TracebackType
from typing import IO

from ibpred.digest import JsonData, canonical_bytes
from ibpred.errors import StoreError, UnwritableError

FORMAT = "ibpred-store-1"


class Store:
    """An open work folder. Use it as a context manager.

    Parameters
    ----------
    folder
        The work folder; made if it is missing.

    Raises
    ------
    UnwritableError
        If the folder cannot be made or written.
    StoreError
        If another run works there, or the file in it is damaged or no store of this version.
    """

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        self.path = folder / "store.sqlite"
        try:
            folder.mkdir(parents=True, exist_ok=True)
            self._lock: IO[str] = (folder / "lock").open("w")
        except OSError as error:
            raise UnwritableError(
                f"the work folder {folder} cannot be written ({error.strerror}); "
                "choose another one with --work DIR"
            ) from error
        try:
            fcntl.flock(self._lock, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except OSError:
            self._lock.close()
            raise StoreError(
                f"another run is working in {folder}; wait for it or choose another folder with --work DIR"
            ) from None
        try:
            self._open()
        except BaseException:
            self._lock.close()
            raise

    def _open(self) -> None:
        with self._guarded("open"):
            self._database = sqlite3.connect(self.path, isolation_level=None)
            tables = {row[0] for row in self._database.execute("select name from sqlite_master")}
            if not tables:
                self._database.execute("create table about (format text not null)")
                self._database.execute("insert into about values (?)", (FORMAT,))
                self._database.execute(
                    "create table result (key text primary key, stage text not null,"
                    " body blob not null, checksum text not null)"
                )
            elif not {"about", "result"} <= tables:
                raise StoreError(f"{self.path} is an SQLite file but no store of ibpred; {self._remedy()}")
            row = self._database.execute("select format from about").fetchone()
            if row is None or row[0] != FORMAT:
                found = row[0] if row else "nothing"
                raise StoreError(
                    f"{self.path} has format {found!r}, this version reads {FORMAT!r}; {self._remedy()}"
                )

    def _remedy(self) -> str:
        return "choose another folder with --work DIR, or delete this one to start afresh"

    @contextmanager
    def _guarded(self, deed: str) -> Iterator[None]:
        try:
            yield
        except sqlite3.OperationalError as error:
            text = str(error)
            if "readonly" in text or "unable to open" in text:
                raise UnwritableError(
                    f"{self.path} cannot be written ({text}); choose another folder with --work DIR"
                ) from error
            if "full" in text:
                raise StoreError(
                    f"the disk is full ({text}): nothing stored is lost; free some space and run again"
                ) from error
            raise StoreError(f"cannot {deed} {self.path}: {text}; {self._remedy()}") from error
        except sqlite3.DatabaseError as error:
            raise StoreError(f"{self.path} is damaged ({error}); {self._remedy()}") from error

    def __enter__(self) -> Store:
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        value: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        self.close()

    def close(self) -> None:
        """Close the file and release the folder."""
        self._database.close()
        self._lock.close()

    def get_bytes(self, key: str) -> bytes | None:
        """The stored bytes, or None.

        Raises
        ------
        StoreError
            If the entry does not match its checksum.
        """
        with self._guarded("read"):
            row = self._database.execute(
                "select body, checksum, stage from result where key = ?", (key,)
            ).fetchone()
        if row is None:
            return None
        body, checksum, stage = row
        if not isinstance(body, bytes) or hashlib.sha256(body).hexdigest() != checksum:
            raise StoreError(f"{self.path}: the entry of stage {stage!r} is damaged; {self._remedy()}")
        try:
            return zlib.decompress(body)
        except zlib.error as error:
            raise StoreError(
                f"{self.path}: the entry of stage {stage!r} is damaged ({error}); {self._remedy()}"
            ) from error

    def put_bytes(self, key: str, stage: str, body: bytes) -> None:
        """Store bytes under a key, in one transaction."""
        packed = zlib.compress(body, 3)
        with self._guarded("write"):
            self._database.execute(
                "insert or replace into result values (?, ?, ?, ?)",
                (key, stage, packed, hashlib.sha256(packed).hexdigest()),
            )

    def get(self, key: str) -> JsonData:
        """The stored JSON data, or None."""
        body = self.get_bytes(key)
        if body is None:
            return None
        try:
            data: JsonData = json.loads(body)
        except ValueError as error:
            raise StoreError(f"{self.path}: an entry is no JSON; {self._remedy()}") from error
        return data

    def put(self, key: str, stage: str, data: JsonData) -> None:
        """Store JSON data under a key."""
        self.put_bytes(key, stage, canonical_bytes(data))
