"""A smooth function of one variable as pieces of Chebyshev polynomials, to be evaluated a million times.

Pieces are halved until the last coefficients are below the tolerance relative to the piece's largest value
(Trefethen 2013, Approximation Theory and Approximation Practice, chapter 3). Kinks and jumps that are known
belong on the ends of pieces; a function that is rough elsewhere ends in pieces of width 1e-13.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from outspread.laws.law import Array

_DEGREE = 16
_NARROWEST = 1e-13
_ANGLES = (np.arange(_DEGREE + 1) + 0.5) * np.pi / (_DEGREE + 1)
_NODES = np.cos(_ANGLES)
#: values at the nodes -> coefficients
_TO_COEFFICIENTS = 2.0 / (_DEGREE + 1) * np.cos(np.outer(np.arange(_DEGREE + 1), _ANGLES))
_TO_COEFFICIENTS[0] *= 0.5


class ScoreTable:
    """`function` on [edges[0], edges[-1]], to `tolerance` relative to its size nearby; constant beyond."""

    def __init__(self, function: Callable[[Array], Array], edges: Array, tolerance: float):
        low, high = edges[:-1], edges[1:]
        starts, rows = [], []
        while low.size:
            middle, half = 0.5 * (low + high), 0.5 * (high - low)
            values = function((middle[:, None] + half[:, None] * _NODES).ravel()).reshape(low.size, -1)
            coefficients = values @ _TO_COEFFICIENTS.T
            size = np.max(np.abs(values), axis=1)
            rough = np.max(np.abs(coefficients[:, -3:]), axis=1) > tolerance * size + 1e-300
            rough &= half > np.maximum(_NARROWEST, 4e-16 * np.abs(middle))
            starts.append(low[~rough])
            rows.append(coefficients[~rough])
            low, high = (
                np.concatenate([low[rough], middle[rough]]),
                np.concatenate([middle[rough], high[rough]]),
            )
        order = np.argsort(np.concatenate(starts))
        self._starts = np.concatenate(starts)[order]
        self._ends = np.append(self._starts[1:], edges[-1])
        self._rows = np.ascontiguousarray(np.concatenate(rows)[order].T)

    def __call__(self, x: Array) -> Array:
        piece = np.clip(np.searchsorted(self._starts, x, side="right") - 1, 0, self._starts.size - 1)
        low, high = self._starts[piece], self._ends[piece]
        t = np.clip((2.0 * x - low - high) / (high - low), -1.0, 1.0)
        last, after = self._rows[_DEGREE][piece], np.zeros(x.shape)
        for k in range(_DEGREE - 1, 0, -1):  # Clenshaw's recurrence
            last, after = self._rows[k][piece] + 2.0 * t * last - after, last
        return np.asarray(self._rows[0][piece] + t * last - after)
