"""Units as values: reads unit text, knows scales exactly, and writes units for people.

Plain units (mm, kg/m^3), units with an offset (degC, degF) and levels (dBm, dB(1/K)) are told apart; which
of them may be added or multiplied is for `units`. Words are defined by `unit_words`; the syntax is read here.
"""

from __future__ import annotations

import math
import re
from collections.abc import Iterable
from dataclasses import dataclass
from fractions import Fraction
from functools import cache

from outspread.formula.unit_words import UnitError, definition

Powers = tuple[tuple[str, Fraction], ...]

#: Level units by their usual names: 10 log10 of a power-like quantity over this reference
#: (ITU-R V.574 writes dB(W); any dB(unit) is read as well).
LEVELS: dict[str, str] = {
    "dBm": "mW", "dBW": "W", "dBmW": "mW", "dBHz": "Hz", "dBK": "K", "dBsm": "m^2", "dBJ": "J",
    "dBW/Hz": "W/Hz", "dBm/Hz": "mW/Hz", "dBW/K/Hz": "W/K/Hz",
}  # fmt: skip

# Units that the definitions treat otherwise than is wanted here.
_RATIO_LEVELS = {"dB": Fraction(1), "dBi": Fraction(1), "dBc": Fraction(1)}
_OFFSETS = {
    **dict.fromkeys(("degC", "°C", "degree_Celsius"), (Fraction(1), Fraction(27315, 100))),
    **dict.fromkeys(
        ("degF", "°F", "degree_Fahrenheit"), (Fraction(5, 9), Fraction(45967, 100) * Fraction(5, 9))
    ),
}
_MISTAKEN = {
    "deg c": "degC", "deg f": "degF", "° c": "degC", "° f": "degF", "deg. c": "degC", "centigrade": "degC",
    "celsius": "degC", "fahrenheit": "degF", "kelvins": "K",
    "db(m)": "dBm", "dbm": "dBm", "dbw": "dBW", "db": "dB",
}  # fmt: skip
_DIFFERENCES = {Fraction(1): "K", Fraction(5, 9): "delta_degF"}
_TURNS = frozenset({"turn", "revolution", "rev", "rpm", "rps", "revolutions_per_minute", "cycle"})
__all__ = ["BARE", "LEVELS", "Unit", "UnitError", "parse_unit", "same_dimension", "unit_is_known"]

MAXIMUM_LENGTH = 80


@dataclass(frozen=True)
class Unit:
    """`kind` plain: value * factor is the quantity in root units (m, g, s, ...; `dimension` has no radian).
    `kind` offset: value * factor + zero is the temperature in kelvin.
    `kind` level: the value is 10 log10(quantity / reference), factor and dimension being the reference's.
    `words` are the unit's words with their exponents, `angle` its power of the radian."""

    kind: str
    factor: Fraction
    dimension: Powers
    words: Powers = ()
    angle: Fraction = Fraction(0)
    zero: Fraction = Fraction(0)
    text: str = ""

    @property
    def bare(self) -> bool:
        """A pure number: no dimension, factor 1 (radians count)."""
        return self.kind == "plain" and not self.dimension and self.factor == 1

    def __str__(self) -> str:
        return self.text or unit_text(self.words)

    def described(self) -> str:
        """For messages: `in mm`, or `a plain number`."""
        shown = str(self)
        return f"in {shown}" if shown else "a plain number"


BARE = Unit("plain", Fraction(1), ())


def _powers(items: Iterable[tuple[str, Fraction]]) -> Powers:
    """Sums exponents of equal words, keeps the order of first occurrence, drops zeros."""
    total: dict[str, Fraction] = {}
    for word, exponent in items:
        total[word] = total.get(word, Fraction(0)) + exponent
    return tuple((word, exponent) for word, exponent in total.items() if exponent)


def times(left: Unit, right: Unit, exponent: Fraction = Fraction(1)) -> Unit:
    """left * right**exponent, of plain units."""
    raised = power(right, exponent)
    return Unit(
        "plain",
        left.factor * raised.factor,
        tuple(sorted(_powers(left.dimension + raised.dimension))),
        _powers(left.words + raised.words),
        left.angle + raised.angle,
    )


def power(unit: Unit, exponent: Fraction) -> Unit:
    """unit**exponent of a plain unit; the factor stays exact where the root is rational."""
    if exponent == 1:
        return unit

    def scaled(powers: Powers) -> Powers:
        return tuple((word, p * exponent) for word, p in powers) if exponent else ()

    factor = rational_power(unit.factor, exponent)
    return Unit("plain", factor, scaled(unit.dimension), scaled(unit.words), unit.angle * exponent)


def rational_power(value: Fraction, exponent: Fraction) -> Fraction:
    """value**exponent for a positive value, exact where it is rational, else rounded to double precision."""
    if exponent.denominator == 1:
        return value**exponent.numerator
    roots = [_whole_root(part, exponent.denominator) for part in (value.numerator, value.denominator)]
    if None not in roots:
        return Fraction(roots[0] or 0, roots[1] or 1) ** exponent.numerator
    return Fraction(math.exp(float(exponent) * _log(value)))


def _log(value: Fraction) -> float:
    return math.log(value.numerator) - math.log(value.denominator)


def _whole_root(value: int, degree: int) -> int | None:
    guess = round(value ** (1.0 / degree)) if value < 2**1000 else 0
    return next((root for root in (guess - 1, guess, guess + 1) if root >= 0 and root**degree == value), None)


def unit_text(words: Powers) -> str:
    """Text of a product of words, such as kg/(m*s^2); `parse_unit` reads it back."""

    def one(word: str, exponent: Fraction) -> str:
        if exponent == 1:
            return word
        return f"{word}^{exponent}" if exponent.denominator == 1 else f"{word}^({exponent})"

    over = [one(word, exponent) for word, exponent in words if exponent > 0]
    under = [one(word, -exponent) for word, exponent in words if exponent < 0]
    if not under:
        return "*".join(over)
    below = under[0] if len(under) == 1 else f"({'*'.join(under)})"
    return f"{'*'.join(over) or '1'}/{below}"


# -- reading ---------------------------------------------------------------------------------------

_TOKEN = re.compile(
    r"\s*(?:(?P<word>[^\W\d_][\w]*|°[A-Za-z]?|%|Ω|‰)|(?P<number>\d+(?:\.\d+)?)|(?P<sign>\*\*|[*·⋅/^()+-]))"
)
_SUPERSCRIPTS = str.maketrans("⁰¹²³⁴⁵⁶⁷⁸⁹⁻", "0123456789-")
_RAISED = re.compile(r"[⁻]?[⁰¹²³⁴⁵⁶⁷⁸⁹]+")


@cache
def parse_unit(text: str) -> Unit:
    """The unit of a text such as `kg/m^3`, `1/K`, `degC`, `dBm` or ``; raises UnitError."""
    stripped = text.strip()
    if len(stripped) > MAXIMUM_LENGTH:
        raise UnitError(f"the unit has {len(stripped)} characters; at most {MAXIMUM_LENGTH} are read")
    if stripped in ("", "1"):
        return BARE
    if stripped not in LEVELS and stripped not in _RATIO_LEVELS and stripped.lower() in _MISTAKEN:
        raise UnitError(f"{stripped} is not a known unit; write {_MISTAKEN[stripped.lower()]}")
    if stripped in _OFFSETS:
        factor, zero = _OFFSETS[stripped]
        return Unit("offset", factor, (("kelvin", Fraction(1)),), zero=zero, text=stripped)
    reference = LEVELS.get(stripped)
    if reference is None and stripped.startswith("dB(") and stripped.endswith(")"):
        reference = stripped[3:-1]
    if reference is not None:
        over = parse_unit(reference)
        if over.kind != "plain":
            raise UnitError(
                f"{reference} cannot be the reference of a level; write dB(unit) with a plain unit"
            )
        return Unit("level", over.factor, over.dimension, over.words, text=stripped)
    unit = _UnitReader(stripped).read()
    return Unit("plain", unit.factor, unit.dimension, unit.words, unit.angle, text=stripped)


def level_text(reference: Unit) -> str:
    """The usual name of a level with this reference, else dB(unit)."""
    for name, text in LEVELS.items():
        known = parse_unit(text)
        if known.factor == reference.factor and known.dimension == reference.dimension:
            return name
    return f"dB({unit_text(reference.words)})"


class _UnitReader:
    """factor { (* | · | space | /) factor }, factor = word | 1 | ( unit ), each with an exponent."""

    def __init__(self, text: str):
        self.text = text
        plain = _RAISED.sub(lambda match: "^" + match.group().translate(_SUPERSCRIPTS), text)
        self.tokens: list[tuple[str, str]] = []
        position = 0
        while position < len(plain):
            match = _TOKEN.match(plain, position)
            if match is None:
                raise UnitError(f"{text} is not a unit; write it like kg/m^3, 1/K or degC")
            self.tokens.append((str(match.lastgroup), match.group(str(match.lastgroup))))
            position = match.end()
        self.tokens.append(("end", ""))
        self.position = 0

    def fail(self) -> UnitError:
        return UnitError(f"{self.text} is not a unit; write it like kg/m^3, 1/K or degC")

    def take(self) -> tuple[str, str]:
        token = self.tokens[self.position]
        self.position += 1
        return token

    def read(self) -> Unit:
        unit = self.product()
        if self.tokens[self.position][0] != "end":
            raise self.fail()
        return unit

    def product(self) -> Unit:
        unit = self.raised()
        while True:
            kind, text = self.tokens[self.position]
            if text == "/":
                self.position += 1
                unit = times(unit, self.raised(), Fraction(-1))
            elif text in ("*", "·", "⋅"):
                self.position += 1
                unit = times(unit, self.raised())
            elif kind == "word" or text == "(":
                unit = times(unit, self.raised())
            else:
                return unit

    def raised(self) -> Unit:
        kind, text = self.take()
        if kind == "word":
            unit = word_unit(text)
        elif text == "(":
            unit = self.product()
            if self.take()[1] != ")":
                raise self.fail()
        elif text == "1":
            unit = BARE
        elif kind == "number":
            raise UnitError(
                f"{self.text} holds the number {text}; put it into the value, and keep the unit bare"
            )
        else:
            raise self.fail()
        if self.tokens[self.position][1] in ("^", "**"):
            self.position += 1
            return power(unit, self.exponent())
        return unit

    def exponent(self) -> Fraction:
        opened = self.tokens[self.position][1] == "("
        self.position += opened
        sign = -1 if self.tokens[self.position][1] == "-" else 1
        self.position += self.tokens[self.position][1] in ("-", "+")
        value = self.number()
        if opened:
            if self.tokens[self.position][1] == "/":
                self.position += 1
                value /= self.number()
            if self.take()[1] != ")":
                raise self.fail()
        return sign * value

    def number(self) -> Fraction:
        kind, text = self.take()
        if kind != "number" or not 0 < Fraction(text) <= 20 or Fraction(text).denominator > 100:
            raise UnitError(f"{self.text} has an exponent out of range; write a number up to 20")
        return Fraction(text)


@cache
def word_unit(word: str) -> Unit:
    """The plain unit of one word; degC inside a product counts as a difference. Raises UnitError."""
    exponent = Fraction(1)
    if word in _RATIO_LEVELS:
        return Unit("plain", _RATIO_LEVELS[word], (("level", exponent),), ((word, exponent),))
    if word == "Np":  # 1 Np = 20 log10(e) dB (ISO 80000-3)
        return Unit("plain", Fraction(20.0 * math.log10(math.e)), (("level", exponent),), ((word, exponent),))
    if word in _OFFSETS:
        factor = _OFFSETS[word][0]
        return Unit("plain", factor, (("kelvin", exponent),), ((_DIFFERENCES[factor], exponent),))
    if word in LEVELS or word.startswith("dB"):
        raise UnitError(
            f"{word} cannot stand in a product of units; write a level alone, such as dBm or dB(W)"
        )
    if word == "‰":
        return Unit("plain", Fraction(1, 1000), (), ((word, exponent),))
    factor, dimension, angle = definition(word)
    return Unit("plain", factor, dimension, ((word, exponent),), angle)


def counts_turns(unit: Unit) -> bool:
    return any(word in _TURNS for word, _ in unit.words)


def counts_hertz(unit: Unit) -> bool:
    return any(word.endswith(("Hz", "hertz")) for word, _ in unit.words)


def difference(unit: Unit) -> Unit:
    """The plain unit of differences between temperatures in an offset unit."""
    word = _DIFFERENCES[unit.factor]
    return Unit("plain", unit.factor, unit.dimension, ((word, Fraction(1)),), text=word)


def unit_is_known(text: str) -> str | None:
    """None where the unit can be read; else one sentence with what is wrong, and what would be right."""
    try:
        parse_unit(text)
    except UnitError as error:
        return str(error)
    return None


def same_dimension(left: str, right: str) -> bool:
    """Whether values in the two units can be compared (mm and m, degC and K, dBm and dBW)."""
    one, other = parse_unit(left), parse_unit(right)
    if (one.kind == "level") != (other.kind == "level"):
        return False
    return one.dimension == other.dimension
