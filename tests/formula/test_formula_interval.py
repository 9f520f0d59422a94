"""Enclosures hold the true range: against mpmath at points inside, and for every operator at its edges."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from precise import Undefined, precise
from random_formulas import formulas

from outspread.formula.evaluate import compile_numpy
from outspread.formula.interval import Interval, enclose
from outspread.formula.parser import parse, parse_event
from outspread.formula.tree import Apply, Name, Node, Number

INF, NAN = np.inf, np.nan
PI = np.pi


def enclosed(text: str, **box: tuple[float, float]) -> tuple[float, float]:
    read = parse_event if any(sign in text for sign in "<>=") and "if" not in text else parse
    found = enclose(read(text), {name: Interval.of(*ends) for name, ends in box.items()})
    return float(found.lower), float(found.upper)


# Ranges by elementary calculus; the enclosure may be wider by roundings only.
RANGES = [
    ("x + y", {"x": (1, 2), "y": (-1, 1)}, (0, 3)),
    ("x - y", {"x": (1, 2), "y": (-1, 1)}, (0, 3)),
    ("x + y", {"x": (-INF, 2), "y": (-1, INF)}, (-INF, INF)),
    ("x*y", {"x": (-1, 2), "y": (-3, 4)}, (-6, 8)),
    ("x*y", {"x": (0, 0), "y": (-INF, INF)}, (0, 0)),
    ("x*x", {"x": (-1, 2)}, (0, 4)),
    ("x*x*y", {"x": (-1, 2), "y": (-1, 1)}, (-4, 4)),
    ("1/x", {"x": (2, 4)}, (0.25, 0.5)),
    ("1/x", {"x": (-1, 2)}, (-INF, INF)),
    ("1/x", {"x": (0, 2)}, (0.5, INF)),
    ("1/x", {"x": (-2, 0)}, (-INF, -0.5)),
    ("1/x", {"x": (0, 0)}, (-INF, INF)),
    ("1/x", {"x": (4, INF)}, (0, 0.25)),
    ("x/y", {"x": (-1, 2), "y": (0, 2)}, (-INF, INF)),
    ("x/y", {"x": (1, 2), "y": (0, 2)}, (0.5, INF)),
    ("x/y", {"x": (1, INF), "y": (1, INF)}, (0, INF)),
    ("x^2", {"x": (-1, 2)}, (0, 4)),
    ("x^3", {"x": (-1, 2)}, (-1, 8)),
    ("x^-2", {"x": (-1, 2)}, (0.25, INF)),
    ("x^-3", {"x": (-1, 2)}, (-INF, INF)),
    ("x^-3", {"x": (0, 2)}, (0.125, INF)),
    ("x^-3", {"x": (-2, 0)}, (-INF, -0.125)),
    ("x^0.5", {"x": (-1, 4)}, (0, 2)),
    ("x^0.5", {"x": (-2, -1)}, (NAN, NAN)),
    ("x^-0.5", {"x": (0, 4)}, (0.5, INF)),
    ("x^y", {"x": (0.5, 2), "y": (-1, 2)}, (0.25, 4)),
    ("x^y", {"x": (-2, -1), "y": (2, 2)}, (1, 4)),
    ("x^y", {"x": (-2, -1), "y": (1.25, 1.75)}, (NAN, NAN)),
    ("x^y", {"x": (-2, -1), "y": (1, 2)}, (-4, 4)),
    ("sqrt(x)", {"x": (-1, 4)}, (0, 2)),
    ("sqrt(x)", {"x": (-2, -1)}, (NAN, NAN)),
    ("log(x)", {"x": (-1, 1)}, (-INF, 0)),
    ("log(x)", {"x": (-2, -1)}, (NAN, NAN)),
    ("log10(x)", {"x": (10, 1000)}, (1, 3)),
    ("exp(x)", {"x": (-INF, 0)}, (0, 1)),
    ("abs(x)", {"x": (-3, 2)}, (0, 3)),
    ("abs(x)", {"x": (-3, -2)}, (2, 3)),
    ("sign(x)", {"x": (-3, 2)}, (-1, 1)),
    ("floor(x)", {"x": (-0.5, 1.5)}, (-1, 1)),
    ("ceil(x)", {"x": (-0.5, 1.5)}, (0, 2)),
    ("min(x, y)", {"x": (0, 3), "y": (1, 2)}, (0, 2)),
    ("max(x, y)", {"x": (0, 3), "y": (1, 2)}, (1, 3)),
    ("hypot(x, y)", {"x": (-3, 1), "y": (-4, -1)}, (1, 5)),
    ("sin(x)", {"x": (0, PI)}, (0, 1)),
    ("sin(x)", {"x": (3, 9)}, (-1, 1)),
    ("sin(x)", {"x": (-0.5, 0.5)}, (-np.sin(0.5), np.sin(0.5))),
    ("cos(x)", {"x": (-0.5, 1)}, (np.cos(1), 1)),
    ("cos(x)", {"x": (1, INF)}, (-1, 1)),
    ("tan(x)", {"x": (1, 2)}, (-INF, INF)),
    ("tan(x)", {"x": (-1, 1)}, (-np.tan(1), np.tan(1))),
    ("asin(x)", {"x": (0, 3)}, (0, PI / 2)),
    ("acos(x)", {"x": (-3, 0)}, (PI / 2, PI)),
    ("acos(x)", {"x": (2, 3)}, (NAN, NAN)),
    ("atan(x)", {"x": (-INF, INF)}, (-PI / 2, PI / 2)),
    ("atan2(y, x)", {"x": (-1, 1), "y": (-1, 1)}, (-PI, PI)),
    ("atan2(y, x)", {"x": (-2, -1), "y": (1, 2)}, (np.arctan2(2, -1), np.arctan2(1, -2))),
    ("atan2(y, x)", {"x": (0, 1), "y": (-1, 1)}, (-PI / 2, PI / 2)),
    ("atan2(y, x)", {"x": (-1, 1), "y": (0, 1)}, (0, PI)),
    ("cosh(x)", {"x": (-1, 2)}, (1, np.cosh(2))),
    ("sinh(x)", {"x": (-1, 2)}, (-np.sinh(1), np.sinh(2))),
    ("tanh(x)", {"x": (-INF, INF)}, (-1, 1)),
    ("erf(x)", {"x": (-INF, INF)}, (-1, 1)),
    ("gamma(x)", {"x": (1, 3)}, (0.8856031944108887, 2)),  # DLMF 5.4.20
    ("gamma(x)", {"x": (0, 1)}, (1, INF)),
    ("gamma(x)", {"x": (-1.5, 1)}, (-INF, INF)),
    ("decibel(x)", {"x": (1, 100)}, (0, 20)),
    ("from_decibel(x)", {"x": (-10, 20)}, (0.1, 100)),
    ("if(x < 0, -x, 2*x)", {"x": (1, 2)}, (2, 4)),
    ("if(x < 0, -x, 2*x)", {"x": (-2, -1)}, (1, 2)),
    ("if(x > 0, sqrt(x), 7)", {"x": (-2, -1)}, (7, 7)),
    ("if(x > 0, sqrt(x), 7)", {"x": (-2, 4)}, (0, 7)),
    ("x < y", {"x": (0, 1), "y": (2, 3)}, (1, 1)),
    ("x < y", {"x": (0, 1), "y": (1, 3)}, (0, 1)),
    ("x < y", {"x": (1, 2), "y": (0, 1)}, (0, 0)),
    ("x <= y", {"x": (0, 1), "y": (1, 3)}, (1, 1)),
    ("x == y", {"x": (1, 1), "y": (1, 1)}, (1, 1)),
    ("x != y", {"x": (0, 1), "y": (2, 3)}, (1, 1)),
    ("not x > 1", {"x": (2, 3)}, (0, 0)),
    ("x > 0 and y > 0 or x < -5", {"x": (1, 2), "y": (-1, 1)}, (0, 1)),
]  # fmt: skip


@pytest.mark.parametrize(("text", "box", "wanted"), RANGES, ids=[f"{case[0]} {case[1]}" for case in RANGES])
def test_the_enclosure_is_the_range_up_to_rounding(
    text: str, box: dict[str, tuple[float, float]], wanted: tuple[float, float]
) -> None:
    low, high = enclosed(text, **box)
    assert (low, high) == pytest.approx(wanted, rel=1e-11, abs=1e-14, nan_ok=True)
    if not np.isnan(wanted[0]):
        assert low <= wanted[0] + 4e-16  # the table is rounded, too
        assert high >= wanted[1] - 4e-16


def _boxes(count: int, seed: int) -> tuple[dict[str, Interval], np.random.Generator]:
    """Boxes of all widths around the origin, some with whole-number ends, some single points."""
    generator = np.random.default_rng(seed)
    centre = generator.uniform(-4.0, 4.0, (3, count))
    width = 10.0 ** generator.uniform(-9.0, 0.6, (3, count))
    low, high = centre - width, centre + width
    low[:, ::5], high[:, ::5] = np.round(low[:, ::5]) + 0.0, np.round(high[:, ::5]) + 1.0
    high[:, 1::7] = low[:, 1::7]
    return {name: Interval(low[i], high[i]) for i, name in enumerate("xyz")}, generator


@given(formulas)
@settings(max_examples=120, deadline=None, derandomize=True)
def test_values_of_numpy_lie_inside(node: Node) -> None:
    count = 60
    box, generator = _boxes(count, 11)
    found = enclose(node, box)
    function = compile_numpy(node, ("x", "y", "z"))
    for step in range(12):
        share = generator.uniform(size=(3, count)) if step else np.zeros((3, count))
        points = [
            np.clip(box[n].lower + (box[n].upper - box[n].lower) * share[i], box[n].lower, box[n].upper)
            for i, n in enumerate("xyz")
        ]
        values = function(*points)
        for index in np.flatnonzero(np.isfinite(values) & ~found.contains(values)):
            # numpy may step over a pole or a jump by rounding: mpmath decides
            point = dict(zip("xyz", (p[index] for p in points), strict=True))
            try:
                true = precise(node, point)
            except Undefined:
                continue
            assert found.lower[index] <= true <= found.upper[index], (node, point)


@given(formulas)
@settings(max_examples=120, deadline=None, derandomize=True)
def test_true_values_lie_inside(node: Node) -> None:
    """mpmath at 40 digits, so that rounding by half a unit in the wrong direction would be seen."""
    count = 12
    box, generator = _boxes(count, 13)
    found = enclose(node, box)
    for index in range(count):
        share = generator.uniform(size=3)
        point = {
            n: float(
                np.clip(
                    b.lower[index] + (b.upper[index] - b.lower[index]) * share[i],
                    b.lower[index],
                    b.upper[index],
                )
            )
            for i, (n, b) in enumerate(box.items())
        }
        try:
            true = precise(node, point)
        except Undefined:
            continue
        assert found.lower[index] <= true <= found.upper[index], (node, point)


@pytest.mark.parametrize(
    "operator", ["sqrt", "exp", "log", "log10", "sin", "cos", "tan", "asin", "acos", "atan", "sinh", "cosh",
                 "tanh",
                 "erf", "gamma", "decibel", "from_decibel"],
)  # fmt: skip
def test_single_points_are_enclosed_tightly_and_soundly(operator: str) -> None:
    """The assumption on the accuracy of the library functions, tried at 500 points each against mpmath."""
    points = np.random.default_rng(3).uniform(0.01, 0.99, 500) * np.where(np.arange(500) % 2, 1.0, 20.0)
    if operator in ("asin", "acos"):
        points = points[points < 1.0]
    found = enclose(Apply(operator, (Name("x"),)), {"x": Interval.of(points)})
    for low, high, point in zip(found.lower, found.upper, points, strict=True):
        true = precise(Apply(operator, (Name("x"),)), {"x": point})
        assert low <= true <= high
        assert high - low <= 4e-12 * max(abs(high), 1e-3)


def test_polygamma_is_enclosed() -> None:
    node = Apply("polygamma", (Number(0.0), Name("x")))
    found = enclose(node, {"x": Interval.of([0.5, 1.2, -1.0], [1.0, 1.6, 1.0])})
    # digamma(1/2) = -gamma - 2 log 2, digamma(1) = -gamma (DLMF 5.4.12, 5.4.13)
    assert found.lower[0] == pytest.approx(-np.euler_gamma - 2 * np.log(2), rel=1e-11)
    assert found.upper[0] == pytest.approx(-np.euler_gamma, rel=1e-11)
    assert found.contains(precise(node, {"x": 1.4}))[1]
    assert (found.lower[2], found.upper[2]) == (-INF, INF)


def test_arrays_broadcast() -> None:
    found = enclose(parse("x + y"), {"x": Interval.of(np.zeros((4, 1))), "y": Interval.of(np.ones(3))})
    assert found.lower.shape == found.upper.shape == (4, 3)
    assert enclose(parse("2"), {"x": Interval.of(np.zeros(5))}).lower.shape == (5,)
