"""Values with error bounds read off any law, given or derived; what is asked and why is decided elsewhere.

A derived law states its errors itself; for a law in closed form they follow from its `relative_error`.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from fractions import Fraction
from typing import Protocol, runtime_checkable

import numpy as np

from outspread.evidence.stating import POINT_ROUNDING, StatesErrors, grid_points, stated, stated_quantile
from outspread.findings.results import Absent, AtomFigure, Figure, Finding, ValueRow
from outspread.laws.law import Estimates, Law


@runtime_checkable
class StatesSupport(Protocol):
    """A law that bounds the errors of the finite ends of its support."""

    support_error: tuple[float, float]


MOMENTS = ("mean", "standard deviation", "skewness", "kurtosis")


@runtime_checkable
class StatesMoments(Protocol):
    """A law that bounds the errors of its own moments: mean, standard deviation, skewness, kurtosis."""

    def moment_estimates(self) -> Estimates: ...


def moment_figures(law: Law) -> tuple[Finding, ...]:
    """Mean, standard deviation, skewness and kurtosis, each with its error or the reason why it is absent."""
    if isinstance(law, StatesMoments):
        rows = law.moment_estimates()
        pairs = zip(MOMENTS, rows.value.tolist(), rows.error.tolist(), strict=True)
        return tuple(_moment(name, value, error) for name, value, error in pairs)
    with np.errstate(all="ignore"):
        mean, deviation = law.mean(), law.standard_deviation()
        skewness, kurtosis = law.skewness(), law.kurtosis()
    relative = max(law.relative_error, 4 * POINT_ROUNDING)
    spread = deviation if math.isfinite(deviation) else 0.0
    return (
        _moment("mean", mean, relative * (abs(mean) + spread)),
        _moment("standard deviation", deviation, relative * deviation),
        # standardised moments subtract powers of the mean: rounding is relative to their own scale, 1
        _moment("skewness", skewness, 10 * relative * (1 + abs(skewness))),
        _moment("kurtosis", kurtosis, 10 * relative * (1 + abs(kurtosis))),
    )


def _moment(name: str, value: float, error: float) -> Finding:
    if math.isnan(value):
        return Absent(f"the {name} does not exist: the integral that defines it does not converge")
    if math.isinf(value):
        sign = "" if value > 0 else "minus "
        return Absent(f"the {name} diverges to {sign}infinity")
    if not math.isfinite(error):
        return Absent(f"the error of the {name} could not be bounded")
    return Figure(value, error)


def quantile(law: Law, p: float, upper: bool = False) -> Finding:
    """Quantile at `p`; Absent where it is an infinite end of the support."""
    return quantiles(law, [(p, upper)])[p, upper]


def quantiles(law: Law, wanted: Iterable[tuple[float, bool]]) -> dict[tuple[float, bool], Finding]:
    """Quantiles at lower (False) and upper-tail (True) probabilities, all of a kind computed together."""
    found: dict[tuple[float, bool], Finding] = {}
    pairs = list(dict.fromkeys(wanted))
    for upper in (False, True):
        probabilities = [p for p, side in pairs if side == upper]
        if not probabilities:
            continue
        rows = stated_quantile(law, np.array(probabilities), upper)
        for p, value, error in zip(probabilities, rows.value.tolist(), rows.error.tolist(), strict=True):
            found[p, upper] = _position(value, error)
    return found


def nearer_tail(p: float) -> tuple[float, bool]:
    """Where to ask for the quantile at `p`: from below, or from above at 1 - p as a decimal number.

    1 - 0.999 is 0.001 then, and not 0.0010000000000000009.
    """
    return (p, False) if p <= 0.5 else (float(1 - Fraction(repr(p))), True)


def _position(value: float, error: float) -> Finding:
    if not math.isfinite(value):
        return Absent("the quantile lies beyond every finite value")
    if not math.isfinite(error):
        return Absent("the error of the quantile could not be bounded")
    return Figure(value, error)


def value_rows(law: Law, points: Sequence[float]) -> tuple[ValueRow, ...]:
    """Density, cdf and ccdf at points; the density is Absent where there is none or it is unbounded."""
    if not points:
        return ()
    at = np.asarray(points, float)
    below, above = stated(law, "cdf", at), stated(law, "ccdf", at)
    heights = Estimates(at, at) if law.continuous_mass == 0.0 else stated(law, "pdf", at)
    atoms = set(law.atoms().values.tolist())
    rows = []
    for i, point in enumerate(points):
        height: Finding = Figure(float(heights.value[i]), float(heights.error[i]))
        if law.continuous_mass == 0.0:
            height = Absent("the law is discrete and has no density")
        elif point in atoms:
            height = Absent("the point carries probability itself (an atom), which no density describes")
        elif not (math.isfinite(heights.value[i]) and math.isfinite(heights.error[i])):
            height = Absent("the density is unbounded here")
        sides = [Figure(float(row.value[i]), float(row.error[i])) for row in (below, above)]
        rows.append(ValueRow(float(point), height, *sides))
    return tuple(rows)


def heaviest_atoms(law: Law, most: int) -> tuple[tuple[AtomFigure, ...], int, Figure]:
    """The heaviest `most` atoms by their points, the number of all atoms, and the mass of all."""
    atoms = law.atoms()
    count = int(atoms.values.size)
    if count == 0:
        return (), 0, Figure(0.0, 0.0)
    order = np.sort(np.argsort(-atoms.masses, kind="stable")[:most])
    rows = tuple(
        AtomFigure(float(atoms.values[i]), Figure(float(atoms.masses[i]), float(atoms.errors[i])))
        for i in order
    )
    if law.continuous_mass == 0.0:
        return rows, count, Figure(1.0, 0.0)
    total = Figure(math.fsum(atoms.masses.tolist()), math.fsum(atoms.errors.tolist()))
    return rows, count, total


def largest_cdf_error(law: Law) -> float:
    """A bound on |stated - true cdf| anywhere, from the law's own bounds at the points that grade it.

    Between two neighbouring points the cdf is monotone and its error is interpolated with it, so the
    largest of the stated bounds on a dense grid is taken.
    """
    if not isinstance(law, StatesErrors):
        return law.relative_error  # relative to the smaller tail, which is at most 1
    points = grid_points(law)
    if points.size == 0:
        return float(law.relative_error)
    lower = np.asarray(law.estimate("cdf", points).error, float)
    upper = np.asarray(law.estimate("ccdf", points).error, float)
    return float(np.max(np.minimum(lower, upper)))
