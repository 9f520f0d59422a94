"""Units: what fits, what does not and where, and numbers that are right in the units asked for.

Scales and offsets of units are those of the SI brochure (9th edition) and NIST SP 811, appendix B.
"""

from __future__ import annotations

import math
import subprocess
import sys
from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest

from outspread.errors import FormulaError
from outspread.formula import unit_words
from outspread.formula.evaluate import compile_numpy
from outspread.formula.parser import parse, parse_event
from outspread.formula.tree import names
from outspread.formula.unit import parse_unit
from outspread.formula.unit_table import usual_unit, usual_words
from outspread.formula.units import resolve_units, same_dimension, unit_is_known

UNITS = {
    "a": "mm", "b": "m", "c": "mm", "k": "1/K", "T": "degC", "S": "degC", "F": "degF", "dT": "K", "TK": "K",
    "P": "dBm", "Q": "dBm", "W": "dBW", "G": "dB", "angle": "deg", "rad": "rad", "x": "", "pc": "%",
    "rho": "kg/m^3",
    "v": "m/s", "area": "mm^2", "f": "MHz", "n": "rpm", "p": "mW", "loss": "dB/km", "d": "km",
    "g_t": "dB(1/K)",
    "boltzmann": "dBW/K/Hz", "V": "V", "I": "mA", "force": "kN", "hours": "h", "inch": "inch", "E": "GPa",
}  # fmt: skip


def value(
    text: str, wanted: str | None, numbers: dict[str, float], event: bool = False
) -> tuple[float, str, bool]:
    """Number, unit, and whether the tree came back unchanged."""
    node = (parse_event if event else parse)(text)
    resolved, unit = resolve_units(node, UNITS, wanted, text, numbers_take_units=event)
    used = names(resolved)
    return float(compile_numpy(resolved, used)(*(numbers[name] for name in used))), unit, resolved is node


# formula, unit wanted, numbers of the inputs, number of the result, its unit
CONVERTED = [
    ("a + b", "mm", {"a": 2, "b": 3}, 3002, "mm"),
    ("a + b", "m", {"a": 2, "b": 3}, 3.002, "m"),
    ("b + a", None, {"a": 2, "b": 3}, 3.002, "m"),
    ("a*b", "m^2", {"a": 2, "b": 3}, 0.006, "m^2"),
    ("a*b", None, {"a": 2, "b": 3}, 6, "mm*m"),
    ("sqrt(area)", "m", {"area": 4}, 0.002, "m"),
    ("area^1.5", "mm^3", {"area": 4}, 8, "mm^3"),
    ("exp(a/b)", None, {"a": 2000, "b": 2}, math.e, ""),
    ("sin(angle)", None, {"angle": 30}, 0.5, ""),
    ("angle*b", "m", {"angle": 180, "b": 1}, math.pi, "m"),
    ("atan2(a, b)", "deg", {"a": 1000, "b": 1}, 45, "deg"),
    ("hypot(a, b)", "mm", {"a": 3, "b": 0.004}, 5, "mm"),
    ("max(a, b)", "mm", {"a": 3, "b": 0.004}, 4, "mm"),
    ("if(a > b, a, b)", "mm", {"a": 3, "b": 0.004}, 4, "mm"),
    ("1 + pc", None, {"pc": 5}, 1.05, ""),
    ("a/b", "%", {"a": 5, "b": 1}, 0.5, "%"),
    ("V*I", "W", {"V": 12, "I": 500}, 6, "W"),
    ("force/area", "MPa", {"force": 3, "area": 60}, 50, "MPa"),
    ("d/hours", "m/s", {"d": 36, "hours": 1}, 10, "m/s"),
    ("inch", "mm", {"inch": 1}, 25.4, "mm"),
    ("2*pi*f", "rad/s", {"f": 1}, 2e6 * math.pi, "rad/s"),
    ("n", "rad/s", {"n": 60}, 2 * math.pi, "rad/s"),
    # temperatures: ISO 80000-5; 0 degC = 273.15 K, 32 degF = 0 degC
    ("T", "K", {"T": 20}, 293.15, "K"),
    ("TK", "degC", {"TK": 293.15}, 20, "degC"),
    ("F", "degC", {"F": 212}, 100, "degC"),
    ("T", "degF", {"T": 100}, 212, "degF"),
    ("T + dT", "degC", {"T": 20, "dT": 5}, 25, "degC"),
    ("T - S", None, {"T": 20, "S": 5}, 15, "K"),
    ("T - F", "K", {"T": 20, "F": 32}, 20, "K"),
    ("T + F - S", "degC", {"T": 20, "F": 212, "S": 50}, 70, "degC"),
    ("k*T", None, {"k": 0.001, "T": 0}, 0.27315, ""),
    ("k*(T - S)", None, {"k": 0.001, "T": 30, "S": 20}, 0.01, ""),
    ("max(T, F)", "degC", {"T": 20, "F": 212}, 100, "degC"),
    # levels: IEC 60027-3; 0 dBW = 30 dBm
    ("P + G", None, {"P": 10, "G": 3}, 13, "dBm"),
    ("P - G + G", "dBW", {"P": 40, "G": 3}, 10, "dBW"),
    ("P - Q", None, {"P": 10, "Q": 4}, 6, "dB"),
    ("P - W", None, {"P": 40, "W": 4}, 6, "dB"),
    ("P - loss*d", None, {"P": 10, "loss": 0.5, "d": 4}, 8, "dBm"),
    ("from_decibel(P)", "W", {"P": 30}, 1, "W"),
    ("from_decibel(G)", None, {"G": 20}, 100, ""),
    ("decibel(p/p)", None, {"p": 3}, 0, "dB"),
    ("decibel(a/b)", None, {"a": 1, "b": 1}, -30, "dB"),
    ("W + g_t - boltzmann", "dBHz", {"W": 10, "g_t": -5, "boltzmann": -228.6}, 233.6, "dBHz"),
]  # fmt: skip


@pytest.mark.parametrize(
    ("text", "wanted", "numbers", "result", "unit"), CONVERTED, ids=[c[0] + f" in {c[1]}" for c in CONVERTED]
)
def test_the_number_is_right_in_the_unit_of_the_result(
    text: str, wanted: str | None, numbers: dict[str, float], result: float, unit: str
) -> None:
    found, found_unit, _ = value(text, wanted, numbers)
    assert found == pytest.approx(result, rel=1e-14, abs=1e-13)
    assert found_unit == unit


@pytest.mark.parametrize(
    ("text", "wanted"),
    [("a - c", "mm"), ("a - c + k*dT*c", "mm"), ("a*c", "mm^2"), ("rho*v^2/2", "Pa"),
     ("sqrt(a^2 + c^2)", "mm"), ("a/c", ""),
     ("exp(a/c)", None), ("max(a, c, 0)", "mm"), ("if(a > 0, a, 0)", "mm"), ("T + dT", "degC"),
     ("T - S", "K"),
     ("P + G", "dBm"), ("sin(rad)", None), ("x*a", "mm"), ("x^x", None), ("2*a", "mm"), ("E", "kN/mm^2")],
)  # fmt: skip
def test_a_coherent_formula_comes_back_as_the_same_tree(text: str, wanted: str | None) -> None:
    node = parse(text)
    assert resolve_units(node, UNITS, wanted, text)[0] is node


# formula, unit wanted, offending part, words of the message
MISFITS = [
    ("a + dT", "mm", "dT", "dT is in K, and a is in mm; a sum must have one dimension"),
    ("a - c + x*dT", "mm", "x*dT", "x*dT is in K, and a is in mm"),
    ("a + x", None, "x", "x is a plain number, and a is in mm"),
    ("a + 1", None, "1", "1 is a plain number, and a is in mm; write the number as a constant with a unit"),
    ("angle + 1", None, "1", "plain number"),
    ("max(a, 1)", None, "1", "1 is a plain number"),
    ("max(a, dT)", None, "dT", "max must have one dimension"),
    ("if(a > 1, a, c)", None, "1", "1 is a plain number"),
    ("if(a > dT, a, c)", None, "dT", "a comparison must have one dimension"),
    ("if(x > 1, a, dT)", None, "dT", "the branches of if must have one dimension"),
    ("hypot(a, v)", None, "v", "v is in m/s, and a is in mm"),
    ("1 + exp(a)", None, "a", "a is in mm, and exp takes a plain number"),
    ("log(rho)", None, "rho", "rho is in kg/m^3, and log takes a plain number"),
    ("sin(a)", None, "a", "sin takes a plain number or an angle"),
    ("floor(a)", None, "a", "floor takes a plain number"),
    ("a^x", None, "x", "the exponent of a, which is in mm, must be a number"),
    ("2^a", None, "a", "an exponent takes a plain number"),
    ("a*c", "mm", "a*c", "the formula's result is in mm^2, and a result in mm is wanted"),
    ("a/c", "mm", "a/c", "the formula's result is a plain number, and a result in mm is wanted"),
    ("a", "", "a", "the formula's result is in mm, and a plain number is wanted"),
    ("3", "mm", "3", "a plain number, and a result in mm is wanted"),
    ("x*(T + S)", None, "T + S", "temperatures in degC cannot be added"),
    ("T + S", None, "T + S", "add a difference in K"),
    ("a + T", None, "a", "a is in mm, and T is in degC"),
    ("T + 5", None, "5", "5 is a plain number, and T is in degC"),
    ("P + Q", None, "P + Q", "levels in dBm cannot be added like this"),
    ("2*P", None, "P", "P is a level in dBm and cannot stand in a product; write from_decibel(P) there"),
    ("P + a", None, "a", "a is in mm, and P is in dBm"),
    ("sqrt(P)", None, "P", "cannot stand in a power"),
    ("decibel(p)", None, "p", "p is in mW, and decibel takes a plain number"),
    ("from_decibel(a)", None, "a", "from_decibel takes dB or a level"),
    ("G", "dBm", "G", "the formula's result is in dB, and a result in dBm is wanted"),
    ("n", "Hz", "n", "differ by the angle of a turn"),
    ("a", "mmm", "a", "mmm is not a known unit; did you mean mm?"),
]  # fmt: skip


@pytest.mark.parametrize(
    ("text", "wanted", "part", "words"), MISFITS, ids=[f"{case[0]} in {case[1]}" for case in MISFITS]
)
def test_a_misfit_is_reported_at_the_part_that_does_not_fit(
    text: str, wanted: str | None, part: str, words: str
) -> None:
    with pytest.raises(FormulaError) as caught:
        resolve_units(parse(text), UNITS, wanted, text)
    assert text[caught.value.start : caught.value.end] == part
    assert words in caught.value.message


EVENTS = [
    ("a > 0.5", {"a": 1}, True),
    ("a > b", {"a": 1500, "b": 1}, True),
    ("a + 0.5 > b", {"a": 1000, "b": 1}, True),
    ("0 < a < 3 and b < 1", {"a": 1, "b": 2}, False),
    ("T > 30", {"T": 31}, True),
    ("T > F", {"T": 10, "F": 49}, True),
    ("T > F", {"T": 10, "F": 51}, False),
    ("P > -100", {"P": -90}, True),
    ("max(a, c) < 2*0.5", {"a": 0.5, "c": 0.9}, True),
    ("T > TK", {"T": 0, "TK": 273}, True),
]  # fmt: skip


@pytest.mark.parametrize(("text", "numbers", "holds"), EVENTS)
def test_plain_numbers_of_an_event_are_in_the_unit_of_the_output(
    text: str, numbers: dict[str, float], holds: bool
) -> None:
    assert bool(value(text, None, numbers, event=True)[0]) is holds


def test_an_event_still_compares_like_with_like() -> None:
    with pytest.raises(FormulaError, match="dT is in K, and a is in mm"):
        resolve_units(parse_event("a > dT"), UNITS, None, "a > dT", numbers_take_units=True)


def test_a_model_without_units_is_all_plain_numbers() -> None:
    node = parse("decibel(a) + b + 3 - exp(c)")
    assert resolve_units(node, {"a": "", "b": "", "c": ""}, None, "") == (node, "")
    assert resolve_units(node, {}, "", "") == (node, "")


def test_factors_are_exact() -> None:
    """1/1000 goes in as a division, so that 3 mm is the double nearest to 0.003 m."""
    numbers = np.arange(1, 1000, dtype=float)
    resolved, _ = resolve_units(parse("a"), UNITS, "m", "a")
    assert np.array_equal(compile_numpy(resolved, ("a",))(numbers), numbers / 1000)
    resolved, _ = resolve_units(parse("b"), UNITS, "mm", "b")
    assert np.array_equal(compile_numpy(resolved, ("b",))(numbers), numbers * 1000)


@pytest.mark.parametrize(
    "text", ["mm", "kg/m^3", "kg/m³", "m/s**2", "1/K", "N*m", "N·m", "N m", "1/(K*s)", "m^(1/2)", "degC",
             "°C", "W/degC",
             "%", "percent", "ppm", "dB", "dBm", "dB/km", "dB(W/Hz)", "Ω", "ohm", "µm", "um", "rpm", "deg",
             "°", "", "1"],
)  # fmt: skip
def test_usual_units_are_known_and_their_text_reads_back(text: str) -> None:
    assert unit_is_known(text) is None
    unit = parse_unit(text)
    again = parse_unit(str(unit))
    assert (again.kind, again.factor, again.dimension) == (unit.kind, unit.factor, unit.dimension)


@pytest.mark.parametrize(
    ("text", "right"),
    [("mmm", "did you mean mm?"), ("m2", "write m^2"), ("Celsius", "write degC"), ("deg C", "write degC"),
     ("dbm", "write dBm"),
     ("Ohm", "did you mean ohm?"), ("2*mm", "put it into the value"), ("9^9^9", "put it into the value"),
     ("m^999", "exponent out of range"), ("kg/", "write it like"), ("dBm/K", "write a level alone"),
     ("m" * 200, "at most 80"),
     ("__import__('os')", "write it like"), ("dB(dBm)", "plain unit")],
)  # fmt: skip
def test_an_unknown_unit_is_answered_with_what_would_be_right(text: str, right: str) -> None:
    found = unit_is_known(text)
    assert found is not None
    assert right in found


def test_units_of_one_dimension_are_recognised() -> None:
    assert same_dimension("mm", "inch")
    assert same_dimension("degC", "K")
    assert same_dimension("dBm", "dBW")
    assert same_dimension("N*m", "J")
    assert not same_dimension("mm", "mm^2")
    assert not same_dimension("dBm", "mW")
    assert not same_dimension("dB", "")


@pytest.mark.parametrize("damage", [b"", b"\x80\x04 not a pickle"])
def test_a_damaged_cache_of_unit_definitions_is_passed_over(
    damage: bytes, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path))
    assert unit_words._registry.__wrapped__().parse_units("mm") is not None
    cached = [path for path in tmp_path.rglob("*") if path.is_file()]
    assert cached
    for path in cached:
        path.write_bytes(damage)
    assert unit_words._registry.__wrapped__().parse_units("mm") is not None


def test_usual_units_are_those_of_the_unit_library() -> None:
    """Factor, dimension and angle of every word of the table, as exact fractions, against pint's definitions.

    But for mcd, which pint reads as a millionth of a day and the SI Brochure (9th edition, tables 2 and 7) as
    the millicandela.
    """
    words = usual_words()
    assert len(words) > 1500
    differing = [word for word in words if usual_unit(word) != unit_words.library_definition(word)]
    assert set(differing) <= {"mcd"}
    assert usual_unit("mcd") == (Fraction(1, 1000), (("candela", Fraction(1)),), Fraction(0))


@pytest.mark.parametrize("word", ["hbar", "mmm", "kmin", "metres", "furlong", "m2", "kkg", "millim", "k", ""])
def test_other_words_are_left_to_the_unit_library(word: str) -> None:
    """No prefix without a unit, none twice, none on a unit that takes none, and no symbol after a name."""
    assert usual_unit(word) is None


@pytest.mark.parametrize(
    "unit", ["", "kg*m^2/s^2", "N*mm", "degC", "dBm", "µm", "°", "%", "1/K", "kilonewton", "mW/Hz"]
)
def test_formulas_in_usual_units_do_not_load_the_unit_library(unit: str) -> None:
    code = (
        "import sys; from outspread.formula.parser import parse\n"
        "from outspread.formula.units import resolve_units\n"
        f"resolve_units(parse('x - y'), {{'x': {unit!r}, 'y': {unit!r}}}, None, 'x - y')\n"
        "print([m for m in ('pint', 'scipy', 'sympy', 'ziamath') if m in sys.modules])"
    )
    done = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, check=True, env=_environment()
    )
    assert done.stdout.strip() == "[]"


def _environment() -> dict[str, str]:
    import os

    return {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)}
