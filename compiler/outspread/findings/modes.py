"""The mode of a law: where its density is largest, or its heaviest atom; nothing else.

A mode that is not unique, or where the density is unbounded, is Absent with the reason: any single
number would be an arbitrary choice.
"""

from __future__ import annotations

import math

import numpy as np

from outspread.evidence.stating import POINT_ROUNDING, grid_points, stated
from outspread.findings.results import Absent, Figure, Finding
from outspread.laws.law import Array, Law

WINDOW = 30  # points in 400 to either side, with which the search for a smooth panel begins
DEGREE = 24  # of the Chebyshev interpolant that is differentiated


def mode(law: Law) -> Finding:
    """The mode with a bound on its error, or the reason why there is none."""
    if law.continuous_mass == 0.0:
        return _heaviest(law)
    if law.atoms().values.size:
        return Absent("the law has atoms beside its density, and their weights cannot be compared")
    low, high = law.support()
    for unbounded, end in zip(law.singular_ends(), (low, high), strict=True):
        if unbounded:
            return Absent(f"the density is unbounded at {end:.6g}")
    knots = _knots(law)
    for mark in law.breaks():
        steps = (np.nextafter(mark, -math.inf), mark, np.nextafter(mark, math.inf))
        if not bool(np.all(np.isfinite(stated(law, "pdf", np.array(steps)).value))):
            return Absent(f"the density is unbounded at {mark:.6g}")
    return _largest(law, knots)


def _heaviest(law: Law) -> Finding:
    atoms = law.atoms()
    best = int(np.argmax(atoms.masses))
    slack = 4e-15 * float(atoms.masses[best])
    rivals = np.flatnonzero(atoms.masses + atoms.errors + slack >= atoms.masses[best] - atoms.errors[best])
    if rivals.size > 1:
        shown = ", ".join(f"{value:.6g}" for value in atoms.values[rivals][:4])
        return Absent(
            f"it is not unique: {shown}{' and more' if rivals.size > 4 else ''} are equally probable"
        )
    return Figure(float(atoms.values[best]), 0.0)


def _knots(law: Law) -> Array:
    """Ascending points that hold every break, the finite ends and many quantiles."""
    marks = [*law.breaks(), *(end for end in law.support() if math.isfinite(end))]
    points = grid_points(law)
    knots: Array = np.unique(np.concatenate([points, np.asarray(marks, float)]))
    return knots


def _sided(law: Law, knots: Array) -> tuple[Array, Array]:
    """Points to look at (each break from either side) and the densities there."""
    marks = np.asarray([*law.breaks(), *(end for end in law.support() if math.isfinite(end))], float)
    width = float(knots[-1] - knots[0]) if knots.size > 1 else 1.0
    near = 1e-13 * np.maximum(np.abs(marks), width)
    low, high = law.support()
    beside = np.concatenate([marks - near, marks + near])
    points = np.unique(np.concatenate([knots, beside[(beside >= low) & (beside <= high)]]))
    with np.errstate(all="ignore"):
        return points, np.asarray(stated(law, "pdf", points).value, float)


def _largest(law: Law, knots: Array) -> Finding:
    points, values = _sided(law, knots)
    if not bool(np.all(np.isfinite(values))):
        return Absent(f"the density is unbounded at {points[~np.isfinite(values)][0]:.6g}")
    peaks = np.flatnonzero(
        (values >= np.concatenate([[-1.0], values[:-1]])) & (values >= np.concatenate([values[1:], [-1.0]]))
    )
    top = float(np.max(values[peaks]))
    level = peaks[values[peaks] >= top * (1 - 1e-12)]
    if level.size > 2:  # a flat top: its two ends say all
        peaks = level[[0, -1]]
    found = [_peak(law, points, int(i), knots) for i in peaks if values[i] >= 0.9 * top]
    best = max(height for _, height, _, _ in found)
    rivals = [peak for peak in found if peak[1] + peak[3] >= best - peak[3] - 1e-11 * best]
    first, last = rivals[0], rivals[-1]
    width = float(knots[-1] - knots[0])
    if last[0] - first[0] > first[2] + last[2] + 1e-9 * width:
        middle = float(stated(law, "pdf", 0.5 * (first[0] + last[0])).value)
        if middle >= best * (1 - 1e-9):
            return Absent(f"it is not unique: the density is constant from {first[0]:.6g} to {last[0]:.6g}")
        return Absent(f"it is not unique: the density has equal peaks at {first[0]:.6g} and {last[0]:.6g}")
    chosen = max(rivals, key=lambda peak: peak[1])
    if not math.isfinite(chosen[2]):
        return Absent("the density is too flat near its peak for a position to be stated")
    if not chosen[2] < 0.5 * (knots[-1] - knots[0]):
        return Absent("the density is not known well enough to tell where it is largest")
    return Figure(chosen[0], chosen[2])


def _peak(law: Law, points: Array, index: int, knots: Array) -> tuple[float, float, float, float]:
    """Position, height, error of the position and error of the height of the peak at `points[index]`."""
    marks = np.asarray([*law.breaks(), *(end for end in law.support() if math.isfinite(end))], float)
    at = float(points[index])
    width = float(knots[-1] - knots[0])
    if marks.size:
        nearest = float(marks[int(np.argmin(np.abs(marks - at)))])
        if abs(nearest - at) <= 4e-13 * max(abs(at), width):
            rows = stated(law, "pdf", at)
            return (
                nearest,
                float(rows.value),
                POINT_ROUNDING * abs(nearest) + 2e-15 * width,
                float(rows.error),
            )
    window = max(WINDOW * points.size // 400, 2)
    left = float(points[max(index - window, 0)])
    right = float(points[min(index + window, points.size - 1)])
    inside = marks[(marks > left) & (marks < right)]
    left = max([left, *inside[inside < at].tolist()])
    right = min([right, *inside[inside > at].tolist()])
    return _smooth_peak(law, left, right)


def _smooth_peak(law: Law, left: float, right: float) -> tuple[float, float, float, float]:
    """The maximum inside a panel without breaks: the root of the derivative of a Chebyshev interpolant.

    With |interpolant - density| <= e the derivatives differ by at most e N^2 / h on the panel (Markov's
    inequality for the polynomial part), which moves the root by that over the curvature.
    """
    chebyshev = np.polynomial.chebyshev
    for _ in range(12):
        centre, half = 0.5 * (left + right), 0.5 * (right - left)
        nodes = np.cos(np.pi * (np.arange(DEGREE + 1) + 0.5) / (DEGREE + 1))
        rows = stated(law, "pdf", centre + half * nodes)
        values = np.asarray(rows.value, float)
        series = chebyshev.chebfit(nodes, values, DEGREE)
        tail = float(np.sum(np.abs(series[-4:]))) + float(np.max(rows.error)) + 4e-16 * float(np.max(values))
        if tail <= 1e-10 * float(np.max(np.abs(values))) or half <= 1e-9 * (abs(centre) + half):
            break
        best = centre + half * float(nodes[int(np.argmax(values))])
        left, right = max(left, best - 0.5 * half), min(right, best + 0.5 * half)
    slope, bend = chebyshev.chebder(series), chebyshev.chebder(series, 2)
    at = float(nodes[int(np.argmax(values))])
    for _ in range(30):
        curvature = float(chebyshev.chebval(at, bend))
        if curvature >= 0.0:
            break
        step = float(chebyshev.chebval(at, slope)) / curvature
        at = min(max(at - step, -1.0), 1.0)
        if abs(step) < 1e-16:
            break
    curvature = float(chebyshev.chebval(at, bend))
    height = float(chebyshev.chebval(at, series))
    error = math.inf if curvature >= 0.0 else 4.0 * tail * DEGREE**2 / -curvature * half
    return centre + half * at, height, error + POINT_ROUNDING * abs(centre), tail
