"""Expressions in normal form: sums with coefficients, products with exponents, functions, symbols.

They are plain values, compared by a key that does not depend on how the formula was spelt. The rules that
produce them from a formula are in `normal_form`.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from fractions import Fraction

from outspread.routes.closed_form.exact import ONE, ZERO


@dataclass(frozen=True, eq=False)
class Expression:
    """Base: `key` identifies the expression, `symbols` are the random quantities in it, sorted."""

    key: str = field(init=False, default="")
    symbols: tuple[str, ...] = field(init=False, default=(), compare=False)

    def _set(self, key: str, symbols: set[str]) -> None:
        object.__setattr__(self, "key", key)
        object.__setattr__(self, "symbols", tuple(sorted(symbols)))

    def __hash__(self) -> int:
        return hash(self.key)

    def __eq__(self, other: object) -> bool:
        return isinstance(other, Expression) and self.key == other.key


@dataclass(frozen=True, eq=False)
class Symbol(Expression):
    """An input, or with `score` the normal logarithm of a lognormal input."""

    name: str
    score: bool = False

    def __post_init__(self) -> None:
        self._set(f"ln[{self.name}]" if self.score else self.name, {self.name})


@dataclass(frozen=True, eq=False)
class Function(Expression):
    """log, exp, abs, min, max, sin, cos, tan, … of expressions; arguments of min and max are sorted."""

    operator: str
    arguments: tuple[Expression, ...]

    def __post_init__(self) -> None:
        inside = ",".join(argument.key for argument in self.arguments)
        self._set(f"{self.operator}({inside})", {s for a in self.arguments for s in a.symbols})


@dataclass(frozen=True, eq=False)
class Product(Expression):
    """Π base^exponent without a constant factor; one factor only with an exponent that is not 1."""

    factors: tuple[tuple[Expression, Fraction], ...]

    def __post_init__(self) -> None:
        inside = "*".join(f"({base.key})^({exponent})" for base, exponent in self.factors)
        self._set(inside, {s for base, _ in self.factors for s in base.symbols})


@dataclass(frozen=True, eq=False)
class Sum(Expression):
    """constant + Σ coefficient*term; the terms are not sums and the coefficients not 0."""

    constant: Fraction
    terms: tuple[tuple[Expression, Fraction], ...]

    def __post_init__(self) -> None:
        inside = "".join(f"+({coefficient})*{term.key}" for term, coefficient in self.terms)
        self._set(f"[{self.constant}{inside}]", {s for term, _ in self.terms for s in term.symbols})


def number(value: Fraction) -> Sum:
    return Sum(value, ())


def constant_of(expression: Expression) -> Fraction | None:
    """The value of an expression without random quantities, else None."""
    if isinstance(expression, Sum) and not expression.terms:
        return expression.constant
    return None


def as_sum(expression: Expression) -> Sum:
    return expression if isinstance(expression, Sum) else Sum(ZERO, ((expression, ONE),))


def simplest(constant: Fraction, terms: dict[Expression, Fraction]) -> Expression:
    """The sum in its normal form: sorted, without zero coefficients; one plain term is itself."""
    kept = sorted(((t, c) for t, c in terms.items() if c != 0), key=lambda item: item[0].key)
    if constant == 0 and len(kept) == 1 and kept[0][1] == 1:
        return kept[0][0]
    return Sum(constant, tuple(kept))


def scaled_term(expression: Expression) -> tuple[Fraction, Expression] | None:
    """(coefficient, term) of an expression that is one term without a constant; None for any other."""
    if not isinstance(expression, Sum):
        return ONE, expression
    if expression.constant == 0 and len(expression.terms) == 1:
        term, coefficient = expression.terms[0]
        return coefficient, term
    return None


def factors_of(term: Expression) -> tuple[tuple[Expression, Fraction], ...]:
    """The factors of a term that is not a sum of several terms."""
    return term.factors if isinstance(term, Product) else ((term, ONE),)


def from_factors(factors: dict[Expression, Fraction]) -> Expression:
    """The product in its normal form; no factors give the number 1."""
    kept = sorted(((b, p) for b, p in factors.items() if p != 0), key=lambda item: item[0].key)
    if not kept:
        return number(ONE)
    if len(kept) == 1 and kept[0][1] == 1:
        return kept[0][0]
    return Product(tuple(kept))
