"""Gathers everything that is stated about a derivation into `Results`; each figure is read off elsewhere."""

from __future__ import annotations

import hashlib
import math
from collections.abc import Callable, Mapping, Sequence
from itertools import combinations
from pathlib import PurePath

from outspread.evidence.comparison import Comparison
from outspread.findings.assumptions import register
from outspread.findings.drivers import Shares, find_drivers
from outspread.findings.figures import (
    density,
    heaviest_atoms,
    largest_cdf_error,
    moment_figures,
    probability,
    quantile,
)
from outspread.findings.intervals import shortest, symmetric
from outspread.findings.modes import mode
from outspread.findings.requirements import judge_requirements
from outspread.findings.results import (
    Absent,
    Driver,
    Evidence,
    Figure,
    Finding,
    Joint,
    OutputResults,
    Results,
    ValueRow,
)
from outspread.formula.tree import Node, names
from outspread.laws.law import Law
from outspread.planning.plan import Plan
from outspread.reading.model import Model, Output
from outspread.routes.derived import DerivedOutput

ATOMS_STATED = 200

Probability = Callable[[Node], Finding]
Correlation = Callable[[str, str], Finding]


def compute_results(
    model: Model,
    plan: Plan,
    outputs: Sequence[DerivedOutput],
    *,
    probability_of: Probability,
    correlation_of: Correlation,
    comparisons: Sequence[Comparison],
    shares: Shares,
    version: str,
) -> Results:
    """All results of one derivation.

    `probability_of` gives the probability of an event over outputs, `correlation_of` that of two outputs;
    `comparisons` and `shares` come from the evidence.
    """
    known: dict[Node, Finding] = {}

    def once(event: Node) -> Finding:
        if event not in known:
            known[event] = probability_of(event)
        return known[event]

    rows = tuple(_output(model, output, derived, once) for output, derived in _paired(model, outputs))
    return Results(
        version=version,
        file=PurePath(model.file).name,
        title=model.title,
        sha256=model.sha256,
        data={name: hashlib.sha256(content).hexdigest() for name, content in sorted(model.data.items())},
        outputs=rows,
        joint=_joint(model, once, correlation_of),
        requirements=judge_requirements(model, {row.output: row.law for row in outputs}, once),
        evidence=tuple(_evidence(comparison) for comparison in comparisons),
        drivers=_drivers(shares, rows),
        assumptions=register(model, plan, outputs),
    )


def _paired(model: Model, outputs: Sequence[DerivedOutput]) -> list[tuple[Output, DerivedOutput]]:
    derived = {row.output: row for row in outputs}
    return [(output, derived[output.name]) for output in model.outputs]


def _evidence(found: Comparison) -> Evidence:
    return Evidence(
        found.output,
        found.against,
        found.points,
        found.largest_difference,
        found.allowed,
        found.agrees,
        found.confidence,
        found.curve,
        found.note,
    )


def _drivers(shares: Shares, rows: Sequence[OutputResults]) -> tuple[Driver, ...]:
    deviations = {row.name: row.standard_deviation for row in rows}
    return find_drivers(shares, deviations, {row.name: row.kurtosis for row in rows})


def _output(
    model: Model, output: Output, derived: DerivedOutput, probability_of: Probability
) -> OutputResults:
    law = derived.law
    mean, deviation, skewness, kurtosis = moment_figures(law)
    atoms, atom_count, atom_mass = heaviest_atoms(law, ATOMS_STATED)
    readings = model.readings
    return OutputResults(
        name=output.name,
        unit=output.unit,
        route=derived.route,
        support=_support(law),
        atoms=atoms,
        atom_count=atom_count,
        atom_mass=atom_mass,
        mean=mean,
        standard_deviation=deviation,
        skewness=skewness,
        kurtosis=kurtosis,
        median=quantile(law, 0.5),
        mode=mode(law),
        quantiles=tuple((p, upper_or_lower_quantile(law, p)) for p in readings.quantiles),
        coverage=tuple(kind(law, p) for p in readings.coverage for kind in (symmetric, shortest)),
        values=tuple(_value_row(law, at) for at in readings.values.get(output.name, ())),
        probabilities=tuple(
            (text, probability_of(event))
            for text, event in readings.probabilities
            if _about(event) == {output.name}
        ),
        largest_error=largest_cdf_error(law),
    )


def upper_or_lower_quantile(law: Law, p: float) -> Finding:
    """The quantile at `p`, from the upper tail where that is the nearer one and 1 - p is exact enough."""
    return quantile(law, p) if p <= 0.5 else quantile(law, _complement(p), upper=True)


def _complement(p: float) -> float:
    """1 - p as the decimal number that was written: 1 - 0.999 is 0.001, not 0.0010000000000000009."""
    from fractions import Fraction

    return float(1 - Fraction(repr(p)))


def _about(event: Node) -> set[str]:
    return set(names(event))


def _support(law: Law) -> tuple[Finding, Finding]:
    low, high = law.support()
    return (
        _end(law, low, 0.0) if math.isfinite(low) else Absent("unbounded below"),
        _end(law, high, 1.0) if math.isfinite(high) else Absent("unbounded above"),
    )


def _end(law: Law, end: float, p: float) -> Finding:
    """A finite end of the support; its error is that of the quantile there, where one is stated."""
    at = quantile(law, 0.0) if p == 0.0 else quantile(law, 0.0, upper=True)
    if isinstance(at, Absent) or at.value != end:
        return Figure(end, 4e-15 * abs(end))
    return Figure(end, at.error)


def _value_row(law: Law, at: float) -> ValueRow:
    return ValueRow(at, density(law, at), probability(law, "cdf", at), probability(law, "ccdf", at))


def _joint(model: Model, probability_of: Probability, correlation_of: Correlation) -> Joint:
    pairs = combinations([output.name for output in model.outputs], 2)
    return Joint(
        tuple((a, b, correlation_of(a, b)) for a, b in pairs),
        tuple(
            (text, probability_of(event))
            for text, event in model.readings.probabilities
            if len(_about(event)) > 1
        ),
    )


def joint_events(model: Model) -> Mapping[str, Node]:
    """The events over more than one output that the model asks about, by their texts."""
    events = dict(model.readings.probabilities)
    events.update({r.text: r.event for r in model.requirements if r.event is not None})
    return {text: event for text, event in events.items() if len(_about(event)) > 1}
