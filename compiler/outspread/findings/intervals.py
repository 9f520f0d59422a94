"""Coverage intervals of a law: probabilistically symmetric and shortest (JCGM 101:2008, 5.3.3, 5.3.4, 7.7).

Both are closed intervals; where the law has atoms they hold at least the probability asked for. A
shortest interval that is not unique is said to be so: any one of them would be an arbitrary choice.
"""

from __future__ import annotations

import math
from fractions import Fraction

import numpy as np

from outspread.evidence.stating import stated, stated_quantile
from outspread.findings.figures import quantiles
from outspread.findings.polishing import polish
from outspread.findings.quantiles import Quantiles, quantiles_for
from outspread.findings.results import Absent, Coverage, Figure, Finding
from outspread.laws.law import Array, Law

#: relative difference of two lengths below which they are not told apart
INDISTINCT = 1e-9
CELLS_AT_MOST = 300
#: relative doubt about lengths above which the law is taken as sampled
BLURRED = 1e-7


def symmetric_ends(probability: float) -> tuple[tuple[float, bool], tuple[float, bool]]:
    """The tail probabilities at which the ends of the symmetric interval are asked for, as in `quantiles`."""
    tail = float((1 - Fraction(repr(probability))) / 2)
    return (tail, False), (tail, True)


def symmetric(law: Law, probability: float) -> Coverage:
    """The interval with (1 - probability)/2 on either side (JCGM 101:2008, 3.13, 5.3.3)."""
    known = quantiles(law, symmetric_ends(probability))
    return Coverage(probability, "symmetric", *(known[end] for end in symmetric_ends(probability)))


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


def _shortest_general(law: Law, probability: float) -> Ends:
    ends = quantiles_for(law, probability)
    spare = 1.0 - probability
    grid = _promising(ends, spare)
    if grid.size == 0:
        return _absent("every interval with this probability is infinitely long")
    candidates = _candidates(law, ends, spare, grid)
    length = ends.length(candidates)
    best = float(np.min(length))
    near = np.flatnonzero(length <= best * (1 + ends.doubt))
    basins = np.split(near, np.flatnonzero(np.diff(near) > 1) + 1)
    found: list[tuple[float, float, Ends]] = []
    for basin in basins:
        a = float(candidates[basin[int(np.argmin(length[basin]))]])
        if _flat(law, ends, candidates[basin], best):
            if ends.doubt > BLURRED and len(basins) == 1:
                return _blurred(ends, a, candidates[basin])
            return _absent(
                "it is not unique: the density is constant there, so many intervals are equally short"
            )
        polished = polish(law, ends, spare, a)
        lower, upper = polished
        if isinstance(lower, Figure) and isinstance(upper, Figure):
            found.append((upper.value - lower.value, lower.error + upper.error, polished))
        else:
            return polished
    found.sort(key=lambda row: row[0])
    if len(found) > 1:
        margin = INDISTINCT * found[0][0] + found[0][1] + found[1][1]
        if found[1][0] <= found[0][0] + margin and _apart(found[0][2], found[1][2], found[0][0]):
            shown = sorted(_values(row[2]) for row in found[:2])
            return _absent("it is not unique: " + " and ".join(f"[{a:.6g}, {b:.6g}]" for a, b in shown)
                           + " are equally short within their errors")  # fmt: skip
    return found[0][2]


def _values(ends: Ends) -> tuple[float, float]:
    lower, upper = ends
    assert isinstance(lower, Figure)
    assert isinstance(upper, Figure)
    return lower.value, upper.value


def _apart(first: Ends, second: Ends, length: float) -> bool:
    """Whether these are two different intervals and not one that was found twice."""
    return abs(_values(first)[0] - _values(second)[0]) > 1e-6 * length


def _promising(ends: Quantiles, spare: float) -> Array:
    """Points a at which the shortest interval may start, by branch and bound.

    For a in [s, t] the length is at least upper(s) - lower(t), because both ends rise with a; cells whose
    bound exceeds the best length seen are dropped, the others halved, until they are narrow.
    """
    inner = np.linspace(0.0, spare, 257)
    edge = np.geomspace(1e-9, 1.0, 40)[:-1] * (spare / 256)
    knots = np.unique(np.concatenate([inner, edge, spare - edge]))
    best = float(np.min(ends.length(knots)))
    if not math.isfinite(best):
        return np.zeros(0)
    cells = np.stack([knots[:-1], knots[1:]])
    for _ in range(24):
        bound = ends.upper(cells[0]) - ends.lower(cells[1])
        cells = cells[:, bound <= best * (1 + ends.doubt)]
        if cells.shape[1] > CELLS_AT_MOST or float(np.max(cells[1] - cells[0])) < 1e-7 * spare:
            break
        middle = 0.5 * (cells[0] + cells[1])
        best = min(best, float(np.min(ends.length(middle))))
        cells = np.stack([np.concatenate([cells[0], middle]), np.concatenate([middle, cells[1]])])
    # all knots stay among the points, so that two basins have points between them
    points: Array = np.unique(np.concatenate([cells.ravel(), knots]))
    return points


def _candidates(law: Law, ends: Quantiles, spare: float, points: Array) -> Array:
    """`points`, the ends of the range, and the positions at which either end lies on an atom or a break."""
    marks = ends.marks
    extra: list[Array] = [points, np.array([0.0, spare])]
    if marks.size:
        atoms = law.atoms()
        mass = np.zeros(marks.size)
        if atoms.values.size:
            place = np.minimum(np.searchsorted(atoms.values, marks), atoms.values.size - 1)
            mass = np.where(atoms.values[place] == marks, atoms.masses[place], 0.0)
        with np.errstate(all="ignore"):
            at = np.asarray(law.cdf(marks), float)
        extra += [at, at - mass, at - ends.probability, at - mass - ends.probability]
    everything = np.concatenate(extra)
    everything = np.unique(everything[(everything >= 0.0) & (everything <= spare)])
    finite: Array = everything[np.isfinite(ends.length(everything))]
    return finite


def _flat(law: Law, ends: Quantiles, near: Array, best: float) -> bool:
    """Whether the density at both ends is the same, within its error, all over a wide basin."""
    if float(ends.lower(near[-1:])[0] - ends.lower(near[:1])[0]) <= 1e-4 * best:
        return False
    inside = np.linspace(near[0], near[-1], 9)[1:-1]
    rows = [stated(law, "pdf", end) for end in (ends.lower(inside), ends.upper(inside))]
    away = np.abs(rows[0].value - rows[1].value)
    return bool(np.all(away <= 2 * (rows[0].error + rows[1].error)))


def _blurred(ends: Quantiles, a: float, near: Array) -> Ends:
    """The best interval found, with errors that reach to every other one that may be the shortest: what a
    law known by sampling allows to say."""
    reach = np.linspace(near[0], near[-1], 33)
    found = []
    for side in (ends.lower, ends.upper):
        middle = float(side(np.array([a]))[0])
        own = stated_quantile(ends.law, a if side == ends.lower else a + ends.probability)
        found.append(Figure(middle, float(np.max(np.abs(side(reach) - middle))) + float(own.error)))
    return found[0], found[1]


def interval(law: Law, probability: float, kind: str) -> Coverage:
    """The coverage interval of the kind "symmetric" or "shortest"; ValueError for another kind."""
    if not 0.0 < probability < 1.0:
        raise ValueError(f"a coverage probability lies between 0 and 1, not at {probability}")
    if kind == "symmetric":
        return symmetric(law, probability)
    if kind == "shortest":
        return shortest(law, probability)
    raise ValueError(f'the kinds of interval are "symmetric" and "shortest", not "{kind}"')
