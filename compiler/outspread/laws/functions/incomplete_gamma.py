"""Regularised incomplete gamma functions and their inverses, relative accuracy in both tails."""

from __future__ import annotations

import numpy as np

from outspread.laws.law import Array


def gamma_lower(shape: float | Array, x: Array) -> Array:
    """P(a, x): the cdf of a gamma law of this shape and scale 1."""
    from scipy import special

    return np.asarray(special.gammainc(shape, x))


def gamma_upper(shape: float | Array, x: Array) -> Array:
    """Q(a, x) = 1 - P(a, x)."""
    from scipy import special

    return np.asarray(special.gammaincc(shape, x))


def gamma_lower_inverse(shape: float, p: Array) -> Array:
    from scipy import special

    return np.asarray(special.gammaincinv(shape, p))


def gamma_upper_inverse(shape: float, q: Array) -> Array:
    from scipy import special

    return np.asarray(special.gammainccinv(shape, q))


def gamma_density(shape: float, x: Array) -> Array:
    """x^(a-1) exp(-x) / Gamma(a)."""
    from scipy import special

    return np.asarray(np.exp(special.xlogy(shape - 1, x) - x - special.gammaln(shape)))
