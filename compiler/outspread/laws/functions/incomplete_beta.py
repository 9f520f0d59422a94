"""The regularised incomplete beta function, its complement, inverses and density."""

from __future__ import annotations

import numpy as np

from outspread.laws.law import Array


def beta_lower(a: float | Array, b: float | Array, u: Array, v: Array) -> Array:
    """I_u(a, b), given u and v = 1 - u."""
    from scipy import special

    return np.asarray(np.where(u < 0.5, special.betainc(a, b, u), special.betaincc(b, a, v)))


def beta_lower_inverse(a: float, b: float, p: Array) -> Array:
    """u with I_u(a, b) = p."""
    from scipy import special

    return np.asarray(special.betaincinv(a, b, p))


def beta_density(a: float, b: float, u: Array, v: Array) -> Array:
    """u^(a-1) v^(b-1) / B(a, b)."""
    from scipy import special

    return np.asarray(np.exp(special.xlogy(a - 1, u) + special.xlogy(b - 1, v) - special.betaln(a, b)))
