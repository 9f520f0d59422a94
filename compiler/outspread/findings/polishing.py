"""Makes a coverage interval that was found by scanning exact: its ends, and bounds on their errors.

At a shortest interval the density is equal at both ends (JCGM 101:2008, 5.3.4), unless an end sits on an
atom, on a break of the density or on the end of the support.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.polynomial import chebyshev

from outspread.evidence.stating import POINT_ROUNDING, Kind, StatesErrors, stated
from outspread.findings.figures import quantile
from outspread.findings.quantiles import Quantiles
from outspread.findings.results import Absent, Figure, Finding
from outspread.laws.law import Array, Estimates, Law

Ends = tuple[Finding, Finding]
NODES = 14  # of the polynomials that stand in for a costly law near the two ends


@dataclass(frozen=True)
class _Point:
    """An interval of the probability asked for: its ends, f(upper) - f(lower) with its error, and the
    error of the upper end for the lower one as it stands."""

    lower: float
    upper: float
    slope: float
    slope_error: float
    upper_error: float


def polish(law: Law, ends: Quantiles, spare: float, a: float) -> Ends:
    """The ends at the minimum of the length near the position `a`, with errors, or the reason for none."""
    start, stop = float(ends.lower(np.array(a))), float(ends.upper(np.array(a)))
    pinned = a <= 0.0 or a >= spare or _marked(ends, start, stop)
    if pinned and (a <= 0.0 or a >= spare):
        return at_position(law, ends.probability, a)
    if pinned:
        kept = at_position(law, ends.probability, a)
        better = _equal_density(law, ends, start, stop)
        if better is None or not _shorter(better, kept):
            return kept
        return better
    found = _equal_density(law, ends, start, stop)
    if found is not None:
        return found
    reason = "its ends could not be bounded: the length hardly changes with their position"
    return Absent(reason), Absent(reason)


def _marked(ends: Quantiles, start: float, stop: float) -> bool:
    """Whether an end sits on an atom or a break, as far as a sketch can tell."""
    if ends.marks.size == 0:
        return False
    near = 10 * min(ends.doubt, 1e-6) * (stop - start)
    return bool(np.min(np.abs(ends.marks - start)) <= near or np.min(np.abs(ends.marks - stop)) <= near)


def _shorter(first: Ends, second: Ends) -> bool:
    values = [
        ends[1].value - ends[0].value
        if isinstance(ends[0], Figure) and isinstance(ends[1], Figure)
        else np.inf
        for ends in (first, second)
    ]
    return bool(values[0] < values[1])


def at_position(law: Law, probability: float, a: float) -> Ends:
    """The quantiles at `a` and `a` + probability, each from the nearer tail."""
    left = max(1.0 - probability - a, 0.0)
    lower = quantile(law, a) if a <= 0.5 else quantile(law, 1.0 - a, upper=True)
    upper = quantile(law, left, upper=True) if left <= 0.5 else quantile(law, 1.0 - left)
    return lower, upper


Known = Callable[[Kind, float], Estimates]


def _local(law: Law, ends: Quantiles, start: float, stop: float, width: float) -> Known | None:
    """Polynomials for cdf and density around `start`, ccdf and density around `stop`, or None where the law
    is not smooth there; outside they answer nan. Their error is the law's and what their last terms show."""
    low, high = law.support()
    centres = []
    for centre in (start, stop):
        marks = ends.marks[np.abs(ends.marks - centre) < width]
        if marks.size or centre - width <= low or centre + width >= high:
            return None
        centres.append(centre)
    nodes = np.cos(np.pi * (np.arange(NODES) + 0.5) / NODES)
    places = [centre + width * nodes for centre in centres]
    density = _rows(law, "pdf", np.concatenate(places))
    series = {
        ("cdf", 0): _series(nodes, _rows(law, "cdf", places[0])),
        ("ccdf", 1): _series(nodes, _rows(law, "ccdf", places[1])),
        ("pdf", 0): _series(nodes, Estimates(density.value[:NODES], density.error[:NODES])),
        ("pdf", 1): _series(nodes, Estimates(density.value[NODES:], density.error[NODES:])),
    }

    def known(kind: Kind, x: float) -> Estimates:
        side = 0 if abs(x - centres[0]) <= abs(x - centres[1]) else 1
        at = (x - centres[side]) / width
        row = series.get((kind, side))
        if row is None or abs(at) > 1.0:
            return Estimates(np.asarray(np.nan), np.asarray(np.inf))
        return Estimates(np.asarray(chebyshev.chebval(at, row[0])), np.asarray(row[1]))

    return known


def _rows(law: Law, kind: Kind, x: Array) -> Estimates:
    rows = stated(law, kind, x)
    return Estimates(np.asarray(rows.value, float), np.asarray(rows.error, float))


def _series(nodes: Array, rows: Estimates) -> tuple[Array, float]:
    series = np.asarray(chebyshev.chebfit(nodes, rows.value, NODES - 1), float)
    return series, float(np.max(rows.error)) + float(np.sum(np.abs(series[-3:])))


def _point(known: Known, probability: float, lower: float, guess: float) -> _Point | None:
    """The upper end for a lower end, by Newton's method on cdf(lower) + ccdf(upper) = 1 - probability."""
    below = known("cdf", lower)
    left = 1.0 - probability - float(below.value)
    upper = guess
    if left <= 0.0:
        return None
    for _ in range(40):
        above, density = known("ccdf", upper), known("pdf", upper)
        if not (np.isfinite(density.value) and float(density.value) > 0.0):
            return None
        step = (float(above.value) - left) / float(density.value)
        # half-way at most to where the tail would be used up, so that a bad guess cannot run away
        upper += float(np.clip(step, -0.5 * abs(upper - lower), 0.5 * abs(upper - lower)))
        # no step below the error of the probability itself means anything
        doubt = 0.1 * float(above.error) / float(density.value)
        if abs(step) <= max(4e-15 * max(abs(upper), abs(upper - lower)), doubt):
            break
    doubt = (float(above.error) + float(below.error)) / float(density.value)
    start = known("pdf", lower)
    slope = float(density.value) - float(start.value)
    error = float(density.error) + float(start.error)
    return _Point(lower, upper, slope, error, doubt + POINT_ROUNDING * abs(upper) + abs(step))


def _equal_density(law: Law, ends: Quantiles, start: float, stop: float) -> Ends | None:
    """The interval with equal density at both ends near [start, stop]."""
    length = stop - start
    if isinstance(law, StatesErrors):
        for share in (0.01, 0.05):
            near = _local(law, ends, start, stop, share * length)
            found = None if near is None else _root(near, ends, start, stop)
            if found is not None:
                return found
    return _root(lambda kind, x: stated(law, kind, x), ends, start, stop)


def _root(known: Known, ends: Quantiles, start: float, stop: float) -> Ends | None:
    p, length = ends.probability, stop - start
    bracket = None
    width = max(1e-6, 0.1 * ends.doubt) * length
    for _ in range(16):
        left, right = _point(known, p, start - width, stop), _point(known, p, start + width, stop)
        if left is None or right is None:
            return None
        if left.slope > 0.0 > right.slope:
            bracket = (left, right)
            break
        width *= 3.0
        if width > length:
            return None
    if bracket is None:
        return None
    left, right = bracket
    middle = left
    for turn in range(60):
        # the secant, and every third time the middle, so that the bracket shrinks from both sides
        share = left.slope / (left.slope - right.slope) if turn % 3 < 2 else 0.5
        at = left.lower + min(max(share, 0.01), 0.99) * (right.lower - left.lower)
        if at in (left.lower, right.lower):
            break
        found = _point(known, p, at, left.upper + share * (right.upper - left.upper))
        if found is None:
            return None
        middle = found
        left, right = (middle, right) if middle.slope > 0.0 else (left, middle)
        if abs(middle.slope) <= middle.slope_error or right.lower - left.lower <= 1e-15 * length:
            break
    return _bounded(known, p, middle, length)


def _bounded(known: Known, probability: float, root: _Point, length: float) -> Ends | None:
    """The ends with the half-width within which the change of sign is certain, errors counted."""
    half = 1e-14 * length
    while half < 0.1 * length:
        before = _point(known, probability, root.lower - half, root.upper)
        after = _point(known, probability, root.lower + half, root.upper)
        if before is None or after is None:
            return None
        if before.slope > before.slope_error and -after.slope > after.slope_error:
            moved = max(abs(before.upper - root.upper), abs(after.upper - root.upper))
            lower_error = half + POINT_ROUNDING * abs(root.lower)
            return Figure(root.lower, lower_error), Figure(root.upper, moved + root.upper_error)
        half *= 8.0
    return None
