"""The command line: reads arguments, runs the road, writes files, says what came out; the only terminal user.

`run` does all of it and returns the exit status; `main` only exits with it. Libraries are imported by
the command that needs them, so that `outspread --help` answers at once.
"""

from __future__ import annotations

import argparse
import os
import sys
from collections.abc import Sequence
from typing import TYPE_CHECKING, TextIO

from outspread import __version__
from outspread.errors import DerivationError, ModelError, OutspreadError

if TYPE_CHECKING:
    from outspread.delivery import Outcome

KINDS = ("html", "pdf", "json")
#: from the worst to the best, for several models at once
RANKING = (130, 3, 2, 5, 1, 0)
INTERRUPTED = 130

_HELP = """\
Derives the distribution of a formula's result from uncertain inputs, checks it by a second method and
writes a report. A first model, from an empty folder to a report:

  outspread new hatch-gap         writes hatch-gap.yaml with comments; edit it
  outspread check hatch-gap.yaml  says what is wrong with it, and where
  outspread plan hatch-gap.yaml   says how it will be derived, and why so
  outspread derive hatch-gap.yaml writes hatch-gap.results.json, .html and .pdf

A model is a short YAML file:

  outspread: 1
  title: Gap of the battery hatch
  inputs:
    frame: {unit: mm, distribution: {normal: {mean: 240.3, sd: 0.06}}, basis: 60 parts measured}
    hatch: {unit: mm, distribution: {triangular: {lower: 239.8, mode: 240, upper: 240.2}}}
  transformation:
    outputs:
      gap: {formula: frame - hatch, unit: mm}
  requirements:
    - {name: The hatch closes, event: gap > 0, probability: {at_least: 0.998}}
"""

_STATUS = """\
exit status:
  0  every requirement is met
  1  a requirement is not met, or undecided within the error
  2  a model is wrong, or the command was not understood
  3  a result could not be derived to the accuracy asked for, or the second derivation disagrees
  5  the PDF could not be made, because a system library is missing; all else was written
  Of several models the worst counts, in the order 3, 2, 5, 1, 0.
"""


def build_parser() -> argparse.ArgumentParser:
    """The parser of the whole command line."""
    raw = argparse.RawDescriptionHelpFormatter
    parser = argparse.ArgumentParser("outspread", description=_HELP, epilog=_STATUS, formatter_class=raw)
    parser.add_argument("--version", action="version", version=f"outspread {__version__}")
    commands = parser.add_subparsers(dest="command", metavar="COMMAND", required=True)

    derive = commands.add_parser(
        "derive",
        help="derive the outputs of models and write their results and reports",
        description="Derives every output, checks it a second time and writes NAME.results.json, NAME.html "
        "and NAME.pdf beside each model.",
        epilog="example:\n  outspread derive gap.yaml offset.yaml --out report --only html,json\n\n"
        + _STATUS,
        formatter_class=raw,
    )
    derive.add_argument("models", nargs="+", metavar="MODEL", help="model file (YAML)")
    derive.add_argument("--out", metavar="DIR", help="folder for what is written (made where missing)")
    derive.add_argument(
        "--only",
        metavar="KINDS",
        type=_kinds,
        default=KINDS,
        help="what to write: html,pdf,json (default: all)",
    )
    derive.add_argument(
        "--jobs", metavar="N", type=_jobs, default=1, help="derive N models at a time (default 1); same files"
    )

    check = commands.add_parser(
        "check",
        help="read, validate and plan models without deriving them",
        description="Says everything that is wrong with a model, each fault with file:line:column.",
        epilog="example:\n  outspread check gap.yaml",
        formatter_class=raw,
    )
    check.add_argument("models", nargs="+", metavar="MODEL", help="model file (YAML)")

    plan = commands.add_parser(
        "plan",
        help="show how a model will be derived, and why so",
        description="Prints the plan: each step with its route, the reason, and what was ruled out.",
        epilog="example:\n  outspread plan gap.yaml",
        formatter_class=raw,
    )
    plan.add_argument("model", metavar="MODEL", help="model file (YAML)")

    new = commands.add_parser(
        "new",
        help="write a commented model to start from",
        description="Writes NAME.yaml in this folder, a small model with comments that derives as it stands.",
        epilog="example:\n  outspread new hatch-gap",
        formatter_class=raw,
    )
    new.add_argument("name", metavar="NAME", help="name of the model, without .yaml")

    families = commands.add_parser(
        "families",
        help="list the distributions with their parameters",
        description="Lists every family of distributions with the parameter sets that it takes.",
        epilog="example:\n  outspread families weibull",
        formatter_class=raw,
    )
    families.add_argument("names", nargs="*", metavar="FAMILY", help="only these families")
    return parser


def _kinds(text: str) -> tuple[str, ...]:
    chosen = tuple(part.strip() for part in text.split(","))
    wrong = [part for part in chosen if part not in KINDS]
    if wrong:
        raise argparse.ArgumentTypeError(
            f"{wrong[0]!r} is none of html, pdf and json; write --only html,json"
        )
    return tuple(kind for kind in KINDS if kind in chosen)


def _jobs(text: str) -> int:
    if not text.isdecimal() or not 1 <= int(text) <= 64:
        raise argparse.ArgumentTypeError(f"{text!r} is no number of models from 1 to 64")
    return int(text)


def run(arguments: argparse.Namespace, stdout: TextIO, stderr: TextIO) -> int:
    """Runs one parsed command on these streams and returns the exit status."""
    command = {"derive": _derive, "check": _check, "plan": _plan, "new": _new, "families": _families}
    try:
        return command[arguments.command](arguments, stdout, stderr)
    except OutspreadError as error:
        stderr.write(f"{error}\n")
        return error.exit_status
    except KeyboardInterrupt:
        stderr.write("outspread: stopped; no file was left half-written\n")
        return INTERRUPTED


def worst(statuses: Sequence[int]) -> int:
    """The status of several models together."""
    return min(statuses, key=RANKING.index, default=0)


def _derive(arguments: argparse.Namespace, stdout: TextIO, stderr: TextIO) -> int:
    from outspread.delivery import Order, deliver, deliver_all, targets

    orders = [Order(file, arguments.out, tuple(arguments.only)) for file in arguments.models]
    taken: dict[str, str] = {}
    for order in orders:
        for path in targets(order).values():
            if path.resolve().as_posix() in taken:
                other = taken[path.resolve().as_posix()]
                stderr.write(
                    f"{order.file}: it would write {path.name}, as {other} does; rename one of the models or "
                    "derive them into different folders\n"
                )
                return 2
            taken[path.resolve().as_posix()] = order.file
    if arguments.out:
        try:
            os.makedirs(arguments.out, exist_ok=True)
        except OSError as error:
            stderr.write(f"{arguments.out}: the folder cannot be made: {error.strerror}\n")
            return 2
    statuses: list[int] = []
    workers = min(arguments.jobs, len(orders))
    if workers > 1:
        with _Line(stderr, f"{len(orders)} models") as line:
            line.say("none is derived yet")
            for outcome in deliver_all(orders, workers):
                line.clear()
                statuses.append(_report(outcome, stdout, stderr))
                line.say(f"{len(statuses)} derived")
    else:
        for order in orders:
            with _Line(stderr, order.file) as line:
                outcome = deliver(order, line.say)
            statuses.append(_report(outcome, stdout, stderr))
    return worst(statuses)


def _report(outcome: Outcome, stdout: TextIO, stderr: TextIO) -> int:
    stdout.write(outcome.said)
    stdout.flush()
    stderr.write(outcome.complained)
    return outcome.status


class _Line:
    """One line of progress on a terminal, rewritten in place and gone at the end; silent elsewhere."""

    def __init__(self, stream: TextIO, file: str):
        self.stream, self.file = stream, os.path.basename(file)
        self.shown = stream.isatty()

    def __enter__(self) -> _Line:
        return self

    def say(self, words: str) -> None:
        if self.shown:
            self.stream.write(f"\r\x1b[K{self.file}: {words}")
            self.stream.flush()

    def clear(self) -> None:
        if self.shown:
            self.stream.write("\r\x1b[K")
            self.stream.flush()

    def __exit__(self, *exception: object) -> None:
        self.clear()


def _check(arguments: argparse.Namespace, stdout: TextIO, stderr: TextIO) -> int:
    from outspread.preparation import plan_model
    from outspread.reading.build import read_model

    statuses = []
    for file in arguments.models:
        try:
            model = read_model(file)
            plan_model(model)
        except ModelError as error:
            stderr.write(f"{error}\n")
            statuses.append(error.exit_status)
            continue
        except DerivationError as error:
            stderr.write(f"{file}: {error}\n")
            statuses.append(error.exit_status)
            continue
        counts = (
            _count(len(model.inputs), "input"),
            _count(len(model.outputs), "output"),
            _count(len(model.requirements), "requirement"),
        )
        stdout.write(f"{file}: nothing is wrong; {counts[0]}, {counts[1]}, {counts[2]}\n")
        statuses.append(0)
    return worst(statuses)


def _count(number: int, what: str) -> str:
    return f"{number or 'no'} {what}{'' if number == 1 else 's'}"


def _plan(arguments: argparse.Namespace, stdout: TextIO, stderr: TextIO) -> int:
    from outspread.planning.printing import plan_lines
    from outspread.preparation import plan_model
    from outspread.reading.build import read_model

    model = read_model(arguments.model)
    try:
        plan, _ = plan_model(model)
    except DerivationError as error:
        stderr.write(f"{arguments.model}: {error}\n")
        return error.exit_status
    stdout.write("\n".join(plan_lines(plan)) + "\n")
    return 0


def _new(arguments: argparse.Namespace, stdout: TextIO, stderr: TextIO) -> int:
    from outspread.reading.starting import starting_model

    name = arguments.name.removesuffix(".yaml")
    file = f"{name}.yaml"
    try:
        text = starting_model(name)
    except ValueError as error:
        stderr.write(f"outspread new: {error}\n")
        return 2
    try:
        with open(file, "x", encoding="utf-8") as stream:
            stream.write(text)
    except FileExistsError:
        stderr.write(f"{file}: it is there already and was left as it is; choose another name\n")
        return 2
    except OSError as error:
        stderr.write(f"{file}: the file cannot be written: {error.strerror}\n")
        return 2
    stdout.write(f"{file} is written; edit it, then run: outspread derive {file}\n")
    return 0


def _families(arguments: argparse.Namespace, stdout: TextIO, stderr: TextIO) -> int:
    from outspread.laws.registry import FAMILIES
    from outspread.reading.words import quoted, suggestion

    for name in arguments.names:
        if name not in FAMILIES:
            hint = suggestion(name, FAMILIES, "families")
            stderr.write(f"outspread families: {quoted(name)} is no family; {hint}\n")
            return 2
    for key in arguments.names or FAMILIES:
        family = FAMILIES[key]
        sets = " or ".join(str(candidate) for candidate in family.parameter_sets)
        stdout.write(f"{key}\n    {sets}\n    {family.kind}; {family.usage}\n")
    return 0


def main() -> int:
    """The entry point of `outspread`: parses the command line, runs it and returns the exit status."""
    try:
        arguments = build_parser().parse_args()
        status = run(arguments, sys.stdout, sys.stderr)
        sys.stdout.flush()
    except BrokenPipeError:  # the reader of a pipe has had enough
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 0
    return status
