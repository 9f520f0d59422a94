"""Labels of limits over a plot: none covers another, and each stays by its line."""

from __future__ import annotations

from itertools import pairwise

import pytest

from outspread.reporting.curves import GAP, LETTER, placed_labels

WIDTH = 300.0


@pytest.mark.parametrize(
    ("at", "rows"),
    [
        ([40.0, 200.0], [0, 0]),  # far apart: each over its line
        ([150.0, 172.0], [0, 0]),  # close: one to the left, one to the right
        ([150.0, 156.0, 162.0], [0, 0, 1]),  # three: the last a row higher
        ([2.0, 20.0], [0, 0]),
        ([280.0, 298.0], [0, 0]),
    ],
)
def test_labels_do_not_cover_each_other(at: list[float], rows: list[int]) -> None:
    """Boxes in one row keep a gap between them; the line stands over or beside its label."""
    texts = ["limit 2.5"] * len(at)
    places = placed_labels(at, texts, WIDTH)
    half = LETTER * len(texts[0]) / 2
    assert [place.row for place in places] == rows
    for row in set(rows):
        centres = sorted(x + place.shift for x, place in zip(at, places, strict=True) if place.row == row)
        assert all(right - left >= 2 * half + GAP - 1e-9 for left, right in pairwise(centres))
    assert all(abs(place.shift) <= half for place in places)


def test_a_label_alone_stands_over_its_line() -> None:
    """No shift and no higher row without need."""
    assert [(place.shift, place.row) for place in placed_labels([120.0], ["limit 7"], WIDTH)] == [(0.0, 0)]
