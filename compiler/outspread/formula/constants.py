"""Values of operators on plain numbers, in double precision; it leaves arrays to `evaluate`.

Shared by the reader (which refuses constant parts without a finite value) and by `folding`.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence


def _power(base: float, exponent: float) -> float:
    if base == 0.0 and exponent < 0.0:
        raise ZeroDivisionError
    return math.pow(base, exponent)


def _log(x: float) -> float:
    return math.log(x)


_VALUES: dict[str, Callable[..., float]] = {
    "add": lambda *v: sum(v[1:], v[0]),
    "multiply": lambda *v: math.prod(v[1:], start=v[0]),
    "divide": lambda a, b: a / b,
    "power": _power,
    "negate": lambda a: -a,
    "sqrt": math.sqrt,
    "exp": math.exp,
    "log": _log,
    "log10": math.log10,
    "abs": abs,
    "sign": lambda a: 0.0 if a == 0.0 else math.copysign(1.0, a),
    "min": lambda *v: min(v),
    "max": lambda *v: max(v),
    "hypot": math.hypot,
    "sin": math.sin,
    "cos": math.cos,
    "tan": math.tan,
    "asin": math.asin,
    "acos": math.acos,
    "atan": math.atan,
    "atan2": math.atan2,
    "sinh": math.sinh,
    "cosh": math.cosh,
    "tanh": math.tanh,
    "erf": math.erf,
    "gamma": math.gamma,
    "floor": lambda a: float(math.floor(a)),
    "ceil": lambda a: float(math.ceil(a)),
    "decibel": lambda a: 10.0 * math.log10(a),
    "from_decibel": lambda a: math.pow(10.0, a / 10.0),
}

_TRUTHS: dict[str, Callable[..., bool]] = {
    "less": lambda a, b: a < b,
    "less_equal": lambda a, b: a <= b,
    "greater": lambda a, b: a > b,
    "greater_equal": lambda a, b: a >= b,
    "equal": lambda a, b: a == b,
    "not_equal": lambda a, b: a != b,
}


class NoValue(Exception):
    """A constant expression has no finite value; the text says why."""


def constant_value(operator: str, arguments: Sequence[float]) -> float | None:
    """Value of a numeric operator on finite numbers; None for operators that have no scalar form here.

    Raises NoValue where the result is not a finite number (1/0, sqrt(-1), 9^9^9).
    """
    function = _VALUES.get(operator)
    if function is None:
        return None
    try:
        value = float(function(*arguments))
    except ZeroDivisionError:
        raise NoValue("divides by zero") from None
    except OverflowError:
        raise NoValue("is too large for a number (the limit is about 1.8e308)") from None
    except ValueError:
        raise NoValue("is not a real number") from None
    if math.isinf(value):
        raise NoValue("is too large for a number (the limit is about 1.8e308)")
    if math.isnan(value):
        raise NoValue("is not a real number")
    return value


def constant_truth(operator: str, left: float, right: float) -> bool:
    """Truth of a comparison of two numbers."""
    return _TRUTHS[operator](left, right)
