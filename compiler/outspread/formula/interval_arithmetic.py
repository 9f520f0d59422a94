"""Outward-rounded interval arithmetic on arrays: sums, products, powers, order and conditions.

Elementary functions are in `interval_functions`, expressions in `interval`, where the rounding assumptions
are stated.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import reduce
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]


@dataclass(frozen=True)
class Interval:
    """Closed intervals [lower, upper], elementwise; both ends nan: empty. Conditions are {0, 1}-valued."""

    lower: Array
    upper: Array

    @classmethod
    def of(cls, lower: ArrayLike, upper: ArrayLike | None = None) -> Interval:
        """From array-likes; one argument gives single points."""
        low = np.asarray(lower, dtype=np.float64)
        return cls(low, low if upper is None else np.asarray(upper, dtype=np.float64))

    @property
    def empty(self) -> Mask:
        return np.isnan(self.lower) | np.isnan(self.upper)

    def contains(self, value: ArrayLike) -> Mask:
        """Whether each value lies inside (False for empty)."""
        values = np.asarray(value, dtype=np.float64)
        inside: Mask = (self.lower <= values) & (values <= self.upper)
        return inside


def where_empty(result: Interval, *arguments: Interval) -> Interval:
    """`result`, made empty wherever an argument is empty."""
    empty = reduce(np.logical_or, (argument.empty for argument in arguments))
    if not np.any(empty):
        return result
    return Interval(np.where(empty, np.nan, result.lower), np.where(empty, np.nan, result.upper))


def down(values: Array, ulps: int = 1) -> Array:
    """The values moved `ulps` units in the last place towards -inf."""
    for _ in range(ulps):
        values = np.nextafter(values, -np.inf)
    return values


def up(values: Array, ulps: int = 1) -> Array:
    for _ in range(ulps):
        values = np.nextafter(values, np.inf)
    return values


# -- sums ------------------------------------------------------------------------------------------


def _sum_end(a: Array, b: Array, towards: float) -> Array:
    """a + b rounded towards `towards`; exact sums are left alone (Knuth's two-sum gives the error)."""
    total = a + b
    shadow = total - a
    error = (a - (total - shadow)) + (b - shadow)
    exact = (error == 0.0) | np.isinf(a) | np.isinf(b)
    kept = exact | ((error > 0.0) if towards < 0.0 else (error < 0.0))
    result = np.where(kept, total, np.nextafter(total, towards))
    return np.where(np.isnan(result), towards, result)  # inf - inf: nothing is known on that side


def add(*terms: Interval) -> Interval:
    def two(x: Interval, y: Interval) -> Interval:
        return Interval(_sum_end(x.lower, y.lower, -np.inf), _sum_end(x.upper, y.upper, np.inf))

    return reduce(two, terms)


def negate(x: Interval) -> Interval:
    return Interval(-x.upper, -x.lower)


# -- products --------------------------------------------------------------------------------------


def multiply(x: Interval, y: Interval) -> Interval:
    """Product of two intervals; 0 times infinity is 0, as an infinite end is never reached."""
    lows, highs = [], []
    for a in (x.lower, x.upper):
        for b in (y.lower, y.upper):
            zero = (a == 0.0) | (b == 0.0)
            product = np.where(zero, 0.0, a * b)
            exact = zero | np.isinf(a) | np.isinf(b)
            lows.append(np.where(exact, product, down(product)))
            highs.append(np.where(exact, product, up(product)))
    return Interval(reduce(np.minimum, lows), reduce(np.maximum, highs))


def reciprocal(x: Interval) -> Interval:
    """1/x: the whole line where 0 lies inside or x is [0, 0], a half line where 0 is one end."""
    below, above = x.upper <= 0.0, x.lower >= 0.0
    from_upper = np.where(x.upper == 0.0, -np.inf, 1.0 / x.upper)
    from_lower = np.where(x.lower == 0.0, np.inf, 1.0 / x.lower)
    low = np.where(np.isinf(x.upper), np.where(x.upper > 0.0, 0.0, -0.0), down(from_upper))
    high = np.where(np.isinf(x.lower), 0.0, up(from_lower))
    # one-sided intervals do not cross zero by rounding
    low = np.where(above, np.maximum(low, 0.0), low)
    high = np.where(below, np.minimum(high, 0.0), high)
    whole = ~(below | above) | ((x.lower == 0.0) & (x.upper == 0.0))
    return Interval(np.where(whole, -np.inf, low), np.where(whole, np.inf, high))


def divide(x: Interval, y: Interval) -> Interval:
    finite = (y.lower > 0.0) | (y.upper < 0.0)
    for end in (x.lower, x.upper, y.lower, y.upper):
        finite = finite & np.isfinite(end)
    general = multiply(x, reciprocal(y))
    if not np.any(finite):
        return _undefined_quotient(x, y, general)
    lows, highs = [], []
    for a in (x.lower, x.upper):
        for b in (y.lower, y.upper):
            quotient = a / b
            lows.append(np.where(a == 0.0, 0.0, down(quotient)))
            highs.append(np.where(a == 0.0, 0.0, up(quotient)))
    low = np.where(finite, reduce(np.minimum, lows), general.lower)
    high = np.where(finite, reduce(np.maximum, highs), general.upper)
    return _undefined_quotient(x, y, Interval(low, high))


def _undefined_quotient(x: Interval, y: Interval, result: Interval) -> Interval:
    """Division by exactly 0 has no finite value: the whole line, which holds both infinities."""
    zero = (y.lower == 0.0) & (y.upper == 0.0)
    return Interval(np.where(zero, -np.inf, result.lower), np.where(zero, np.inf, result.upper))


# -- powers ----------------------------------------------------------------------------------------


def power(x: Interval, y: Interval) -> Interval:
    """x^y: whole exponents over the whole line, others where the base is not negative."""
    whole = (y.lower == y.upper) & (np.floor(y.lower) == y.lower) & np.isfinite(y.lower)
    if np.all(whole):
        return _whole_power(x, y.lower)
    result = _real_power(x, y)
    if np.any(whole):
        exact = _whole_power(x, np.where(whole, y.lower, 1.0))
        result = Interval(
            np.where(whole, exact.lower, result.lower), np.where(whole, exact.upper, result.upper)
        )
    return result


def _pow(base: Array, exponent: Array) -> tuple[Array, Array]:
    """Lower and upper bound of base**exponent; 0, 1 and infinite ends are exact."""
    value: Array = np.power(base, exponent)
    exact = (base == 0.0) | (np.abs(base) == 1.0) | np.isinf(base) | (exponent == 0.0) | (exponent == 1.0)
    low, high = down(value, 4), up(value, 4)
    low = np.where(value >= 0.0, np.maximum(low, 0.0), low)
    high = np.where(value < 0.0, np.minimum(high, 0.0), high)
    return np.where(exact, value, low), np.where(exact, value, high)


def _whole_power(x: Interval, n: Array) -> Interval:
    base_low, base_high = x.lower + 0.0, x.upper + 0.0  # turns -0.0 into 0.0
    at_low, at_high = _pow(base_low, n), _pow(base_high, n)
    inside = (base_low < 0.0) & (base_high > 0.0)
    touches = (base_low <= 0.0) & (base_high >= 0.0)
    even = np.fmod(n, 2.0) == 0.0
    ends_low = np.minimum(at_low[0], at_high[0])
    ends_high = np.maximum(at_low[1], at_high[1])
    even_low = np.where(touches & (n > 0.0), 0.0, ends_low)
    even_high = np.where(touches & (n < 0.0), np.inf, ends_high)
    # odd, negative exponent: at a zero end the branch inside the interval counts
    from_high = np.where((n < 0.0) & (base_high == 0.0), -np.inf, at_high[0])
    odd_low = np.where(n > 0.0, at_low[0], np.where(inside, -np.inf, from_high))
    odd_high = np.where(n > 0.0, at_high[1], np.where(inside, np.inf, at_low[1]))
    low, high = np.where(even, even_low, odd_low), np.where(even, even_high, odd_high)
    pole = (n < 0.0) & (base_low == 0.0) & (base_high == 0.0)
    low, high = np.where(pole, -np.inf, low), np.where(pole, np.inf, high)
    return Interval(np.where(n == 0.0, 1.0, low), np.where(n == 0.0, 1.0, high))


def _real_power(x: Interval, y: Interval) -> Interval:
    """Base cut to x >= 0, where exp(y log x) is bilinear in (y, log x): the extremes lie at the corners."""
    positive = _corners(np.maximum(x.lower, 0.0) + 0.0, x.upper + 0.0, y, x.upper >= 0.0)
    # a negative base has values at whole exponents only, of either sign
    holds_whole = np.ceil(y.lower) <= np.floor(y.upper)
    negative = (x.lower < 0.0) & holds_whole
    if not np.any(negative):
        return positive
    largest = np.maximum(-x.upper, 0.0) + 0.0
    mirrored = _corners(largest, -x.lower, y, negative)
    return hull(positive, Interval(np.where(negative, -mirrored.upper, np.nan), mirrored.upper))


def _corners(low: Array, high: Array, y: Interval, defined: Mask) -> Interval:
    values = [_pow(a, b) for a in (low, high) for b in (y.lower, y.upper)]
    return Interval(
        np.where(defined, reduce(np.minimum, [value[0] for value in values]), np.nan),
        np.where(defined, reduce(np.maximum, [value[1] for value in values]), np.nan),
    )


# -- order, conditions -----------------------------------------------------------------------------


def hull(*parts: Interval) -> Interval:
    """The smallest interval that holds all; empty ones count for nothing."""
    return Interval(
        reduce(np.fmin, [part.lower for part in parts]), reduce(np.fmax, [part.upper for part in parts])
    )


def _condition(certain: Any, possible: Any) -> Interval:
    return Interval(np.where(certain, 1.0, 0.0), np.where(possible, 1.0, 0.0))


def _less(x: Interval, y: Interval) -> Interval:
    return _condition(x.upper < y.lower, x.lower < y.upper)


def _less_equal(x: Interval, y: Interval) -> Interval:
    return _condition(x.upper <= y.lower, x.lower <= y.upper)


def _equal(x: Interval, y: Interval) -> Interval:
    points = (x.lower == x.upper) & (y.lower == y.upper) & (x.lower == y.lower)
    return _condition(points, (x.lower <= y.upper) & (y.lower <= x.upper))


def _not(x: Interval) -> Interval:
    return Interval(1.0 - x.upper, 1.0 - x.lower)


def minimum(*parts: Interval) -> Interval:
    return Interval(
        reduce(np.minimum, [part.lower for part in parts]), reduce(np.minimum, [part.upper for part in parts])
    )


def maximum(*parts: Interval) -> Interval:
    return Interval(
        reduce(np.maximum, [part.lower for part in parts]), reduce(np.maximum, [part.upper for part in parts])
    )


def _if(condition: Interval, first: Interval, second: Interval) -> Interval:
    """The branch where the condition is decided, the hull of both where it is not."""
    both = hull(first, second)
    yes, no = condition.lower == 1.0, condition.upper == 0.0
    low = np.where(yes, first.lower, np.where(no, second.lower, both.lower))
    high = np.where(yes, first.upper, np.where(no, second.upper, both.upper))
    empty = condition.empty
    return Interval(np.where(empty, np.nan, low), np.where(empty, np.nan, high))


ARITHMETIC: dict[str, Callable[..., Interval]] = {
    "add": add,
    "negate": negate,
    "divide": divide,
    "power": power,
    "less": _less,
    "less_equal": _less_equal,
    "greater": lambda x, y: _less(y, x),
    "greater_equal": lambda x, y: _less_equal(y, x),
    "equal": _equal,
    "not_equal": lambda x, y: _not(_equal(x, y)),
    "and": minimum,
    "or": maximum,
    "not": _not,
    "if": _if,
    "min": minimum,
    "max": maximum,
}
