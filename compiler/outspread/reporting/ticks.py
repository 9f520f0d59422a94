"""Labels the axes of a figure in plain characters, with a common power of ten in the axis's name.

Plain because matplotlib sets every tick of its own as a formula, which takes longer than all the rest of a
figure, and because a power left at the end of an axis is easily overlooked.
"""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Literal

import numpy as np

from outspread.reporting.numbers import MINUS, power_of_ten

if TYPE_CHECKING:
    from matplotlib.axes import Axes


def linear(
    axes: Axes, which: Literal["x", "y"], low: float, high: float, name: str, whole: bool = False
) -> None:
    """Sets limits, ticks, tick labels and the name of one linear axis; `whole`: at whole numbers only."""
    from matplotlib.ticker import MaxNLocator

    locator = MaxNLocator(nbins=8 if which == "x" else 5, steps=[1, 2, 2.5, 5, 10], integer=whole)
    span = high - low
    places = [
        float(p) for p in locator.tick_values(low, high) if low - 1e-9 * span <= p <= high + 1e-9 * span
    ]
    labels, power = tick_labels(places)
    name = f"{name} (numbers × {power_of_ten(power)})" if power else name
    if which == "x":
        axes.set_xlim(low, high)
        axes.set_xticks(places, labels)
        axes.set_xlabel(name)
    else:
        axes.set_ylim(low, high)
        axes.set_yticks(places, labels)
        axes.set_ylabel(name)


def tick_labels(places: list[float]) -> tuple[list[str], int]:
    """Labels that tell the places apart, and the power of ten taken out of them (0: none)."""
    reach = max((abs(place) for place in places), default=0.0)
    power = math.floor(math.log10(reach)) if reach > 0 and not 1e-2 <= reach < 1e5 else 0
    scaled = np.array(places, float) * 10.0**-power if power > -300 else np.array(places, float)
    step = (
        float(np.min(np.diff(scaled))) if scaled.size > 1 else abs(float(scaled[0])) if scaled.size else 1.0
    )
    decimals = next((d for d in range(13) if np.all(np.abs(np.round(scaled, d) - scaled) < 1e-6 * step)), 12)
    return [f"{value + 0.0:.{decimals}f}".replace("-", MINUS) for value in np.round(scaled, decimals)], power


def powers(axes: Axes, depth: float) -> None:
    """Ticks at powers of ten from `depth` to 1 on a logarithmic vertical axis."""
    lowest = math.floor(math.log10(depth))
    exponents = list(range(lowest, 1, max(1, -lowest // 6)))
    axes.set_yticks([10.0**k for k in exponents], [power_of_ten(k) if k else "1" for k in exponents])
    axes.set_yticks([], minor=True)
    axes.set_ylim(depth / 2, 1.6)
