"""Density, tail and inverse tail of the standard Student t law."""

from __future__ import annotations

import numpy as np

from outspread.laws.functions.incomplete_beta import beta_lower, beta_lower_inverse
from outspread.laws.law import Array

LOG_ROOT_PI = 0.5 * float(np.log(np.pi))


def log_inverse_beta(a: float) -> float:
    """log(1 / B(a, 1/2)) = log(Gamma(a + 1/2) / (sqrt(pi) Gamma(a))).

    Difference of Stirling's series (DLMF 5.11.1 and 5.11.8) for large a, where log-gammas would cancel.
    """
    from scipy import special

    if a < 20:
        return float(special.gammaln(a + 0.5) - special.gammaln(a)) - LOG_ROOT_PI
    inverse = 1 / (a * a)
    series = -1 / 8 + inverse * (
        1 / 192 + inverse * (-1 / 640 + inverse * (17 / 14336 - inverse * 31 / 18432))
    )
    return float(0.5 * np.log(a) + series / a) - LOG_ROOT_PI


def student_pdf(nu: float, t: Array) -> Array:
    constant = log_inverse_beta(nu / 2) - 0.5 * np.log(nu)
    w = np.abs(t) / np.sqrt(nu)
    log_power = np.where(w < 1e7, 0.5 * np.log1p(np.minimum(w, 1e7) ** 2), np.log(np.maximum(w, 1.0)))
    return np.asarray(np.exp(constant - (nu + 1) * log_power))


def student_tail(nu: float, t: Array) -> Array:
    """P(T > t) for t >= 0."""
    w = t / np.sqrt(nu)
    near = np.minimum(w, 1e7)
    u = 1 / (1 + near * near)
    v = near * near * u
    body = 0.5 * beta_lower(nu / 2, 0.5, u, v)
    log_far = -nu * np.log(np.maximum(w, 1.0)) - np.log(nu) + log_inverse_beta(nu / 2)
    return np.asarray(np.where(w < 1e7, body, np.exp(log_far)))


def student_tail_inverse(nu: float, q: Array) -> Array:
    """t >= 0 with P(T > t) = q, for q <= 1/2."""
    log_constant = np.log(nu) - log_inverse_beta(nu / 2)
    far = np.sqrt(nu) * np.exp(-(np.log(q) + log_constant) / nu)
    u = beta_lower_inverse(nu / 2, 0.5, 2 * q)
    v = beta_lower_inverse(0.5, nu / 2, 1 - 2 * q)
    near = np.sqrt(nu) * np.where(q > 0.25, np.sqrt(v / (1 - v)), np.sqrt((1 - u) / u))
    t = np.where(far > 1e7 * np.sqrt(nu), far, near)
    for _ in range(2):
        tail = student_tail(nu, t)
        step = (tail / q - 1) * q / student_pdf(nu, t)
        t = np.where(np.isfinite(step) & (np.abs(step) < 0.5 * t), t + step, t)
    return np.asarray(t)
