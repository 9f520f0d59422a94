"""Enclosures of the elementary and special functions, beside the arithmetic of `interval_arithmetic`.

Each function cuts its argument to the domain; a part of the box outside it counts for nothing, and a box
wholly outside gives an empty interval.
"""

from __future__ import annotations

from collections.abc import Callable
from functools import reduce

import numpy as np

from outspread.formula.interval_arithmetic import Array, Interval, Mask, divide, down, multiply, power, up

_LIBRARY = 4  # units in the last place allowed for numpy's mathematical library
_PI = Interval.of(np.pi, np.nextafter(np.pi, np.inf))  # pi lies between these neighbours
_TEN = Interval.of(10.0)
_GAMMA_MINIMUM = (1.4616321449683622, 1.4616321449683625)  # DLMF 5.4.20: 1.46163 21449 68362 34126
_GAMMA_LEAST = 0.8856031944108886  # DLMF 5.4.20: 0.88560 31944 10888 70027


def _increasing(
    function: Callable[[Array], Array], ulps: int = _LIBRARY, least: float = -np.inf, most: float = np.inf
) -> Callable[[Interval], Interval]:
    """An increasing function on the whole line with range [least, most]; f(0) = 0 is taken as exact."""

    def enclosed(x: Interval) -> Interval:
        low, high = function(x.lower), function(x.upper)
        low = np.where((low == 0.0) & (x.lower == 0.0), low, np.maximum(down(low, ulps), least))
        high = np.where((high == 0.0) & (x.upper == 0.0), high, np.minimum(up(high, ulps), most))
        return Interval(low, high)

    return enclosed


def _cut(x: Interval, least: float, most: float = np.inf) -> Interval:
    """The part of x inside [least, most]; empty where there is none."""
    outside = (x.upper < least) | (x.lower > most)
    low = np.where(outside, np.nan, np.maximum(x.lower, least))
    high = np.where(outside, np.nan, np.minimum(x.upper, most))
    return Interval(low, high)


def _exp(x: Interval) -> Interval:
    low = np.where(x.lower == 0.0, 1.0, np.maximum(down(np.exp(x.lower), _LIBRARY), 0.0))
    high = np.where(x.upper == 0.0, 1.0, up(np.exp(x.upper), _LIBRARY))
    return Interval(low, high)


def _sqrt(x: Interval) -> Interval:
    part = _cut(x, 0.0)
    low, high = np.sqrt(part.lower), np.sqrt(part.upper)
    return Interval(np.maximum(down(low), 0.0), np.where(high == 0.0, 0.0, up(high)))


def _logarithm(function: Callable[[Array], Array]) -> Callable[[Interval], Interval]:
    def enclosed(x: Interval) -> Interval:
        part = _cut(x, 0.0)
        part = Interval(part.lower + 0.0, part.upper + 0.0)
        low, high = function(part.lower), function(part.upper)
        low = np.where(part.lower == 1.0, 0.0, down(low, _LIBRARY))
        high = np.where(part.upper == 1.0, 0.0, up(high, _LIBRARY))
        return Interval(low, high)

    return enclosed


def _abs(x: Interval) -> Interval:
    low = np.maximum(np.maximum(x.lower, -x.upper), 0.0)
    return Interval(low, np.maximum(-x.lower, x.upper))


def _holds_multiple(x: Interval, offset: float, period: float) -> Mask:
    """Whether x holds offset + k*period, erring towards yes by far more than the rounding of the quotient."""
    low = (x.lower - offset) / period
    high = (x.upper - offset) / period
    slack = 8.0 * np.finfo(float).eps
    with_slack = np.ceil(low - slack * (1.0 + np.abs(low))) <= np.floor(high + slack * (1.0 + np.abs(high)))
    return np.asarray(with_slack | np.isinf(low) | np.isinf(high), dtype=np.bool_)


def _wave(function: Callable[[Array], Array], crest: float) -> Callable[[Interval], Interval]:
    """sine or cosine: 1 at crest + 2 k pi, -1 half a turn later, monotone between."""

    def enclosed(x: Interval) -> Interval:
        at_low, at_high = function(x.lower), function(x.upper)
        low = np.maximum(down(np.fmin(at_low, at_high), _LIBRARY), -1.0)
        high = np.minimum(up(np.fmax(at_low, at_high), _LIBRARY), 1.0)
        low = np.where(_holds_multiple(x, crest + np.pi, 2.0 * np.pi), -1.0, low)
        high = np.where(_holds_multiple(x, crest, 2.0 * np.pi), 1.0, high)
        return Interval(low, high)

    return enclosed


def _tan(x: Interval) -> Interval:
    pole = _holds_multiple(x, np.pi / 2.0, np.pi)
    low = np.where(pole, -np.inf, down(np.tan(x.lower), _LIBRARY))
    return Interval(low, np.where(pole, np.inf, up(np.tan(x.upper), _LIBRARY)))


def _asin(x: Interval) -> Interval:
    part = _cut(x, -1.0, 1.0)
    return Interval(down(np.arcsin(part.lower), _LIBRARY), up(np.arcsin(part.upper), _LIBRARY))


def _acos(x: Interval) -> Interval:
    part = _cut(x, -1.0, 1.0)
    low = np.maximum(down(np.arccos(part.upper), _LIBRARY), 0.0)
    return Interval(low, up(np.arccos(part.lower), _LIBRARY))


def _atan2(y: Interval, x: Interval) -> Interval:
    """Angle of the box: the corners, and the whole turn where the box meets the cut y = 0, x < 0."""
    corners = [np.arctan2(b + 0.0, a + 0.0) for a in (x.lower, x.upper) for b in (y.lower, y.upper)]
    low = down(reduce(np.minimum, corners), _LIBRARY)
    high = up(reduce(np.maximum, corners), _LIBRARY)
    most = float(_PI.upper)
    cut = (x.lower < 0.0) & (y.lower < 0.0) & (y.upper >= 0.0)
    # an origin on the border of the box has the angle 0 by convention
    origin = (x.lower <= 0.0) & (x.upper >= 0.0) & (y.lower <= 0.0) & (y.upper >= 0.0)
    low, high = np.where(origin, np.minimum(low, 0.0), low), np.where(origin, np.maximum(high, 0.0), high)
    return Interval(np.where(cut, -most, np.maximum(low, -most)), np.where(cut, most, np.minimum(high, most)))


def _hypot(*parts: Interval) -> Interval:
    if len(parts) == 1:
        return _abs(parts[0])

    def two(x: Interval, y: Interval) -> Interval:
        low, high = np.hypot(x.lower, y.lower), np.hypot(x.upper, y.upper)
        exact_low = (x.lower == 0.0) | (y.lower == 0.0)
        exact_high = (x.upper == 0.0) | (y.upper == 0.0)
        return Interval(
            np.where(exact_low, low, np.maximum(down(low, _LIBRARY), 0.0)),
            np.where(exact_high, high, up(high, _LIBRARY)),
        )

    return reduce(two, [_abs(part) for part in parts])


def _cosh(x: Interval) -> Interval:
    size = _abs(x)
    low = np.maximum(down(np.cosh(size.lower), _LIBRARY), 1.0)
    return Interval(low, np.where(size.upper == 0.0, 1.0, up(np.cosh(size.upper), _LIBRARY)))


def _erf(x: Interval) -> Interval:
    from scipy.special import erf

    return _increasing(lambda values: np.asarray(erf(values)), 8, -1.0, 1.0)(x)


def _widened(low: Array, high: Array, relative: float = 1e-12) -> Interval:
    return Interval(down(low - relative * np.abs(low)), up(high + relative * np.abs(high)))


def _gamma(x: Interval) -> Interval:
    """Convex for positive arguments with its minimum at 1.4616; between two poles below 0 of one sign."""
    from scipy.special import gamma

    at_low = np.where(x.lower == 0.0, np.inf, np.asarray(gamma(x.lower)))
    at_low = np.where(np.isposinf(x.lower), np.inf, at_low)
    at_high = np.where(np.isposinf(x.upper), np.inf, np.asarray(gamma(x.upper)))
    positive = _widened(np.minimum(at_low, at_high), np.maximum(at_low, at_high))
    dips = (x.lower <= _GAMMA_MINIMUM[1]) & (x.upper >= _GAMMA_MINIMUM[0])
    positive_low = np.where(dips, _GAMMA_LEAST, np.maximum(positive.lower, _GAMMA_LEAST))
    # x.lower = 0: the half line above; scipy has no value there of use
    positive_high = np.where(x.lower == 0.0, np.inf, positive.upper)
    # below zero
    cell = np.floor(x.lower)
    no_pole = (x.lower < 0.0) & (x.lower != cell) & (x.upper < cell + 1.0)
    sign_is_plus = np.fmod(cell, 2.0) == 0.0
    largest = np.maximum(np.abs(at_low), np.abs(at_high)) * (1.0 + 1e-12) + 5e-324
    below_low = np.where(no_pole, np.where(sign_is_plus, 0.0, -largest), -np.inf)
    below_high = np.where(no_pole, np.where(sign_is_plus, largest, 0.0), np.inf)
    above = x.lower >= 0.0
    only_zero = (x.lower == 0.0) & (x.upper == 0.0)
    low = np.where(only_zero, -np.inf, np.where(above, positive_low, below_low))
    return Interval(low, np.where(above, positive_high, below_high))


def _polygamma(n: Interval, x: Interval) -> Interval:
    """Monotone for positive arguments: rising for even n, falling for odd n (DLMF 5.15); else unknown."""
    from scipy.special import polygamma

    order = int(np.max(n.lower))
    positive = x.lower > 0.0
    inner = np.where(positive, x.lower, 1.0), np.where(positive, x.upper, 1.0)
    ends = [np.asarray(polygamma(order, values), dtype=np.float64) for values in inner]
    known = _widened(np.minimum(*ends), np.maximum(*ends))
    slack = 1e-12  # near the zero of digamma the error is absolute
    return Interval(
        np.where(positive, known.lower - slack, -np.inf), np.where(positive, known.upper + slack, np.inf)
    )


def _whole(function: Callable[[Array], Array]) -> Callable[[Interval], Interval]:
    return lambda x: Interval(function(x.lower), function(x.upper))


def _decibel(x: Interval) -> Interval:
    return multiply(_TEN, _logarithm(np.log10)(x))


def _from_decibel(x: Interval) -> Interval:
    return power(_TEN, divide(x, _TEN))


FUNCTIONS: dict[str, Callable[..., Interval]] = {
    "sqrt": _sqrt,
    "exp": _exp,
    "log": _logarithm(np.log),
    "log10": _logarithm(np.log10),
    "abs": _abs,
    "sign": _whole(np.sign),
    "hypot": _hypot,
    "sin": _wave(np.sin, np.pi / 2.0),
    "cos": _wave(np.cos, 0.0),
    "tan": _tan,
    "asin": _asin,
    "acos": _acos,
    "atan": _increasing(np.arctan),
    "atan2": _atan2,
    "sinh": _increasing(np.sinh),
    "cosh": _cosh,
    "tanh": _increasing(np.tanh, _LIBRARY, -1.0, 1.0),
    "erf": _erf,
    "gamma": _gamma,
    "polygamma": _polygamma,
    "floor": _whole(np.floor),
    "ceil": _whole(np.ceil),
    "decibel": _decibel,
    "from_decibel": _from_decibel,
}
