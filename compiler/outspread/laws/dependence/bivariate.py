"""Rectangle probabilities of two and three jointly normal scores, relative to themselves.

Each is an integral of a positive, log-concave function of one score, whose peak is found first; panels
grow geometrically away from it, so that no narrow peak is overlooked and no digits cancel in a tail. Two
normals with a moderate correlation have a short rule as well (`bivariate_fast`), for use inside other
integrals. More scores: `orthants` and `randomised`.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import numpy.typing as npt

from outspread.laws.functions.normal import log_normal_cdf, normal_between, normal_cdf, normal_pdf
from outspread.laws.law import Array, Estimates
from outspread.numerics.quadrature import Index, integrate, panels_between

_UNDERFLOW = 1e-300  # a probability below this may be stated as 0
_FAR = 38.5  # beyond this score no double precision probability is left
_STEPS = np.array([0.0, 0.2, 0.8, 3.0, 12.0])  # panel ends on either side of a peak, in its least width
_UNITS = np.array([-12.0, -6.0, -2.5, -1.0, 1.0, 2.5, 6.0, 12.0])  # and in the widest one
_GAUSS_NODES, _GAUSS_WEIGHTS = np.polynomial.legendre.leggauss(20)
FAST_LIMIT = 0.925  # |ρ| up to which 20 points of the short rule give 15 decimals (Genz 2004, table 1)


def bivariate_rectangle(lower: Array, upper: Array, correlation: Array) -> Estimates:
    """P(lower < Z <= upper) of N pairs of standard normal scores.

    lower, upper: shape (2, N), may be infinite; correlation: shape (N,), from -1 to 1. The probability is
    ∫ φ(x) P(lower_1 < Z_1 <= upper_1 | Z_0 = x) dx over the first side; errors are bounds, mostly below
    1e-14 of the value wherever it exceeds 1e-290.
    """
    lower, upper = np.array(lower, float), np.array(upper, float)
    rho = np.broadcast_to(np.asarray(correlation, float), lower.shape[1:])
    exact = np.abs(rho) == 1
    value, error = np.zeros(rho.size), np.zeros(rho.size)
    if exact.any():
        value[exact] = _comonotone(lower[:, exact], upper[:, exact], rho[exact])
        error[exact] = 1e-15 * value[exact]
    rest = np.flatnonzero(~exact)
    if rest.size:
        found = _integrated(lower[:, rest], upper[:, rest], rho[rest])
        value[rest], error[rest] = found.value, found.error
    return Estimates(value, error)


def _comonotone(lower: Array, upper: Array, rho: Array) -> Array:
    turned = rho < 0
    low = np.maximum(lower[0], np.where(turned, -upper[1], lower[1]))
    high = np.minimum(upper[0], np.where(turned, -lower[1], upper[1]))
    return normal_between(low, np.maximum(high, low))


def _integrated(lower: Array, upper: Array, rho: Array) -> Estimates:
    scale = np.sqrt((1.0 - rho) * (1.0 + rho))

    def limits(x: Array, owner: Index) -> tuple[Array, Array]:
        with np.errstate(over="ignore"):
            centre = rho[owner] * x
            return (lower[1][owner] - centre) / scale[owner], (upper[1][owner] - centre) / scale[owner]

    def density(x: Array, owner: Index) -> Array:
        low, high = limits(x, owner)
        with np.errstate(invalid="ignore", over="ignore"):
            width = (upper[1] - lower[1])[owner] / scale[owner]
        return normal_pdf(x) * normal_between(low, high, width)

    def slope(x: Array, owner: Index) -> Array:
        """Sign of the derivative of the logarithm of `density`."""
        low, high = limits(x, owner)
        return -x + rho[owner] / scale[owner] * _truncated_mean(low, high)

    start, end = np.maximum(lower[0], -_FAR), np.minimum(upper[0], _FAR)
    start, end = np.minimum(start, _FAR), np.maximum(end, -_FAR)
    mode = _peak(slope, start, end, float(np.min(scale)))
    # the rounding of the nearer limit z at the peak moves Φ(z) by z² ulp relative to itself
    low, high = limits(mode, np.arange(rho.size))
    nearest = np.where(low > 0, low, np.where(high < 0, -high, 0.0))
    side = np.where(low > 0, lower[1], np.where(high < 0, upper[1], 0.0))
    with np.errstate(invalid="ignore"):
        rounding = 4e-16 * nearest * (np.abs(rho * mode) + np.abs(side)) / scale
    rounding = np.where(np.isfinite(rounding), rounding, 0.0)
    rounding += 4e-16 * np.abs(mode) / _slit(lower, upper, rho, scale)
    extra = step_points(np.stack([lower[1], upper[1]]), np.stack([rho, rho]), np.stack([scale, scale])).T
    return integrate_peak(density, start, end, mode, np.minimum(scale, 1.0), 2e-15, rounding, extra)


def _truncated_mean(low: Array, high: Array) -> Array:
    """E(Z | low < Z <= high), well enough to know a sign."""
    with np.errstate(all="ignore"):
        mass = normal_between(low, high)
        inner = (normal_pdf(low) - normal_pdf(high)) / mass
        nearest = np.where(low > 0, low, np.where(high < 0, high, 0.0))
        return np.where((mass > 1e-290) & np.isfinite(inner), inner, nearest)


def _slit(lower: Array, upper: Array, rho: Array, scale: Array) -> Array:
    """The least width, at most 1, on which a rounding of the first score by one ulp tells."""
    with np.errstate(all="ignore"):
        ends = np.sort(np.stack([lower[1], upper[1]]) / rho, axis=0)
        overlap = np.minimum(upper[0], ends[1]) - np.maximum(lower[0], ends[0])
        joint = np.where(np.isnan(overlap), 1.0, np.maximum(overlap, scale))
    widths = np.minimum(upper[0] - lower[0], upper[1] - lower[1])
    return np.asarray(np.clip(np.minimum(widths, joint), 1e-300, 1.0))


def step_points(limits: Array, loadings: Array, scales: Array) -> Array:
    """Panel ends about the places where a steep conditional probability rises or falls: limit / loading.

    All of one shape (k, …); the result is (5 k, …), NaN where the step is no steeper than the density.
    """
    with np.errstate(all="ignore"):
        place, width = limits / loadings, scales / np.abs(loadings)
        steep = np.where(np.isfinite(place) & (width < 0.3), place, np.nan)
        width = np.where(np.isnan(steep), 0.0, width)
    return np.concatenate([steep + k * width for k in (-9.0, -3.0, 0.0, 3.0, 9.0)])


def _peak(slope: Callable[[Array, Index], Array], start: Array, end: Array, least: float) -> Array:
    """Where the falling function `slope` changes its sign between start and end (an end if it does not), to
    a tenth of `least`."""
    everything = np.arange(start.size)
    low, high = start.copy(), end.copy()
    for _ in range(min(max(int(np.ceil(np.log2(20.0 * _FAR / least))), 24), 56)):
        middle = 0.5 * (low + high)
        rising = slope(middle, everything) > 0
        low, high = np.where(rising, middle, low), np.where(rising, high, middle)
    return np.asarray(0.5 * (low + high))


def integrate_peak(
    density: Callable[[Array, Index], Array],
    start: Array,
    end: Array,
    mode: Array,
    scale: Array,
    relative: float,
    inner_error: npt.ArrayLike = 0.0,
    extra: Array | None = None,
) -> Estimates:
    """Integrals of log-concave functions over [start, end]; `scale` is the least width of their peaks.

    `inner_error` is the relative error of the function's own values, `extra` further panel ends by row.
    """
    reach = np.minimum(scale, 1.0)[:, None] * _STEPS
    far = mode[:, None] + _UNITS
    points = np.concatenate(
        [start[:, None], end[:, None], mode[:, None] - reach, mode[:, None] + reach, far]
        + ([] if extra is None else [extra]),
        axis=1,
    )
    points = np.clip(points, start[:, None], np.maximum(end, start)[:, None])
    low, high, owner = panels_between(points)
    if not low.size:
        return Estimates(np.zeros(start.size), np.full(start.size, _UNDERFLOW))
    # far panels carry less than 1e-290 of anything and are kept only for the account
    found = integrate(density, low, high, owner, start.size, relative=relative, absolute=1e-306)
    value = found.value[0]
    # one ulp of a node x moves φ(x) by x² ulp
    rounding = (1e-15 + 2e-16 * mode * mode + np.asarray(inner_error)) * value
    return Estimates(value, found.error[0] + rounding + _UNDERFLOW)


def bivariate_fast(b: Array, c: Array, correlation: Array) -> Array:
    """P(Z_0 <= b, Z_1 <= c), absolute error below 2e-15; arrays of one shape (N,).

    Up to |ρ| = 0.925 by Plackett's derivative in ρ with 20 Gauss points in asin ρ (Drezner and Wesolowsky
    1990, Journal of Statistical Computation and Simulation 35, 101–107; Genz 2004, Statistics and Computing
    14, 251–260), beyond it by `bivariate_rectangle`.
    """
    rho = np.clip(correlation, -1.0, 1.0)
    fast = np.abs(rho) <= FAST_LIMIT
    angle = np.arcsin(np.where(fast, rho, 0.0))
    b, c = np.clip(b, -40.0, 40.0), np.clip(c, -40.0, 40.0)
    total = np.zeros(b.shape)
    for node, weight in zip(_GAUSS_NODES, _GAUSS_WEIGHTS, strict=True):
        sine = np.sin(0.5 * angle * (1.0 + node))
        total += weight * np.exp(-0.5 * ((b - c) ** 2 / (1.0 - sine**2) + 2.0 * b * c / (1.0 + sine)))
    result = normal_cdf(b) * normal_cdf(c) + 0.25 * angle / np.pi * total
    slow = np.flatnonzero(~fast)
    if slow.size:
        ends = np.stack([b[slow], c[slow]])
        result[slow] = bivariate_rectangle(np.full_like(ends, -np.inf), ends, rho[slow]).value
    return np.asarray(result)


def trivariate_rectangle(lower: Array, upper: Array, matrix: Array) -> Estimates:
    """P(lower < Z <= upper) of three standard normal scores; lower, upper: (3,), matrix: (3, 3).

    ∫ φ(x) P(the other two in their rectangle | Z_0 = x) dx with the score first that the others depend on
    most; the result has shape (1,). Positive definite matrices only; relative like `bivariate_rectangle`.
    """
    first = int(np.argmax(np.sum(matrix**2, axis=0)))
    order = [first, *(k for k in range(3) if k != first)]
    lower, upper, matrix = lower[order], upper[order], matrix[np.ix_(order, order)]
    rho = matrix[0, 1:]
    scale = np.sqrt((1.0 - rho) * (1.0 + rho))
    inner = float(np.clip((matrix[1, 2] - rho[0] * rho[1]) / (scale[0] * scale[1]), -1.0, 1.0))
    if not min(upper[0], _FAR) > max(lower[0], -_FAR):
        return Estimates(np.zeros(1), np.zeros(1))
    least = float(np.sqrt(1.0 / np.linalg.inv(matrix)[0, 0]))
    found = _over_first(lower, upper, rho, scale, inner, least)
    # near a singular matrix the difference above has lost digits: what they change is part of the error
    lost = 2.3e-16 * (abs(matrix[1, 2]) + abs(rho[0] * rho[1])) / float(scale[0] * scale[1])
    if lost < 3e-15 and found.value[0] > 1e-12:  # a tail feels the last digit of a correlation, too
        return found
    moved = inner - 2.0 * lost if inner > 0 else inner + 2.0 * lost
    other = _over_first(lower, upper, rho, scale, moved, least)
    # three correlations and two scales are rounded, one correlation is moved; and the exponent of a tail is
    # a sum whose parts are rounded
    exponent = np.abs(np.log(np.maximum(found.value, 1e-300)))
    moved_by = 5.0 * np.abs(found.value - other.value) + 1e-14 * exponent * found.value
    return Estimates(found.value, found.error + moved_by)


def _over_first(
    lower: Array, upper: Array, rho: Array, scale: Array, inner: float, least: float
) -> Estimates:
    """The integral over the first score; `inner` is the correlation of the others given it."""

    def sides(x: Array) -> tuple[Array, Array]:
        centre = rho[:, None] * x
        return (lower[1:, None] - centre) / scale[:, None], (upper[1:, None] - centre) / scale[:, None]

    def conditional(x: Array) -> Estimates:
        return bivariate_rectangle(*sides(x), np.full(x.size, inner))

    start, end = max(lower[0], -_FAR), min(upper[0], _FAR)
    mode, worst = coarse_peak(
        conditional, lambda x: np.min(log_side(*sides(x)), axis=0), start, end, least
    )
    # the rounding of a limit z given the peak moves its probability by z² ulp relative to itself
    low, high = (side[:, 0] for side in sides(np.array([mode])))
    nearest = np.where(low > 0, low, np.where(high < 0, -high, 0.0))
    own_limit = np.where(low > 0, lower[1:], np.where(high < 0, upper[1:], 0.0))
    worst += float(np.sum(4e-16 * nearest * (np.abs(rho * mode) + np.abs(own_limit)) / scale))
    worst += float(4e-16 * abs(mode) / min(np.min(upper - lower), 1.0))
    # where one limit takes over from the other: z_1 = ± z_2 given x
    own = [limits[1:] / scale for limits in (lower, upper)]
    slopes = rho / scale
    turn = np.array([1.0, -1.0])
    with np.errstate(all="ignore"):
        crossings = np.concatenate(
            [(a[0] - turn * b[1]) / (slopes[0] - turn * slopes[1]) for a in own for b in own]
        )
    crossings = crossings[np.isfinite(crossings)]
    steps = step_points(
        np.concatenate([lower[1:], upper[1:]]), np.tile(rho, 2), np.tile(scale, 2)
    )  # fmt: skip
    widths = least * np.array([-9.0, -3.0, 0.0, 3.0, 9.0])
    extra = np.concatenate([steps, (crossings[:, None] + widths).ravel()])[None, :]
    return integrate_peak(
        lambda x, owner: normal_pdf(x) * conditional(x).value,
        np.array([start]), np.array([end]), np.array([mode]), np.array([least]), 1e-14, worst, extra,
    )  # fmt: skip


def coarse_peak(
    conditional: Callable[[Array], Estimates],
    log_bound: Callable[[Array], Array],
    start: float,
    end: float,
    least: float,
) -> tuple[float, float]:
    """Where φ(x) times the conditional probability is largest, and the latter's relative error near it.

    `log_bound` bounds the logarithm of the probability from above also where it underflows: it leads to a
    peak that is narrower than any grid. The place is found to about half of `least`.
    """
    low, high = start, end
    best, worst = 0.5 * (low + high), 0.0
    for _ in range(24):
        x = np.linspace(low, high, 17)
        found = conditional(x)
        with np.errstate(divide="ignore", invalid="ignore"):
            known = found.value > 1e-290
            height = np.where(known, np.log(found.value), np.minimum(log_bound(x), -668.0)) - 0.5 * x * x
            weighty = known & (height > np.max(height) - 40.0)
            worst = max(worst, float(np.max(np.where(weighty, found.error / found.value, 0.0))))
        at = int(np.argmax(height))
        best = float(x[at])
        left, right = max(at - 1, 0), min(at + 1, 16)
        low, high = float(x[left]), float(x[right])
        if high - low < least:
            break
    return best, worst


def log_side(low: Array, high: Array) -> Array:
    """log P(low < Z <= high) of a score, finite where the probability underflows (it may err by 1e-15)."""
    turned = low > 0
    a, b = np.where(turned, -high, low), np.where(turned, -low, high)
    with np.errstate(all="ignore"):
        above = log_normal_cdf(np.minimum(b, 40.0))
        below = np.where(np.isneginf(a), -np.inf, log_normal_cdf(np.minimum(a, 40.0)))
        result = above + np.log(-np.expm1(np.minimum(below - above, 0.0)))
    return np.where(np.isfinite(result), result, -1e300)
