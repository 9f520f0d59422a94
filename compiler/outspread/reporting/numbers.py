"""Prints numbers for people: to the digits that the stated error supports, with readable powers and units.

How far a figure is rounded, and the error beside it, is decided in `findings.writing`, so that the report
and the results file show the same digits; here they are written out.
"""

from __future__ import annotations

import math
import re
from decimal import ROUND_CEILING, ROUND_HALF_EVEN, Context, Decimal

from markupsafe import Markup, escape

from outspread.findings.results import Absent, Finding
from outspread.findings.writing import rounded as printed

MOST_DIGITS = 15  # significant digits that a double holds
MINUS = "−"
_EXACT = Context(prec=400)
_SUPERSCRIPTS = str.maketrans("0123456789-", "⁰¹²³⁴⁵⁶⁷⁸⁹⁻")


def value_text(value: float, error: float, scale: float = 0.0) -> str:
    """The value to the decimal place of its printed error; `scale` as in `findings.writing.rounded`."""
    if not math.isfinite(value):
        return not_finite(value)
    if error == 0 or not math.isfinite(error):
        return exact(value)
    return _write(*_rounded(value, error, scale))


def error_text(value: float, error: float, scale: float = 0.0) -> str:
    """The bound that holds for the printed value, to one digit; "exact" where there is no error."""
    if not math.isfinite(value) or error == 0:
        return "exact"
    if not math.isfinite(error):
        return "unknown"
    bound = Decimal(repr(printed(value, error, scale)[1]))
    if 0 < bound.adjusted() <= 3:
        return str(int(bound))
    return _write(bound, bound.adjusted())


def figure(value: float, error: float, unit: str = "", scale: float = 0.0) -> str:
    """`value ± error unit` on one line."""
    shown = value_text(value, error, scale)
    if error == 0 or not math.isfinite(value):
        return shown + unit_suffix(unit)
    return f"{shown} ± {error_text(value, error, scale)}{unit_suffix(unit)}"


def exact(value: float) -> str:
    """An exactly known number, as short as it can be written without change."""
    if not math.isfinite(value):
        return not_finite(value)
    decimal = Decimal(repr(float(value))).normalize()
    if decimal == 0:
        return "0"
    return re.sub(r"^(−?)1 × (?=10)", r"\1", _write(decimal, _last_place(decimal)))


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


def rounded(value: float, digits: int = 3, upwards: bool = False) -> str:
    """A number that is only compared, such as a difference observed (or, upwards, the bound on it), to a
    few significant digits and without error, as the results file has it."""
    if value == 0 or not math.isfinite(value):
        return exact(value)
    place = Decimal(value).adjusted() - digits + 1
    mode = ROUND_CEILING if upwards else ROUND_HALF_EVEN
    shown = Decimal(value).quantize(Decimal((0, (1,), place)), rounding=mode, context=_EXACT)
    return _write(shown, place)


def _last_place(decimal: Decimal) -> int:
    """The place of the last digit to write of an exact number: its last non-zero one, or the units."""
    place = decimal.normalize().as_tuple().exponent
    assert isinstance(place, int)
    return min(place, 0) if decimal.adjusted() < 7 else place


def not_finite(value: float) -> str:
    if math.isnan(value):
        return "not a number"
    return "∞" if value > 0 else f"{MINUS}∞"


def _rounded(value: float, error: float, scale: float = 0.0) -> tuple[Decimal, int]:
    """The value as printed beside its error, and the place of its last digit."""
    shown, stated = printed(value, error, scale)
    place = Decimal(repr(stated)).adjusted()
    unit = Decimal((0, (1,), place))
    return Decimal(repr(shown)).quantize(unit, rounding=ROUND_HALF_EVEN, context=_EXACT), place


def power_of_ten(exponent: int) -> str:
    """10 with a raised exponent, in plain characters."""
    return f"10{str(exponent).translate(_SUPERSCRIPTS)}"


def _write(value: Decimal, place: int) -> str:
    """A decimal whose last digit stands at 10^place, as plain digits or with a power of ten."""
    sign = MINUS if value < 0 else ""
    value = abs(value)
    if value == 0:
        return "0"
    leading = value.adjusted()
    if -4 <= leading <= 8 and place <= 0:
        return f"{sign}{value:.{-place}f}"
    digits = max(leading - place, 0)
    mantissa = value.scaleb(-leading, context=_EXACT)
    power = power_of_ten(leading)
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


def unit_suffix(unit: str) -> str:
    """The unit as it follows a number: with its space, if it takes one; nothing for plain numbers."""
    text = unit_text(unit)
    if text in ("", "1"):
        return ""
    return text if text == "°" else f"\N{NO-BREAK SPACE}{text}"


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


_LONG_FRACTION = re.compile(r"(?<=\.)\d{5,}|(?<=10)[⁰¹²³⁴⁵⁶⁷⁸⁹⁻]+")
_PLAIN_DIGITS = str.maketrans("⁰¹²³⁴⁵⁶⁷⁸⁹⁻", f"0123456789{MINUS}")


def grouped(text: str) -> Markup:
    """The text as HTML: decimals in groups of three (ISO 80000-1, 7.3.1) by style, so that copying a
    number copies no space, and exponents raised."""
    pieces: list[Markup] = []
    end = 0
    for match in _LONG_FRACTION.finditer(text):
        pieces.append(escape(text[end : match.start()]))
        digits = match[0]
        if digits.isascii():
            groups = [digits[start : start + 3] for start in range(0, len(digits), 3)]
            pieces += [Markup('<span class="g">{}</span>').format(group) for group in groups]
        else:
            pieces.append(Markup("<sup>{}</sup>").format(digits.translate(_PLAIN_DIGITS)))
        end = match.end()
    pieces.append(escape(text[end:]))
    return Markup('<span class="n">{}</span>').format(Markup("").join(pieces))


def finding_text(finding: Finding, unit: str = "") -> str:
    """A finding on one line: value ± error, or why there is none."""
    if isinstance(finding, Absent):
        return finding.because
    return figure(finding.value, finding.error, unit)
