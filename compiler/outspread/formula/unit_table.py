"""The usual units as exact multiples of the root units, so that most models are read without a units library.

SI units and prefixes (BIPM, SI Brochure, 9th edition 2019, tables 2, 4, 7 and 8) and common others
(ISO 80000-3 to -5; NIST SP 811, appendix B). `unit_words` asks pint for every word that is not here.
"""

from __future__ import annotations

from fractions import Fraction

#: Factor to root units, dimension (root units with exponents, no radian) and power of the radian.
Definition = tuple[Fraction, tuple[tuple[str, Fraction], ...], Fraction]

_ROOTS = {
    "g": "gram", "m": "meter", "s": "second", "A": "ampere", "K": "kelvin", "mol": "mole", "cd": "candela",
}  # fmt: skip

_PI = Fraction("3.1415926535897932384626433832795028841971693993751")
_INCH, _POUND, _STANDARD_GRAVITY = Fraction("0.0254"), Fraction("453.59237"), Fraction("9.80665")

#: What a table holds of a unit: factor, and root units with exponents (the gram is the root of mass).
_Entry = tuple[Fraction | int | str, str]

#: Units that take prefixes, by their symbols.
_SYMBOLS: dict[str, _Entry] = {
    "m": (1, "m"),
    "g": (1, "g"),
    "s": (1, "s"),
    "A": (1, "A"),
    "K": (1, "K"),
    "mol": (1, "mol"),
    "cd": (1, "cd"),
    "rad": (1, "rad"),
    "sr": (1, "rad2"),
    "Hz": (1, "s-1"),
    "N": (1000, "g m s-2"),
    "Pa": (1000, "g m-1 s-2"),
    "J": (1000, "g m2 s-2"),
    "W": (1000, "g m2 s-3"),
    "C": (1, "A s"),
    "V": (1000, "g m2 s-3 A-1"),
    "F": ("1/1000", "g-1 m-2 s4 A2"),
    "ohm": (1000, "g m2 s-3 A-2"),
    "Ω": (1000, "g m2 s-3 A-2"),
    "S": ("1/1000", "g-1 m-2 s3 A2"),
    "Wb": (1000, "g m2 s-2 A-1"),
    "T": (1000, "g s-2 A-1"),
    "H": (1000, "g m2 s-2 A-2"),
    "lm": (1, "cd rad2"),
    "lx": (1, "cd rad2 m-2"),
    "Bq": (1, "s-1"),
    "Gy": (1, "m2 s-2"),
    "Sv": (1, "m2 s-2"),
    "kat": (1, "mol s-1"),
    "L": ("1/1000", "m3"),
    "l": ("1/1000", "m3"),
    "bar": (10**8, "g m-1 s-2"),
    "eV": ("1.602176634e-16", "g m2 s-2"),
    "Wh": (3_600_000, "g m2 s-2"),
    "Ah": (3600, "A s"),
    "VA": (1000, "g m2 s-3"),
}

#: The same by their names, which take the names of prefixes.
_NAMES = {
    "metre": "m", "meter": "m", "gram": "g", "second": "s", "ampere": "A", "kelvin": "K", "mole": "mol",
    "candela": "cd", "radian": "rad", "steradian": "sr", "hertz": "Hz", "newton": "N", "pascal": "Pa",
    "joule": "J", "watt": "W", "coulomb": "C", "volt": "V", "farad": "F", "siemens": "S", "weber": "Wb",
    "tesla": "T", "henry": "H", "lumen": "lm", "lux": "lx", "becquerel": "Bq", "gray": "Gy", "sievert": "Sv",
    "katal": "kat", "litre": "L", "liter": "L", "electron_volt": "eV", "watt_hour": "Wh",
}  # fmt: skip

#: Units without prefixes.
_SINGLE: dict[tuple[str, ...], _Entry] = {
    ("min", "minute"): (60, "s"),
    ("h", "hr", "hour"): (3600, "s"),
    ("d", "day"): (86_400, "s"),
    ("week",): (604_800, "s"),
    ("year", "yr", "a"): (31_557_600, "s"),  # the Julian year of 365.25 days
    ("t", "tonne"): (10**6, "g"),
    ("percent", "%"): ("1/100", ""),
    ("ppm",): ("1/1000000", ""),
    ("bit", "count", "dimensionless"): (1, ""),
    ("byte", "B"): (8, ""),
    ("deg", "degree", "°"): (_PI / 180, "rad"),
    ("arcmin", "arcminute"): (_PI / 10_800, "rad"),
    ("arcsec", "arcsecond"): (_PI / 648_000, "rad"),
    ("turn", "revolution", "cycle"): (2 * _PI, "rad"),
    ("rpm", "revolutions_per_minute"): (_PI / 30, "rad s-1"),
    ("rps",): (2 * _PI, "rad s-1"),
    ("inch", "in"): (_INCH, "m"),
    ("thou",): (_INCH / 1000, "m"),
    ("foot", "ft"): (12 * _INCH, "m"),
    ("yard",): (36 * _INCH, "m"),
    ("mile", "mi"): (63_360 * _INCH, "m"),
    ("nautical_mile", "nmi"): (1852, "m"),
    ("micron",): ("1e-6", "m"),
    ("angstrom",): ("1e-10", "m"),
    ("knot", "kn", "kt"): ("463/900", "m s-1"),
    ("kph",): ("5/18", "m s-1"),
    ("mph",): (63_360 * _INCH / 3600, "m s-1"),
    ("ha", "hectare"): (10_000, "m2"),
    ("lb", "pound"): (_POUND, "g"),
    ("oz", "ounce"): (_POUND / 16, "g"),
    ("lbf",): (_POUND * _STANDARD_GRAVITY, "g m s-2"),
    ("kgf",): (1000 * _STANDARD_GRAVITY, "g m s-2"),
    ("psi",): (_POUND * _STANDARD_GRAVITY / _INCH**2, "g m-1 s-2"),
    ("atm",): (101_325_000, "g m-1 s-2"),
    ("g_0",): (_STANDARD_GRAVITY, "m s-2"),
}

_PREFIXES = {
    "Q": 30, "R": 27, "Y": 24, "Z": 21, "E": 18, "P": 15, "T": 12, "G": 9, "M": 6, "k": 3, "h": 2, "da": 1,
    "d": -1, "c": -2, "m": -3, "µ": -6, "μ": -6, "u": -6, "n": -9, "p": -12, "f": -15, "a": -18, "z": -21,
    "y": -24, "r": -27, "q": -30,
}  # fmt: skip
_PREFIX_NAMES = {
    "quetta": 30, "ronna": 27, "yotta": 24, "zetta": 21, "exa": 18, "peta": 15, "tera": 12, "giga": 9,
    "mega": 6, "kilo": 3, "hecto": 2, "deca": 1, "deci": -1, "centi": -2, "milli": -3, "micro": -6,
    "nano": -9, "pico": -12, "femto": -15, "atto": -18, "zepto": -21, "yocto": -24, "ronto": -27,
    "quecto": -30,
}  # fmt: skip
_PLAIN = {
    **_SYMBOLS,
    **{name: _SYMBOLS[symbol] for name, symbol in _NAMES.items()},
    **{word: entry for words, entry in _SINGLE.items() for word in words},
}
#: The Planck constant over 2 pi has this name, and not the hectobar.
_OTHERWISE = frozenset({"hbar"})


def usual_unit(word: str) -> Definition | None:
    """The definition of a usual unit, with or without a prefix; None for any other word."""
    if word in _PLAIN:
        return _definition(_PLAIN[word], 0)
    if word in _OTHERWISE:
        return None
    for length in (1, 2):
        prefix, symbol = word[:length], word[length:]
        if prefix in _PREFIXES and symbol in _SYMBOLS:
            return _definition(_SYMBOLS[symbol], _PREFIXES[prefix])
    for name, exponent in _PREFIX_NAMES.items():
        if word.startswith(name) and word[len(name) :] in _NAMES:
            return _definition(_SYMBOLS[_NAMES[word[len(name) :]]], exponent)
    return None


def usual_words() -> list[str]:
    """Every word that `usual_unit` knows."""
    prefixed = [prefix + symbol for prefix in _PREFIXES for symbol in _SYMBOLS]
    prefixed += [prefix + name for prefix in _PREFIX_NAMES for name in _NAMES]
    return [*_PLAIN, *(word for word in prefixed if word not in _PLAIN and word not in _OTHERWISE)]


def _definition(entry: _Entry, exponent: int) -> Definition:
    factor, roots = entry
    dimension, angle = [], Fraction(0)
    for part in roots.split():
        symbol = part.rstrip("-0123456789")
        power = Fraction(part[len(symbol) :] or 1)
        if symbol == "rad":
            angle = power
        else:
            dimension.append((_ROOTS[symbol], power))
    return Fraction(factor) * Fraction(10) ** exponent, tuple(sorted(dimension)), angle
