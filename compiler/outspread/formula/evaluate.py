"""Compiles an expression into a function of numpy arrays; it leaves constant folding to `folding`.

Points outside a function's domain give nan, poles give infinities, without a warning: what such a value
means is for the caller to judge.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from functools import reduce
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from outspread.formula.folding import fold
from outspread.formula.linear import Operation, linearise
from outspread.formula.tree import Node

__all__ = ["compile_numpy", "fold"]

Array = NDArray[Any]  # float64 for numbers, bool for conditions
Function = Callable[..., Array]


def _reduced(function: Function) -> Function:
    return lambda *arguments: reduce(function, arguments)


def _hypot(*arguments: Array) -> Array:
    return reduce(np.hypot, arguments) if len(arguments) > 1 else np.abs(arguments[0])


def _power(base: Array, exponent: Array) -> Array:
    return np.asarray(np.power(base, exponent))


_FUNCTIONS: dict[str, Function] = {
    "add": _reduced(np.add),
    "multiply": _reduced(np.multiply),
    "divide": np.divide,
    "power": _power,
    "negate": np.negative,
    "less": np.less,
    "less_equal": np.less_equal,
    "greater": np.greater,
    "greater_equal": np.greater_equal,
    "equal": np.equal,
    "not_equal": np.not_equal,
    "and": _reduced(np.logical_and),
    "or": _reduced(np.logical_or),
    "not": np.logical_not,
    "if": np.where,
    "sqrt": np.sqrt,
    "exp": np.exp,
    "log": np.log,
    "log10": np.log10,
    "abs": np.abs,
    "sign": np.sign,
    "min": _reduced(np.minimum),
    "max": _reduced(np.maximum),
    "hypot": _hypot,
    "sin": np.sin,
    "cos": np.cos,
    "tan": np.tan,
    "asin": np.arcsin,
    "acos": np.arccos,
    "atan": np.arctan,
    # formulas know no sign of zero: atan2(0, -0.0) is 0, not pi
    "atan2": lambda y, x: np.arctan2(y + 0.0, x + 0.0),
    "sinh": np.sinh,
    "cosh": np.cosh,
    "tanh": np.tanh,
    "floor": np.floor,
    "ceil": np.ceil,
    "decibel": lambda x: 10.0 * np.log10(x),
    "from_decibel": lambda x: np.power(10.0, x / 10.0),
}

# Whole powers by multiplication: exact to the last rounding for the square, and faster than pow.
_WHOLE_POWERS: dict[float, Function] = {
    1.0: lambda x: x,
    2.0: lambda x: x * x,
    3.0: lambda x: x * x * x,
    4.0: lambda x: np.square(x * x),
    -1.0: lambda x: np.divide(1.0, x),
    -2.0: lambda x: np.divide(1.0, x * x),
}


def _function(operator: str) -> Function:
    if operator == "gamma":
        from scipy.special import gamma

        return lambda x: np.asarray(gamma(x))
    if operator == "erf":
        from scipy.special import erf

        return lambda x: np.asarray(erf(x))
    if operator == "polygamma":
        from scipy.special import polygamma

        return lambda n, x: np.asarray(polygamma(n.astype(int), x))
    return _FUNCTIONS[operator]


class _Code:
    """The compiled operations: constants computed once, slots freed after their last use."""

    def __init__(self, node: Node, arguments: Sequence[str]):
        operations = linearise(node)
        place = {name: index for index, name in enumerate(arguments)}
        self.size = len(operations)
        self.constants: dict[int, Array] = {}
        self.loads: list[tuple[int, int]] = []
        self.calls: list[tuple[Function, tuple[int, ...], int, tuple[int, ...]]] = []
        pending: list[tuple[Function, tuple[int, ...], int]] = []
        for slot, operation in enumerate(operations):
            if operation.operator == "number":
                self.constants[slot] = np.asarray(operation.value)
            elif operation.operator == "name":
                self.loads.append((slot, place[operation.name]))
            else:
                function, used = self._call(operation)
                if all(index in self.constants for index in used):
                    with np.errstate(all="ignore"):
                        self.constants[slot] = np.asarray(function(*(self.constants[i] for i in used)))
                else:
                    pending.append((function, used, slot))
        self._free_after_last_use(pending)

    def _call(self, operation: Operation) -> tuple[Function, tuple[int, ...]]:
        """The function and the slots it takes; a whole constant exponent becomes multiplication."""
        if operation.operator == "power":
            exponent = self.constants.get(operation.arguments[1])
            if exponent is not None and float(exponent) in _WHOLE_POWERS:
                return _WHOLE_POWERS[float(exponent)], operation.arguments[:1]
        return _function(operation.operator), operation.arguments

    def _free_after_last_use(self, pending: list[tuple[Function, tuple[int, ...], int]]) -> None:
        seen: set[int] = set(self.constants) | {self.size - 1}
        freed: list[tuple[int, ...]] = []
        for _, used, _ in reversed(pending):
            freed.append(tuple(dict.fromkeys(index for index in used if index not in seen)))
            seen.update(used)
        for (function, used, slot), free in zip(pending, reversed(freed), strict=True):
            self.calls.append((function, used, slot, free))

    def run(self, values: list[Array]) -> Array:
        slots: list[Array | None] = [None] * self.size
        for slot, constant in self.constants.items():
            slots[slot] = constant
        for slot, index in self.loads:
            slots[slot] = values[index]
        with np.errstate(all="ignore"):
            for function, used, slot, free in self.calls:
                slots[slot] = function(*[slots[index] for index in used])
                for index in free:
                    slots[index] = None
        result = slots[-1]
        assert result is not None
        return np.asarray(result)


def compile_numpy(node: Node, arguments: Sequence[str]) -> Callable[..., Array]:
    """A function of arrays, one for each of `arguments` in that order, that computes `node`.

    Arguments are converted to double precision and broadcast against each other; the result has the
    broadcast shape, also where it does not depend on every argument, and is float64 for a number and bool
    for a condition. It is never a view of an argument. Both branches of `if` are computed, one is selected.
    Raises KeyError for a name that is not among `arguments`.
    """
    code = _Code(node, arguments)
    count = len(arguments)

    def function(*given: ArrayLike) -> Array:
        if len(given) != count:
            raise TypeError(f"{count} arguments are wanted ({', '.join(arguments)}), {len(given)} given")
        values = [np.asarray(value, dtype=np.float64) for value in given]
        shape = np.broadcast_shapes(*(value.shape for value in values))
        result = code.run(values)
        if result.shape != shape or any(result is value for value in values):
            result = np.broadcast_to(result, shape).copy()
        return result

    return function
