"""Probability of an event in one output, read off that output's law: the event is solved for the output."""

from __future__ import annotations

import numpy as np

from outspread.formula.evaluate import compile_numpy
from outspread.formula.tree import Apply, Node, walk
from outspread.laws.law import Array, Estimates, Law
from outspread.numerics.slices import cases
from outspread.numerics.slices.solve import Frame, Solver

_PERIODIC = frozenset({"sin", "cos", "tan"})


def stated(law: Law, kind: str, y: float) -> Estimates:
    """cdf or ccdf at a point with its error, for derived and given laws alike."""
    estimate = getattr(law, "estimate", None)
    if estimate is not None:
        result: Estimates = estimate(kind, y)
        return result
    value = law.cdf(y) if kind == "cdf" else law.ccdf(y)
    return Estimates(value, np.abs(value) * max(law.relative_error, 1e-14))


def event_of_one(event: Node, name: str, law: Law) -> Estimates | None:
    """P(event) where the event holds no other name; None where it cannot be solved by formula."""
    holds = compile_numpy(event, (name,))
    atoms = law.atoms()
    with np.errstate(all="ignore"):
        true = np.broadcast_to(np.asarray(holds(atoms.values), bool), atoms.values.shape)
    value, error = float(atoms.masses[true].sum()), float(atoms.errors[true].sum())
    if law.continuous_mass == 0:
        return _clipped(value, error)
    if any(isinstance(part, Apply) and part.operator in _PERIODIC for part in walk(event)):
        return None
    frame = Frame(name, np.array([-1.0, 0.0, 1.0]))
    if not Solver(cases.split(event, name), frame, structure_only=True).exact:
        return None
    where = Solver(event, frame)({}, 1)
    for lower, upper in zip(where.lower[:, 0].tolist(), where.upper[:, 0].tolist(), strict=True):
        if lower < upper:
            mass, doubt = _between(law, lower, upper)
            inside = (atoms.values > lower) & (atoms.values <= upper)
            value += mass - float(atoms.masses[inside].sum())
            error += doubt + float(atoms.errors[inside].sum())
    return _clipped(value, error)


def _clipped(value: float, error: float) -> Estimates:
    bounded: Array = np.asarray(min(max(value, 0.0), 1.0))
    return Estimates(bounded, np.asarray(error))


def _between(law: Law, lower: float, upper: float) -> tuple[float, float]:
    """P(lower < Y <= upper), atoms included, from the tail that keeps most digits."""
    if np.isneginf(lower) and np.isposinf(upper):
        return 1.0, 0.0
    if np.isneginf(lower):
        whole = stated(law, "cdf", upper)
        return float(whole.value), float(whole.error)
    if np.isposinf(upper):
        whole = stated(law, "ccdf", lower)
        return float(whole.value), float(whole.error)
    middle = float(law.cdf(lower)) < 0.5 < float(law.cdf(upper))
    if middle:
        parts = [stated(law, "cdf", lower), stated(law, "ccdf", upper)]
        value = 1.0 - float(parts[0].value) - float(parts[1].value)
    else:
        kind, sign = ("cdf", 1.0) if float(law.cdf(upper)) <= 0.5 else ("ccdf", -1.0)
        parts = [stated(law, kind, lower), stated(law, kind, upper)]
        value = sign * (float(parts[1].value) - float(parts[0].value))
    return max(value, 0.0), float(parts[0].error) + float(parts[1].error) + 2.3e-16
