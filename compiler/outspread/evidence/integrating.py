"""Integrates a law's density over panels between its quantiles, to hold it against the distribution function.

Gauss-Legendre rules of two orders where the density is smooth, else double exponential quadrature
(Takahasi and Mori 1974), which bears singular ends; written for this check alone, it shares no code with
the quadrature of the routes.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from outspread.evidence.stating import Graded, central_nodes, stated
from outspread.laws.law import Array, Law

#: lower and upper probabilities between whose quantiles the density is integrated
PROBABILITIES = (1e-6, 1e-3, 0.05, 0.5)
STEPS = (0.25, 0.125, 0.0625)
ORDERS = (14, 20)  # of the two Gauss-Legendre rules
SMOOTH = 1e-9  # relative error up to which they are taken
REACH = 3.4  # of the variable t, where the weights have fallen below 1e-20


@dataclass(frozen=True)
class Panels:
    """One row a panel: its upper end, |integral - rise of the cdf| and what their errors allow."""

    stops: Array
    difference: Array
    allowed: Array


def panel_ends(law: Law) -> Array:
    """Ascending ends of the panels: quantiles in both tails, breaks, atoms and finite ends of the support."""
    tails = np.asarray(PROBABILITIES)
    if isinstance(law, Graded):  # any ends do: take known points
        nodes = central_nodes(law, PROBABILITIES[0])
        quantiles = nodes[np.unique(np.round(np.linspace(0, nodes.size - 1, 2 * tails.size)).astype(int))]
    else:
        with np.errstate(all="ignore"):
            quantiles = np.concatenate([np.asarray(law.icdf(tails)), np.asarray(law.iccdf(tails))])
    marks = np.asarray([*law.breaks(), *law.support(), *law.atoms().values[:50].tolist()], float)
    quantiles = quantiles[np.isfinite(quantiles)]
    if quantiles.size == 0:
        return np.zeros(0)
    low, high = float(np.min(quantiles)), float(np.max(quantiles))
    marks = marks[np.isfinite(marks) & (marks > low) & (marks < high)]
    ends: Array = np.unique(np.concatenate([quantiles, marks]))
    width = high - low
    keep = np.concatenate([[True], np.diff(ends) > 1e-12 * max(width, abs(low), abs(high))])
    kept: Array = ends[keep]
    return kept


def integrate_density(law: Law) -> Panels:
    """The density of the continuous part over each panel, against P(start < X < stop) without atoms."""
    ends = panel_ends(law)
    if ends.size < 2:
        empty = np.zeros(0)
        return Panels(empty, empty, empty)
    starts, stops = ends[:-1], ends[1:]
    rises, rise_errors = _rises(law, ends)
    integrals, errors, stated_errors = _gauss(law, starts, stops)
    # where the density itself is known no better, a finer rule would show no more
    for i in np.flatnonzero(~(errors <= SMOOTH * np.abs(integrals) + 2.0 * stated_errors)):
        integrals[i], errors[i] = _double_exponential(law, float(starts[i]), float(stops[i]))
    allowed = errors + rise_errors + 8 * float(np.finfo(float).eps)
    return Panels(stops, np.abs(integrals - rises), allowed)


def _rises(law: Law, ends: Array) -> tuple[Array, Array]:
    """P(start < X <= stop) without the atoms there, for each panel, from the tail that knows it better."""
    lower, upper = stated(law, "cdf", ends), stated(law, "ccdf", ends)
    below_error, above_error = (row.error[1:] + row.error[:-1] for row in (lower, upper))
    from_below = below_error <= above_error
    rise = np.where(from_below, np.diff(lower.value), -np.diff(upper.value))
    atoms = law.atoms()
    panel = np.searchsorted(ends, atoms.values, side="left") - 1
    inside = (panel >= 0) & (panel < rise.size)
    held = np.bincount(panel[inside], atoms.masses[inside], rise.size)
    doubt = np.bincount(panel[inside], atoms.errors[inside], rise.size)
    return rise - held, np.where(from_below, below_error, above_error) + doubt


def _gauss(law: Law, starts: Array, stops: Array) -> tuple[Array, Array, Array]:
    """Integrals by 20 points a panel, their errors (the difference from 14 points counted), and that part of
    the errors which the law states for its density."""
    rules = [np.polynomial.legendre.leggauss(order) for order in ORDERS]
    half = 0.5 * (stops - starts)
    points = [starts[:, None] + half[:, None] * (1.0 + nodes) for nodes, _ in rules]
    rows = stated(law, "pdf", np.concatenate([block.ravel() for block in points]))
    split = points[0].size
    values = [rows.value[:split].reshape(points[0].shape), rows.value[split:].reshape(points[1].shape)]
    with np.errstate(all="ignore"):
        results = [half * (value @ weights) for value, (_, weights) in zip(values, rules, strict=True)]
        stated_error = half * (rows.error[split:].reshape(points[1].shape) @ rules[1][1])
        error = stated_error + np.abs(results[1] - results[0]) + 1e-14 * np.abs(results[1])
    return results[1], np.where(np.isfinite(error), error, np.inf), stated_error


def _double_exponential(law: Law, start: float, stop: float) -> tuple[float, float]:
    """The integral of the density and a bound: its stated errors, and twice the last change on halving."""
    results = []
    stated_error = 0.0
    for step in STEPS:
        t = np.arange(-math.floor(REACH / step), math.floor(REACH / step) + 1) * step
        inner = 0.5 * math.pi * np.sinh(t)
        near = 1.0 / (1.0 + np.exp(2.0 * np.abs(inner)))  # share of the panel to the nearer end
        x = np.where(t < 0, start + (stop - start) * near, stop - (stop - start) * near)
        weight = 0.5 * math.pi * np.cosh(t) / np.cosh(inner) ** 2 * 0.5 * (stop - start) * step
        inside = (x > start) & (x < stop)
        rows = stated(law, "pdf", x[inside])
        value = np.asarray(rows.value, float)
        finite = np.isfinite(value)
        results.append(math.fsum((value * weight[inside])[finite].tolist()))
        stated_error = float(np.sum((np.asarray(rows.error, float) * weight[inside])[finite]))
    return results[-1], stated_error + 2.0 * abs(results[-1] - results[-2]) + 1e-14 * abs(results[-1])
