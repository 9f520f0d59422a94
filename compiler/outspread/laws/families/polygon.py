"""Triangular and trapezoidal laws."""

from __future__ import annotations

import itertools

import numpy as np
import numpy.typing as npt

from outspread.laws.families.base import Family, Parameters, ParameterSet, ascending, positive, proportion
from outspread.laws.families.shapes import IntervalLaw, Moments
from outspread.laws.law import Array


class Trapezoidal(IntervalLaw):
    """Density rising from `lower` to `top_lower`, level to `top_upper`, falling to `upper`.

    Worked in fractions of the width: rise and fall are those of the sides, `height` the level density.
    """

    relative_error = 5e-15

    def __init__(self, lower: float, top_lower: float, top_upper: float, upper: float):
        super().__init__(lower, upper)
        self.corners = (top_lower, top_upper)
        self.rise = (top_lower - lower) / self.width
        self.fall = (upper - top_upper) / self.width
        self.height = 2 / (1 + (top_upper - top_lower) / self.width)

    def unit_pdf(self, u: Array, v: Array) -> Array:
        left = u / self.rise if self.rise > 0 else np.ones_like(u)
        right = v / self.fall if self.fall > 0 else np.ones_like(v)
        return np.asarray(self.height * np.minimum(np.minimum(left, right), 1.0))

    def _below(self, u: Array, v: Array, rise: float, fall: float) -> Array:
        left = 0.5 * self.height * u * u / rise if rise > 0 else np.zeros_like(u)
        level = self.height * (u - 0.5 * rise)
        right = 1 - 0.5 * self.height * v * v / fall if fall > 0 else np.ones_like(v)
        return np.asarray(np.where(u < rise, left, np.where(v < fall, right, level)))

    def unit_cdf(self, u: Array, v: Array) -> Array:
        return self._below(u, v, self.rise, self.fall)

    def unit_ccdf(self, u: Array, v: Array) -> Array:
        return self._below(v, u, self.fall, self.rise)

    def _inverse(self, p: Array, rise: float, fall: float) -> Array:
        left = np.sqrt(2 * p * rise / self.height)
        level = p / self.height + 0.5 * rise
        right = 1 - np.sqrt(2 * (1 - p) * fall / self.height)
        on_left, on_right = p < 0.5 * self.height * rise, 1 - p < 0.5 * self.height * fall
        return np.asarray(np.where(on_left, left, np.where(on_right, right, level)))

    def unit_icdf(self, p: Array) -> Array:
        return self._inverse(p, self.rise, self.fall)

    def unit_iccdf(self, q: Array) -> Array:
        return self._inverse(q, self.fall, self.rise)

    def between(self, lower: npt.ArrayLike, upper: npt.ArrayLike) -> Array:
        """Sum over the three sides of the mean density times the width: exact and without cancellation."""
        points = (self.lower, *self.corners, self.upper)
        total = np.zeros(np.broadcast(lower, upper).shape)
        for left, right in itertools.pairwise(points):
            low = np.clip(np.asarray(lower, float), left, right)
            high = np.clip(np.asarray(upper, float), left, right)
            if right > left:
                middle = low + 0.5 * (high - low)
                total = total + np.where(high > low, self.pdf(middle) * (high - low), 0.0)
        return np.asarray(total)

    def breaks(self) -> tuple[float, ...]:
        inside = (corner for corner in self.corners if self.lower < corner < self.upper)
        return tuple(dict.fromkeys(inside))

    def unit_moments(self) -> Moments:
        a, b = self.rise, 1 - self.fall
        mean = self._integral(lambda u: u, a, b)
        second, third, fourth = (self._integral(lambda u, k=k: (u - mean) ** k, a, b) for k in (2, 3, 4))
        return (mean, second, third / second**1.5, fourth / second**2)

    def _integral(self, function: object, a: float, b: float) -> float:
        """Of function(u) times the density: a polynomial on each side, so that 4 Gauss points are exact."""
        assert callable(function)
        nodes, weights = np.polynomial.legendre.leggauss(4)
        total = 0.0
        for left, right in ((0.0, a), (a, b), (b, 1.0)):
            u = left + 0.5 * (right - left) * (1 + nodes)
            total += 0.5 * (right - left) * float(np.sum(weights * function(u) * self.unit_pdf(u, 1 - u)))
        return total


def triangular(lower: float, mode: float, upper: float) -> Trapezoidal:
    return Trapezoidal(lower, mode, mode, upper)


def _triangle_from_centre(parameters: Parameters) -> Parameters:
    positive(parameters, "half_width")
    centre, half_width = parameters["centre"], parameters["half_width"]
    return {"lower": centre - half_width, "mode": centre, "upper": centre + half_width}


def _from_top_ratio(parameters: Parameters) -> Parameters:
    proportion(parameters, "top_ratio")
    ascending(parameters, "lower", "upper")
    lower, upper, ratio = parameters["lower"], parameters["upper"], parameters["top_ratio"]
    half = 0.5 * (upper - lower)
    top_lower, top_upper = lower + half * (1 - ratio), upper - half * (1 - ratio)
    return {"lower": lower, "top_lower": min(top_lower, top_upper), "top_upper": top_upper, "upper": upper}


def _check_triangle(parameters: Parameters) -> None:
    ascending(parameters, "lower", "upper")
    ascending(parameters, "lower", "mode", "upper", strictly=False)


def _check_trapezoid(parameters: Parameters) -> None:
    ascending(parameters, "lower", "upper")
    ascending(parameters, "lower", "top_lower", "top_upper", "upper", strictly=False)


FAMILIES = (
    Family(
        key="triangular",
        title="Triangular distribution",
        kind="continuous",
        canonical_names=("lower", "mode", "upper"),
        parameter_sets=(
            ParameterSet(("lower", "mode", "upper")),
            ParameterSet(("centre", "half_width"), convert=_triangle_from_centre),
        ),
        builder=triangular,
        check=_check_triangle,
        symbols={"lower": "a", "mode": "c", "upper": "b"},
        density_latex=(r"\frac{2}{b-a}\,\min\left(\frac{x-a}{c-a},\ \frac{b-x}{b-c}\right)"),
        usage="limits and a most likely value; sum of two uniform quantities of equal width",
        reference="JCGM 101:2008, 6.4.5",
    ),
    Family(
        key="trapezoidal",
        title="Trapezoidal distribution",
        kind="continuous",
        canonical_names=("lower", "top_lower", "top_upper", "upper"),
        parameter_sets=(
            ParameterSet(("lower", "top_lower", "top_upper", "upper")),
            ParameterSet(("lower", "upper", "top_ratio"), convert=_from_top_ratio),
        ),
        builder=Trapezoidal,
        check=_check_trapezoid,
        symbols={"lower": "a", "top_lower": "c", "top_upper": "d", "upper": "b"},
        density_latex=(r"\frac{2}{b+d-a-c}\,\min\left(\frac{x-a}{c-a},\ 1,\ \frac{b-x}{b-d}\right)"),
        usage="sum of two uniform quantities; level between two corners",
        reference="JCGM 101:2008, 6.4.4",
    ),
)
