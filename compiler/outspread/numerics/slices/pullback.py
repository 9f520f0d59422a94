"""Inverse images of sets under one operation of a formula, the other operand held fixed.

pull(operator)(target, ...) returns where the changing operand must lie for the result to lie in the target.
End points carry their derivatives along by the chain rule. Every branch of a many-to-one operation
(even powers, abs, reciprocals, sines) is one more row of intervals.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import numpy.typing as npt

from outspread.errors import DerivationError
from outspread.numerics import sets
from outspread.numerics.sets import Array, Sets

Function = Callable[[Array], Array]
HALF_PI = np.pi / 2
MOST_BRANCHES = 20_000


class TooManyBranches(DerivationError):
    """A periodic function runs through more periods than can be followed one by one."""

    def __init__(self) -> None:
        super().__init__(
            f"a sine, cosine or tangent has more than {MOST_BRANCHES:,} periods; limit its argument, "
            "for example by `truncate`"
        )


def monotone(
    target: Sets,
    inverse: Function,
    slope: Function,
    rising: npt.NDArray[np.bool_] | bool = True,
    low: float = -np.inf,
    high: float = np.inf,
) -> Sets:
    """Inverse image under a monotone operation with range [low, high]; `slope`: the inverse's derivative."""
    if low > -np.inf or high < np.inf:
        target = sets.clip(target, low, high)
    full = target.lower <= target.upper
    lower, upper = inverse(target.lower), inverse(target.upper)
    lower_rate = np.where(target.lower_rate == 0, 0.0, slope(target.lower) * target.lower_rate)
    upper_rate = np.where(target.upper_rate == 0, 0.0, slope(target.upper) * target.upper_rate)
    up = np.broadcast_to(np.asarray(rising), lower.shape)
    full = full & ~np.isnan(lower) & ~np.isnan(upper)
    return Sets(
        np.where(full, np.where(up, lower, upper), np.inf),
        np.where(full, np.where(up, upper, lower), -np.inf),
        np.where(full, np.where(up, lower_rate, upper_rate), 0.0),
        np.where(full, np.where(up, upper_rate, lower_rate), 0.0),
    )


def mirrored(target: Sets) -> Sets:
    """The sets and their mirror images at 0, for even operations; the sets lie in [0, inf)."""
    return sets.stack([target, Sets(-target.upper, -target.lower, -target.upper_rate, -target.lower_rate)])


def _constant(target: Sets, value: Array | float) -> npt.NDArray[np.bool_]:
    """Whether the value lies in the target, for each problem."""
    inside = (target.lower <= value) & (value <= target.upper)
    return np.asarray(inside.any(axis=0), bool)


def _or_all(condition: npt.NDArray[np.bool_], inside: npt.NDArray[np.bool_], otherwise: Sets) -> Sets:
    """`otherwise`, but everything (or nothing) where the operation is constant (`condition`)."""
    if not condition.any():
        return otherwise
    whole = sets.where(condition & inside, sets.everything(otherwise.count))
    return sets.stack([sets.where(~condition, otherwise), whole])


def negate(target: Sets) -> Sets:
    return Sets(-target.upper, -target.lower, -target.upper_rate, -target.lower_rate)


def shift(target: Sets, other: Array) -> Sets:
    """v + other in target."""
    return monotone(target, lambda t: t - other, lambda t: np.ones_like(t))


def scale(target: Sets, other: Array) -> Sets:
    """v * other in target."""
    moved = monotone(target, lambda t: t / other, lambda t: 1 / other + 0 * t, other > 0)
    return _or_all(other == 0, _constant(target, 0.0), sets.where(other != 0, moved))


def divide_by(target: Sets, other: Array) -> Sets:
    """v / other in target."""
    return sets.where(other != 0, monotone(target, lambda t: t * other, lambda t: other + 0 * t, other > 0))


def divide_into(target: Sets, other: Array) -> Sets:
    """other / v in target."""
    parts = []
    for sign, low, high in ((1.0, 0.0, np.inf), (-1.0, -np.inf, 0.0)):

        def inverse(t: Array, sign: float = sign) -> Array:
            return other / np.where(t == 0, sign * 0.0, t)

        part = monotone(target, inverse, lambda t: -other / t**2, other < 0, low, high)
        parts.append(sets.where(other != 0, part))
    return _or_all(other == 0, _constant(target, 0.0), sets.stack(parts))


def power_of(target: Sets, exponent: Array) -> Sets:
    """v ^ exponent in target, for v >= 0 and any real exponent (each problem may have its own)."""
    moved = monotone(
        target,
        lambda t: t ** (1 / exponent),
        lambda t: t ** (1 / exponent - 1) / exponent,
        exponent > 0,
        0.0,
    )
    return _or_all(exponent == 0, _constant(target, 1.0), sets.where(exponent != 0, moved))


def integer_power(target: Sets, exponent: int) -> Sets:
    """v ^ exponent in target for a whole exponent and v of either sign."""
    if exponent == 0:
        return sets.where(_constant(target, 1.0), sets.everything(target.count))
    if exponent < 0:
        return integer_power(divide_into(target, np.ones(target.count)), -exponent)
    if exponent == 1:
        return target
    root = np.sqrt if exponent == 2 else np.cbrt if exponent == 3 else None

    def inverse(t: Array) -> Array:
        if root is not None:
            return np.asarray(root(t))
        return np.sign(t) * np.abs(t) ** (1 / exponent)

    def slope(t: Array) -> Array:
        return np.abs(t) ** (1 / exponent - 1) / exponent

    if exponent % 2:
        return monotone(target, inverse, slope)
    return mirrored(monotone(target, inverse, slope, True, 0.0))


def exponent_of(target: Sets, base: Array) -> Sets:
    """base ^ v in target, base > 0."""
    log_base = np.log(base)
    moved = monotone(target, lambda t: np.log(t) / log_base, lambda t: 1 / (t * log_base), log_base > 0, 0.0)
    usable = (base > 0) & (base != 1)
    return _or_all(base == 1, _constant(target, 1.0), sets.where(usable, moved))


def absolute(target: Sets) -> Sets:
    return mirrored(sets.clip(target, 0.0, np.inf))


def sign(target: Sets) -> Sets:
    count = target.count
    zero, least, infinite = (np.full((1, count), value) for value in (0.0, 5e-324, np.inf))
    # 0 by itself has a sign of its own, which matters where what is below has a step there
    return sets.stack([
        sets.where(_constant(target, -1.0), sets.make(-infinite, -least)),
        sets.where(_constant(target, 0.0), sets.make(zero, least)),
        sets.where(_constant(target, 1.0), sets.make(least, infinite)),
    ])  # fmt: skip


def floor(target: Sets) -> Sets:
    lower, upper = np.ceil(target.lower), np.floor(target.upper)
    full = (target.lower <= target.upper) & (lower <= upper)
    # upper + 1 itself is outside, which matters where what is below can jump to it
    return sets.make(np.where(full, lower, np.inf), np.where(full, np.nextafter(upper + 1, -np.inf), -np.inf))


def ceil(target: Sets) -> Sets:
    return negate(floor(negate(target)))


def maximum(target: Sets, other: Array) -> Sets:
    """max(v, other) in target."""
    possible, reached = other <= target.upper, other >= target.lower
    return Sets(
        np.where(possible, np.where(reached, -np.inf, target.lower), np.inf),
        np.where(possible, target.upper, -np.inf),
        np.where(possible & ~reached, target.lower_rate, 0.0),
        np.where(possible, target.upper_rate, 0.0),
    )


def minimum(target: Sets, other: Array) -> Sets:
    return negate(maximum(negate(target), -other))


def hypotenuse(target: Sets, other: Array) -> Sets:
    """hypot(v, other) in target."""
    target = sets.clip(target, 0.0, np.inf)
    size = np.abs(other)
    reached = target.lower <= size

    def leg(t: Array) -> Array:
        return np.sqrt(np.maximum(t - size, 0)) * np.sqrt(t + size)

    full = (target.upper >= size) & (target.lower <= target.upper)
    upper = leg(target.upper)
    lower = np.where(reached, 0.0, leg(target.lower))
    return mirrored(
        Sets(
            np.where(full, lower, np.inf),
            np.where(full, upper, -np.inf),
            np.where(
                full & ~reached & (target.lower_rate != 0), target.lower / lower * target.lower_rate, 0.0
            ),
            np.where(full & (target.upper_rate != 0), target.upper / upper * target.upper_rate, 0.0),
        )
    )


def direction(target: Sets, other: Array) -> Sets:
    """v / hypot(v, other) in target: the cosine of the angle to v's axis."""
    leg = np.abs(other)

    def inverse(t: Array) -> Array:
        return leg * t / np.sqrt((1 - t) * (1 + t))

    def slope(t: Array) -> Array:
        return np.asarray(leg / ((1 - t) * (1 + t)) ** 1.5, float)

    slanted = monotone(target, inverse, slope, True, -1.0, 1.0)
    if not (leg == 0).any():
        return slanted
    return sets.stack([sets.where(leg > 0, slanted), sets.where(leg == 0, sign(target))])


def _periods(low: Array, high: Array, period: float) -> range:
    first, last = np.nanmin(low), np.nanmax(high)
    if not (np.isfinite(first) and np.isfinite(last)) or (last - first) / period > MOST_BRANCHES:
        raise TooManyBranches
    return range(int(np.floor(first / period)) - 1, int(np.ceil(last / period)) + 2)


def _repeated(parts: list[Sets], low: Array, high: Array, period: float) -> Sets:
    rows = []
    for k in _periods(low, high, period):
        for part in parts:
            moved = Sets(part.lower + k * period, part.upper + k * period, part.lower_rate, part.upper_rate)
            rows.append(sets.clip(moved, low, high))
    return sets.compact(sets.stack(rows))


def sine(target: Sets, low: Array, high: Array) -> Sets:
    """sin(v) in target for v in [low, high]."""
    base = monotone(target, np.arcsin, lambda t: 1 / np.sqrt((1 - t) * (1 + t)), True, -1.0, 1.0)
    other = Sets(np.pi - base.upper, np.pi - base.lower, -base.upper_rate, -base.lower_rate)
    return _repeated([base, other], low, high, 2 * np.pi)


def cosine(target: Sets, low: Array, high: Array) -> Sets:
    base = monotone(target, np.arccos, lambda t: -1 / np.sqrt((1 - t) * (1 + t)), False, -1.0, 1.0)
    return _repeated([base, negate(base)], low, high, 2 * np.pi)


def tangent(target: Sets, low: Array, high: Array) -> Sets:
    base = monotone(target, np.arctan, lambda t: 1 / (1 + t**2))
    return _repeated([base], low, high, np.pi)


def _tan(t: Array) -> Array:
    return np.where(np.abs(t) >= HALF_PI, np.copysign(np.inf, t), np.tan(t))


def angle_of_rise(target: Sets, run: Array) -> Sets:
    """atan2(v, run) in target."""
    ahead = run > 0

    def inverse(t: Array) -> Array:
        value = run * np.tan(t)
        steep = np.abs(np.abs(t) - HALF_PI) < 1e-15
        return np.where(
            steep, np.copysign(np.inf, t), np.where(t == 0, 0.0, np.where(np.abs(t) >= np.pi, 0.0, value))
        )

    def slope(t: Array) -> Array:
        return np.asarray(run / np.cos(t) ** 2, float)

    front = sets.where(ahead, monotone(target, inverse, slope, True, -HALF_PI, HALF_PI))
    back_up = sets.where(run < 0, monotone(target, inverse, slope, False, HALF_PI, np.pi))
    back_down = sets.where(run < 0, monotone(target, inverse, slope, False, -np.pi, -HALF_PI))
    return sets.stack([front, back_up, back_down])


def angle_of_run(target: Sets, rise: Array) -> Sets:
    """atan2(rise, v) in target."""

    def inverse(t: Array) -> Array:
        value = rise * np.cos(t) / np.sin(t)
        straight = (t == 0) | (np.abs(t) >= np.pi)
        return np.where(straight, np.where(t == 0, np.inf, -np.inf), value)

    def slope(t: Array) -> Array:
        return np.asarray(-rise / np.sin(t) ** 2, float)

    up = sets.where(rise > 0, monotone(target, inverse, slope, False, 0.0, np.pi))
    down = sets.where(rise < 0, monotone(target, inverse, slope, True, -np.pi, 0.0))
    return sets.stack([up, down])


def _erf_inverse(t: Array) -> Array:
    from scipy.special import erfinv

    return np.asarray(erfinv(t))


#: operations of one operand that are monotone on their domain: inverse, its slope, rising, range
MONOTONE: dict[str, tuple[Function, Function, bool, float, float]] = {
    "sqrt": (lambda t: t * t, lambda t: 2 * t, True, 0.0, np.inf),
    "exp": (np.log, lambda t: 1 / t, True, 0.0, np.inf),
    "log": (np.exp, np.exp, True, -np.inf, np.inf),
    "log10": (lambda t: 10.0**t, lambda t: np.log(10) * 10.0**t, True, -np.inf, np.inf),
    "decibel": (
        lambda t: 10.0 ** (t / 10), lambda t: np.log(10) / 10 * 10.0 ** (t / 10), True, -np.inf, np.inf
    ),
    "from_decibel": (lambda t: 10 * np.log10(t), lambda t: 10 / (np.log(10) * t), True, 0.0, np.inf),
    "asin": (np.sin, np.cos, True, -HALF_PI, HALF_PI),
    "acos": (np.cos, lambda t: -np.sin(t), False, 0.0, np.pi),
    "atan": (_tan, lambda t: 1 / np.cos(t) ** 2, True, -HALF_PI, HALF_PI),
    "sinh": (np.arcsinh, lambda t: 1 / np.hypot(1, t), True, -np.inf, np.inf),
    "tanh": (np.arctanh, lambda t: 1 / ((1 - t) * (1 + t)), True, -1.0, 1.0),
    "erf": (_erf_inverse, lambda t: np.sqrt(np.pi) / 2 * np.exp(_erf_inverse(t) ** 2), True, -1.0, 1.0),
}  # fmt: skip

#: further operations of one operand
UNARY: dict[str, Callable[[Sets], Sets]] = {
    "negate": negate,
    "abs": absolute,
    "hypot": absolute,
    "min": lambda target: target,
    "max": lambda target: target,
    "sign": sign,
    "floor": floor,
    "ceil": ceil,
    "cosh": lambda target: mirrored(
        monotone(target, np.arccosh, lambda t: 1 / np.sqrt((t - 1) * (t + 1)), True, 1.0)
    ),
}

PERIODIC: dict[str, Callable[[Sets, Array, Array], Sets]] = {"sin": sine, "cos": cosine, "tan": tangent}
