"""Rewrites a formula to one normal form, so that all spellings of it look alike to the rules.

Sums and products are flattened and collected, constants folded, powers of powers, roots, hypot, decibels,
logarithms of products and exponentials of sums resolved where the inputs' supports allow it ("root" and
"checked_log" stay where it is not known that the argument is positive); a lognormal
input becomes the exponential of its normal score. Products of sums are not multiplied out here, see
`alternatives`. Conditions and piecewise functions other than abs, min and max have no normal form.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from fractions import Fraction

from outspread.formula.tree import Apply, Name, Node, Number
from outspread.laws.law import Law
from outspread.routes.closed_form import exact as ex
from outspread.routes.closed_form.expressions import (
    Expression,
    Function,
    Product,
    Sum,
    Symbol,
    as_sum,
    constant_of,
    factors_of,
    from_factors,
    number,
    scaled_term,
    simplest,
)

INF = float("inf")
_OPAQUE = ("sin", "cos", "tan", "asin", "acos", "atan", "sinh", "cosh", "tanh", "erf")


class NoNormalForm(Exception):
    """The formula (or a part of it) cannot be written as sums, products and functions of the inputs."""


class NormalForm:
    """The rewriting rules for given laws of the inputs, whose supports decide which rules are valid."""

    def __init__(self, laws: Mapping[str, Law]):
        self._laws = laws
        self._readers: dict[str, Callable[[list[Expression]], Expression]] = {
            "add": self.add,
            "multiply": lambda args: self.multiply(*args),
            "negate": lambda args: self.scale(args[0], -ex.ONE),
            "divide": lambda args: self.multiply(args[0], self.power(args[1], -ex.ONE)),
            "power": lambda args: self._power_of(args[0], args[1]),
            "sqrt": lambda args: self.power(args[0], ex.HALF),
            "hypot": lambda args: self.power(self.add([self.power(a, Fraction(2)) for a in args]), ex.HALF),
            "exp": lambda args: self.exp(args[0]),
            "log": lambda args: self.log(args[0]),
            "log10": lambda args: self.scale(self.log(args[0]), 1 / ex.LOG_TEN),
            "decibel": lambda args: self.scale(self.log(args[0]), 10 / ex.LOG_TEN),
            "from_decibel": lambda args: self.exp(self.scale(args[0], ex.LOG_TEN / 10)),
            "abs": lambda args: self.absolute(args[0]),
            "min": lambda args: self.extreme("min", args),
            "max": lambda args: self.extreme("max", args),
        }

    def read(self, node: Node) -> Expression:
        """The normal form of a formula; raises NoNormalForm, ArithmeticError where a constant overflows."""
        if isinstance(node, Number):
            return number(ex.exact(node.value))
        if isinstance(node, Name):
            return self.symbol(node.name)
        if isinstance(node, Apply):
            arguments = [self.read(argument) for argument in node.arguments]
            if node.operator in self._readers:
                return self._readers[node.operator](arguments)
            if node.operator in _OPAQUE and len(arguments) == 1 and arguments[0].symbols:
                return Function(node.operator, (arguments[0],))
        raise NoNormalForm

    def symbol(self, name: str) -> Expression:
        law = self._laws.get(name)
        if law is None:
            raise NoNormalForm
        if law.family == "lognormal":
            return self.exp(Symbol(name, score=True))
        return Symbol(name)

    def add(self, parts: list[Expression]) -> Expression:
        constant, terms = ex.ZERO, dict[Expression, Fraction]()
        for part in map(as_sum, parts):
            constant += part.constant
            for term, coefficient in part.terms:
                terms[term] = terms.get(term, ex.ZERO) + coefficient
        return simplest(ex.trimmed(constant), {term: ex.trimmed(c) for term, c in terms.items()})

    def scale(self, expression: Expression, factor: Fraction) -> Expression:
        whole = as_sum(expression)
        terms = {term: ex.trimmed(factor * c) for term, c in whole.terms}
        return simplest(ex.trimmed(factor * whole.constant), terms)

    def multiply(self, *parts: Expression) -> Expression:
        coefficient, varying = ex.ONE, list[Expression]()
        for part in parts:
            constant = constant_of(part)
            if constant is None:
                varying.append(part)
            else:
                coefficient = ex.trimmed(coefficient * constant)
        if len(varying) < 2:
            return self.scale(varying[0], coefficient) if varying else number(coefficient)
        factors = dict[Expression, Fraction]()
        for part in varying:
            multiplier, term = self._monic(part)
            coefficient = ex.trimmed(coefficient * multiplier)
            for base, exponent in factors_of(term):
                factors[base] = factors.get(base, ex.ZERO) + exponent
        return self.scale(from_factors(self._without_abs(factors)), coefficient)

    def _without_abs(self, factors: dict[Expression, Fraction]) -> dict[Expression, Fraction]:
        """|u|^p with even p is u^p."""
        result = dict[Expression, Fraction]()
        for base, exponent in factors.items():
            if isinstance(base, Function) and base.operator == "abs" and ex.is_even(exponent):
                multiplier, base = self._monic(base.arguments[0])
                if multiplier != 1:
                    raise NoNormalForm
            result[base] = result.get(base, ex.ZERO) + exponent
        return result

    def _monic(self, expression: Expression) -> tuple[Fraction, Expression]:
        """(coefficient, term) with expression = coefficient*term; a sum of several terms is divided by its
        first coefficient, so that multiples of one sum are powers of one base. A sum of one sign is made
        one that is never negative."""
        single = scaled_term(expression)
        if single is not None:
            return single
        first = as_sum(expression).terms[0][1]
        lower, upper = self.bounds(expression)
        if lower >= 0 or upper <= 0:
            first = abs(first) if lower >= 0 else -abs(first)
        return first, self.scale(expression, 1 / first)

    def power(self, base: Expression, exponent: Fraction) -> Expression:
        if exponent == 1:
            return base
        constant = constant_of(base)
        if exponent == 0 or constant is not None:
            return number(ex.power(constant if constant is not None else ex.ONE, exponent))
        if exponent < 0:
            self._never_zero(base)
        coefficient, term = self._monic(base)
        if ex.is_whole(exponent):
            raised = from_factors(self._without_abs({b: p * exponent for b, p in factors_of(term)}))
            return self.scale(raised, ex.power(coefficient, exponent))
        if self.bounds(base)[0] < 0:
            return Function("root", (base, number(exponent)))  # no rule may assume that it is defined
        if coefficient < 0:
            coefficient, term = -coefficient, self.scale(term, -ex.ONE)
        return self.scale(self._root_of(term, exponent), ex.power(coefficient, exponent))

    def _never_zero(self, base: Expression) -> None:
        """Refuse a base that might be 0 with positive probability: X/X is not 1 where X may be 0."""
        if any(self._laws[name].continuous_mass < 1 for name in base.symbols):
            raise NoNormalForm

    def _root_of(self, term: Expression, exponent: Fraction) -> Expression:
        """term^exponent for a term >= 0 and an exponent that is not whole."""
        parts: list[Expression] = []
        for base, inner in factors_of(term):
            if self.bounds(base)[0] >= 0:
                parts.append(from_factors({base: inner * exponent}))
            elif ex.is_even(inner):
                parts.append(self.power(self.absolute(base), inner * exponent))
            else:
                return from_factors({term: exponent})
        return self.multiply(*parts)

    def _power_of(self, base: Expression, exponent: Expression) -> Expression:
        fixed_exponent, fixed_base = constant_of(exponent), constant_of(base)
        if fixed_exponent is not None:
            return self.power(base, fixed_exponent)
        if fixed_base is not None and fixed_base > 0:
            return self.exp(self.scale(exponent, ex.logarithm(fixed_base)))
        raise NoNormalForm

    def exp(self, argument: Expression) -> Expression:
        whole = as_sum(argument)
        factors: list[Expression] = [number(ex.exponential(whole.constant))]
        for term, coefficient in whole.terms:
            if isinstance(term, Function) and term.operator == "log":
                factors.append(self.power(term.arguments[0], coefficient))
            else:
                factors.append(from_factors({Function("exp", (term,)): coefficient}))
        return self.multiply(*factors)

    def log(self, argument: Expression) -> Expression:
        constant = constant_of(argument)
        if constant is not None:
            return number(ex.logarithm(constant))
        self._never_zero(argument)
        if self.bounds(argument)[0] < 0:
            return Function("checked_log", (argument,))  # no rule may assume that it is defined
        coefficient, term = self._monic(argument)
        if coefficient < 0:
            coefficient, term = -coefficient, self.scale(term, -ex.ONE)
        parts: list[Expression] = [number(ex.logarithm(coefficient))]
        for base, exponent in factors_of(term):
            if self.bounds(base)[0] >= 0:
                parts.append(self.scale(self._log_of_base(base), exponent))
            elif ex.is_even(exponent):
                parts.append(self.scale(self.log(self.absolute(base)), exponent))
            else:
                return self.add([parts[0], Function("log", (term,))])
        return self.add(parts)

    def _log_of_base(self, base: Expression) -> Expression:
        if isinstance(base, Function) and base.operator == "exp":
            return base.arguments[0]
        return Function("log", (base,))

    def absolute(self, argument: Expression) -> Expression:
        lower, upper = self.bounds(argument)
        if lower >= 0:
            return argument
        if upper <= 0:
            return self.scale(argument, -ex.ONE)
        coefficient, term = self._monic(argument)
        parts: list[Expression] = [number(abs(coefficient))]
        for base, exponent in factors_of(term):
            if self.bounds(base)[0] < 0 and not ex.is_even(exponent):
                base = Function("abs", (base,))
            parts.append(from_factors({base: exponent}))
        return self.multiply(*parts)

    def extreme(self, operator: str, arguments: list[Expression]) -> Expression:
        flat = dict[Expression, None]()
        for argument in arguments:
            if isinstance(argument, Function) and argument.operator == operator:
                flat.update(dict.fromkeys(argument.arguments))
            else:
                flat[argument] = None
        parts = sorted(flat, key=lambda part: part.key)
        if len(parts) == 1:
            return parts[0]
        singles = [scaled_term(part) for part in parts]
        if all(single is not None and single[0] < 0 for single in singles):
            other = "max" if operator == "min" else "min"  # min(-x, -y) is -max(x, y)
            return self.scale(self.extreme(other, [self.scale(part, -ex.ONE) for part in parts]), -ex.ONE)
        return Function(operator, tuple(parts))

    def bounds(self, expression: Expression) -> tuple[float, float]:
        """An interval that holds every value of the expression (used for signs only: 0 is exact)."""
        if isinstance(expression, Symbol):
            return (-INF, INF) if expression.score else self._laws[expression.name].support()
        if isinstance(expression, Sum):
            return self._bounds_of_sum(expression)
        if isinstance(expression, Product):
            signs = [self._sign_of_power(base, exponent) for base, exponent in expression.factors]
            if all(sign != 0 for sign in signs):
                positive = sum(sign < 0 for sign in signs) % 2 == 0
                return (0.0, INF) if positive else (-INF, 0.0)
            return (-INF, INF)
        if isinstance(expression, Function):
            return self._bounds_of_function(expression)
        return (-INF, INF)

    def _sign_of_power(self, base: Expression, exponent: Fraction) -> int:
        """1: never negative, -1: never positive, 0: not known."""
        lower, upper = self.bounds(base)
        if lower >= 0 or ex.is_even(exponent):
            return 1
        return -1 if upper <= 0 and ex.is_whole(exponent) else 0

    def _bounds_of_sum(self, expression: Sum) -> tuple[float, float]:
        lower = upper = float(expression.constant)
        for term, coefficient in expression.terms:
            low, high = (float(coefficient) * end if end else 0.0 for end in self.bounds(term))
            lower, upper = lower + min(low, high), upper + max(low, high)
        return lower, upper

    def _bounds_of_function(self, expression: Function) -> tuple[float, float]:
        ends = [self.bounds(argument) for argument in expression.arguments]
        if expression.operator in ("exp", "abs", "root"):
            return (0.0, INF)
        if expression.operator == "log":
            return (-INF if ends[0][0] < 1 else 0.0, 0.0 if ends[0][1] <= 1 else INF)
        if expression.operator in ("min", "max"):
            choose = min if expression.operator == "min" else max
            return choose(low for low, _ in ends), choose(high for _, high in ends)
        return (-INF, INF)
