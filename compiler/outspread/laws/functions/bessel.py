"""The modified Bessel function of the first kind without its exponential growth and its power at 0."""

from __future__ import annotations

import numpy as np

from outspread.laws.law import Array


def log_scaled_bessel(order: float, x: Array) -> Array:
    """Logarithm of exp(-x) I_order(x) (2/x)^order, for order > -1 and x >= 0.

    Series of DLMF 10.25.2 for x² below 400 (1 + order): all terms have one sign there for order > -1;
    beyond, the library's scaled function.
    """
    from scipy import special

    x = np.asarray(x, float)
    quarter = 0.25 * x * x
    use_series = quarter < 100 * (1 + order)
    small = np.where(use_series, quarter, 0.0)
    term = np.ones_like(small)
    total = np.ones_like(small)
    for k in range(1, 5000):
        term = term * (small / (k * (k + order)))
        total = total + term
        if np.all(term <= 1e-17 * total):
            break
    series = np.log(total) - special.gammaln(order + 1) - x
    with np.errstate(all="ignore"):
        library = np.log(special.ive(order, x)) + order * np.log(2 / x)
    return np.asarray(np.where(use_series, series, library))
