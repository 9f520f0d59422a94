"""Encloses the range of an expression over boxes by outward-rounded interval arithmetic, vectorised.

It encloses ranges only; splitting boxes for tighter ranges is for the caller.

Rounding (assumptions): + - * / and sqrt are correctly rounded by IEEE 754 and are widened by at most one
unit in the last place; elementary functions of numpy's mathematical library are taken to be right within 4
units in the last place, erf within 8, gamma and polygamma of scipy within 1e-12 relative. Numbers in the
formula are taken as the doubles they are stored as.
Reference: Moore, Kearfott, Cloud, Introduction to Interval Analysis (SIAM 2009), chapters 2 to 5.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from functools import reduce

import numpy as np

from outspread.formula.interval_arithmetic import ARITHMETIC, Interval, multiply, power, where_empty
from outspread.formula.interval_functions import FUNCTIONS
from outspread.formula.linear import Operation, linearise
from outspread.formula.tree import Node

__all__ = ["Interval", "enclose"]

_OPERATORS: dict[str, Callable[..., Interval]] = {**ARITHMETIC, **FUNCTIONS}


def enclose(node: Node, box: Mapping[str, Interval]) -> Interval:
    """An interval that contains every value of `node` over the box, elementwise over broadcasting arrays.

    Points at which a part of the expression has no finite value (square root of a negative number, 1/0) are
    left out; an empty interval means that there are no others in the box. Infinite ends are allowed. A
    condition gives a part of [0, 1]. Raises KeyError for a name without an interval.
    """
    found: list[Interval] = []
    with np.errstate(all="ignore"):
        for operation in linearise(node):
            found.append(_value(operation, found, box))
    result = found[-1]
    shape = np.broadcast_shapes(
        result.lower.shape, result.upper.shape, *(part.lower.shape for part in box.values())
    )
    return Interval(np.broadcast_to(result.lower, shape).copy(), np.broadcast_to(result.upper, shape).copy())


def _value(operation: Operation, found: list[Interval], box: Mapping[str, Interval]) -> Interval:
    if operation.operator == "number":
        return Interval.of(operation.value)
    if operation.operator == "name":
        return box[operation.name]
    if operation.operator == "multiply":
        return _product(operation.arguments, found)
    arguments = [found[index] for index in operation.arguments]
    result = _OPERATORS[operation.operator](*arguments)
    # an empty branch of `if` does not make the whole empty
    return result if operation.operator == "if" else where_empty(result, *arguments)


def _product(slots: tuple[int, ...], found: list[Interval]) -> Interval:
    """A product in which a factor that occurs k times is raised to the power k: x*x is never negative."""
    factors: list[Interval] = []
    for slot in dict.fromkeys(slots):
        count = slots.count(slot)
        factor = found[slot]
        factors.append(factor if count == 1 else power(factor, Interval.of(float(count))))
    result = reduce(multiply, factors)
    return where_empty(result, *(found[slot] for slot in slots))
