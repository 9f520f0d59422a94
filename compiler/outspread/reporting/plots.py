"""Draws the report's figures as SVG, the same bytes on every run; what they show is chosen by `curves`.

Lines differ by style as well as by shade, so that a copy in grey says the same.
"""

from __future__ import annotations

import base64
import io
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from outspread.findings.results import Evidence, Figure, OutputResults
from outspread.laws.law import Array, Law
from outspread.reporting import curves, ticks
from outspread.reporting.curves import Limit, Reach
from outspread.reporting.numbers import brief, unit_text
from outspread.reporting.tables import central

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure as Canvas

INK = "#17324d"
RUST = "#b0501e"
STONE = "#8a8f94"
BAND = "#dfe5ea"
WIDTH = 5.6  # inches

_STYLE: Any = {  # matplotlib types each key of its settings by name
    "font.family": "DejaVu Sans",
    "font.size": 8.5,
    "axes.edgecolor": "#4c5358",
    "axes.labelcolor": "#22282d",
    "axes.linewidth": 0.7,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "xtick.color": "#4c5358",
    "ytick.color": "#4c5358",
    "xtick.labelcolor": "#22282d",
    "ytick.labelcolor": "#22282d",
    "lines.solid_capstyle": "round",
    "legend.frameon": False,
    "legend.fontsize": 8,
    "svg.fonttype": "path",
    "svg.hashsalt": "outspread",
    "path.simplify": True,
    "path.simplify_threshold": 0.05,
}


@dataclass(frozen=True)
class Picture:
    """A finished figure: its data URL and the words that replace it for those who cannot see it."""

    url: str
    alt: str


@dataclass(frozen=True)
class Subject:
    """An output to be drawn: its law, its findings, the values that requirements name, and its reach."""

    law: Law
    output: OutputResults
    limits: tuple[Limit, ...]
    reach: Reach


@contextmanager
def _figure(height: float) -> Iterator[tuple[Canvas, list[str]]]:
    """An empty figure in the report's style; its data URL is appended to the list when the block ends."""
    import matplotlib as mpl
    from matplotlib.backends.backend_svg import FigureCanvasSVG
    from matplotlib.figure import Figure as Canvas

    with mpl.rc_context(_STYLE):
        figure = Canvas(figsize=(WIDTH, height))
        FigureCanvasSVG(figure)
        urls: list[str] = []
        yield figure, urls
        target = io.BytesIO()
        figure.savefig(target, format="svg", metadata={"Date": None, "Creator": None})
    urls.append("data:image/svg+xml;base64," + base64.b64encode(target.getvalue()).decode("ascii"))


def _axis_name(output: OutputResults) -> str:
    unit = unit_text(output.unit)
    return f"{output.name} in {unit}" if unit not in ("", "1") else output.name


def law_picture(subject: Subject) -> Picture:
    """Density (or probabilities) above, distribution function below, one horizontal axis."""
    law, output, limits = subject.law, subject.output, subject.limits
    low, high = curves.window(subject.reach, tuple(limit.at for limit in limits))
    both = curves.sample(law, low, high)
    discrete = law.continuous_mass == 0.0
    width = 0.76 if discrete or not output.atom_count else 0.73  # room for a second scale
    with _figure(3.55) as (figure, urls):
        above = figure.add_axes((0.13, 0.55, width, 0.37))
        below = figure.add_axes((0.13, 0.125, width, 0.37), sharex=above)
        band = central(output)
        for axes in (above, below):
            if band is not None:
                axes.axvspan(band[1].value, band[2].value, color=BAND, lw=0, zorder=0)
            axes.set_xlim(low, high)
        _draw_density(above, law, output, both.density)
        _draw_distribution(below, law, output, both)
        for axes in (above, below):
            _mark_limits(axes, limits, low, high, named=axes is above)
        ticks.linear(below, "x", low, high, _axis_name(output), _whole(law))
        above.tick_params(labelbottom=False)
    what = "Probabilities" if discrete else "Density and atoms" if output.atom_count else "Density"
    middle = output.median
    median = f"; median {brief(middle.value, middle.error)}" if isinstance(middle, Figure) else ""
    return Picture(urls[0], f"{what} and distribution function of {_axis_name(output)}{median}.")


def _whole(law: Law) -> bool:
    """Whether the law lives on whole numbers: then ticks between them would mean nothing."""
    values = law.atoms().values
    return law.continuous_mass == 0.0 and bool(np.all(values == np.round(values)))


def _draw_density(axes: Axes, law: Law, output: OutputResults, curve: curves.DensityCurve) -> None:
    discrete = law.continuous_mass == 0.0
    low, high = float(curve.x[0]), float(curve.x[-1])
    if not discrete:
        axes.plot(curve.x, curve.y, color=INK, lw=1.4)
        unit = unit_text(output.unit)
        name = f"density in 1/{unit}" if unit not in ("", "1") else "density"
        ticks.linear(axes, "y", 0.0, curve.top, name)
        for point in curve.unbounded:
            at_top: Any = {"xycoords": ("data", "axes fraction"), "ha": "center", "va": "bottom"}
            axes.annotate("↑", (point, 1.0), color=INK, fontsize=11, **at_top)
    atoms = law.atoms()
    seen = (atoms.values >= low) & (atoms.values <= high)
    if not np.any(seen):
        return
    beside: Axes = axes if discrete else axes.twinx()
    values, masses = atoms.values[seen][: curves.MOST_POINTS], atoms.masses[seen][: curves.MOST_POINTS]
    beside.vlines(values, 0, masses, color=INK if discrete else RUST, lw=1.6 if values.size < 60 else 0.8)
    if values.size <= 60:
        beside.plot(values, masses, "D", color=INK if discrete else RUST, ms=3.6, clip_on=False)
    name = "probability" if discrete else "atoms (◆)"
    ticks.linear(beside, "y", 0.0, 1.12 * float(np.max(masses)), name)
    if not discrete:
        beside.spines["right"].set_visible(True)
        beside.set_xlim(low, high)


def _draw_distribution(axes: Axes, law: Law, output: OutputResults, both: curves.Curves) -> None:
    x, y = both.x, both.cdf
    low, high = float(x[0]), float(x[-1])
    if law.continuous_mass == 0.0:
        axes.step(x, y, where="post", color=INK, lw=1.4)
    else:
        axes.plot(x, y, color=INK, lw=1.4)
    ticks.linear(axes, "y", 0.0, 1.03, "distribution function")
    labelled = -1.0
    for p, quantile in output.quantiles:
        if not isinstance(quantile, Figure) or not low <= quantile.value <= high:
            continue
        axes.plot([quantile.value], [p], "o", mfc="white", mec=RUST, mew=1.1, ms=4.6, zorder=5, clip_on=False)
        if p - labelled > 0.08:
            share = (quantile.value - low) / (high - low)
            # the curve rises: above it on its left, below it on its right, there is room
            above = p < 0.1
            edge = share < 0.075
            left = above or share > 0.72
            axes.annotate(
                f"{p:g}",
                (quantile.value, p),
                xytext=(0 if edge else -4 if above else -6 if left else 6, 7 if edge else 4 if above else -7),
                textcoords="offset points",
                ha="center" if edge else "right" if left else "left",
                va="bottom" if above else "center",
                color=RUST,
                fontsize=7.5,
            )
            labelled = p


def _mark_limits(axes: Axes, limits: tuple[Limit, ...], low: float, high: float, named: bool) -> None:
    """Vertical lines at the values that requirements name, numbered above the upper panel."""
    seen = [limit for limit in limits if low <= limit.at <= high]
    for limit in seen:
        axes.axvline(limit.at, color="#22282d", lw=1.0, ls=(0, (5, 2, 1, 2)), zorder=3)
    if not named:
        return
    texts = [f"limit {brief(limit.at, 0.0)}" for limit in seen]
    points = axes.get_position().width * WIDTH * 72.0
    at = [points * (limit.at - low) / (high - low) for limit in seen]
    for limit, text, place in zip(seen, texts, curves.placed_labels(at, texts, points), strict=True):
        axes.annotate(
            text,
            (limit.at, 1.0),
            xycoords=("data", "axes fraction"),
            xytext=(place.shift, 3 + place.row * 9.5),
            textcoords="offset points",
            ha="center",
            va="bottom",
            fontsize=7.5,
        )


def tail_picture(subject: Subject) -> Picture | None:
    """Both tails on a logarithmic scale; None where the law is a single point."""
    law, output, limits = subject.law, subject.output, subject.limits
    low, high, depth = curves.tail_window(subject.reach)
    if not high > low:
        return None
    x, below, above = curves.tails(law, low, high, depth)
    depth = min(curves.drawn_depth(depth, below, above), 0.1)
    step = "steps-post" if law.continuous_mass == 0.0 else "default"
    margin = 0.04 * (high - low)
    with _figure(2.7) as (figure, urls):
        axes = figure.add_axes((0.13, 0.175, 0.76, 0.68))
        axes.set_yscale("log")
        axes.plot(x, below, color=INK, lw=1.4, drawstyle=step, label="P(at most this value)")
        axes.plot(x, above, color=RUST, lw=1.4, ls=(0, (4, 2)), drawstyle=step, label="P(above this value)")
        ticks.powers(axes, depth)
        ticks.linear(axes, "x", low - margin, high + margin, _axis_name(output), _whole(law))
        _mark_limits(axes, limits, low - margin, high + margin, named=False)
        axes.set_ylabel("probability")
        axes.legend(loc="lower left", bbox_to_anchor=(0.0, 1.0), ncols=2, handlelength=3.2, borderaxespad=0.2)
        axes.grid(axis="y", color="#e3e6e8", lw=0.5)
    alt = f"Both tails of {_axis_name(output)} on a logarithmic scale, down to a probability of {depth:g}."
    return Picture(urls[0], alt)


def evidence_picture(evidence: Evidence, subject: Subject) -> Picture:
    """The difference of the two derivations inside the band that a right answer stays in, over the range
    of the law's own figure and the place of the largest difference."""
    law, output = subject.law, subject.output
    x, y = curves.thinned(evidence.curve)
    low, high = curves.window(subject.reach)
    worst = float(x[np.argmax(np.abs(y))])
    low, high = min(low, worst), max(high, worst)
    reach = max(evidence.allowed, evidence.largest_difference)
    with _figure(2.5) as (figure, urls):
        axes = figure.add_axes((0.13, 0.19, 0.76, 0.76))
        bound = evidence.allowed
        axes.axhspan(-bound, bound, color=BAND, lw=0, zorder=0)
        for side in (-bound, bound):
            axes.axhline(side, color=STONE, lw=1.0, ls=(0, (4, 2)))
        axes.axhline(0, color=STONE, lw=0.6)
        step = "steps-post" if law.continuous_mass == 0.0 else "default"
        axes.plot(x, y, color=INK, lw=1.0, drawstyle=step)
        if high > low:
            ticks.linear(axes, "x", low, high, _axis_name(output), _whole(law))
        if reach > 0:
            ticks.linear(axes, "y", -1.25 * reach, 1.25 * reach, "difference")
    verb = "stays inside" if evidence.agrees else "leaves"
    band = f"the band of ±{evidence.allowed:.3g}"
    what = f"Difference of the two distribution functions of {output.name}"
    return Picture(urls[0], f"{what}: it {verb} {band}.")


def joint_picture(pdf: Callable[[Array], Array], first: Subject, second: Subject) -> Picture:
    """Contours of a joint density of two outputs at stated fractions of its greatest value on the grid."""
    ranges = [curves.window(subject.reach) for subject in (first, second)]
    columns, rows = (np.linspace(low, high, 60) for low, high in ranges)
    mesh = np.meshgrid(columns, rows)
    with np.errstate(all="ignore"):
        heights = np.asarray(pdf(np.stack([mesh[0].ravel(), mesh[1].ravel()])), float).reshape(mesh[0].shape)
    heights = np.where(np.isfinite(heights), heights, 0.0)
    greatest = float(np.max(heights))
    with _figure(3.7) as (figure, urls):
        axes = figure.add_axes((0.155, 0.125, 0.68, 0.82))
        if greatest > 0:
            _contours(axes, columns, rows, heights / greatest)
        ticks.linear(axes, "x", *ranges[0], _axis_name(first.output), _whole(first.law))
        ticks.linear(axes, "y", *ranges[1], _axis_name(second.output), _whole(second.law))
    alt = f"Contours of the joint density of {_axis_name(first.output)} and {_axis_name(second.output)}."
    return Picture(urls[0], alt)


def _contours(axes: Axes, columns: Array, rows: Array, share: Array) -> None:
    levels = [0.01, 0.1, 0.5, 0.9]
    styles = [(0, (1, 2)), (0, (4, 2)), "solid", "solid"]
    for level, style, width in zip(levels, styles, (1.0, 1.1, 1.1, 1.7), strict=True):
        if not float(np.min(share)) < level < float(np.max(share)):
            continue
        look: Any = {"colors": [INK], "linestyles": [style], "linewidths": width}
        lines = axes.contour(columns, rows, share, levels=[level], **look)
        axes.clabel(lines, fmt={level: f"{level:g}"}, fontsize=7)
