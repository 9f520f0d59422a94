"""The regularised incomplete beta function, its complement, inverses and density."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from outspread.laws.functions.counting import beta_kernel
from outspread.laws.law import Array


def beta_lower(a: npt.ArrayLike, b: npt.ArrayLike, u: Array, v: Array) -> Array:
    """I_u(a, b), given u and v = 1 - u."""
    from scipy import special

    return np.asarray(np.where(u < 0.5, special.betainc(a, b, u), special.betaincc(b, a, v)))


def beta_lower_inverse(a: float, b: float, p: Array) -> Array:
    """u with I_u(a, b) = p, polished by a Newton step on the logarithm where p is not near 1."""
    from scipy import special

    u = np.asarray(special.betaincinv(a, b, p))
    with np.errstate(all="ignore"):
        value = beta_lower(a, b, u, 1 - u)
        step = np.log(value / p) * value / beta_density(a, b, u, 1 - u)
        use = (p < 0.9) & (u < 0.5) & np.isfinite(step) & (np.abs(step) < 1e-6 * u)
    return np.asarray(np.where(use, u - step, u))


def beta_density(a: float, b: float, u: Array, v: Array) -> Array:
    """u^(a-1) v^(b-1) / B(a, b); at the ends its limits."""
    inner = (u > 0) & (v > 0)
    safe_u, safe_v = np.where(inner, u, 0.5), np.where(inner, v, 0.5)
    value = beta_kernel(a, b, safe_u, safe_v) / (safe_u * safe_v)
    at_lower = np.inf if a < 1 else (b if a == 1 else 0.0)
    at_upper = np.inf if b < 1 else (a if b == 1 else 0.0)
    return np.asarray(np.where(inner, value, np.where(u <= 0, at_lower, at_upper)))
