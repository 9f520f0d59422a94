"""What a comparison of a derivation with something independent found, as a frozen value."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class Comparison:
    """`largest_difference` was judged against `allowed` at `points` points; `confidence` is the probability
    with which a right answer stays inside; `curve` is (x, difference) for a plot where there is one."""

    output: str
    against: str
    points: int
    largest_difference: float
    allowed: float
    agrees: bool
    confidence: float = 1.0
    curve: tuple[tuple[float, float], ...] = ()
    note: str = ""
