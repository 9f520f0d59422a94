"""Moments of a continuous law as integrals over its quantile function.

E h(X) is the integral of h(icdf(p)) over (0, 1), taken in the lower half in p and in the upper half in
q = 1 - p, each by the double exponential rule (Takahasi and Mori, 1974), which copes with the
algebraic growth of the quantile function of heavy tails. The law must not have atoms.
"""

from __future__ import annotations

from itertools import pairwise

import numpy as np

from outspread.laws.law import Array, Law

INF = float("inf")
NAN = float("nan")


def _nodes(lower: float, upper: float, step: float = 1.0 / 64) -> tuple[Array, Array]:
    """Probabilities and weights of the rule on (lower, upper), measured without cancellation from `lower`."""
    t = np.arange(-6.0, 6.0 + step / 2, step)
    u = 0.5 * np.pi * np.sinh(t)
    near = np.exp(-np.logaddexp(0.0, -2 * u))  # fraction of the interval, 1/(1 + exp(-2u))
    weight = np.pi * np.cosh(t) * np.exp(-np.logaddexp(0.0, -2 * u) - np.logaddexp(0.0, 2 * u))
    point = lower + (upper - lower) * near
    keep = (point > max(lower, 1e-300)) & (point < upper) & (weight > 0)
    return point[keep], weight[keep] * step * (upper - lower)


def quantile_nodes(law: Law) -> tuple[Array, Array]:
    """Points x and weights w with E h(X) = Σ w h(x); panels end at the law's breaks."""
    points: list[Array] = []
    weights: list[Array] = []
    inner = np.asarray(law.breaks(), float)
    middle = float(law.icdf(0.5))
    below = np.asarray(law.cdf(inner[inner < middle])) if inner.size else np.zeros(0)
    above = np.asarray(law.ccdf(inner[inner > middle])) if inner.size else np.zeros(0)
    for quantile, cuts in ((law.icdf, below), (law.iccdf, above)):
        edges = np.unique(np.concatenate([[0.0], cuts[(cuts > 0) & (cuts < 0.5)], [0.5]]))
        for lower, upper in pairwise(edges):
            p, w = _nodes(float(lower), float(upper))
            points.append(np.asarray(quantile(p)))
            weights.append(w)
    return np.concatenate(points), np.concatenate(weights)


def quantile_moments(law: Law) -> tuple[float, float, float, float]:
    """Mean, variance, skewness and kurtosis; nan where one does not exist, inf where it diverges."""
    lower, upper = law.support()
    one_sided = bool(np.isfinite(lower) or np.isfinite(upper))
    order = law.moment_order
    side = INF if np.isfinite(lower) else -INF
    if order <= 1:
        return side if one_sided else NAN, NAN, NAN, NAN
    x, weight = quantile_nodes(law)
    weight = weight / np.sum(weight)
    mean = float(np.sum(weight * x))
    if order <= 2:
        return mean, INF, NAN, NAN
    centred = x - mean
    variance = float(np.sum(weight * centred**2))
    third, fourth = side if one_sided else NAN, INF
    if order > 3:
        third = float(np.sum(weight * centred**3)) / variance**1.5
    if order > 4:
        fourth = float(np.sum(weight * centred**4)) / variance**2
    return mean, variance, third, fourth
