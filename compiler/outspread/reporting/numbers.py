"""Prints numbers for people: to the digits that the stated error supports, with readable powers and units.

The printed pair holds by itself: the error printed beside a value covers the rounding of that value too.
The results file is written by `findings.writing`, which rounds for itself.
"""

from __future__ import annotations

import math
import re
from decimal import ROUND_CEILING, ROUND_HALF_EVEN, Context, Decimal

from markupsafe import Markup, escape

from outspread.findings.results import Absent, Figure, Finding

MOST_DIGITS = 15  # significant digits that a double holds
MINUS = "−"
_EXACT = Context(prec=400)
_SUPERSCRIPTS = str.maketrans("0123456789-", "⁰¹²³⁴⁵⁶⁷⁸⁹⁻")


def value_text(value: float, error: float) -> str:
    """The value to the last digit whose place is not below the error: 1.23456789, 3e-7 -> 1.234568."""
    if not math.isfinite(value):
        return not_finite(value)
    if error == 0:
        return exact(value)
    return _write(*_rounded(value, error))


def error_text(value: float, error: float) -> str:
    """The bound that holds for the printed value, upwards to one digit; "exact" where both are exact."""
    if not math.isfinite(value) or error == 0:
        return "exact"
    if not math.isfinite(error):
        return "unknown"
    rounded, _ = _rounded(value, error)
    bound = _EXACT.add(Decimal(error), _EXACT.abs(_EXACT.subtract(Decimal(value), rounded)))
    place = bound.adjusted()
    upwards = bound.quantize(Decimal((0, (1,), place)), rounding=ROUND_CEILING, context=_EXACT)
    if 0 < upwards.adjusted() <= 3:
        return str(int(upwards))
    return _write(upwards, upwards.adjusted())


def figure(value: float, error: float, unit: str = "") -> str:
    """`value ± error unit` on one line."""
    suffix = f"\N{NARROW NO-BREAK SPACE}{unit_text(unit)}" if unit else ""
    if error == 0 or not math.isfinite(value):
        return value_text(value, error) + suffix
    return f"{value_text(value, error)} ± {error_text(value, error)}{suffix}"


def exact(value: float) -> str:
    """An exactly known number, as short as it can be written without change."""
    if not math.isfinite(value):
        return not_finite(value)
    decimal = Decimal(repr(float(value))).normalize()
    return "0" if decimal == 0 else _write(decimal, _last_place(decimal))


def brief(value: float, error: float, against: float | None = None, digits: int = 4) -> str:
    """The value in few digits for a sentence, without error: more digits than supported are never shown,
    and enough are shown to keep it visibly on its side of the limit `against`."""
    if not math.isfinite(value):
        return not_finite(value)
    if error == 0 and len(exact(value)) <= 8:
        return exact(value)
    supported, place = _rounded(value, error) if error else (Decimal(repr(float(value))), -400)
    if supported == 0:
        return "0"
    for count in range(digits, MOST_DIGITS + 1):
        wanted = max(place, supported.adjusted() - count + 1)
        if against is not None and 0 < value < 1 and value > 0.9:  # count the nines as leading zeros
            wanted = max(place, min(wanted, (1 - supported).adjusted() - 1 if supported < 1 else wanted))
        shown = supported.quantize(Decimal((0, (1,), wanted)), rounding=ROUND_HALF_EVEN, context=_EXACT)
        if against is None or wanted == place or shown != Decimal(repr(float(against))):
            break
    return _write(shown, wanted) if error else _write(shown, _last_place(shown))


def _last_place(decimal: Decimal) -> int:
    """The place of the last digit to write of an exact number: its last non-zero one, or the units."""
    place = decimal.normalize().as_tuple().exponent
    assert isinstance(place, int)
    return min(place, 0) if decimal.adjusted() < 7 else place


def not_finite(value: float) -> str:
    if math.isnan(value):
        return "not a number"
    return "∞" if value > 0 else f"{MINUS}∞"


def _rounded(value: float, error: float) -> tuple[Decimal, int]:
    """The value rounded at the smallest power of ten that is not below the error, and that place."""
    decimal = Decimal(value)
    if not math.isfinite(error):
        return Decimal(0), 0
    stated = Decimal(repr(float(error)))
    place = stated.adjusted() if stated == Decimal((0, (1,), stated.adjusted())) else stated.adjusted() + 1
    if decimal != 0:
        place = max(place, decimal.adjusted() - MOST_DIGITS + 1)
    return decimal.quantize(Decimal((0, (1,), place)), rounding=ROUND_HALF_EVEN, context=_EXACT), place


def _write(value: Decimal, place: int) -> str:
    """A decimal whose last digit stands at 10^place, as plain digits or with a power of ten."""
    sign = MINUS if value < 0 else ""
    value = abs(value)
    if value == 0:
        return "0"
    leading = value.adjusted()
    if -5 <= leading <= 8 and place <= 0:
        return f"{sign}{value:.{-place}f}"
    digits = max(leading - place, 0)
    mantissa = value.scaleb(-leading, context=_EXACT)
    power = f"10{str(leading).translate(_SUPERSCRIPTS)}"
    if digits == 0 and mantissa == 1:
        return f"{sign}{power}"
    return f"{sign}{mantissa:.{digits}f} × {power}"


_UNIT_WORDS = {
    "degC": "°C", "degF": "°F", "delta_degC": "K", "deg": "°", "degree": "°", "ohm": "Ω", "percent": "%",
    "um": "µm", "us": "µs", "uV": "µV", "uA": "µA", "micrometer": "µm", "micrometre": "µm",
    "dimensionless": "", "degree_Celsius": "°C",
}  # fmt: skip
_UNIT_TOKEN = re.compile(r"\*\*|[\^*/·()]|-?\d+(?:\.\d+)?|[^\W\d][\w]*|%|°\w?|\s+|.")


def unit_text(unit: str) -> str:
    """A unit as people write it: mm^2 -> mm², kg*m/s**2 -> kg·m/s²."""
    parts: list[str] = []
    raise_next = False
    for token in _UNIT_TOKEN.findall(unit):
        if token in ("^", "**"):
            raise_next = True
        elif token.isspace():
            if parts and parts[-1] not in "·/(":
                parts.append("·")
        elif token in "*·":
            if parts and parts[-1] == "·":
                continue
            parts.append("·")
        elif raise_next:
            plain = re.fullmatch(r"-?\d+", token)
            parts.append(token.translate(_SUPERSCRIPTS) if plain else f"^{token}")
            raise_next = False
        else:
            if token == "/" and parts and parts[-1] == "·":
                parts.pop()
            parts.append(_UNIT_WORDS.get(token, token))
    return "".join(parts).strip("·")


def unit_latex(unit: str) -> str:
    """A unit for use inside a formula."""
    text = re.sub(r"[{}\\$]", "", unit_text(unit))
    return rf"\text{{{text}}}" if text else ""


def number_latex(value: float) -> str:
    """An exactly known number as LaTeX."""
    text = exact(value).replace(MINUS, "-").replace("∞", r"\infty")
    match = re.fullmatch(r"(-?)(?:([\d.]+) × )?10([⁰¹²³⁴⁵⁶⁷⁸⁹⁻]+)", text)
    if not match:
        return text
    exponent = match[3].translate(str.maketrans("⁰¹²³⁴⁵⁶⁷⁸⁹⁻", "0123456789-"))
    mantissa = rf"{match[2]} \times " if match[2] else ""
    return f"{match[1]}{mantissa}10^{{{exponent}}}"


_LONG_FRACTION = re.compile(r"(?<=\.)\d{5,}")


def grouped(text: str) -> Markup:
    """The text with decimals set in groups of three (ISO 80000-1, 7.3.1) by style, so that copying a
    number copies no space."""
    pieces: list[Markup] = []
    end = 0
    for match in _LONG_FRACTION.finditer(text):
        pieces.append(escape(text[end : match.start()]))
        digits = match[0]
        groups = [digits[start : start + 3] for start in range(0, len(digits), 3)]
        pieces.append(Markup("").join(Markup('<span class="g">{}</span>').format(group) for group in groups))
        end = match.end()
    pieces.append(escape(text[end:]))
    return Markup('<span class="n">{}</span>').format(Markup("").join(pieces))


def finding_text(finding: Finding, unit: str = "") -> str:
    """A finding on one line: value ± error, or why there is none."""
    if isinstance(finding, Absent):
        return finding.because
    return figure(finding.value, finding.error, unit)


def bounds(finding: Figure) -> tuple[float, float]:
    return finding.value - finding.error, finding.value + finding.error
