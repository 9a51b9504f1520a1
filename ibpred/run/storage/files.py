"""Family files from disk, and folders that appear whole or not at all."""

from __future__ import annotations

import os
import shutil
import tempfile
from collections.abc import Iterable, Mapping
from pathlib import Path

from ibpred.errors import InputError, UnwritableError
from ibpred.family.definition import FamilyDefinition
from ibpred.family.reading import read_family


def read_family_file(path: Path) -> FamilyDefinition:
    """The family of a file; its name is the file's stem.

    Raises
    ------
    InputError
        If the file cannot be read, or (a `FamilyFileError`) what is in it is wrong.
    """
    try:
        text = path.read_text(encoding="utf-8")
    except OSError as error:
        raise InputError(f"the family file {path} cannot be read: {error.strerror}") from error
    except UnicodeDecodeError as error:
        raise InputError(f"the family file {path} is no UTF-8 text: {error}") from error
    return read_family(text, str(path), path.stem)


def check_writable(folder: Path) -> None:
    """Make sure that `folder` can be made, before long work starts.

    Raises
    ------
    UnwritableError
        If it cannot.
    """
    try:
        folder.parent.mkdir(parents=True, exist_ok=True)
        with tempfile.NamedTemporaryFile(dir=folder.parent):
            pass
        if folder.exists() and not folder.is_dir():
            raise UnwritableError(f"{folder} is a file; choose another folder with --output DIR")
    except OSError as error:
        raise UnwritableError(
            f"{folder} cannot be written ({error.strerror}); choose another folder with --output DIR"
        ) from error


def write_file(path: Path, content: str | bytes) -> None:
    """Write a file (text as UTF-8); an old one is replaced as a whole.

    Raises
    ------
    UnwritableError
        If the file cannot be written; an old one then stays.
    """
    write_pieces(path, [content])


def write_pieces(path: Path, content: Iterable[str | bytes]) -> None:
    """The same for a file that is made piece by piece, as long tables are.

    Raises
    ------
    UnwritableError
        If the file cannot be written; an old one then stays.
    """
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        handle, fresh = tempfile.mkstemp(prefix=f".{path.name}-", dir=path.parent)
        try:
            with os.fdopen(handle, "wb") as stream:
                for piece in content:
                    stream.write(piece.encode() if isinstance(piece, str) else piece)
            os.chmod(fresh, 0o644)
            os.replace(fresh, path)
        except BaseException:
            os.unlink(fresh)
            raise
    except OSError as error:
        raise UnwritableError(f"{path} cannot be written ({error.strerror}); choose another file") from error


def write_folder(folder: Path, files: Mapping[str, str]) -> None:
    """Write text files into a new folder, then put it in the place of the old one.

    Files of an earlier run are replaced as a whole, so a folder never mixes two runs.

    Raises
    ------
    UnwritableError
        If the folder cannot be written; the old one then stays.
    """
    try:
        folder.parent.mkdir(parents=True, exist_ok=True)
        fresh = Path(tempfile.mkdtemp(prefix=f".{folder.name}-", dir=folder.parent))
        fresh.chmod(0o755)
        try:
            for name, text in files.items():
                (fresh / name).write_text(text, encoding="utf-8")
            old = fresh.with_name(fresh.name + "-old")
            if folder.exists():
                os.rename(folder, old)
            os.rename(fresh, folder)
            shutil.rmtree(old, ignore_errors=True)
        finally:
            shutil.rmtree(fresh, ignore_errors=True)
    except OSError as error:
        raise UnwritableError(
            f"{folder} cannot be written ({error.strerror}); choose another folder with --output DIR"
        ) from error
