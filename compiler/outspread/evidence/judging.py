"""Compares derived laws with independent evidence and says whether they agree; it derives nothing itself.

The band for plain sampling is that of Dvoretzky, Kiefer and Wolfowitz with Massart's constant (Massart
1990, Annals of Probability 18, 1269-1283): P(sup |F_n - F| > e) <= 2 exp(-2 n e^2), for every law.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from outspread.evidence.adaptive import Index
from outspread.evidence.comparison import Comparison
from outspread.evidence.drawing import Sample
from outspread.evidence.integrating import integrate_density
from outspread.evidence.marginal_density import NotWritten
from outspread.evidence.stating import Graded, StatesErrors, central_nodes, stated
from outspread.evidence.written import written_density
from outspread.laws.law import Array, Estimates, Law
from outspread.reading.model import Model
from outspread.routes.derived import DerivedOutput, SymbolicDensity, SymbolicIntegral

CONFIDENCE = 0.9999
FIRST_POINTS = 401
#: points at which a law is evaluated; one that computes each value with its error is costly
POINTS_AT_MOST, POINTS_OF_COSTLY = 200_000, 401
CURVE_POINTS = 400
COMPARED_POINTS = 200
#: tail probability to which a density written as an integral is evaluated
INTEGRAL_TAIL = 1e-3
#: relative difference below which two densities are one: the ten digits that a route promises
TEN_DIGITS = 1e-10
#: share of the scale of a law within which a draw is taken to be at an atom: rounding of the formula
SNAP = 1e-11


def band(count: int, confidence: float = CONFIDENCE) -> float:
    """Half-width that sup |F_n - F| exceeds with probability at most 1 - confidence (Massart 1990)."""
    return math.sqrt(math.log(2.0 / (1.0 - confidence)) / (2.0 * count))


def judge_output(
    derived: DerivedOutput, sample: Sample, model: Model | None = None
) -> tuple[Comparison, ...]:
    """Everything that can be compared for one output, in a fixed order. Without the model, a density that
    is written as an integral is not evaluated."""
    found: list[Comparison] = [
        judge_sample(derived.output, derived.law, sample.outputs[derived.output], sample.label)
    ]
    found.extend(judge_atoms(derived.output, derived.law, sample.outputs[derived.output], sample.label))
    if derived.law.continuous_mass > 0.0:
        found.append(judge_density(derived.output, derived.law))
    if derived.numeric is not None:
        found.append(judge_law(derived.output, derived.law, derived.numeric))
    if isinstance(derived.symbolic, SymbolicDensity):
        found.append(judge_symbolic(derived.output, derived.law, derived.symbolic))
    elif derived.symbolic is not None and derived.law.continuous_mass > 0.0 and model is not None:
        try:
            found.append(judge_integral(derived.output, derived.law, derived.symbolic, model))
        except NotWritten as reason:  # said beside the check of the density that could be made
            found[-1] = replace(found[-1], note=f"not compared with a formula of the density: {reason}")
    return tuple(found)


def judge_sample(output: str, law: Law, draws: Array, label: str) -> Comparison:
    """The empirical distribution function against the law's, with a bound on the largest difference.

    Between two points where both are known, both functions are monotone, so that their difference there
    is bounded; points are added where that bound is not small enough to decide. For a law whose values are
    costly the points stay few, what is seen there is judged, and the bound is said in a note.
    """
    undefined = int(np.count_nonzero(np.isnan(draws)))
    allowed = band(draws.size)
    if undefined:
        share = undefined / draws.size
        return Comparison(
            output,
            label,
            draws.size,
            share,
            allowed,
            False,
            CONFIDENCE,
            note=f"the formula is undefined in {undefined:,} of the draws",
        )
    walk = _Walk(law, _snapped(np.sort(draws), law))
    costly = isinstance(law, StatesErrors)
    largest, bound, error = walk.settle(allowed, POINTS_OF_COSTLY if costly else POINTS_AT_MOST)
    agrees = (largest if costly else bound) <= allowed + error
    note = "" if agrees else "the distribution function lies outside the band"
    if agrees and bound > allowed + error:
        note = f"between these points the difference is at most {bound:.2g}, because both rise"
    return Comparison(
        output, label, walk.points.size, largest, allowed + error, agrees, CONFIDENCE, walk.curve(), note
    )


def _snapped(ordered: Array, law: Law) -> Array:
    """The draws, those within rounding of an atom moved onto it."""
    atoms = law.atoms().values
    if atoms.size == 0 or ordered.size == 0:
        return ordered
    place = np.clip(np.searchsorted(atoms, ordered), 1, max(atoms.size - 1, 1))
    left = atoms[place - 1]
    right = atoms[np.minimum(place, atoms.size - 1)]
    nearest = np.where(np.abs(ordered - left) <= np.abs(right - ordered), left, right)
    middle = ordered[ordered.size // 20 : -(ordered.size // 20) or None]
    scale = max(float(np.max(np.abs(middle))), float(np.max(np.abs(atoms[:1]))))
    return np.asarray(np.where(np.abs(ordered - nearest) <= SNAP * scale, nearest, ordered))


class _Walk:
    """Two step-by-step known monotone functions, F of the law and F_n of the draws, over chosen draws."""

    def __init__(self, law: Law, ordered: Array):
        self.law, self.ordered, self.count = law, ordered, ordered.size
        atoms = law.atoms()
        chosen = np.unique(np.round(np.linspace(0, self.count - 1, FIRST_POINTS)).astype(int))
        heavy = atoms.values[np.argsort(-atoms.masses, kind="stable")[:2000]]
        self.points = np.unique(np.concatenate([ordered[chosen], heavy]))
        self._evaluate()

    def _evaluate(self) -> None:
        """F and F_n at the points (`at`) and their limits from below (`before`), and the law's error."""
        rows = stated(self.law, "cdf", self.points)
        self.at, self.error = rows.value, rows.error
        self.before = self.at - _mass_at(self.law, self.points)
        self.sampled_at = np.searchsorted(self.ordered, self.points, side="right") / self.count
        self.sampled_before = np.searchsorted(self.ordered, self.points, side="left") / self.count

    def _gaps(self) -> tuple[Array, Array, Array]:
        """For each gap between neighbouring points (and outside all): bound of |F_n - F|, index, error."""
        law_start = np.concatenate([[0.0], self.at])
        law_stop = np.concatenate([self.before, [1.0]])
        sample_start = np.concatenate([[0.0], self.sampled_at])
        sample_stop = np.concatenate([self.sampled_before, [1.0]])
        bound = np.maximum(np.abs(sample_stop - law_start), np.abs(law_stop - sample_start))
        error = np.maximum(np.concatenate([[0.0], self.error]), np.concatenate([self.error, [0.0]]))
        return np.asarray(bound), np.arange(bound.size), np.asarray(error)

    def largest(self) -> tuple[float, float]:
        """Largest |F_n - F| at the points, from either side, and the law's largest error there."""
        away = np.maximum(np.abs(self.sampled_at - self.at), np.abs(self.sampled_before - self.before))
        return float(np.max(away)), float(np.max(self.error))

    def settle(self, allowed: float, most: int) -> tuple[float, float, float]:
        """Largest difference seen, a bound on all of them, and the law's error.

        Points are added until the bound is allowed, or what was seen is not.
        """
        while True:
            seen, error = self.largest()
            if not math.isfinite(seen):
                return math.inf, math.inf, error
            bound, index, _ = self._gaps()
            open_gaps = index[bound > allowed + error]
            if seen > allowed + error or open_gaps.size == 0:
                return seen, max(seen, float(np.max(bound))), error
            fresh = self._inside(open_gaps)
            if fresh.size == 0 or self.points.size + fresh.size > most:
                # nothing lies between: the law itself rises there without a draw, as far as the bound says
                return seen, max(seen, float(np.max(bound))), error
            self.points = np.unique(np.concatenate([self.points, fresh]))
            self._evaluate()

    def _inside(self, gaps: Array) -> Array:
        """New points inside gaps: the middle draw there, or just before and after an empty stretch."""
        start = np.where(gaps == 0, -np.inf, self.points[np.maximum(gaps - 1, 0)])
        stop = np.where(gaps == self.points.size, np.inf, self.points[np.minimum(gaps, self.points.size - 1)])
        first = np.searchsorted(self.ordered, start, side="right")
        last = np.searchsorted(self.ordered, stop, side="left")
        middle = self.ordered[np.minimum((first + last) // 2, self.count - 1)]
        with np.errstate(all="ignore"):
            halfway = np.where(last > first, middle, 0.5 * (start + stop))
        fresh: Array = np.unique(halfway[np.isfinite(halfway) & (halfway > start) & (halfway < stop)])
        return fresh

    def curve(self) -> tuple[tuple[float, float], ...]:
        """The difference F_n - F over at most 400 points, for the evidence plot."""
        pick = np.unique(np.round(np.linspace(0, self.points.size - 1, CURVE_POINTS)).astype(int))
        rows = []
        for i in pick:
            x = float(self.points[i])
            if not math.isfinite(x):
                continue
            if self.before[i] != self.at[i]:
                rows.append((x, float(self.sampled_before[i] - self.before[i])))
            rows.append((x, float(self.sampled_at[i] - self.at[i])))
        return tuple(rows)


def _mass_at(law: Law, points: Array) -> Array:
    atoms = law.atoms()
    mass = np.zeros(points.size)
    if atoms.values.size:
        place = np.minimum(np.searchsorted(atoms.values, points), atoms.values.size - 1)
        mass = np.where(atoms.values[place] == points, atoms.masses[place], 0.0)
    return mass


def judge_atoms(output: str, law: Law, draws: Array, label: str) -> list[Comparison]:
    """The mass of every heavy atom against the number of draws there, and of all atoms together.

    Each relative frequency is judged in the band of Hoeffding (1963), theorem 1, at the confidence that
    leaves 1e-4 for all of them together (Bonferroni).
    """
    atoms = law.atoms()
    if atoms.values.size == 0 or bool(np.any(np.isnan(draws))):
        return []
    heavy = np.sort(np.argsort(-atoms.masses, kind="stable")[:COMPARED_POINTS])
    ordered = _snapped(np.sort(draws), law)
    values = atoms.values[heavy]
    seen = np.searchsorted(ordered, values, side="right") - np.searchsorted(ordered, values, side="left")
    share = seen / draws.size
    sigma = band(draws.size, 1.0 - (1.0 - CONFIDENCE) / heavy.size)
    away = np.abs(share - atoms.masses[heavy])
    allowed = sigma + atoms.errors[heavy]
    worst = int(np.argmax(away - allowed))
    return [
        Comparison(
            output,
            f"the relative frequencies of the atoms in {label}",
            int(heavy.size),
            float(away[worst]),
            float(allowed[worst]),
            bool(np.all(away <= allowed)),
            CONFIDENCE,
        )
    ]


def judge_density(output: str, law: Law) -> Comparison:
    """The density, integrated over panels between quantiles, against the rise of the cdf."""
    panels = integrate_density(law)
    if panels.difference.size == 0:
        return Comparison(
            output, "the integral of the density", 0, 0.0, 0.0, True, note="no panel holds probability"
        )
    worst = int(np.argmax(panels.difference / panels.allowed))  # the panel that comes nearest to failing
    return Comparison(
        output,
        "the integral of the density",
        int(panels.difference.size),
        float(panels.difference[worst]),
        float(panels.allowed[worst]),
        bool(np.all(panels.difference <= panels.allowed)),
        curve=tuple(zip(panels.stops.tolist(), panels.difference.tolist(), strict=True)),
    )


def comparison_points(law: Law, count: int = COMPARED_POINTS) -> Array:
    """About `count` points from 1e-6 in either tail, without points at which the law is not smooth.

    Quantiles, or for a law whose quantiles are costly points spread between those that grade it.
    """
    if isinstance(law, Graded):
        nodes = central_nodes(law, 1e-6)
        if nodes.size < 2:
            return nodes
        points = np.interp(np.linspace(0, nodes.size - 1, count), np.arange(nodes.size), nodes)
        return _apart_from_marks(law, points)
    lower = np.geomspace(1e-6, 0.5, count // 2)
    upper = np.geomspace(1e-6, 0.5, count - count // 2 + 1)[:-1]
    with np.errstate(all="ignore"):
        points = np.unique(np.concatenate([np.asarray(law.icdf(lower)), np.asarray(law.iccdf(upper))]))
    return _apart_from_marks(law, points[np.isfinite(points)])


def _apart_from_marks(law: Law, points: Array) -> Array:
    """The points that are no break, no atom and no end of the support: there a density may be anything."""
    marks = np.concatenate([np.asarray([*law.breaks(), *law.support()], float), law.atoms().values])
    kept: Array = points[np.isin(points, marks, invert=True)]
    return kept


def judge_law(output: str, law: Law, numeric: Law) -> Comparison:
    """A law in closed form against the law by the numeric route: cdf, ccdf and density at 200 points.

    Differences are relative to the smaller of both errors' sum: each side is taken at its word.
    """
    points = comparison_points(law)
    away, allowed = [np.zeros(1)], [np.zeros(1)]
    for kind in ("cdf", "ccdf") if law.continuous_mass == 0.0 else ("cdf", "ccdf", "pdf"):
        one, other = stated(law, kind, points), stated(numeric, kind, points)
        finite = np.isfinite(one.value) & np.isfinite(other.value)
        away.append(np.abs(one.value - other.value)[finite])
        allowed.append((one.error + other.error)[finite])
    return _worst(output, "the numeric law, for the closed form", points.size, away, allowed)


def judge_symbolic(output: str, law: Law, symbolic: SymbolicDensity) -> Comparison:
    """The density written as a formula against the density of the law at 200 points."""
    points = comparison_points(law)
    with np.errstate(all="ignore"):
        written = np.asarray(symbolic.function(points), float)
    rows = stated(law, "pdf", points)
    finite = np.isfinite(rows.value)
    away = np.abs(written - rows.value)[finite]
    # a closed formula evaluated in double precision: rounding only, relative to its value
    allowed = (rows.error + 1e-10 * np.abs(rows.value))[finite]
    return _worst(output, "the symbolic density", points.size, [np.zeros(1), away], [np.zeros(1), allowed])


def judge_integral(output: str, law: Law, symbolic: SymbolicIntegral, model: Model) -> Comparison:
    """The density written as an integral, evaluated by itself, against that of the law at 200 quantiles.

    Differences are relative to the density. Allowed are the error that the law states, the bounds on the
    quadrature and on the rounding of what is written, and at least 1e-10. A difference is looked at again
    with a finer net of points before it counts. Raises NotWritten where there is nothing to evaluate.
    """
    points = body_points(law)
    rows = stated(law, "pdf", points)
    positive = np.isfinite(rows.value) & (rows.value > 0.0)
    points, value, error = points[positive], rows.value[positive], rows.error[positive]
    written = written_density(symbolic, model, points)

    def relative(found: Estimates, at: Index) -> tuple[Array, Array]:
        away, limit = np.abs(found.value - value[at]) / value[at], (found.error + error[at]) / value[at]
        return away, np.maximum(limit, TEN_DIGITS)

    everywhere = np.arange(points.size)
    away, allowed = relative(written, everywhere)
    doubtful = everywhere[~(away <= allowed)]
    if doubtful.size:
        again = written_density(symbolic, model, points[doubtful], finer=8)
        away[doubtful], allowed[doubtful] = relative(again, doubtful)
    against = f"the density as written, an integral over {symbolic.outer} (relative difference)"
    return _worst(output, against, points.size, [np.zeros(1), away], [np.zeros(1), allowed])


def body_points(law: Law, count: int = COMPARED_POINTS, tail: float = INTEGRAL_TAIL) -> Array:
    """About `count` quantiles at equal steps of probability from `tail` to 1 - `tail`, without points at
    which the law is not smooth; read off the nodes of a law whose quantiles are costly."""
    levels = np.linspace(tail, 1.0 - tail, count)
    if isinstance(law, Graded):
        nodes = central_nodes(law, 0.1 * tail)
        points = np.interp(levels, np.maximum.accumulate(np.asarray(law.cdf(nodes), float)), nodes)
    else:
        points = np.asarray(law.icdf(levels), float)
    return _apart_from_marks(law, np.unique(points[np.isfinite(points)]))


def _worst(
    output: str, against: str, points: int, away: Sequence[Array], allowed: Sequence[Array]
) -> Comparison:
    differences, limits = np.concatenate(away), np.concatenate(allowed)
    differences = np.where(np.isnan(differences), np.inf, differences)
    worst = int(np.argmax(differences - limits)) if differences.size > 1 else 0
    if differences.size > 1 and worst == 0:  # the leading zero stands for "nothing to compare" only
        worst = 1 + int(np.argmax(differences[1:] - limits[1:]))
    agrees = bool(np.all(differences <= limits))
    return Comparison(output, against, points, float(differences[worst]), float(limits[worst]), agrees)


def judge_event(text: str, probability: float, error: float, sample: Sample) -> Comparison:
    """The probability of an event over several outputs against its relative frequency (Hoeffding 1963)."""
    away = abs(sample.events[text] - probability)
    allowed = band(sample.count) + error
    return Comparison(
        text, f"the relative frequency in {sample.label}", 1, away, allowed, away <= allowed, CONFIDENCE
    )
