"""The curvilinear trapezoidal law: a uniform law whose limits are themselves known inexactly."""

from __future__ import annotations

import numpy as np

from outspread.errors import LawError
from outspread.laws.families.base import Family, Parameters, ParameterSet, ascending, positive
from outspread.laws.families.shapes import IntervalLaw, Moments
from outspread.laws.law import Array


def _wing(r: Array) -> Array:
    """r + (1 - r) log(1 - r), by its series sum r^k / (k (k-1)) where the two terms cancel."""
    series = np.zeros_like(r)
    small = np.minimum(r, 0.25)
    for k in range(27, 1, -1):
        series = (series + 1 / (k * (k - 1))) * small
    return np.asarray(np.where(r < 0.25, series * small, r + (1 - r) * np.log1p(-r)))


def _wing_inverse(y: Array) -> Array:
    """r in (0, 1) with wing(r) = y: Newton's method on the convex wing, from the right."""
    r = np.minimum(np.sqrt(2 * y), 1 - 1e-16)
    for _ in range(60):
        slope = -np.log1p(-r)
        step = np.where(slope > 0, (_wing(r) - y) / slope, 0.0)
        r = np.clip(r - step, 0.0, 1 - 1e-16)
        if np.all(np.abs(step) <= 1e-16 * r):
            break
    return r


class CurvilinearTrapezoidal(IntervalLaw):
    """Uniform between limits that are uncertain by +-`limit_half_width`, each the mirror of the other.

    `lower` and `upper` are the best estimates of the limits; the support is wider by `limit_half_width`.
    JCGM 101:2008, 6.4.3.
    """

    relative_error = 1e-14

    def __init__(self, lower: float, upper: float, limit_half_width: float):
        super().__init__(lower - limit_half_width, upper + limit_half_width)
        half_width = 0.5 * (upper - lower)
        #: half the support, the share of it that each wing takes, and the wing's factor, in half supports
        self.half = half_width + limit_half_width
        self.wing_share = 2 * limit_half_width / self.half
        self.factor = self.half / (4 * limit_half_width)
        self.wing_mass = float(self.factor * _wing(np.array([self.wing_share]))[0])
        self.top = float(-np.log1p(-self.wing_share) * self.factor)
        self.limits = (half_width, limit_half_width)

    def unit_pdf(self, u: Array, v: Array) -> Array:
        r = np.minimum(2 * np.minimum(u, v), self.wing_share)
        return np.asarray(-2 * self.factor * np.log1p(-r))

    def unit_cdf(self, u: Array, v: Array) -> Array:
        left, right = 2 * u, 2 * v
        lower_wing = self.factor * _wing(np.minimum(left, self.wing_share))
        middle = self.wing_mass + self.top * (left - self.wing_share)
        upper_wing = 1 - self.factor * _wing(np.minimum(right, self.wing_share))
        return np.asarray(
            np.where(
                left < self.wing_share, lower_wing, np.where(right < self.wing_share, upper_wing, middle)
            )
        )

    def unit_ccdf(self, u: Array, v: Array) -> Array:
        return self.unit_cdf(v, u)

    def unit_icdf(self, p: Array) -> Array:
        tail = np.minimum(p, 1 - p)
        wing = 0.5 * _wing_inverse(np.minimum(tail, self.wing_mass) / self.factor)
        middle = 0.5 * (self.wing_share + (p - self.wing_mass) / self.top)
        return np.asarray(np.where(tail >= self.wing_mass, middle, np.where(p < 0.5, wing, 1 - wing)))

    def unit_iccdf(self, q: Array) -> Array:
        return self.unit_icdf(q)

    def breaks(self) -> tuple[float, ...]:
        lower, upper = self.support()
        d = self.limits[1]
        return (lower + 2 * d, upper - 2 * d)

    def unit_moments(self) -> Moments:
        w, d = self.limits
        variance = w**2 / 3 + d**2 / 9
        fourth = (w**4 + 2 * w**2 * d**2 + d**4 / 5) / 5
        return (0.5, variance / self.width**2, 0.0, fourth / variance**2)


def _check(parameters: Parameters) -> None:
    ascending(parameters, "lower", "upper")
    positive(parameters, "limit_half_width")
    half_width = 0.5 * (parameters["upper"] - parameters["lower"])
    if not parameters["limit_half_width"] < half_width:
        raise LawError(
            f"limit_half_width is {parameters['limit_half_width']:g}, and less than half the distance"
            f" between lower and upper ({half_width:g}) would be right",
            "limit_half_width",
        )


FAMILIES = (
    Family(
        key="curvilinear_trapezoidal",
        title="Curvilinear trapezoidal distribution",
        kind="continuous",
        canonical_names=("lower", "upper", "limit_half_width"),
        parameter_sets=(ParameterSet(("lower", "upper", "limit_half_width")),),
        builder=CurvilinearTrapezoidal,
        check=_check,
        symbols={"lower": "a", "upper": "b", "limit_half_width": "d"},
        density_latex=(
            r"\frac{1}{4d}\,\ln\frac{\frac{b-a}{2}+d}"
            r"{\max\left(\left|x-\frac{a+b}{2}\right|,\ \frac{b-a}{2}-d\right)}"
        ),
        usage="limits that are themselves known only to +- limit_half_width",
        reference="JCGM 101:2008, 6.4.3",
    ),
)
