"""Runs the command inside the test's process and keeps everything that it says."""

from __future__ import annotations

import io
from dataclasses import dataclass

from outspread.command import build_parser, run


@dataclass(frozen=True)
class Said:
    status: int
    out: str
    err: str


class Terminal(io.StringIO):
    """A stream that says it is a terminal."""

    def isatty(self) -> bool:
        return True


def outspread(*arguments: str, terminal: bool = False) -> Said:
    out, err = io.StringIO(), Terminal() if terminal else io.StringIO()
    status = run(build_parser().parse_args(arguments), out, err)
    return Said(status, out.getvalue(), err.getvalue())
