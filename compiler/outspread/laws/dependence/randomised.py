"""Rectangle probabilities of many jointly normal scores by randomised quasi-Monte Carlo.

Separation of variables (Genz 1992, Journal of Computational and Graphical Statistics 1, 141–149): score by
score, the probability of its side given the earlier ones, and a point inside it; sides that constrain most
come first (Gibson, Glasbey and Elston 1994), and the points are drawn where the product is large (Botev 2017,
Journal of the Royal Statistical Society B 79, 125–148). They are scrambled Sobol' points (Owen 1995) in
independent replicates, whose spread gives the error. Tails keep their digits: every factor is relative to
itself.
"""

from __future__ import annotations

import numpy as np

from outspread.laws.functions.normal import normal_between, normal_pdf
from outspread.laws.law import Array, Estimates

REPLICATES = 16
#: two-sided quantile of Student's t with 15 degrees of freedom at 1 - 1e-4: one stated error in 10,000 fails
_WIDEN = 5.239
LARGEST = 40
_FAR = 38.4
_PART = 2**12  # points at a time: they stay in the processor's cache


def randomised_rectangle(
    lower: Array,
    upper: Array,
    matrix: Array,
    *,
    absolute: float = 1e-10,
    relative: float = 1e-5,
    seed: int = 0,
    points: int = 2**18,
) -> Estimates:
    """P(lower < Z <= upper) of standard normal scores with a positive definite correlation matrix.

    lower, upper: shape (n,), 2 <= n <= 40. Doubles the points of its 16 replicates, at most `points` each,
    until the error is below `absolute` or below `relative` times the value. The error holds with a
    probability of 0.9999; results are scalars (shape ()) and depend on `seed` alone.
    """
    lower, upper, factor = _ordered(np.array(lower, float), np.array(upper, float), np.array(matrix, float))
    shifts = _tilt(lower, upper, factor)
    size = 2**10
    while True:
        means = _replicates(lower, upper, factor, shifts, size, seed)
        value = float(np.mean(means))
        error = _WIDEN * float(np.std(means, ddof=1)) / REPLICATES**0.5 + 1e-14 * value
        if error <= max(absolute, relative * value) or 2 * size > points:
            return Estimates(np.array(value), np.array(error))
        size = 4 * size if 4 * size <= points else points


def _ordered(lower: Array, upper: Array, matrix: Array) -> tuple[Array, Array, Array]:
    """Sides and Cholesky factor, at each step the side that is least probable given the earlier means."""
    size = len(lower)
    factor = np.zeros((size, size))
    means = np.zeros(size)
    for k in range(size):
        left = factor[k:, :k]
        spread = np.sqrt(np.maximum(np.diag(matrix)[k:] - np.sum(left**2, axis=1), 1e-300))
        centre = left @ means[:k]
        chance = normal_between((lower[k:] - centre) / spread, (upper[k:] - centre) / spread)
        chosen = k + int(np.argmin(chance))
        if chosen != k:
            swap = [chosen, k]
            lower[[k, chosen]], upper[[k, chosen]] = lower[swap], upper[swap]
            matrix[[k, chosen]] = matrix[swap]
            matrix[:, [k, chosen]] = matrix[:, swap]
            factor[[k, chosen]] = factor[swap]
        factor[k, k] = np.sqrt(matrix[k, k] - factor[k, :k] @ factor[k, :k])
        factor[k + 1 :, k] = (matrix[k + 1 :, k] - factor[k + 1 :, :k] @ factor[k, :k]) / factor[k, k]
        place = factor[k, :k] @ means[:k]
        low, high = (lower[k] - place) / factor[k, k], (upper[k] - place) / factor[k, k]
        mass = float(normal_between(np.array([low]), np.array([high]))[0])
        if mass > 1e-280:
            ends = normal_pdf(np.array([low, high]))
            means[k] = (ends[0] - ends[1]) / mass
        else:
            means[k] = low if low > 0 else high
    return lower, upper, factor


def _tilt(lower: Array, upper: Array, factor: Array) -> Array:
    """The shifts μ of the whitened scores at which the product's weight is flattest: Botev's saddle point.

    With any shifts the estimate is unbiased, so that a search that fails costs points and no truth. Six
    decimals are enough, and make the figures the same everywhere.
    """
    from scipy.optimize import root

    size = len(lower)
    scale = np.diag(factor)
    rows = factor / scale[:, None] - np.eye(size)

    def gradient(both: Array) -> Array:
        score, shift = np.append(both[: size - 1], 0.0), np.append(both[size - 1 :], 0.0)
        moved = rows @ score + shift
        low, high = lower / scale - moved, upper / scale - moved
        with np.errstate(all="ignore"):
            pull = (normal_pdf(low) - normal_pdf(high)) / normal_between(low, high)
        return np.concatenate([(rows.T @ pull - shift)[:-1], (shift - score + pull)[:-1]])

    with np.errstate(all="ignore"):
        found = root(gradient, np.zeros(2 * size - 2))
    shifts = np.append(np.round(found.x[size - 1 :], 6), 0.0)
    usable = found.success and np.all(np.isfinite(shifts)) and np.max(np.abs(shifts)) < 30.0
    return shifts if usable else np.zeros(size)


def _replicates(lower: Array, upper: Array, factor: Array, shifts: Array, size: int, seed: int) -> Array:
    from scipy.stats.qmc import Sobol

    children = np.random.SeedSequence(seed).spawn(REPLICATES)
    means = np.empty(REPLICATES)
    part = min(size, _PART)
    for at, child in enumerate(children):
        sobol = Sobol(len(lower) - 1, scramble=True, rng=np.random.default_rng(child))
        total = 0.0
        for _ in range(size // part):
            total += float(np.sum(_products(lower, upper, factor, shifts, sobol.random(part).T)))
        means[at] = total / size
    return means


def _products(lower: Array, upper: Array, factor: Array, shifts: Array, shares: Array) -> Array:
    """The product of the sides' conditional probabilities at each point, times the weight of the shifts.

    shares: (n - 1, points).
    """
    count = shares.shape[1]
    white = np.zeros((len(lower), count))
    product = np.ones(count)
    weight = np.zeros(count)
    for k, shift in enumerate(shifts):
        centre = factor[k, :k] @ white[:k]
        low, high = (lower[k] - centre) / factor[k, k] - shift, (upper[k] - centre) / factor[k, k] - shift
        chance, inside = _side(low, high, shares[k] if k + 1 < len(lower) else None)
        product *= chance
        if inside is not None:
            white[k] = inside + shift
            weight += shift * (0.5 * shift - white[k])
    return np.asarray(product * np.exp(weight))


def _side(low: Array, high: Array, share: Array | None) -> tuple[Array, Array | None]:
    """The probability of a side, and the score within it below which that share of it lies.

    Both from the tail that the side is in: a side above 0 is turned round.
    """
    from scipy.special import ndtr, ndtri

    turned = low > 0
    a, b = np.where(turned, -high, low), np.where(turned, -low, high)
    below = ndtr(a) if np.any(a > -_FAR) else np.zeros(a.shape)
    above = ndtr(b)
    chance = np.maximum(above - below, 0.0)
    if share is None:
        return chance, None
    inside = ndtri(np.clip(below + np.where(turned, 1.0 - share, share) * chance, 1e-307, 1.0 - 1.2e-16))
    inside = np.clip(inside, np.minimum(a, b), b)
    return chance, np.where(turned, -inside, inside)
