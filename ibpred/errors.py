"""The exceptions of ibpred.

::

    IbpredError
    ├── InputError            what the user gave is wrong (exit code 2)
    │   ├── FamilyFileError   a family file: carries file, line and entry
    │   ├── ExpressionError   an expression: carries the text and the position
    │   └── PointError        a kinematic point: missing, unknown or singular
    ├── UnfinishedError       a computation could not finish (exit code 1)
    │   ├── ReconstructionError
    │   ├── ObstructionError  no ε-form, or none found
    │   ├── BoundaryError     boundary constants that stay open
    │   └── PrecisionError    digits that could not be reached
    ├── OutOfTimeError        the time allowed is over (exit code 1)
    └── StoreError            damaged, foreign, locked or unwritable work folder (exit code 1 or 2)
"""

from __future__ import annotations


class IbpredError(Exception):
    """Base class of every error that ibpred raises on purpose."""

    exit_code = 1


class InputError(IbpredError, ValueError):
    """What the user gave is wrong; nothing was computed or written."""

    exit_code = 2


class FamilyFileError(InputError):
    """A family file is wrong.

    Parameters
    ----------
    problem
        What is wrong, and what to do about it.
    file, line
        Where: file name and 1-based line, when known.
    entry
        The offending entry as the user wrote it, when known.
    """

    def __init__(
        self,
        problem: str,
        *,
        file: str | None = None,
        line: int | None = None,
        entry: str | None = None,
    ) -> None:
        self.problem = problem
        self.file = file
        self.line = line
        self.entry = entry
        place = file or ""
        if line is not None:
            place += f":{line}" if place else f"line {line}"
        text = f"{place}: {problem}" if place else problem
        if entry is not None:
            text += f"\n    {entry}"
        super().__init__(text)


class ExpressionError(InputError):
    """An expression cannot be read.

    Parameters
    ----------
    problem
        What is wrong.
    text
        The whole expression.
    position
        0-based offset of the offending character in `text`.
    """

    def __init__(self, problem: str, text: str, position: int) -> None:
        self.problem = problem
        self.text = text
        self.position = position
        super().__init__(f"{problem}\n    {text}\n    {' ' * position}^")


class PointError(InputError):
    """A kinematic point is incomplete, names unknown invariants, or lies on a singularity."""


class UnfinishedError(IbpredError):
    """A computation could not finish; the message says what was kept and how to go on."""


class ReconstructionError(UnfinishedError):
    """Samples did not determine rational functions that a fresh prime and point confirm."""


class ObstructionError(UnfinishedError):
    """No ε-factorised form exists over the functions tried, or none was found."""


class BoundaryError(UnfinishedError):
    """Boundary constants stay undetermined."""


class PrecisionError(UnfinishedError):
    """The digits asked for could not be reached."""


class OutOfTimeError(IbpredError):
    """The time allowed is over.

    It is no `UnfinishedError`: where one of several ways cannot be gone another is tried, but when the time
    is over nothing is.

    Parameters
    ----------
    during
        What was being done.
    statement
        What is kept and how to go on, where that is known.
    """

    def __init__(self, during: str, statement: str = "") -> None:
        self.during = during
        self.statement = statement
        text = f"the time allowed is over (during: {during})"
        super().__init__(f"{text}. {statement}" if statement else text)


class StoreError(IbpredError):
    """The work folder or its store is damaged, foreign, locked or cannot be written."""


class UnwritableError(StoreError):
    """A folder cannot be written; nothing was computed."""

    exit_code = 2
