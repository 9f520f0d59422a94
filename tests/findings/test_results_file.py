"""The results file: rounding that holds, stable bytes, whole files."""

from __future__ import annotations

import json
from decimal import Decimal
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as some

from outspread.findings.results import Absent, Figure
from outspread.findings.writing import finding, read_results, rounded, write_bytes

values = some.floats(-1e12, 1e12, allow_nan=False)
errors = some.floats(1e-300, 1e6, allow_nan=False)


@given(values, errors, some.floats(0, 1e6))
def test_printed_error_covers_the_rounding(value: float, error: float, scale: float) -> None:
    """Whatever lies within the error of the value lies within the printed error of the printed value."""
    shown, stated = rounded(value, error, scale)
    assert abs(Decimal(repr(shown)) - Decimal(value)) + Decimal(error) <= Decimal(repr(stated))


@given(values, errors)
def test_no_digit_below_the_error(value: float, error: float) -> None:
    """The printed value ends at the decimal place of the printed error, which has one digit: 1, 2 or 5."""
    shown, stated = rounded(value, error)
    digits = Decimal(repr(stated)).normalize().as_tuple().digits
    assert digits in {(1,), (2,), (5,)}
    place = Decimal(repr(stated)).adjusted()
    assert Decimal(repr(shown)).normalize().as_tuple().exponent >= place or shown == 0.0


# 7 times the largest error is below 1e-10 of the smallest value: both are tiny, and neither is printed
@given(some.floats(1e-3, 1e6), some.floats(1e-16, 1e-14), some.sampled_from([1 - 1e-15, 1 + 1e-15]))
def test_noise_in_the_last_place_does_not_show(value: float, error: float, noise: float) -> None:
    """Another machine's last bit and another estimate of a tiny error give nearly always the same text."""
    ours, theirs = rounded(value, error), rounded(value * noise, 7 * error)
    assert abs(ours[0] - theirs[0]) <= ours[1]
    assert ours[1] == pytest.approx(theirs[1], rel=1.01)


@pytest.mark.parametrize(
    ("value", "error", "scale", "shown"),
    [
        (1.9599639845400545, 1e-13, 0.0, (1.9599639845, 5e-10)),  # nothing below 1e-10 of the value
        (1e-17, 1e-16, 1.0, (0.0, 2e-10)),
        (123456.789, 0.3, 0.0, (123456.8, 0.5)),
        (0.98765, 0.002, 0.0, (0.988, 0.005)),
        (3.0, 0.0, 1.0, (3.0, 0.0)),  # exact
        (1.23456e-200, 3e-205, 0.0, (1.23456e-200, 5e-205)),
    ],
)
def test_rounding_by_example(value: float, error: float, scale: float, shown: tuple[float, float]) -> None:
    """A few figures as they stand in a file."""
    assert rounded(value, error, scale) == shown


def test_absent_figures_say_why() -> None:
    """A figure that does not exist is no number."""
    assert finding(Absent("the mean does not exist")) == {
        "exists": False,
        "because": "the mean does not exist",
    }
    assert finding(Figure(float("inf"), 0.0))["exists"] is False


def test_nothing_is_half_written(tmp_path: Path) -> None:
    """A fault while writing leaves the old file and no other."""
    target = tmp_path / "a.results.json"
    write_bytes(target, b"old")
    with pytest.raises(TypeError):
        write_bytes(target, "not bytes")  # type: ignore[arg-type]
    assert target.read_bytes() == b"old"
    assert [path.name for path in tmp_path.iterdir()] == ["a.results.json"]
    write_bytes(target, b"new")
    assert target.read_bytes() == b"new"


def test_reading_refuses_what_is_no_results_file(tmp_path: Path) -> None:
    """The message names the file."""
    path = tmp_path / "x.json"
    path.write_text("{", encoding="utf-8")
    with pytest.raises(ValueError, match=r"x\.json is no results file"):
        read_results(path)
    path.write_text(json.dumps({"outspread": 9, "outputs": {}}), encoding="utf-8")
    with pytest.raises(ValueError, match="format 1"):
        read_results(path)
