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
    StatesSupport,
    heaviest_atoms,
    largest_cdf_error,
    moment_figures,
    nearer_tail,
    quantiles,
    value_rows,
)
from outspread.findings.intervals import shortest, symmetric_ends
from outspread.findings.modes import mode
from outspread.findings.requirements import judge_requirements
from outspread.findings.results import (
    Absent,
    Coverage,
    Driver,
    Evidence,
    Figure,
    Finding,
    Joint,
    OutputResults,
    Results,
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
    ends = {p: symmetric_ends(p) for p in readings.coverage}
    wanted = [(0.5, False), *(nearer_tail(p) for p in readings.quantiles)]
    known = quantiles(law, [*wanted, *(end for pair in ends.values() for end in pair)])
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
        median=known[0.5, False],
        mode=mode(law),
        quantiles=tuple((p, known[nearer_tail(p)]) for p in readings.quantiles),
        coverage=tuple(
            row
            for p, (lower, upper) in ends.items()
            for row in (Coverage(p, "symmetric", known[lower], known[upper]), shortest(law, p))
        ),
        values=value_rows(law, readings.values.get(output.name, ())),
        probabilities=tuple(
            (text, probability_of(event))
            for text, event in readings.probabilities
            if _about(event) == {output.name}
        ),
        largest_error=largest_cdf_error(law),
        headline=readings.headline,
    )


def _about(event: Node) -> set[str]:
    return set(names(event))


def _support(law: Law) -> tuple[Finding, Finding]:
    low, high = law.support()
    # given laws end at their parameters, a sum or a difference of two at most
    errors = law.support_error if isinstance(law, StatesSupport) else (4e-16 * abs(low), 4e-16 * abs(high))
    return (
        Figure(low, errors[0]) if math.isfinite(low) else Absent("unbounded below"),
        Figure(high, errors[1]) if math.isfinite(high) else Absent("unbounded above"),
    )


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
