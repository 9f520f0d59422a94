"""The density of one input as the model states it, written out: cut, mixed, from data or from a formula.

The families' formulas are in `densities`; dependence between inputs is left to `written`.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from outspread.evidence.adaptive import Panels, integrate
from outspread.evidence.densities import CORNERS, FORMULAS, density_function, limiting
from outspread.evidence.marginals import canonical, draw, plain_number
from outspread.formula.tree import Node, names
from outspread.laws.law import Array
from outspread.reading.distributions import parents
from outspread.reading.model import Distribution

SEED, DRAWS = 0x0E53, 4096

Function = Callable[[Array], Array]


class NotWritten(Exception):
    """The density cannot be written out; the message says why, in words that follow "because"."""


@dataclass(frozen=True)
class MarginalDensity:
    """A density inside [lower, upper] (0 outside), and the points between where it has a corner or a jump."""

    function: Function
    lower: float
    upper: float
    corners: tuple[float, ...] = ()

    def __call__(self, x: Array) -> Array:
        inside = (x >= self.lower) & (x <= self.upper)
        with np.errstate(all="ignore"):
            value = self.function(np.where(inside, x, np.nan))
        return np.asarray(np.where(inside, value, 0.0))


def typical(distribution: Distribution) -> Array:
    """Some thousand draws in ascending order: where the distribution lies, for cutting panels."""
    generator = np.random.Generator(np.random.Philox(np.random.SeedSequence(SEED)))
    return np.sort(draw(distribution, generator, DRAWS))


def marginal_density(distribution: Distribution) -> MarginalDensity:
    """The density of the distribution. Raises NotWritten where there is no formula for it."""
    whole = _whole(distribution)
    if distribution.lower is None and distribution.upper is None:
        return whole
    lower = whole.lower if distribution.lower is None else max(whole.lower, distribution.lower)
    upper = whole.upper if distribution.upper is None else min(whole.upper, distribution.upper)
    corners = tuple(corner for corner in whole.corners if lower < corner < upper)
    cut = MarginalDensity(whole.function, lower, upper, corners)
    return _scaled(cut, _mass(cut, typical(distribution)))


def _scaled(density: MarginalDensity, mass: float) -> MarginalDensity:
    return MarginalDensity(
        lambda x: np.asarray(density.function(x) / mass), density.lower, density.upper, density.corners
    )


def _mass(density: MarginalDensity, draws: Array) -> float:
    """The integral of the density, cut where draws of it lie. Raises NotWritten where it is not known to 11
    digits."""
    marks = np.concatenate([np.quantile(draws, np.linspace(0.0, 1.0, 9)), density.corners])
    marks = marks[(marks > density.lower) & (marks < density.upper)]
    ends = np.unique(np.concatenate([[density.lower], marks, [density.upper]]))
    count = ends.size - 1
    scale = np.full(count, float(np.ptp(draws)))
    panels = Panels(np.zeros(count, np.int64), ends[:-1], ends[1:], scale)
    found = integrate(lambda row, x: density(x), lambda row, x: np.zeros(x.size), panels, 1)
    value, error = float(found.value[0]), float(found.error[0])
    if not 0.0 < value < np.inf or error > 1e-11 * value:
        raise NotWritten("the share of a distribution that its limits leave is not known well enough")
    return value


def _whole(d: Distribution) -> MarginalDensity:
    if parents(d):
        raise NotWritten("the parameters of an input depend on another input")
    special = _SPECIAL.get(d.family)
    if special is not None:
        return special(d)
    if d.family not in FORMULAS:
        raise NotWritten(f"the {d.family} family has no density")
    family, parameters = limiting(d.family, canonical(d))
    lower, upper = FORMULAS[family][1](parameters)
    corners = tuple(sorted(CORNERS[family](parameters))) if family in CORNERS else ()
    return MarginalDensity(
        density_function(family, parameters),
        lower,
        upper,
        tuple(dict.fromkeys(corner for corner in corners if lower < corner < upper)),
    )


def _mixture(d: Distribution) -> MarginalDensity:
    weights = np.asarray(d.parameters["weights"], float)
    parts = [marginal_density(component) for component in d.components]
    lower, upper = min(part.lower for part in parts), max(part.upper for part in parts)
    marks = {mark for part in parts for mark in (part.lower, *part.corners, part.upper)}

    def function(x: Array) -> Array:
        shares = weights / weights.sum()
        return np.asarray(sum(share * part(x) for share, part in zip(shares, parts, strict=True)))

    return MarginalDensity(function, lower, upper, tuple(sorted(m for m in marks if lower < m < upper)))


def _formula(d: Distribution) -> MarginalDensity:
    """A stated density; it is divided by its integral, which the reader of the model holds to be 1 nearly."""
    import sympy

    from outspread.formula.symbolic import to_sympy

    node = d.parameters["density"]
    if not isinstance(node, Node) or set(names(node)) - {"x"}:
        raise NotWritten("the density of an input depends on another input")
    x = sympy.Symbol("x", real=True)
    compiled = sympy.lambdify([x], to_sympy(node, {"x": x}), ["scipy", "numpy"])
    lower, upper = (plain_number(d, side) for side in ("lower", "upper"))
    stated = MarginalDensity(lambda at: np.asarray(compiled(at) + np.zeros(at.shape), float), lower, upper)
    return _scaled(stated, _mass(stated, typical(d)))


def _table(d: Distribution) -> MarginalDensity:
    x = np.asarray(d.parameters["x"], float)
    if "cdf" in d.parameters:
        return _steps(x, np.diff(np.asarray(d.parameters["cdf"], float)))
    height = np.asarray(d.parameters["pdf"], float)
    area = float(np.sum(0.5 * (height[1:] + height[:-1]) * np.diff(x)))
    return MarginalDensity(
        lambda at: np.asarray(np.interp(at, x, height) / area),
        float(x[0]),
        float(x[-1]),
        tuple(x[1:-1].tolist()),
    )


def _steps(edges: Array, shares: Array) -> MarginalDensity:
    height = shares / np.sum(shares) / np.diff(edges)

    def function(at: Array) -> Array:
        cell = np.clip(np.searchsorted(edges, at, side="right") - 1, 0, height.size - 1)
        return np.asarray(height[cell])

    return MarginalDensity(function, float(edges[0]), float(edges[-1]), tuple(edges[1:-1].tolist()))


def _histogram(d: Distribution) -> MarginalDensity:
    edges, counts = (np.asarray(d.parameters[key], float) for key in ("edges", "counts"))
    return _steps(edges, counts)


def _observations(d: Distribution) -> MarginalDensity:
    """Scaled and shifted t with count - 1 degrees of freedom (JCGM 101:2008, 6.4.9.2)."""
    mean, sd, count = (plain_number(d, key) for key in ("mean", "sd", "count"))
    parameters = {"degrees_of_freedom": count - 1.0, "location": mean, "scale": sd / np.sqrt(count)}
    return MarginalDensity(density_function("student_t", parameters), -np.inf, np.inf)


def _sample(d: Distribution) -> MarginalDensity:
    raise NotWritten("a sample has no density")


_SPECIAL: dict[str, Callable[[Distribution], MarginalDensity]] = {
    "mixture": _mixture,
    "density": _formula,
    "table": _table,
    "histogram": _histogram,
    "sample": _sample,
    "observations": _observations,
}
