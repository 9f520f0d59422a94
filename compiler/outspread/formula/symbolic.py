"""Carries expressions to sympy and back; the algebra itself is for the callers.

sympy is imported when first needed. Numbers travel as exact rationals of their decimal form, pi as pi.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from typing import Any

from outspread.formula.folding import fold
from outspread.formula.linear import postorder
from outspread.formula.tree import Apply, Name, Node, Number, add, multiply

# A rational to a larger power has too many digits to be carried exactly.
_LARGEST_EXACT_EXPONENT = 64


def to_sympy(node: Node, symbols: Mapping[str, Any] | None = None) -> Any:
    """The sympy expression; `symbols` gives the sympy symbol of names, others become real symbols."""
    import sympy

    given = dict(symbols or {})
    builders = _builders()
    made: dict[int, Any] = {}
    for part in postorder(node):
        if isinstance(part, Number):
            made[id(part)] = _number(part)
        elif isinstance(part, Name):
            made[id(part)] = given.setdefault(part.name, sympy.Symbol(part.name, real=True))
        else:
            assert isinstance(part, Apply)
            constant = fold(part) if part.operator == "power" else part
            if isinstance(constant, Number) and _is_large(part.arguments[1]):
                made[id(part)] = sympy.Float(constant.value)
            else:
                made[id(part)] = builders[part.operator](*(made[id(argument)] for argument in part.arguments))
    return made[id(node)]


def _is_large(exponent: Node) -> bool:
    value = fold(exponent)
    return isinstance(value, Number) and abs(value.value) > _LARGEST_EXACT_EXPONENT


def _number(number: Number) -> Any:
    import sympy

    if number.value == math.pi:
        return sympy.pi
    if not math.isfinite(number.value):
        return sympy.oo if number.value > 0 else -sympy.oo if number.value < 0 else sympy.nan
    if number.value.is_integer() and abs(number.value) < 1e15:
        return sympy.Integer(int(number.value))
    return sympy.Rational(repr(number.value))


def _builders() -> dict[str, Callable[..., Any]]:
    import sympy

    return {
        "add": sympy.Add, "multiply": sympy.Mul, "divide": lambda a, b: a / b, "power": sympy.Pow,
        "negate": lambda a: -a, "less": sympy.Lt, "less_equal": sympy.Le, "greater": sympy.Gt,
        "greater_equal": sympy.Ge, "equal": sympy.Eq, "not_equal": sympy.Ne, "and": sympy.And, "or": sympy.Or,
        "not": sympy.Not, "if": lambda c, a, b: sympy.Piecewise((a, c), (b, True)), "sqrt": sympy.sqrt,
        "exp": sympy.exp, "log": sympy.log, "log10": lambda a: sympy.log(a) / sympy.log(10), "abs": sympy.Abs,
        "sign": sympy.sign, "min": sympy.Min, "max": sympy.Max,
        "hypot": lambda *parts: sympy.sqrt(sympy.Add(*(part**2 for part in parts))), "sin": sympy.sin,
        "cos": sympy.cos, "tan": sympy.tan, "asin": sympy.asin, "acos": sympy.acos, "atan": sympy.atan,
        "atan2": sympy.atan2, "sinh": sympy.sinh, "cosh": sympy.cosh, "tanh": sympy.tanh, "erf": sympy.erf,
        "gamma": sympy.gamma, "floor": sympy.floor, "ceil": sympy.ceiling,
        "decibel": lambda a: 10 * sympy.log(a) / sympy.log(10),
        "from_decibel": lambda a: sympy.Integer(10) ** (a / 10), "polygamma": sympy.polygamma,
    }  # fmt: skip


class _NoCounterpart(Exception):
    """An operator of sympy that the tree does not have."""


def from_sympy(expression: Any) -> Node | None:
    """The tree of a sympy expression; None where a part has no counterpart (an integral, a Bessel function).

    Symbols become names. Terms and factors stand in sympy's sorted order, which does not vary between runs.
    """
    try:
        return _back(expression)
    except _NoCounterpart:
        return None


_SIMPLE = {
    "exp": "exp", "Abs": "abs", "sign": "sign", "Min": "min", "Max": "max", "sin": "sin", "cos": "cos",
    "tan": "tan", "asin": "asin", "acos": "acos", "atan": "atan", "atan2": "atan2", "sinh": "sinh",
    "cosh": "cosh", "tanh": "tanh", "erf": "erf", "gamma": "gamma", "floor": "floor", "ceiling": "ceil",
    "log": "log", "polygamma": "polygamma", "StrictLessThan": "less", "LessThan": "less_equal",
    "StrictGreaterThan": "greater", "GreaterThan": "greater_equal", "Equality": "equal",
    "Unequality": "not_equal", "And": "and", "Or": "or", "Not": "not",
}  # fmt: skip
_INVERSES = {"sec": "cos", "csc": "sin", "cot": "tan"}


def _back(expression: Any) -> Node:
    import sympy

    if isinstance(expression, sympy.Symbol):
        return Name(expression.name)
    if isinstance(expression, sympy.Number | sympy.NumberSymbol):
        return _back_number(expression)
    if isinstance(expression, sympy.Add):
        return _back_sum(expression.as_ordered_terms())
    if isinstance(expression, sympy.Mul):
        return _back_product(expression.as_ordered_factors())
    if isinstance(expression, sympy.Pow):
        return _back_power(expression)
    if isinstance(expression, sympy.Piecewise):
        return _back_pieces(expression.args)
    kind = type(expression).__name__
    arguments = tuple(expression.args)
    if kind in ("And", "Or", "Min", "Max"):  # sympy keeps these as sets
        arguments = tuple(sorted(arguments, key=sympy.default_sort_key))
    operator = _SIMPLE.get(kind)
    parts = tuple(_back(argument) for argument in arguments)
    if operator is not None and not (operator == "log" and len(parts) != 1):
        return Apply(operator, parts)
    if kind in _INVERSES:
        return Apply("divide", (Number(1.0), Apply(_INVERSES[kind], parts)))
    if kind == "erfc":
        return add(Number(1.0), Apply("negate", (Apply("erf", parts),)))
    if kind == "factorial":
        return Apply("gamma", (add(*parts, Number(1.0)),))
    raise _NoCounterpart(kind)


def _back_number(number: Any) -> Node:
    import sympy

    if number is sympy.pi:
        return Number(math.pi, "pi")
    if number is sympy.E:
        return Apply("exp", (Number(1.0),))
    value = float(number) if number.is_finite and number.is_real else math.nan
    if not math.isfinite(value):
        raise _NoCounterpart(str(number))
    if value < 0.0:
        return Apply("negate", (_back_number(-number),))
    exact = not number.is_Rational or sympy.Rational(repr(value)) == number
    if exact or number.is_Integer:
        return Number(value)
    return Apply("divide", (Number(float(number.p)), Number(float(number.q))))


def _back_sum(terms: Sequence[Any]) -> Node:
    parts = []
    for term in terms:
        negative = term.could_extract_minus_sign() and not term.is_Add
        parts.append(Apply("negate", (_back(-term),)) if negative else _back(term))
    return add(*parts)


def _back_product(factors: Sequence[Any]) -> Node:
    """Factors with a negative power go below the fraction bar."""
    import sympy

    above, below, negative = [], [], False
    for factor in factors:
        if factor.is_Rational:
            negative ^= bool(factor < 0)
            size = abs(factor)
            above += [_back_number(sympy.Integer(size.p))] if size.p != 1 else []
            below += [_back_number(sympy.Integer(size.q))] if size.q != 1 else []
        elif factor.is_Pow and factor.exp.could_extract_minus_sign():
            below.append(_back(factor.base**-factor.exp))
        else:
            above.append(_back(factor))
    over = multiply(*above) if above else Number(1.0)
    result = Apply("divide", (over, multiply(*below))) if below else over
    return Apply("negate", (result,)) if negative else result


def _back_power(power: Any) -> Node:
    import sympy

    base, exponent = power.base, power.exp
    if exponent == sympy.Rational(1, 2):
        return Apply("sqrt", (_back(base),))
    if exponent.could_extract_minus_sign():
        return Apply("divide", (Number(1.0), _back(base**-exponent)))
    return Apply("power", (_back(base), _back(exponent)))


def _back_pieces(pieces: Sequence[Any]) -> Node:
    import sympy

    value, condition = pieces[-1]
    if condition is not sympy.true:
        raise _NoCounterpart("a Piecewise without a last branch")
    result = _back(value)
    for value, condition in reversed(pieces[:-1]):
        result = Apply("if", (_back(condition), _back(value), result))
    return result
