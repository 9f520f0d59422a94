"""Quantiles of a law that has only its two distribution functions: bracketing on the logarithm of a tail."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import numpy.typing as npt

from outspread.laws.families.shapes import INF, NAN
from outspread.laws.law import Array
from outspread.numerics.roots import bracketed_root

Tail = Callable[[Array], Array]


def quantiles(
    cdf: Tail,
    ccdf: Tail,
    p: npt.ArrayLike,
    bracket: Callable[[Array], tuple[Array, Array]],
    atoms: Array,
    support: tuple[float, float],
    *,
    upper: bool,
) -> Array:
    """inf{x: cdf(x) >= p}, or inf{x: ccdf(x) <= p} where `upper`.

    `bracket` gives, for probabilities p of the chosen side, two points between which the quantile lies;
    `atoms` are the points with probability, ascending, to which an answer beside them is moved.
    """
    p = np.asarray(p, float)
    flat = np.atleast_1d(p).ravel()
    ends = support[::-1] if upper else support
    result = np.where(flat == 0, ends[0], np.where(flat == 1, ends[1], NAN))
    inner = np.flatnonzero((flat > 0) & (flat < 1))
    if inner.size:
        result[inner] = _solve(cdf, ccdf, flat[inner], bracket, upper)
        result[inner] = _snap(cdf, ccdf, flat[inner], result[inner], atoms, upper)
    return np.asarray(result.reshape(p.shape))


def _solve(
    cdf: Tail, ccdf: Tail, p: Array, bracket: Callable[[Array], tuple[Array, Array]], upper: bool
) -> Array:
    low, high = bracket(p)
    # the smaller tail decides: 1 - p is exact there
    use_upper = (p <= 0.5) == upper
    goal = np.log(np.where(p <= 0.5, p, 1 - p))

    def excess(x: Array, index: npt.NDArray[np.int64]) -> Array:
        value = np.where(use_upper[index], ccdf(x), cdf(x))
        with np.errstate(divide="ignore"):
            difference = np.maximum(np.log(value), -1e4) - goal[index]
        return np.asarray(np.where(use_upper[index], -difference, difference))

    everything = np.arange(p.size)
    at_low, at_high = excess(low, everything), excess(high, everything)
    root, _ = bracketed_root(excess, low, high, at_low, at_high)
    # a bracket that is one point, or whose end is the answer
    return np.asarray(np.where(np.isnan(root), np.where(at_low >= 0, low, high), root))


def _snap(cdf: Tail, ccdf: Tail, p: Array, x: Array, atoms: Array, upper: bool) -> Array:
    """Move answers within a few units in the last place of an atom onto it, where the atom reaches p."""
    if not atoms.size:
        return x
    right = np.clip(np.searchsorted(atoms, x), 0, atoms.size - 1)
    left = np.maximum(right - 1, 0)
    nearest = np.where(np.abs(atoms[left] - x) <= np.abs(atoms[right] - x), atoms[left], atoms[right])
    close = np.abs(nearest - x) <= 8 * np.spacing(np.abs(x)) + 1e-300
    before = np.nextafter(nearest, -INF)
    slack = 1 + 4 * np.finfo(float).eps
    if upper:
        reached = (ccdf(nearest) <= p * slack) & (ccdf(before) > p * slack)
    else:
        reached = (cdf(nearest) * slack >= p) & (cdf(before) * slack < p)
    return np.asarray(np.where(close & reached, nearest, x))
