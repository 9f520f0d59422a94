"""Values of any law with bounds on their errors, as the law itself states them; nothing is judged here.

A derived law bounds its own errors (`estimate`, `estimate_quantile`); those of a law in closed form
follow from its `relative_error`.
"""

from __future__ import annotations

from typing import Literal, Protocol, runtime_checkable

import numpy as np
import numpy.typing as npt

from outspread.laws.law import Array, Estimates, Law

Kind = Literal["pdf", "cdf", "ccdf"]

#: a point computed in double precision is not known better than a few units in its last place
POINT_ROUNDING = 4 * float(np.finfo(float).eps)


@runtime_checkable
class StatesErrors(Protocol):
    """A law that bounds the errors of its own values."""

    def estimate(self, kind: Kind, y: npt.ArrayLike) -> Estimates: ...

    def estimate_quantile(self, p: npt.ArrayLike, upper: bool = False) -> Estimates: ...


@runtime_checkable
class Graded(Protocol):
    """A law with ascending `nodes` that grade it from tail to tail; it keeps the values it has computed."""

    nodes: Array


def stated(law: Law, kind: Kind, y: npt.ArrayLike) -> Estimates:
    """pdf, cdf or ccdf at `y` with bounds on the absolute errors, arrays of the shape of `y`."""
    if isinstance(law, StatesErrors):
        return law.estimate(kind, y)
    with np.errstate(all="ignore"):
        value = np.asarray({"pdf": law.pdf, "cdf": law.cdf, "ccdf": law.ccdf}[kind](y), float)
        return Estimates(value, np.abs(value) * law.relative_error)


def stated_quantile(law: Law, p: npt.ArrayLike, upper: bool = False) -> Estimates:
    """The quantile at lower probability `p` (upper=True: at upper-tail probability `p`) with its error.

    Without errors stated by the law itself, the quantiles at the probabilities moved by the relative
    error of the cdf to either side enclose the true one, because the cdf is monotone.
    """
    if isinstance(law, StatesErrors):
        return law.estimate_quantile(p, upper=upper)
    p = np.asarray(p, float)
    inverse = law.iccdf if upper else law.icdf
    with np.errstate(all="ignore"):
        value = np.asarray(inverse(p), float)
        slack = law.relative_error * p
        ends = [np.asarray(inverse(np.clip(p + sign * slack, 0.0, 1.0)), float) for sign in (-1, 1)]
        away = np.maximum(np.abs(ends[0] - value), np.abs(ends[1] - value))
        error = np.where(np.isfinite(value), away + POINT_ROUNDING * np.abs(value), np.inf)
    if law.continuous_mass == 0.0:  # the points of a discrete law are exact
        error = np.where(away == 0.0, 0.0, error)
    return Estimates(value, error)


def grid_points(law: Law, count: int = 401) -> Array:
    """Ascending distinct points between the far tails: a law's own nodes, else quantiles."""
    if isinstance(law, Graded):
        return central_nodes(law)
    inner = np.linspace(0.0, 1.0, count)[1:-1]
    tail = np.geomspace(1e-6, inner[0], 9)[:-1]
    with np.errstate(all="ignore"):
        lower = law.icdf(np.concatenate([tail, inner[inner <= 0.5]]))
        upper = law.iccdf(np.concatenate([tail, np.sort(1.0 - inner[inner > 0.5])]))
    points = np.concatenate([np.asarray(lower, float), np.asarray(upper, float)])
    distinct: Array = np.unique(points[np.isfinite(points)])
    return distinct


def central_nodes(law: Law, tail: float = 1e-7) -> Array:
    """The nodes of a graded law that leave at least `tail` on either side, found by bisection.

    Values far out in a tail are costly, because they are accurate relative to themselves.
    """
    assert isinstance(law, Graded)
    nodes = np.unique(np.asarray(law.nodes, float))
    low, high = 0, nodes.size - 1  # the first node with cdf >= tail lies in (low, high]
    while high - low > 1:
        middle = (low + high) // 2
        low, high = (low, middle) if float(law.cdf(nodes[middle])) >= tail else (middle, high)
    first = low
    low, high = first, nodes.size - 1
    while high - low > 1:
        middle = (low + high) // 2
        low, high = (middle, high) if float(law.ccdf(nodes[middle])) >= tail else (low, middle)
    last = high
    chosen: Array = nodes[first : last + 1]
    return chosen
