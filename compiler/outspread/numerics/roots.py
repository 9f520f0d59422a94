"""Bracketed root finding on arrays, to the last representable digit.

Method: Chandrupatla (1997), Advances in Engineering Software 28, 145–149, with bisection in the order of
the floating-point numbers where a bracket spans many magnitudes, so that at most about 130 steps are needed.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import numpy.typing as npt

Array = npt.NDArray[np.float64]


def ordinal_middle(lower: Array, upper: Array) -> Array:
    """The number halfway between two others in the order of representable numbers."""
    a, b = _ordinal(lower), _ordinal(upper)
    return _from_ordinal((a >> 1) + (b >> 1) + (a & b & 1))


def _ordinal(x: Array) -> npt.NDArray[np.int64]:
    bits = np.ascontiguousarray(x + 0.0).view(np.int64)
    return np.where(bits < 0, np.int64(-(2**63)) - bits, bits)


def _from_ordinal(order: npt.NDArray[np.int64]) -> Array:
    bits = np.where(order < 0, np.int64(-(2**63)) - order, order)
    return np.ascontiguousarray(bits).view(np.float64)


def bracketed_root(
    function: Callable[[Array, npt.NDArray[np.int64]], Array],
    lower: Array,
    upper: Array,
    at_lower: Array | None = None,
    at_upper: Array | None = None,
    steps: int = 200,
) -> tuple[Array, Array]:
    """Roots of `function(x, index)` in [lower, upper]; `index` tells which of the problems x belongs to.

    Returns (root, width): the true sign change lies within `width` of the root. Where the function has one
    sign over the bracket ends the result is NaN.
    """
    a, b = np.array(lower, float), np.array(upper, float)
    everything = np.arange(a.size)
    fa = function(a, everything) if at_lower is None else np.array(at_lower, float)
    fb = function(b, everything) if at_upper is None else np.array(at_upper, float)
    root = np.full(a.size, np.nan)
    width = np.zeros(a.size)
    for x, f in ((a, fa), (b, fb)):
        hit = (f == 0) & np.isnan(root)
        root[hit] = x[hit]
    live = everything[np.isnan(root) & (np.sign(fa) * np.sign(fb) < 0)]
    a, b, fa, fb = a[live], b[live], fa[live], fb[live]
    c, fc = a.copy(), fa.copy()  # previous point
    step = np.full(live.size, 0.5)
    for count in range(steps):
        if not live.size:
            break
        with np.errstate(all="ignore"):
            x = a + step * (b - a)
            low, high = np.minimum(a, b), np.maximum(a, b)
            # a bracket over many magnitudes is halved in the order of representable numbers
            if count % 3 == 2:
                wide = (low < 0) != (high < 0)
                wide |= np.maximum(np.abs(low), np.abs(high)) > 8 * np.minimum(np.abs(low), np.abs(high))
                if wide.any():
                    x = np.where(wide, ordinal_middle(low, high), x)
            x = np.where((x > low) & (x < high), x, ordinal_middle(low, high))
        f = function(x, live)
        with np.errstate(all="ignore"):
            same = np.sign(f) == np.sign(fa)
            c, fc = np.where(same, a, b), np.where(same, fa, fb)
            b, fb = np.where(same, b, a), np.where(same, fb, fa)
            a, fa = x, f
            best = np.where(np.abs(fa) <= np.abs(fb), a, b)
            gap = np.abs(b - a)
            # done when nothing representable lies between (or a few units in the last place remain)
            done = (fa == 0) | (gap <= 2.3e-16 * np.maximum(np.abs(best), 1e-307)) | np.isnan(fa)
            xi = (a - b) / (c - b)
            phi = (fa - fb) / (fc - fb)
            inverse = (phi**2 < xi) & ((1 - phi) ** 2 < 1 - xi)
            step = np.where(
                inverse,
                fa / (fb - fa) * fc / (fb - fc) + (c - a) / (b - a) * fa / (fc - fa) * fb / (fc - fb),
                0.5,
            )
            edge = 1e-16 * np.abs(best) / np.maximum(gap, 1e-300)
            edge = np.minimum(np.where(np.isfinite(edge), edge, 0.5), 0.5)
            step = np.where(np.isfinite(step), np.clip(step, edge, 1 - edge), 0.5)
        root[live[done]] = best[done]
        width[live[done]] = np.where(fa[done] == 0, 0.0, gap[done])
        keep = ~done
        live, a, b, c, step = live[keep], a[keep], b[keep], c[keep], step[keep]
        fa, fb, fc = fa[keep], fb[keep], fc[keep]
    if live.size:
        root[live] = np.where(np.abs(fa) <= np.abs(fb), a, b)
        width[live] = np.abs(b - a)
    return root, width
