"""Looks single unit words up, the usual in `unit_table` and others in pint; suggests near misses.

All factors are exact fractions. Unit expressions are read in `unit`; levels and offsets, which pint treats
otherwise, are handled there.
"""

from __future__ import annotations

import os
import pickle
import re
import sys
from collections.abc import Mapping
from fractions import Fraction
from functools import cache
from pathlib import Path
from typing import TYPE_CHECKING, Any

from outspread.formula.tokens import near_miss
from outspread.formula.unit_table import Definition, usual_unit

if TYPE_CHECKING:
    import pint

_COMMON = (
    "m", "mm", "cm", "km", "µm", "um", "nm", "kg", "g", "mg", "t", "s", "ms", "us", "min", "h", "day", "A",
    "mA", "K", "degC", "degF", "mol", "N", "kN", "MN", "Pa", "kPa", "MPa", "GPa", "bar", "J", "kJ", "MJ",
    "W", "mW", "kW", "MW", "V", "mV", "kV", "ohm", "kohm", "F", "uF", "nF", "pF", "H", "mH", "Hz", "kHz",
    "MHz", "GHz", "rad", "deg", "mrad", "sr", "L", "l", "kWh", "Wh", "T", "percent", "ppm", "dB", "dBm",
    "dBW", "dBi", "rpm", "year", "inch", "foot", "ft", "mile", "knot", "nautical_mile", "lb", "lbf", "psi",
    "eV", "bit", "byte", "metre", "meter", "second", "kilogram", "newton", "pascal", "watt", "joule",
    "volt", "ampere", "hertz", "litre",
)  # fmt: skip


class UnitError(ValueError):
    """Unit text that cannot be read; the message says what is wrong, and what would be right."""


def definition(word: str) -> Definition:
    """Factor to root units, dimension (root units with exponents, no radian) and power of the radian.

    Raises UnitError for an unknown word and for one that is not on a proportional scale.
    """
    usual = usual_unit(word)
    return library_definition(word) if usual is None else usual


def library_definition(word: str) -> Definition:
    """The same by pint's definitions alone, which take a quarter of a second to load."""
    registry = _registry()
    import pint

    try:
        factor, root = registry.get_root_units(registry.parse_units(word), check_nonmult=True)
    except (pint.UndefinedUnitError, pint.DefinitionSyntaxError, ValueError, TypeError) as error:
        raise UnitError(_unknown(word)) from error
    if not isinstance(factor, int | Fraction):  # None: an offset or logarithmic scale
        raise UnitError(
            f"{word} is not on a proportional scale; write degC, degF, dB or dBm, or a plain unit"
        )
    dimension, angle = [], Fraction(0)
    for name, exponent in _items(root):
        if name == "radian":
            angle = exponent
        elif registry.get_dimensionality(name):
            dimension.append((name, exponent))
    return Fraction(factor), tuple(sorted(dimension)), angle


def _items(root: Any) -> list[tuple[str, Fraction]]:
    """The names and exponents of a pint unit."""
    container: Mapping[str, Any] = root._units
    return [(name, Fraction(value)) for name, value in container.items()]


def _unknown(word: str) -> str:
    squared = re.fullmatch(r"([^\W\d_]+)(\d)", word)
    if squared:
        return f"{word} is not a known unit; write {squared.group(1)}^{squared.group(2)} for a power"
    near = near_miss(word, _COMMON)
    return f"{word} is not a known unit; " + (
        f"did you mean {near}?" if near else "write it like mm, kg/m^3, degC or dBm"
    )


@cache
def _registry() -> pint.UnitRegistry[Any]:
    """One registry for the process, with exact fractions; its definitions are cached on disk if possible."""
    import pint

    folder = _cache_folder(pint.__version__)
    if folder is not None:
        try:
            return pint.UnitRegistry(non_int_type=Fraction, cache_folder=str(folder))
        except (OSError, EOFError, pickle.PickleError, AttributeError, ImportError, ValueError, IndexError):
            pass  # a damaged cache, or one that another process is writing: read the definitions themselves
    return pint.UnitRegistry(non_int_type=Fraction, cache_folder=None)


def _cache_folder(version: str) -> Path | None:
    if sys.platform == "win32":
        base = os.environ.get("LOCALAPPDATA", "")
    else:
        base = os.environ.get("XDG_CACHE_HOME", "") or os.path.expanduser("~/.cache")
    if not base or not os.path.isabs(base):
        return None
    folder = Path(base) / "outspread" / f"units-{version}"
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError:
        return None
    return folder if os.access(folder, os.W_OK) else None
