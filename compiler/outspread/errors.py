"""Every error that a user can meet, as records that say where, what is wrong and what would be right.

Nothing here prints; `command` turns these into lines on standard error and an exit status.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass


@dataclass(frozen=True, order=True)
class Place:
    """A position in a file: 1-based line and column; line 0 means the file as a whole."""

    file: str
    line: int = 0
    column: int = 0

    def __str__(self) -> str:
        return f"{self.file}:{self.line}:{self.column}" if self.line else self.file


@dataclass(frozen=True, order=True)
class Fault:
    """One thing wrong with a model: its place, and one sentence `what is wrong, and what would be right`.

    `excerpt` is an optional further line or two (the text of a formula with a caret under the column).
    """

    place: Place
    message: str
    excerpt: str = ""

    def __str__(self) -> str:
        line = f"{self.place}: {self.message}"
        return f"{line}\n{self.excerpt}" if self.excerpt else line


class OutspreadError(Exception):
    """Base of every error that is reported to the user as text, without a traceback."""

    exit_status = 2


class ModelError(OutspreadError):
    """The model is wrong (exit status 2): every fault found, in the order of the file."""

    exit_status = 2

    def __init__(self, faults: Iterable[Fault]):
        self.faults: tuple[Fault, ...] = tuple(sorted(set(faults)))
        super().__init__("\n".join(str(fault) for fault in self.faults))


class FormulaError(OutspreadError):
    """A formula cannot be read, or its units do not fit.

    `start` and `end` are 0-based character offsets into `text`; `reading` turns them into a Fault.
    """

    exit_status = 2

    def __init__(self, message: str, text: str, start: int, end: int):
        self.message, self.text, self.start, self.end = message, text, start, end
        super().__init__(message)


class LawError(OutspreadError):
    """The parameters of a distribution are out of range; `parameter` names the one to blame, if one is."""

    exit_status = 2

    def __init__(self, message: str, parameter: str | None = None):
        self.message, self.parameter = message, parameter
        super().__init__(message)


class DerivationError(OutspreadError):
    """A result cannot be derived to the accuracy asked for, or not at all by this version (exit status 3)."""

    exit_status = 3

    def __init__(self, message: str, output: str | None = None):
        self.message, self.output = message, output
        super().__init__(message)


class ReportError(OutspreadError):
    """A report cannot be written on this machine (exit status 5); figures and results stay as they are."""

    exit_status = 5
