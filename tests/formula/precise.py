"""Evaluates a formula tree with mpmath at 40 digits: the outside reference of this folder's tests.

mpmath (mpmath.org) supplies every function; `Undefined` is raised where a part has no finite real value.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

from mpmath import mp, mpf

from outspread.formula.tree import Apply, Name, Node, Number


class Undefined(Exception):
    """Not a finite real number, or too large for double precision."""


def _real(value: Any) -> Any:
    if isinstance(value, bool):
        return value
    if isinstance(value, mp.mpc):
        if value.imag != 0:
            raise Undefined
        value = value.real
    if not mp.isfinite(value) or abs(value) > mpf(10) ** 300:
        raise Undefined
    return value


def _power(base: Any, exponent: Any) -> Any:
    if base == 0 and exponent < 0:
        raise Undefined
    if base < 0 and exponent != mp.floor(exponent):
        raise Undefined
    if base != 0 and abs(exponent * mp.log(abs(base))) > 690:
        raise Undefined
    return mp.power(base, exponent)


def _guarded(function: Callable[[Any], Any], limit: float) -> Callable[[Any], Any]:
    def call(x: Any) -> Any:
        if abs(x) > limit:
            raise Undefined
        return function(x)

    return call


FUNCTIONS: dict[str, Callable[..., Any]] = {
    "add": lambda *v: mp.fsum(v), "multiply": lambda *v: mp.fprod(v), "negate": lambda a: -a,
    "power": _power, "less": lambda a, b: bool(a < b), "less_equal": lambda a, b: bool(a <= b),
    "greater": lambda a, b: bool(a > b), "greater_equal": lambda a, b: bool(a >= b),
    "equal": lambda a, b: bool(a == b), "not_equal": lambda a, b: bool(a != b),
    "and": lambda *v: all(v), "or": lambda *v: any(v), "not": lambda a: not a,
    "sqrt": mp.sqrt, "exp": _guarded(mp.exp, 690), "log": mp.log, "log10": mp.log10, "abs": abs,
    "sign": mp.sign,
    "min": min, "max": max, "hypot": lambda *v: mp.sqrt(mp.fsum(a * a for a in v)),
    "sin": _guarded(mp.sin, 1e15), "cos": _guarded(mp.cos, 1e15), "tan": _guarded(mp.tan, 1e15),
    "asin": mp.asin, "acos": mp.acos, "atan": mp.atan, "atan2": mp.atan2, "sinh": _guarded(mp.sinh, 690),
    "cosh": _guarded(mp.cosh, 690), "tanh": mp.tanh, "erf": mp.erf, "gamma": _guarded(mp.gamma, 170),
    "floor": mp.floor, "ceil": mp.ceil, "decibel": lambda a: 10 * mp.log10(a),
    "from_decibel": lambda a: mp.power(10, _guarded(lambda x: x, 3000)(a) / 10),
    "polygamma": lambda n, a: mp.psi(int(n), a),
}  # fmt: skip


def precise(node: Node, values: Mapping[str, Any]) -> Any:
    """The value at 40 digits; only the branch of an `if` that counts is looked at."""
    with mp.workdps(40):
        return value_at(node, values)


def value_at(node: Node, values: Mapping[str, Any]) -> Any:
    """The value at mpmath's present precision."""
    if isinstance(node, Number):
        return mpf(node.value)
    if isinstance(node, Name):
        return mpf(values[node.name])
    assert isinstance(node, Apply)
    if node.operator == "if":
        return value_at(node.arguments[1 if value_at(node.arguments[0], values) else 2], values)
    arguments = [value_at(argument, values) for argument in node.arguments]
    if node.operator == "divide":
        if arguments[1] == 0:
            raise Undefined
        return _real(arguments[0] / arguments[1])
    try:
        return _real(FUNCTIONS[node.operator](*arguments))
    except (ValueError, ZeroDivisionError, OverflowError):
        raise Undefined from None
