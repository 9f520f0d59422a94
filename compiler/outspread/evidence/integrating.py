"""Integrates a law's density over panels between its quantiles, to hold it against the distribution function.

Gauss-Legendre rules of two orders where the density is smooth, else double exponential quadrature
(Takahasi and Mori 1974), which bears singular ends; written for this check alone, it shares no code with
the quadrature of the routes.
"""

from __future__ import annotations

import itertools
import math
from dataclasses import dataclass

import numpy as np

from outspread.evidence.stating import Graded, stated
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
    if isinstance(law, Graded):  # any ends do: take known points near these quantiles
        nodes = np.asarray(law.nodes, float)
        below, above = stated(law, "cdf", nodes).value, stated(law, "ccdf", nodes).value
        near = [
            int(np.argmin(np.abs(np.log(side + 1e-300) - math.log(p))))
            for side in (below, above)
            for p in tails
        ]
        quantiles = nodes[near]
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
    rows = [_panel(law, a, b) for a, b in itertools.pairwise(ends.tolist())]
    stops, difference, allowed = (np.array(column) for column in zip(*rows, strict=True))
    return Panels(stops, difference, allowed)


def _panel(law: Law, start: float, stop: float) -> tuple[float, float, float]:
    integral, error = _gauss(law, start, stop)
    if error > SMOOTH * abs(integral):
        integral, error = _double_exponential(law, start, stop)
    lower = stated(law, "cdf", np.array([start, stop]))
    upper = stated(law, "ccdf", np.array([start, stop]))
    atoms = law.atoms()
    inside = float(np.sum(atoms.masses[(atoms.values > start) & (atoms.values <= stop)]))
    inside_error = float(np.sum(atoms.errors[(atoms.values > start) & (atoms.values <= stop)]))
    from_below = float(lower.value[1] - lower.value[0])
    from_above = float(upper.value[0] - upper.value[1])
    below_error, above_error = float(np.sum(lower.error)), float(np.sum(upper.error))
    rise, rise_error = (from_below, below_error) if below_error <= above_error else (from_above, above_error)
    allowed = error + rise_error + inside_error + 8 * float(np.finfo(float).eps)
    return stop, abs(integral - (rise - inside)), allowed


def _gauss(law: Law, start: float, stop: float) -> tuple[float, float]:
    """The integral by 20 points, and its stated errors with the difference from 14 points."""
    results = []
    stated_error = 0.0
    for order in ORDERS:
        nodes, weights = np.polynomial.legendre.leggauss(order)
        half = 0.5 * (stop - start)
        rows = stated(law, "pdf", start + half * (1.0 + nodes))
        results.append(float(half * np.sum(weights * rows.value)))
        stated_error = float(half * np.sum(weights * rows.error))
    away = abs(results[1] - results[0])
    if not math.isfinite(away):
        return results[1], math.inf
    return results[1], stated_error + away + 1e-14 * abs(results[1])


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
