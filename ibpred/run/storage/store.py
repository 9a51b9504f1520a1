"""The store: a work folder with one SQLite file that holds what was computed under its digest.

Entries are results, which stay, and pieces of unfinished work (tapes, samples, parts of a
reconstruction), which belong to the stage that they are for and go when it is finished. Each carries
a checksum. Writing is one transaction, so a kill at any moment leaves either the old state or the new
one. One process at a time works in a folder (an advisory lock says so).
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

FORMAT = "ibpred-store-2"

_PART = 2**28  # bytes of an entry in one row: SQLite takes less than 2^30
_SCHEMA = (
    "create table about (format text not null)",
    "create table entry (key text not null, part integer not null, parts integer not null,"
    " kind text not null, owner text, packed integer not null, body blob not null,"
    " checksum text not null, primary key (key, part)) without rowid",
    "create index work on entry (owner) where owner is not null",
)


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
                with self.transaction():
                    for statement in _SCHEMA:
                        self._database.execute(statement)
                    self._database.execute("insert into about values (?)", (FORMAT,))
                return
            if "about" not in tables:
                raise StoreError(f"{self.path} is an SQLite file but no store of ibpred; {self._remedy()}")
            row = self._database.execute("select format from about").fetchone()
            if row is None or row[0] != FORMAT or "entry" not in tables:
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
            if "full" in text or "disk I/O" in text:
                raise StoreError(
                    f"cannot {deed} {self.path} ({text}): the disk is full, a limit on the size of files is "
                    "reached, or the disk fails; nothing stored before is lost: free some space and run the "
                    "same command again"
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

    @contextmanager
    def transaction(self) -> Iterator[None]:
        """All that is written inside takes effect together, or not at all."""
        if self._database.in_transaction:
            yield
            return
        with self._guarded("write"):
            self._database.execute("begin immediate")
            try:
                yield
                self._database.execute("commit")
            except BaseException:
                if self._database.in_transaction:
                    self._database.execute("rollback")
                raise

    def has(self, key: str) -> bool:
        """Whether there is an entry under a key."""
        with self._guarded("read"):
            found = self._database.execute("select 1 from entry where key = ? and part = 0", (key,))
            return found.fetchone() is not None

    def get_bytes(self, key: str) -> bytes | None:
        """The stored bytes, or None.

        Raises
        ------
        StoreError
            If the entry does not match its checksum.
        """
        with self._guarded("read"):
            rows = self._database.execute(
                "select body, checksum, kind, packed, parts from entry where key = ? order by part", (key,)
            ).fetchall()
        if not rows:
            return None
        return b"".join(self._checked(row, len(rows)) for row in rows)

    def _checked(self, row: tuple[bytes, str, str, int, int], present: int) -> bytes:
        body, checksum, kind, packed, parts = row
        whole = isinstance(body, bytes) and hashlib.sha256(body).hexdigest() == checksum
        if not whole or present != parts:
            raise StoreError(f"{self.path}: an entry of {kind!r} is damaged; {self._remedy()}")
        try:
            return zlib.decompress(body) if packed else body
        except zlib.error as error:
            raise StoreError(
                f"{self.path}: an entry of {kind!r} is damaged ({error}); {self._remedy()}"
            ) from error

    def put_bytes(
        self, key: str, kind: str, body: bytes, owner: str | None = None, packed: bool = True
    ) -> None:
        """Store bytes under a key.

        Parameters
        ----------
        key
            A digest of all that the bytes depend on; what was stored under it is replaced.
        kind
            What it is, for messages.
        body
            The bytes.
        owner
            Key of the unfinished result that the bytes are for; None for what stays.
        packed
            Whether to compress (of no use for residues).
        """
        parts = max(1, -(-len(body) // _PART))
        with self.transaction():
            self._database.execute("delete from entry where key = ?", (key,))
            for part in range(parts):
                piece = body[part * _PART : (part + 1) * _PART]
                piece = zlib.compress(piece, 3) if packed else piece
                checksum = hashlib.sha256(piece).hexdigest()
                self._database.execute(
                    "insert into entry values (?, ?, ?, ?, ?, ?, ?, ?)",
                    (key, part, parts, kind, owner, int(packed), piece, checksum),
                )

    def forget_work(self, owner: str) -> None:
        """Remove the pieces of work that a finished result does not need any more."""
        with self.transaction():
            self._database.execute("delete from entry where owner = ?", (owner,))

    def work(self) -> dict[str, int]:
        """How many pieces of unfinished work there are, by kind."""
        query = "select kind, count(*) from entry where owner is not null and part = 0 group by kind"
        with self._guarded("read"):
            return dict(sorted(self._database.execute(query).fetchall()))

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

    def put(self, key: str, kind: str, data: JsonData, owner: str | None = None) -> None:
        """Store JSON data under a key; see `put_bytes`."""
        self.put_bytes(key, kind, canonical_bytes(data), owner)
