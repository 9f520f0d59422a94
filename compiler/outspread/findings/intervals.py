"""Coverage intervals of a law: probabilistically symmetric and shortest (JCGM 101:2008, 5.3.3, 5.3.4, 7.7).

Both are closed intervals; where the law has atoms they hold at least the probability asked for. A
shortest interval that is not unique is said to be so: any one of them would be an arbitrary choice.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from outspread.evidence.stating import stated
from outspread.findings.figures import quantile
from outspread.findings.results import Absent, Coverage, Figure, Finding
from outspread.laws.law import Array, Law

#: relative difference of two lengths below which they are not told apart
INDISTINCT = 1e-9
CELLS_AT_MOST = 20_000


def symmetric(law: Law, probability: float) -> Coverage:
    """The interval with (1 - probability)/2 on either side (JCGM 101:2008, 3.13, 5.3.3)."""
    tail = (1.0 - probability) / 2.0
    return Coverage(probability, "symmetric", quantile(law, tail), quantile(law, tail, upper=True))


def shortest(law: Law, probability: float) -> Coverage:
    """The shortest closed interval with the probability asked for (JCGM 101:2008, 3.14, 5.3.4)."""
    if law.continuous_mass == 0.0:
        ends = _shortest_discrete(law, probability)
    else:
        ends = _shortest_general(law, probability)
    return Coverage(probability, "shortest", *ends)


Ends = tuple[Finding, Finding]


def _absent(reason: str) -> Ends:
    return Absent(reason), Absent(reason)


def _shortest_discrete(law: Law, probability: float) -> Ends:
    atoms = law.atoms()
    values, masses = atoms.values, atoms.masses
    slack = float(np.sum(atoms.errors)) + 8 * np.finfo(float).eps
    below = np.concatenate([[0.0], np.cumsum(masses)])
    # for each first point the first last point that reaches the probability
    reach = np.searchsorted(below[1:], below[:-1] + probability - slack)
    first = np.flatnonzero(reach < values.size)
    if first.size == 0:
        return _absent("the probability asked for is not reached by the points that are stated one by one")
    last = reach[first]
    held = below[last + 1] - below[first]
    if bool(np.any(np.abs(held - probability) <= slack)):
        tight = np.abs(held - probability) <= slack
        if slack > 1e-9 and bool(
            np.any(values[last[tight]] - values[first[tight]] <= np.min(values[last] - values[first]))
        ):
            return _absent("the probability is met or missed within the error of the stated masses")
    length = values[last] - values[first]
    best = float(np.min(length))
    ties = np.flatnonzero(length <= best + 1e-12 * (abs(best) + 1e-300))
    most = float(np.max(held[ties]))
    ties = ties[held[ties] >= most - max(slack, 1e-12)]
    pairs = [(float(values[first[i]]), float(values[last[i]])) for i in ties]
    if len(pairs) > 1:
        return _absent("it is not unique: " + " and ".join(f"[{a:.6g}, {b:.6g}]" for a, b in pairs[:3])
                       + " are equally short and equally probable")  # fmt: skip
    return Figure(pairs[0][0], 0.0), Figure(pairs[0][1], 0.0)


@dataclass(frozen=True)
class _Quantiles:
    """Both ends of the interval that leaves `a` below itself, each taken from the nearer tail."""

    law: Law
    probability: float

    def lower(self, a: Array) -> Array:
        a = np.asarray(a, float)
        with np.errstate(all="ignore"):
            left = np.asarray(self.law.icdf(np.minimum(a, 0.5)), float)
            if bool(np.any(a > 0.5)):
                left = np.where(a > 0.5, self.law.iccdf(np.minimum(1.0 - a, 0.5)), left)
        return np.where(a <= 0.0, self.law.support()[0], left)

    def upper(self, a: Array) -> Array:
        remaining = np.maximum(1.0 - self.probability - np.asarray(a, float), 0.0)
        with np.errstate(all="ignore"):
            right = np.asarray(self.law.iccdf(np.minimum(remaining, 0.5)), float)
            if bool(np.any(remaining > 0.5)):
                right = np.where(remaining > 0.5, self.law.icdf(np.minimum(1.0 - remaining, 0.5)), right)
        return np.where(remaining <= 0.0, self.law.support()[1], right)

    def length(self, a: Array) -> Array:
        return self.upper(a) - self.lower(a)


def _shortest_general(law: Law, probability: float) -> Ends:
    ends = _Quantiles(law, probability)
    spare = 1.0 - probability
    grid = _promising(ends, spare)
    if grid.size == 0:
        return _absent("every interval with this probability is infinitely long")
    candidates = _candidates(law, ends, spare, grid)
    length = ends.length(candidates)
    best_at = float(candidates[int(np.argmin(length))])
    best = float(np.min(length))
    errors = [finding.error for finding in _at(law, ends, best_at) if isinstance(finding, Figure)]
    slack = INDISTINCT * best + sum(errors)
    near = np.sort(candidates[length <= best + slack])
    low = ends.lower(near)
    apart = np.flatnonzero(np.diff(low) > 1e-4 * best)
    if apart.size:
        between = ends.length(0.5 * (near[apart] + near[apart + 1]))
        if bool(np.any(between > best + 10 * slack)):
            high = ends.upper(near)
            return _absent(
                f"it is not unique: [{low[0]:.6g}, {high[0]:.6g}] and [{low[-1]:.6g}, {high[-1]:.6g}]"
                " are equally short within their errors"
            )
    if float(low[-1] - low[0]) > 1e-4 * best and _flat(law, ends, near):
        return _absent("it is not unique: the density is constant there, so many intervals are equally short")
    return _polished(law, ends, spare, best_at)


def _flat(law: Law, ends: _Quantiles, near: Array) -> bool:
    """Whether the density at both ends is the same, within its error, for all the positions `near`."""
    inside = np.linspace(near[0], near[-1], 34)[1:-1]
    slopes = [_slope(law, ends, float(a)) for a in inside]
    return all(abs(value) <= 2 * error for value, error in slopes)


def _promising(ends: _Quantiles, spare: float) -> Array:
    """Points a at which the shortest interval may start, by branch and bound.

    For a in [s, t] the length is at least upper(s) - lower(t), because both ends rise with a; cells whose
    bound exceeds the best length seen are dropped, the others halved, until they are narrow.
    """
    inner = np.linspace(0.0, spare, 257)
    edge = np.geomspace(1e-9, 1.0, 40)[:-1] * (spare / 256)
    knots = np.unique(np.concatenate([inner, edge, spare - edge]))
    low, high = ends.lower(knots), ends.upper(knots)
    best = float(np.min(high - low))
    if not math.isfinite(best):
        return np.zeros(0)
    cells = np.stack([knots[:-1], knots[1:]])
    for _ in range(24):
        lower_ends, upper_starts = ends.lower(cells[1]), ends.upper(cells[0])
        keep = upper_starts - lower_ends <= best * (1 + INDISTINCT)
        cells = cells[:, keep]
        if 2 * cells.shape[1] > CELLS_AT_MOST or float(np.max(cells[1] - cells[0])) < 1e-7 * spare:
            break
        middle = 0.5 * (cells[0] + cells[1])
        best = min(best, float(np.min(ends.length(middle))))
        cells = np.stack([np.concatenate([cells[0], middle]), np.concatenate([middle, cells[1]])])
        if cells.shape[1] > 600:  # enough to tell the basins apart; the rest is polishing
            break
    points: Array = np.unique(cells)
    return points


def _candidates(law: Law, ends: _Quantiles, spare: float, points: Array) -> Array:
    """`points`, the ends of the range, and the positions at which either end lies on an atom or a break."""
    marks = np.unique(np.concatenate([law.atoms().values[:2000], np.asarray(law.breaks(), float)]))
    extra: list[Array] = [points, np.array([0.0, spare])]
    if marks.size:
        with np.errstate(all="ignore"):
            mass = np.zeros(marks.size)
            atoms = law.atoms()
            place = np.searchsorted(atoms.values, marks)
            inside = place < atoms.values.size
            same = np.zeros(marks.size, bool)
            same[inside] = atoms.values[place[inside]] == marks[inside]
            mass[same] = atoms.masses[place[same]]
            at = np.asarray(law.cdf(marks), float)
        extra += [at, at - mass, at - ends.probability, at - mass - ends.probability]
    everything = np.concatenate(extra)
    everything = np.unique(everything[(everything >= 0.0) & (everything <= spare)])
    finite: Array = everything[np.isfinite(ends.length(everything))]
    return finite


def _polished(law: Law, ends: _Quantiles, spare: float, a: float) -> Ends:
    """The ends at the minimum near `a`, where the density is equal at both ends (JCGM 101:2008, 5.3.4)."""
    at = np.array(a)
    start, stop = float(ends.lower(at)), float(ends.upper(at))
    marks = set(law.atoms().values[:2000].tolist()) | set(law.breaks())
    # an end that sits on an atom, a break or the end of the support stays there; equality need not hold
    if a <= 0.0 or a >= spare or start in marks or stop in marks:
        kept = _at(law, ends, a)
        root = None if (a <= 0.0 or a >= spare) else _equal_density(law, ends, spare, a)
        if root is None or float(ends.length(np.array(root[0]))) >= stop - start:
            return kept
        return _with_error(law, ends, *root)
    root = _equal_density(law, ends, spare, a)
    if root is None:
        return _absent("its ends could not be bounded: the length hardly changes with their position")
    return _with_error(law, ends, *root)


def _at(law: Law, ends: _Quantiles, a: float) -> Ends:
    tail = max(1.0 - ends.probability - a, 0.0)
    return quantile(law, a) if a <= 0.5 else quantile(law, 1.0 - a, upper=True), (
        quantile(law, tail, upper=True) if tail <= 0.5 else quantile(law, 1.0 - tail)
    )


def _slope(law: Law, ends: _Quantiles, a: float) -> tuple[float, float]:
    """Density at the upper end less that at the lower end, and a bound on its error.

    The sign of this difference is minus that of the derivative of the length with respect to a.
    """
    at = np.array(a)
    rows = stated(law, "pdf", np.array([float(ends.lower(at)), float(ends.upper(at))]))
    value, error = np.asarray(rows.value, float), np.asarray(rows.error, float)
    return float(value[1] - value[0]), float(error.sum())


def _equal_density(law: Law, ends: _Quantiles, spare: float, a: float) -> tuple[float, float] | None:
    """The position with equal density near `a` and the half-width within which it is certain to lie."""
    width = max(1e-6 * spare, 1e-12)
    bracket = None
    while width < spare:
        left, right = max(a - width, 0.0), min(a + width, spare)
        if _slope(law, ends, left)[0] > 0.0 > _slope(law, ends, right)[0]:
            bracket = (left, right)
            break
        width *= 2.0
    if bracket is None:
        return None
    left, right = bracket
    for _ in range(200):
        middle = 0.5 * (left + right)
        if middle in (left, right) or right - left < 1e-14 * spare:
            break
        left, right = (middle, right) if _slope(law, ends, middle)[0] > 0.0 else (left, middle)
    root = 0.5 * (left + right)
    half = max(right - left, 1e-15 * spare)
    while half < 0.1 * spare:
        before, after = _slope(law, ends, max(root - half, 0.0)), _slope(law, ends, min(root + half, spare))
        if before[0] > before[1] and -after[0] > after[1]:
            return root, half
        half *= 2.0
    return None


def _with_error(law: Law, ends: _Quantiles, root: float, half: float) -> Ends:
    around = np.clip(np.array([root - half, root, root + half]), 0.0, 1.0 - ends.probability)
    findings: list[Finding] = []
    for value, finding in zip((ends.lower(around), ends.upper(around)), _at(law, ends, root), strict=True):
        if isinstance(finding, Absent):
            findings.append(finding)
            continue
        away = float(max(abs(value[0] - value[1]), abs(value[2] - value[1])))
        findings.append(Figure(finding.value, finding.error + away))
    return findings[0], findings[1]


def interval(law: Law, probability: float, kind: str) -> Coverage:
    """The coverage interval of the kind "symmetric" or "shortest"; ValueError for another kind."""
    if not 0.0 < probability < 1.0:
        raise ValueError(f"a coverage probability lies between 0 and 1, not at {probability}")
    if kind == "symmetric":
        return symmetric(law, probability)
    if kind == "shortest":
        return shortest(law, probability)
    raise ValueError(f'the kinds of interval are "symmetric" and "shortest", not "{kind}"')
