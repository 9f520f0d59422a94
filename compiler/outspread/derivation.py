"""The whole road for one model, from reading to results, and what Python users hold at its end.

Each stop does its own work; this module only walks from one to the next. Files and the terminal are
`command`'s concern.
"""

from __future__ import annotations

import os
import signal
import threading
import time
from collections.abc import Callable, Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import numpy.typing as npt

from outspread import __version__
from outspread.errors import DerivationError, OutspreadError
from outspread.evidence.comparison import Comparison
from outspread.evidence.drawing import SECOND_STREAM, Sample, draw_sample
from outspread.evidence.judging import judge_event, judge_output, judge_sample
from outspread.findings.compute import compute_results, joint_events
from outspread.findings.drivers import Shares
from outspread.findings.figures import largest_cdf_error
from outspread.findings.intervals import interval
from outspread.findings.requirements import clipped
from outspread.findings.results import Absent, Figure, Finding, Results
from outspread.formula.parser import check_names, parse_event
from outspread.formula.tree import Node
from outspread.laws.law import Array, Atoms, Law
from outspread.planning.plan import Plan
from outspread.preparation import plan_model
from outspread.reading.build import read_mapping, read_model
from outspread.reading.model import Model
from outspread.routes.derived import DerivedOutput, JointLaw
from outspread.routes.engine import Engine

#: called with a few words on what is being done, for a terminal
Progress = Callable[[str], None]


class OutputLaw(Law):
    """The derived law of one output: everything a `Law` answers, its intervals and its stated error."""

    def __init__(self, law: Law):
        self._law = law
        self.relative_error = law.relative_error

    @property
    def error(self) -> float:
        """The stated bound on |cdf - true cdf|, anywhere."""
        return largest_cdf_error(self._law)

    @property
    def continuous_mass(self) -> float:
        return self._law.continuous_mass

    def support(self) -> tuple[float, float]:
        return self._law.support()

    def pdf(self, x: npt.ArrayLike) -> Array:
        return self._law.pdf(x)

    def cdf(self, x: npt.ArrayLike) -> Array:
        return self._law.cdf(x)

    def ccdf(self, x: npt.ArrayLike) -> Array:
        return self._law.ccdf(x)

    def icdf(self, p: npt.ArrayLike) -> Array:
        return self._law.icdf(p)

    def iccdf(self, q: npt.ArrayLike) -> Array:
        return self._law.iccdf(q)

    def atoms(self) -> Atoms:
        return self._law.atoms()

    def breaks(self) -> tuple[float, ...]:
        return self._law.breaks()

    def singular_ends(self) -> tuple[bool, bool]:
        return self._law.singular_ends()

    def between(self, lower: npt.ArrayLike, upper: npt.ArrayLike) -> Array:
        return self._law.between(lower, upper)

    def mean(self) -> float:
        return self._law.mean()

    def variance(self) -> float:
        return self._law.variance()

    def standard_deviation(self) -> float:
        return self._law.standard_deviation()

    def skewness(self) -> float:
        return self._law.skewness()

    def kurtosis(self) -> float:
        return self._law.kurtosis()

    def interval(self, probability: float, kind: str = "symmetric") -> tuple[float, float]:
        """The coverage interval of the kind "symmetric" or "shortest" (JCGM 101:2008, 5.3.3, 5.3.4).

        Raises ValueError where there is none, for example no unique shortest one, with the reason.
        """
        found = interval(self._law, probability, kind)
        ends = []
        for end in (found.lower, found.upper):
            if isinstance(end, Absent):
                raise ValueError(f"there is no {kind} interval of probability {probability:g}: {end.because}")
            ends.append(end.value)
        return ends[0], ends[1]


@dataclass(frozen=True)
class Derivation(Mapping[str, OutputLaw]):
    """What `derive` returns: the laws of the outputs by name, the plan, the results and joint questions."""

    model: Model
    plan: Plan
    outputs: tuple[DerivedOutput, ...]
    joint: tuple[JointLaw, ...]
    results: Results
    input_laws: Mapping[str, Law]
    engine: Engine = field(repr=False)

    def __getitem__(self, name: str) -> OutputLaw:
        for derived in self.outputs:
            if derived.output == name:
                return OutputLaw(derived.law)
        known = ", ".join(derived.output for derived in self.outputs)
        raise KeyError(f"{name} is no output; the outputs are {known}")

    def __iter__(self) -> Iterator[str]:
        return (derived.output for derived in self.outputs)

    def __len__(self) -> int:
        return len(self.outputs)

    def joint_pdf(self, point: Mapping[str, npt.ArrayLike]) -> Array:
        """Joint density of the outputs named, at a point or at arrays of points of one shape.

        Raises KeyError where no joint law of exactly these outputs was derived.
        """
        for law in self.joint:
            if set(law.outputs) == set(point):
                rows = np.broadcast_arrays(*(np.asarray(point[name], float) for name in law.outputs))
                values = law.pdf(np.stack([row.ravel() for row in rows]))
                return np.asarray(values, float).reshape(rows[0].shape)
        raise KeyError(f"no joint law of {', '.join(point)} was derived")

    def probability(self, event: str) -> float:
        """Probability of an event over the outputs, such as "a > 0 and b < 1", in the outputs' units.

        Raises FormulaError where the event cannot be read, DerivationError where it cannot be derived.
        """
        found = _finding(self.engine.probability(event_over(event, list(self))))
        return clipped(found).value if isinstance(found, Figure) else float("nan")

    def correlation(self, first: str, second: str) -> float:
        """Pearson's correlation of two outputs; nan where it does not exist (the results say why)."""
        found = _correlation(self.engine, first, second)
        return found.value if isinstance(found, Figure) else float("nan")


def event_over(text: str, outputs: list[str]) -> Node:
    """The tree of an event over these outputs. Raises FormulaError."""
    node = parse_event(text)
    check_names(node, outputs, text)
    return node


def derive(source: str | os.PathLike[str] | Mapping[str, object]) -> Derivation:
    """Derives every output of a model file, or of a mapping with the keys of the file format.

    Raises ModelError where the model is wrong, and DerivationError where a result cannot be derived to the
    accuracy asked for or takes longer than the model's time limit.
    """
    model = read_mapping(source) if isinstance(source, Mapping) else read_model(os.fspath(source))
    return derive_model(model)


def derive_model(model: Model, progress: Progress | None = None) -> Derivation:
    """The whole derivation of a model that has been read. Raises as `derive` does."""
    with time_limit(model.accuracy.time_limit, progress) as say:
        say("planning")
        plan, laws = plan_model(model)
        engine = Engine(model, laws, plan)
        outputs = engine.derive(say)
        say("drawing the evidence")
        shares = Shares(model)
        events = joint_events(model)
        sample = draw_sample(model, observers=(shares,), events=events)
        say("comparing")
        comparisons = _compare(model, outputs, sample)
        found = {text: _finding(engine.probability(event)) for text, event in events.items()}
        for text, probability in found.items():
            if isinstance(probability, Figure):
                comparisons.append(judge_event(text, probability.value, probability.error, sample))
        say("stating results")
        results = compute_results(
            model,
            plan,
            outputs,
            probability_of=lambda event: _probability(engine.probability(event)),
            correlation_of=lambda a, b: _correlation(engine, a, b),
            comparisons=comparisons,
            shares=shares,
            version=__version__,
        )
        joint = engine.joint()
    return Derivation(model, plan, outputs, joint, results, laws, engine)


def _compare(model: Model, outputs: tuple[DerivedOutput, ...], sample: Sample) -> list[Comparison]:
    """Each output against the evidence; an output that was itself sampled also against a second sample."""
    found: list[Comparison] = []
    second: Sample | None = None
    for derived in outputs:
        found.extend(judge_output(derived, sample, model))
        if derived.route == "sampling":
            second = second or draw_sample(model, stream=SECOND_STREAM)
            draws = second.outputs[derived.output]
            found.append(judge_sample(derived.output, derived.law, draws, second.label))
    return found


def _finding(answer: Any) -> Finding:
    """What the engine says, as a finding: it answers with a value and an error, or with a reason."""
    if isinstance(answer, Figure | Absent):
        return answer
    if isinstance(answer, str):
        return Absent(answer)
    return Figure(float(np.asarray(answer.value)), float(np.asarray(answer.error)))


def _correlation(engine: Engine, first: str, second: str) -> Finding:
    """The correlation of two outputs; where it cannot be derived, all else still stands."""
    try:
        return _finding(engine.correlation(first, second))
    except DerivationError as error:
        return Absent(f"it could not be derived: {error}")


def _probability(answer: Any) -> Finding:
    found = _finding(answer)
    return clipped(found) if isinstance(found, Figure) else found


class _Overdue(OutspreadError):
    """Raised by the timer inside whatever is being computed; becomes a DerivationError."""


@contextmanager
def time_limit(seconds: float | None, progress: Progress | None) -> Iterator[Progress]:
    """Stops what runs inside after `seconds` with a DerivationError; it changes no figure.

    On the main thread a timer interrupts; elsewhere the limit is looked at whenever progress is said.
    """
    say = progress or (lambda words: None)
    if seconds is None:
        yield say
        return
    overdue = DerivationError(
        f"the derivation was stopped at its time limit of {seconds:g} s; raise `time_limit` under `accuracy`,"
        " or ask for fewer digits"
    )
    if not hasattr(signal, "setitimer") or threading.current_thread() is not threading.main_thread():
        start = time.monotonic()

        def watched(words: str) -> None:
            if time.monotonic() - start >= seconds:
                raise overdue
            say(words)

        yield watched
        return

    def ring(number: int, frame: object) -> None:
        raise _Overdue

    before = signal.signal(signal.SIGALRM, ring)
    # repeated, because an exception is lost where it falls into a destructor
    signal.setitimer(signal.ITIMER_REAL, seconds, 0.2)
    try:
        yield say
    except _Overdue:
        raise overdue from None
    finally:
        signal.setitimer(signal.ITIMER_REAL, 0.0)
        signal.signal(signal.SIGALRM, before)
