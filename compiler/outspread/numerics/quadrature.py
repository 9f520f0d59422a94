"""Adaptive Gauss–Kronrod integration of many integrals at once.

Panels of all the integrals ("owners") are refined together, so that a thousand one-dimensional integrals
cost a few dozen array operations. Where panels must begin and end is the caller's knowledge: kinks, jumps
and singular points belong on panel boundaries; unknown ones are found by bisection.

Rule: Gauss–Kronrod (10, 21), nodes of Piessens et al., QUADPACK (1983), computed here from their
defining polynomials' published decimals. The error of a panel is the plain difference |K21 - G10|, which
overstates the error of K21 for smooth integrands by orders of magnitude and holds at kinks and
integrable end-point singularities, where bisection continues until the difference is small.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

Array = npt.NDArray[np.float64]
Index = npt.NDArray[np.int64]

_HALF_NODES = [
    0.995657163025808080735527280689003, 0.973906528517171720077964012084452,
    0.930157491355708226001207180059508, 0.865063366688984510732096688423493,
    0.780817726586416897063717578345042, 0.679409568299024406234327365114874,
    0.562757134668604683339000099272694, 0.433395394129247190799265943165784,
    0.294392862701460198131126603103866, 0.148874338981631210884826001129720,
]  # fmt: skip
_HALF_KRONROD = [
    0.011694638867371874278064396062192, 0.032558162307964727478818972459390,
    0.054755896574351996031381300244580, 0.075039674810919952767043140916190,
    0.093125454583697605535065465083366, 0.109387158802297641899210590325805,
    0.123491976262065851077958109585166, 0.134709217311473325928054001771707,
    0.142775938577060080797094273138717, 0.147739104901338491374841515972068,
]  # fmt: skip
_CENTRE_KRONROD = 0.149445554002916905664936468389821
_HALF_GAUSS = [
    0.066671344308688137593568809893332, 0.149451349150580593145863396957698,
    0.219086362515982043995534934228163, 0.269266719309996355091226921569469,
    0.295524224714752870173815619188769,
]  # fmt: skip

NODES: Array = np.array([-x for x in _HALF_NODES] + [0.0] + _HALF_NODES[::-1])
KRONROD: Array = np.array([*_HALF_KRONROD, _CENTRE_KRONROD, *_HALF_KRONROD[::-1]])
GAUSS: Array = np.zeros(21)
GAUSS[1:10:2] = _HALF_GAUSS
GAUSS[11:20:2] = _HALF_GAUSS[::-1]
_WEIGHTS = np.stack([KRONROD, GAUSS], axis=1)

_NOISE = 5  # bisections in a row without gain after which a panel is taken for noise
_CHUNK = 1_500  # panels evaluated at a time: their arrays stay in the cache of the processor


@dataclass(frozen=True)
class Integrals:
    """`value` and `error` have shape (components, owners); `evaluations` counts integrand points."""

    value: Array
    error: Array
    evaluations: int


def integrate(
    function: Callable[[Array, Index], Array],
    lower: Array,
    upper: Array,
    owner: Index,
    owners: int,
    *,
    components: int = 1,
    control: int | None = None,
    relative: float = 1e-12,
    absolute: float | Array = 0.0,
    rounds: int = 130,
    most_panels: int | None = None,
    noise: int | None = None,
    share: int = 2_500,
    origins: Array | None = None,
) -> Integrals:
    """Integrate `function(x, owner)` over the panels, summed by owner.

    `function` takes flat arrays of points and their owners and returns values of shape (points,) or
    (components, points). `lower`, `upper`, `owner` have one entry a panel; all limits are finite.
    A panel is accepted when its error is below relative * |integral| / 40 of its owner (for every
    component) or below absolute / 40 (a number, or one for each owner), or below relative / 4 of its own
    size; only the first `control` components (default: all) are so controlled. What is not accepted after
    `rounds` bisections or `most_panels` panels keeps its error, so the error stated is always the sum
    over all panels; it never vanishes from the account. The same holds for the panels of an owner that
    has had its `share` of them, and for panels whose error both halves inherit over several bisections:
    that is rounding noise. Where component `noise` integrates a bound on the rounding of the others, a
    panel whose error is below it is accepted too.
    `origins`: a point at or beyond an end of a panel from which on the integrand may go like a square root,
    NaN where there is none; such a panel is integrated in the root of the distance, where that is smooth.
    """
    most_panels = 40_000 + 2_000 * owners if most_panels is None else most_panels
    shares = np.zeros(owners, np.int64)
    value = np.zeros((components, owners))
    error = np.zeros((components, owners))
    evaluations = 0
    panels = 0
    keep = upper > lower
    origin = np.full(lower.size, np.nan) if origins is None else origins
    lower, upper, owner, origin = lower[keep], upper[keep], owner[keep], origin[keep]
    # a bent panel runs over v, with x = origin + side v^2
    side = np.where(np.isnan(origin), 0.0, np.where(origin <= lower, 1.0, -1.0))
    bent = side != 0
    roots = [np.sqrt(np.maximum(side * (end - origin), 0.0)) for end in (lower, upper)]
    lower, upper = np.where(bent, np.minimum(*roots), lower), np.where(bent, np.maximum(*roots), upper)
    before = np.full((components, lower.size), np.inf)  # the parents' differences
    stuck = np.zeros(lower.size, np.int64)
    for round_ in range(rounds + 1):
        if not lower.size:
            break
        panels += lower.size
        kronrod, difference, size = _panels(function, lower, upper, owner, components, origin, side)
        evaluations += 21 * lower.size
        total = np.abs(value + _sum_by(owner, kronrod, owners))
        allowed = np.maximum(relative * total, absolute)[:, owner] / 40
        # A difference at the level of rounding of the panel's own sum cannot be lowered by bisection.
        own = np.maximum(4e-16, 0.25 * relative) * size  # what all panels may be off by adds up to a share
        done = (difference <= np.maximum(allowed, own))[:control].all(axis=0)
        if noise is not None:
            done |= (difference[:control] <= 0.1 * np.abs(kronrod[noise])).all(axis=0)
        shares += np.bincount(owner, minlength=owners)
        done |= shares[owner] > share
        middle = 0.5 * (lower + upper)
        done |= (middle <= lower) | (middle >= upper) | (upper - lower <= 4e-16 * np.abs(middle))
        if round_:
            pairs = difference[:control].reshape(-1, 2, before.shape[1])
            inherited = (pairs > 0.2 * before[:control, None, :]).all(axis=1).any(axis=0)
            stuck = np.tile(np.where(inherited, stuck + 1, 0), 2)
            done |= stuck >= _NOISE
        if round_ == rounds or panels > most_panels:
            done[:] = True
        value += _sum_by(owner[done], kronrod[:, done], owners)
        error += _sum_by(owner[done], difference[:, done] + 4e-16 * size[:, done], owners)
        rest = ~done
        lower, upper = (
            np.concatenate([lower[rest], middle[rest]]),
            np.concatenate([middle[rest], upper[rest]]),
        )
        owner, origin, side = (np.tile(column[rest], 2) for column in (owner, origin, side))
        before, stuck = difference[:, rest], stuck[rest]
    return Integrals(value, error, evaluations)


def _panels(
    function: Callable[[Array, Index], Array],
    lower: Array,
    upper: Array,
    owner: Index,
    components: int,
    origin: Array,
    side: Array,
) -> tuple[Array, Array, Array]:
    kronrod = np.empty((components, lower.size))
    difference = np.empty_like(kronrod)
    size = np.empty_like(kronrod)
    for start in range(0, lower.size, _CHUNK):
        part = slice(start, start + _CHUNK)
        half = 0.5 * (upper[part] - lower[part])
        centre = 0.5 * (upper[part] + lower[part])
        points = centre[:, None] + half[:, None] * NODES
        bent = np.flatnonzero(side[part])
        if bent.size:
            v = points[bent]
            points[bent] = origin[part][bent, None] + side[part][bent, None] * v * v
        values = function(points.ravel(), np.repeat(owner[part], 21)).reshape(components, half.size, 21)
        if bent.size:
            values[:, bent] *= 2 * v
        both = (values @ _WEIGHTS) * half[None, :, None]
        kronrod[:, part] = both[..., 0]
        difference[:, part] = np.abs(both[..., 0] - both[..., 1])
        size[:, part] = (np.abs(values) @ KRONROD) * half
    return kronrod, difference, size


def _sum_by(owner: Index, values: Array, owners: int) -> Array:
    return np.stack([np.bincount(owner, row, owners) for row in values])


def panels_between(points: Array) -> tuple[Array, Array, Index]:
    """Panels between consecutive points of each row: points (owners, k), NaN where there is none.

    Returns lower, upper, owner as flat arrays; empty panels are left out.
    """
    ordered = np.sort(points, axis=1)  # NaN sorts last
    lower, upper = ordered[:, :-1], ordered[:, 1:]
    owner = np.broadcast_to(np.arange(points.shape[0])[:, None], lower.shape)
    with np.errstate(invalid="ignore"):
        keep = upper > lower
    return lower[keep], upper[keep], owner[keep].astype(np.int64)
