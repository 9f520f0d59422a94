"""Moments of a derived law by integrating its tail functions: no density is needed, atoms are included.

E[(Y - c)^k] = k * integral over y > c of (y - c)^(k-1) P(Y > y) dy
             + (-1)^k k * integral over y < c of (c - y)^(k-1) P(Y < y) dy
(Feller 1971, An Introduction to Probability Theory and Its Applications II, V.6, Lemma 1).
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from outspread.laws.law import Array, Estimates
from outspread.numerics.quadrature import integrate

if TYPE_CHECKING:
    from outspread.laws.derived import DerivedLaw

_LEVELS = np.array([
    0.4, 0.3, 0.2, 0.1, 0.03, 1e-2, 1e-3, 1e-4, 1e-6, 1e-8, 1e-11, 1e-14, 1e-18, 1e-23, 1e-30, 1e-40,
    1e-55, 1e-75, 1e-100, 1e-140, 1e-200, 1e-280,
])  # fmt: skip


def central_moments(law: DerivedLaw, centre: float, highest: int, relative: float = 1e-11) -> Estimates:
    """Moments 1..4 about `centre`, NaN above `highest`; error from quadrature, the cdf and the cut tail."""
    value, error = np.full(4, np.nan), np.zeros(4)
    if highest == 0:
        return Estimates(value, error)
    value[:highest] = 0.0
    for side in (1, -1):
        part, doubt = _half(law, centre, side, highest, relative)
        signs = np.array([float(side) ** k for k in range(1, highest + 1)])
        value[:highest] += signs * part
        error[:highest] += doubt
    return Estimates(value, error)


def _half(law: DerivedLaw, centre: float, side: int, highest: int, relative: float) -> tuple[Array, Array]:
    kind = "ccdf" if side > 0 else "cdf"
    points = _points(law, centre, side)
    if points.size < 2:
        return np.zeros(highest), np.zeros(highest)
    orders = np.arange(1, highest + 1)

    def integrand(distance: Array, _: object) -> Array:
        estimate = law.estimate(kind, centre + side * distance)
        powers = orders[:, None] * distance ** (orders[:, None] - 1)
        return np.concatenate([powers * estimate.value, powers * estimate.error])

    lower, upper = points[:-1], points[1:]
    result = integrate(
        integrand, lower, upper, np.zeros(lower.size, np.int64), 1,
        components=2 * highest, control=highest, relative=relative, rounds=60, most_panels=600,
    )  # fmt: skip
    value = result.value[:highest, 0]
    error = result.error[:highest, 0] + np.abs(result.value[highest:, 0])
    cut = _beyond(law, centre, side, float(points[-1]), orders.astype(float))
    return value, error + cut


def _points(law: DerivedLaw, centre: float, side: int) -> Array:
    """Distances from the centre that grade the half line by probability; atoms and breaks are points too."""
    end = law.support()[1 if side > 0 else 0]
    levels = _LEVELS[law.tail_probability < _LEVELS]
    total = float(law.ccdf(centre)) if side > 0 else float(law.cdf(centre))
    levels = levels[levels < total]
    inside = law.rough_quantile(levels, upper=side > 0)
    inside = inside[: _enough(side * (inside - centre), levels)]
    marks = np.concatenate([inside, law.atoms().values[:2000], law.breaks()])
    distance = side * (marks - centre)
    distance = distance[(distance > 0) & np.isfinite(distance)]
    if np.isfinite(end):
        distance = np.append(distance[distance < side * (end - centre)], side * (end - centre))
    return np.unique(np.concatenate([[0.0], distance[distance >= 0]]))


def _enough(distance: Array, levels: Array) -> int:
    """How many of the levels matter: up to two beyond that where p d^4 has become negligible."""
    with np.errstate(all="ignore"):
        weight = levels * distance**4
    largest = np.maximum.accumulate(np.where(np.isfinite(weight), weight, 0.0))
    small = np.flatnonzero(weight < 1e-16 * largest)
    # the tail must keep falling from there on, which a heavy one does not
    falling = [i for i in small.tolist() if bool(np.all(weight[i:] <= 1e-16 * largest[i]))]
    return falling[0] + 2 if falling else levels.size


def _beyond(law: DerivedLaw, centre: float, side: int, last: float, orders: Array) -> Array:
    """A bound on what lies beyond the last point, from the tail's exponent there."""
    tail = law.tails()[1 if side > 0 else 0]
    if tail.ends:
        return np.zeros(orders.size)
    y = centre + side * last
    mass = float(law.ccdf(y)) if side > 0 else float(law.cdf(y))
    density = float(law.pdf(y))
    if mass <= 0:
        return np.zeros(orders.size)
    local = last * density / mass if np.isinf(tail.exponent) and density > 0 else tail.exponent
    margin = np.maximum(local - orders, 1e-3)
    return np.asarray(2 * orders * last**orders * mass / margin)


def standardised(raw: Estimates, centre: float) -> Estimates:
    """Mean, standard deviation, skewness and kurtosis from moments about `centre`."""
    value = np.full(4, np.nan)
    error = np.zeros(4)
    (m1, m2, m3, m4), (e1, e2, e3, e4) = raw.value, raw.error
    if np.isnan(m1):
        return Estimates(value, error)
    value[0], error[0] = centre + m1, e1 + 3e-16 * (abs(centre) + abs(m1))
    if np.isnan(m2):
        value[1] = np.inf
        return Estimates(value, error)
    variance = m2 - m1**2
    variance_error = e2 + 2 * abs(m1) * e1 + 4e-16 * (m2 + m1**2)
    if variance <= 0:
        value[1], error[1] = 0.0, np.sqrt(variance_error)
        return Estimates(value, error)
    sd = np.sqrt(variance)
    value[1], error[1] = sd, variance_error / (2 * sd)
    relative = variance_error / variance
    if not np.isnan(m3):
        third = m3 - 3 * m1 * m2 + 2 * m1**3
        third_error = (
            e3 + 3 * (abs(m1) * e2 + m2 * e1) + 6 * m1**2 * e1 + 6e-16 * (abs(m3) + 3 * abs(m1) * m2)
        )
        value[2] = third / sd**3
        error[2] = third_error / sd**3 + 1.5 * relative * abs(value[2])
    if np.isnan(m4):
        value[3] = np.inf
    else:
        fourth = m4 - 4 * m1 * m3 + 6 * m1**2 * m2 - 3 * m1**4
        fourth_error = (
            e4 + 4 * (abs(m1) * e3 + abs(m3) * e1) + 6 * (2 * abs(m1) * m2 * e1 + m1**2 * e2)
            + 12 * abs(m1) ** 3 * e1 + 1e-15 * (m4 + 4 * abs(m1 * m3) + 6 * m1**2 * m2)
        )  # fmt: skip
        value[3] = fourth / variance**2
        error[3] = fourth_error / variance**2 + 2 * relative * value[3]
    return Estimates(value, error)
