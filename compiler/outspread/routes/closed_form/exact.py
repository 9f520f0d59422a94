"""Constants of a formula as fractions: decimals as they are written, roots and logarithms to 50 digits.

A number such as 0.1 means one tenth here, so that 0.1*3 and 0.3 are one constant, and whether two scales
are equal is decided without the rounding of intermediate results. Nothing here knows distributions.
"""

from __future__ import annotations

from decimal import Context, Decimal, DivisionByZero, InvalidOperation, Overflow
from fractions import Fraction
from math import isqrt

ZERO, ONE, HALF = Fraction(0), Fraction(1), Fraction(1, 2)
DIGITS = 50
_TRAPS = [DivisionByZero, InvalidOperation, Overflow]
_CONTEXT = Context(prec=DIGITS, Emax=100_000, Emin=-100_000, traps=_TRAPS)
#: beyond this size a fraction is rounded to DIGITS digits, which bounds the cost of long formulas
_LARGEST_BITS = 2048
#: two parameters are one where they differ by no more than the rounding of a few operations in double
SAME = Fraction(1, 10**15)


def exact(value: float) -> Fraction:
    """The decimal number that `value` prints as. Raises ArithmeticError where it is not finite."""
    number = float(value)
    if number - number != 0.0:
        raise ArithmeticError(f"{value} is not finite")
    return Fraction(repr(number))


def trimmed(value: Fraction) -> Fraction:
    """`value`, rounded to DIGITS digits where it has grown too long to be handled quickly."""
    if value.numerator.bit_length() + value.denominator.bit_length() <= _LARGEST_BITS:
        return value
    return Fraction(_decimal(value))


def tidied(value: Fraction) -> Fraction:
    """The simple fraction that a product of 50-digit roots stands for: sqrt(5)/sqrt(5) is 1."""
    if value.denominator < 10**6:
        return value
    simple = value.limit_denominator(10**6)
    return simple if abs(simple - value) * 10**40 <= abs(value) else value


def _decimal(value: Fraction) -> Decimal:
    return _CONTEXT.divide(Decimal(value.numerator), Decimal(value.denominator))


def _root(value: int) -> int | None:
    root = isqrt(value)
    return root if root * root == value else None


def square_root(value: Fraction) -> Fraction:
    """The root of a number >= 0: exact for squares of fractions, else to DIGITS digits."""
    if value < 0:
        raise ArithmeticError("root of a negative number")
    top, bottom = _root(value.numerator), _root(value.denominator)
    if top is not None and bottom is not None:
        return Fraction(top, bottom)
    return Fraction(_CONTEXT.sqrt(_decimal(value)))


def power(base: Fraction, exponent: Fraction) -> Fraction:
    """base^exponent; raises ArithmeticError where that is not a real number of ordinary size."""
    if exponent.denominator == 1 and abs(exponent) <= 64:
        return trimmed(base ** int(exponent))
    if base < 0:
        raise ArithmeticError("non-integer power of a negative number")
    if exponent.denominator == 2 and abs(exponent) <= 32:
        return trimmed(square_root(base) ** exponent.numerator)
    if base == 0:
        if exponent > 0:
            return ZERO
        raise ZeroDivisionError("negative power of zero")
    return Fraction(_CONTEXT.power(_decimal(base), _decimal(exponent)))


def exponential(value: Fraction) -> Fraction:
    return Fraction(_CONTEXT.exp(_decimal(value)))


def logarithm(value: Fraction) -> Fraction:
    """Natural logarithm of a number > 0."""
    if value <= 0:
        raise ArithmeticError("logarithm of a number that is not positive")
    return ZERO if value == 1 else Fraction(_CONTEXT.ln(_decimal(value)))


LOG_TEN = logarithm(Fraction(10))


def same(left: Fraction, right: Fraction) -> bool:
    """Whether two numbers agree within 1e-15 of their size."""
    return left == right or abs(left - right) <= SAME * max(abs(left), abs(right))


def all_same(values: list[Fraction]) -> bool:
    return all(same(value, values[0]) for value in values)


def is_even(value: Fraction) -> bool:
    return value.denominator == 1 and value.numerator % 2 == 0


def is_whole(value: Fraction) -> bool:
    return value.denominator == 1
