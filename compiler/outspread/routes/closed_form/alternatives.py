"""Other ways to write an expression of the normal form: multiplied out, and over a common denominator.

Normal forms leave products of sums alone, so that sums of independent parts stay visible; a rule that
finds nothing tries these spellings. Nothing here knows distributions.
"""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction

from outspread.routes.closed_form import exact as ex
from outspread.routes.closed_form.expressions import (
    Expression,
    Product,
    Sum,
    as_sum,
    factors_of,
    from_factors,
    number,
)
from outspread.routes.closed_form.normal_form import NormalForm

#: longer results are not built
_MOST_TERMS = 60


def alternatives(expression: Expression, algebra: NormalForm) -> Iterator[Expression]:
    """Spellings that differ from the expression itself, each once."""
    seen = {expression.key}
    for rewritten in (_together(expression, algebra), _expanded(expression, algebra)):
        if rewritten is not None and rewritten.key not in seen:
            seen.add(rewritten.key)
            yield rewritten


def _expanded(expression: Expression, algebra: NormalForm) -> Expression | None:
    """Products of sums with whole positive exponents multiplied out, also inside a sum."""
    if isinstance(expression, Sum):
        if len(expression.terms) > _MOST_TERMS:
            return None
        parts: list[Expression] = [number(expression.constant)]
        for term, coefficient in expression.terms:
            part = _expanded(term, algebra)
            if part is None:
                return None
            parts.append(algebra.scale(part, coefficient))
        return algebra.add(parts)
    if not isinstance(expression, Product):
        return expression
    result: Expression = number(ex.ONE)
    for base, exponent in expression.factors:
        if isinstance(base, Sum) and ex.is_whole(exponent) and 0 < exponent <= 4:
            for _ in range(int(exponent)):
                outcome = _distributed(result, base, algebra)
                if outcome is None:
                    return None
                result = outcome
        else:
            outcome = _distributed(result, from_factors({base: exponent}), algebra)
            if outcome is None:
                return None
            result = outcome
    return result


def _distributed(left: Expression, right: Expression, algebra: NormalForm) -> Expression | None:
    first, second = as_sum(left), as_sum(right)
    if (len(first.terms) + 1) * (len(second.terms) + 1) > _MOST_TERMS:
        return None
    return algebra.add([algebra.multiply(a, b) for a in _parts(first) for b in _parts(second)])


def _parts(whole: Sum) -> list[Expression]:
    own: list[Expression] = [number(whole.constant)] if whole.constant != 0 or not whole.terms else []
    return own + [Sum(ex.ZERO, ((term, coefficient),)) for term, coefficient in whole.terms]


def _together(expression: Expression, algebra: NormalForm) -> Expression | None:
    """Negative powers in a sum brought before it: 1 + Y/X becomes X^-1 (X + Y), inside products too."""
    if isinstance(expression, Product):
        parts: list[Expression] = []
        for base, exponent in expression.factors:
            inner = _together(base, algebra)
            if inner is None:
                return None
            parts.append(algebra.power(inner, exponent))
        return algebra.multiply(*parts)
    if not isinstance(expression, Sum) or len(expression.terms) > _MOST_TERMS:
        return expression
    lowest = dict[Expression, Fraction]()
    for term, _ in expression.terms:
        for base, exponent in factors_of(term):
            if exponent < 0:
                lowest[base] = min(lowest.get(base, ex.ZERO), exponent)
    if not lowest:
        return expression
    rest: list[Expression] = []
    multiplier = from_factors({base: -exponent for base, exponent in lowest.items()})
    for part in _parts(expression):
        product = _expanded(algebra.multiply(part, multiplier), algebra)
        if product is None:
            return None
        rest.append(product)
    return algebra.multiply(algebra.add(rest), from_factors(lowest))
