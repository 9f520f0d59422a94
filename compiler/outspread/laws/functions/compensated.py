"""Sums and products of doubles carried to twice the precision, where a difference would lose digits.

Method: Dekker (1971), Knuth's two-sum; see Ogita, Rump and Oishi (2005), SIAM J. Sci. Comput. 26.
"""

from __future__ import annotations

import numpy as np

from outspread.laws.law import Array

_SPLIT = 134217729.0  # 2^27 + 1


def two_sum(a: Array, b: Array) -> tuple[Array, Array]:
    """The rounded sum and its rounding error, exactly."""
    total = a + b
    part = total - a
    return total, (a - (total - part)) + (b - part)


def two_product(a: Array, b: Array) -> tuple[Array, Array]:
    """The rounded product and its rounding error, exactly (for factors below 1e150)."""
    product = a * b
    high_a = _SPLIT * a - (_SPLIT * a - a)
    high_b = _SPLIT * b - (_SPLIT * b - b)
    low_a, low_b = a - high_a, b - high_b
    return product, ((high_a * high_b - product) + high_a * low_b + low_a * high_b) + low_a * low_b


def one_plus_ratio(factor: float, x: Array, location: float, scale: float) -> Array:
    """1 + factor * (x - location) / scale, relative to itself also where it is nearly 0."""
    difference, rest = two_sum(x, np.full_like(x, -location))
    product, error = two_product(np.full_like(x, factor), difference)
    total, lost = two_sum(product, np.full_like(x, scale))
    return np.asarray((total + (lost + error + factor * rest)) / scale)
