"""A nonnegative function of one variable as Chebyshev series on panels, refined until each series holds.

On a panel the logarithm of the function is expanded (so that it keeps its digits relative to itself), or the
function itself where it takes the value 0. Next to a knot, where a kink, a jump, a power or a logarithm may
sit, and towards an infinite end, the coordinate is the logarithm of the distance. The error stated is what
the function's own error can grow to between the nodes, plus the tail of the series.

Method: Trefethen (2013), Approximation Theory and Approximation Practice, chapters 3, 8 and 15 (the Lebesgue
constant of Chebyshev points); bisection on the decay of the coefficients.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
import numpy.typing as npt
from numpy.polynomial import chebyshev

from outspread.laws.law import Estimates

Array = npt.NDArray[np.float64]
Index = npt.NDArray[np.int64]
Evaluate = Callable[[Array], Estimates]

SIZE = 20  # nodes, and coefficients, of a panel
LEAST = 1e-290  # below this a value is taken for 0, and stated to be off by as much
_FADED = 1e5  # a panel that ends below the least and stays below so many times that counts as 0 throughout
_LEBESGUE = 2.9  # of 20 Chebyshev points: 2/pi log(20) + 0.97
_FLAT, _LOG, _ZERO, _AFAR = 0, 1, 2, 3
_DIFFERENTIATED = 620.0  # a quarter of the sum of k^2 below SIZE: the tail sums four coefficients
_KNOWN = 0.3  # relative error of values whose logarithm says something
_SLACK = 30.0  # units in the last place by which rounding may have moved the argument of a firm value
_NARROW = 12.0  # ratio of the values of a panel up to which its nodes may differ in noise
_NEGLIGIBLE = 1e-17  # where values that small need no digits each, one error may stand for a panel
_MOST = 2_500  # panels
_LINEAR_ATTEMPTS = 2  # bisections at a knot before the logarithm of the distance is taken
_NODES: Array = np.cos(np.pi * (np.arange(SIZE) + 0.5) / SIZE)[::-1]
_TRANSFORM: Array = (2 / SIZE) * np.cos(np.arange(SIZE)[:, None] * np.arccos(np.clip(_NODES, -1, 1))[None, :])
_TRANSFORM[0] /= 2


@dataclass(frozen=True)
class Panel:
    """Values from `lower` to `upper`. Linear: anchor 0, side 0, coordinate y. Otherwise the coordinate is
    log(side * (y - anchor)), from `first` to `last`. `knots`: whether a knot sits at the lower, upper end."""

    lower: float
    upper: float
    anchor: float = 0.0
    side: int = 0
    first: float = 0.0
    last: float = 0.0
    knots: tuple[bool, bool] = (False, False)
    depth: int = 0

    def coordinates(self) -> Array:
        return np.asarray(0.5 * (self.first + self.last) + 0.5 * (self.last - self.first) * _NODES, float)

    def nodes(self) -> Array:
        s = self.coordinates()
        return np.asarray(self.anchor + self.side * np.exp(s) if self.side else s, float)

    def rounding(self) -> Array:
        """By how much rounding of the values moves the nodes, as a share of the panel's half length."""
        half = max(0.5 * (self.last - self.first), 1e-300)
        s = self.coordinates()
        if not self.side:
            return np.asarray(2.3e-16 * np.abs(s) / half, float)
        distance = np.exp(s)
        return np.asarray(2.3e-16 * (1 + np.abs(self.anchor) / distance + np.abs(s)) / half, float)


def linear(lower: float, upper: float, knots: tuple[bool, bool], depth: int = 0) -> Panel:
    return Panel(lower, upper, first=lower, last=upper, knots=knots, depth=depth)


def logarithmic(
    anchor: float, side: int, first: float, last: float, depth: int = 0, innermost: bool = False
) -> Panel:
    """From distance exp(first) to distance exp(last) on one side of the anchor; the innermost panel answers
    for all that is closer, too."""
    near, far = (anchor + side * float(np.exp(s)) for s in (first, last))
    near = anchor if innermost else near
    knots = (innermost and side > 0, innermost and side < 0)
    return Panel(min(near, far), max(near, far), anchor, side, first, last, knots, depth)


def panels_over(
    knots: Sequence[float],
    low: float,
    high: float,
    centre: float,
    scale: float,
    ends: tuple[bool, bool] = (True, True),
) -> list[Panel]:
    """Starting panels from low to high (maybe infinite), broken at the knots; `ends`: whether a finite low
    and a finite high are knots themselves."""
    inner = sorted({k for k in knots if low < k < high and np.isfinite(k)})
    places = [low, *inner, high]
    found: list[Panel] = []
    for i, (a, b) in enumerate(pairwise(places)):
        left, right = (ends[0] or i > 0), (ends[1] or i < len(places) - 2)
        if np.isfinite(a) and np.isfinite(b):
            found.append(linear(a, b, (left, right)))
            continue
        if np.isinf(a) and np.isinf(b):
            found += [*_ray(centre, -1, scale), linear(centre - scale, centre + scale, (False, False))]
            found += _ray(centre, 1, scale)
            continue
        side = 1 if np.isfinite(a) else -1
        knot = a if side > 0 else b
        reach = max(side * (centre - knot), 0.0) + scale
        near, far = sorted((knot, knot + side * reach))
        found.append(linear(near, far, (left and side > 0, right and side < 0)))
        found += _ray(knot, side, reach)
    return sorted((p for p in found if p.upper > p.lower), key=lambda panel: panel.lower)


def _ray(anchor: float, side: int, start: float) -> list[Panel]:
    """From a distance to the largest number, doubling in the logarithm so that light tails begin right."""
    first, most = float(np.log(start)), 700.0
    steps = first + np.array([0.0, 1.0, 2.0, 4.0, 8.0, 16.0, 40.0, 100.0, 250.0, 1000.0])
    steps = np.append(steps[steps < most], most)
    return [
        logarithmic(anchor, side, a, b) for a, b in zip(steps[:-1].tolist(), steps[1:].tolist(), strict=True)
    ]


class PanelFunction:
    """The function on its panels: call it with values for `Estimates`. Outside all panels it is 0."""

    def __init__(
        self,
        panels: list[Panel],
        series: Array,
        forms: Index,
        relative: Array,
        absolute: Array,
        tails: Array,
        peaks: Array,
        firm: Array,
    ):
        order = np.argsort([panel.lower for panel in panels], kind="stable")
        self.panels = [panels[i] for i in order.tolist()]
        self.forms, self.relative, self.absolute = forms[order], relative[order], absolute[order]
        self.tails, self.peaks = tails[order], peaks[order]
        #: (relative, absolute) error of each panel without what is a rounding of the argument
        self.firm = firm[order]
        self.series = np.ascontiguousarray(series[order].T)
        self._slopes = np.asarray(chebyshev.chebder(self.series, axis=0), float)
        self.lower = np.array([panel.lower for panel in self.panels])
        self.upper = np.array([panel.upper for panel in self.panels])
        self._anchor = np.array([panel.anchor for panel in self.panels])
        self._side = np.array([float(panel.side) for panel in self.panels])
        first = np.array([panel.first for panel in self.panels])
        last = np.array([panel.last for panel in self.panels])
        self._nearest = np.exp(np.where(self._side == 0, 0.0, first))
        self._middle, self._half = 0.5 * (first + last), 0.5 * (last - first)

    def __call__(self, y: Array) -> Estimates:
        if not self.lower.size:
            return Estimates(np.zeros(y.size), np.zeros(y.size))
        index = self._panel(y)
        inside = (y >= self.lower[index]) & (y <= self.upper[index])
        value = self._series_at(y, index)
        form = self.forms[index]
        with np.errstate(over="ignore"):
            value = np.where(form == _LOG, np.exp(np.where(form == _LOG, value, 0.0)), value)
        value = np.where((form >= _ZERO) | ~inside, 0.0, np.maximum(value, 0.0))
        error = np.where(inside, self.absolute[index] + self.relative[index] * value, 0.0)
        return Estimates(value, error)

    def afar(self, y: Array) -> npt.NDArray[np.bool_]:
        """Whether y lies in a panel that was left out as too far from all that matters."""
        if not self.lower.size:
            return np.zeros(y.size, bool)
        index = self._panel(y)
        inside = (y >= self.lower[index]) & (y <= self.upper[index])
        return np.asarray(inside & (self.forms[index] == _AFAR), bool)

    def parted(self) -> tuple[list[Panel], list[Panel]]:
        """The panels that were expanded, and those left out."""
        marked = list(zip(self.panels, self.forms == _AFAR, strict=True))
        return [panel for panel, out in marked if not out], [panel for panel, out in marked if out]

    def slope(self, y: Array) -> Estimates:
        """The derivative, from that of the series. Its error is judged by the noise that the series' own last
        coefficients show; differentiating lifts it by the square of the degree."""
        if not self.lower.size:
            return Estimates(np.zeros(y.size), np.zeros(y.size))
        index = self._panel(y)
        inside = (y >= self.lower[index]) & (y <= self.upper[index])
        form = self.forms[index]
        value = self(y).value
        with np.errstate(all="ignore"):
            rate, stretch = self._series_at(y, index, self._slopes), self._stretch(y, index)
            size = np.where(form == _LOG, value, 1.0) * np.abs(stretch)
            slope = np.where(form == _LOG, value * rate, rate) * stretch
        live = inside & (form < _ZERO) & np.isfinite(slope)
        error = np.where(live, _DIFFERENTIATED * self.tails[index] * size, 0.0)
        return Estimates(np.where(live, slope, 0.0), np.where(np.isfinite(error), error, np.inf))

    def _stretch(self, y: Array, index: Index) -> Array:
        """du/dy of the panels' own variable u in [-1, 1]."""
        side = self._side[index]
        # closer to the anchor than the innermost panel reaches, its first value stands for all
        distance = np.maximum(side * (y - self._anchor[index]), self._nearest[index])
        per = np.where(side == 0, 1.0, side / np.where(side == 0, 1.0, distance))
        return np.asarray(per / self._half[index], float)

    def _panel(self, y: Array) -> Index:
        found = np.searchsorted(self.lower, y, side="right") - 1
        return np.clip(found, 0, self.lower.size - 1)

    def _series_at(self, y: Array, index: Index, series: Array | None = None) -> Array:
        series = self.series if series is None else series
        side = self._side[index]
        with np.errstate(all="ignore"):
            distance = side * (y - self._anchor[index])
            s = np.where(side == 0, y, np.log(np.where(side == 0, 1.0, np.maximum(distance, 1e-305))))
            u = np.clip((s - self._middle[index]) / self._half[index], -1.0, 1.0)
        one = two = np.zeros_like(u)
        twice = 2 * u
        for k in range(len(series) - 1, 0, -1):
            one, two = series[k][index] + twice * one - two, one
        return np.asarray(series[0][index] + u * one - two, float)


def expand(
    evaluate: Evaluate,
    panels: list[Panel],
    relative: float = 1e-13,
    enough: Callable[[Array], Array] | None = None,
    least: float = LEAST,
    afar: float = 0.0,
    left_out: Sequence[Panel] = (),
) -> PanelFunction:
    """The function on panels that start as given and are halved until each series holds.

    `evaluate` takes flat points and answers with values >= 0 and bounds on their errors. A series holds where
    its tail falls below `relative` of the function or below the function's own error; where `enough` is
    given, also where its tail times the width falls below `enough(middle)`. What never holds keeps its error.
    Values below `least` are taken for 0. Panels on which no value reaches `afar`, and those `left_out`, are
    not expanded: `PanelFunction.afar` tells where values must come from elsewhere.
    """
    pending = list(panels)
    done: list[Panel] = []
    series: list[Array] = []
    forms: list[int] = []
    relatives: list[float] = []
    absolutes: list[float] = []
    tails: list[float] = []
    peaks: list[float] = []
    firm: list[tuple[float, float]] = []
    while pending:
        points = np.stack([panel.nodes() for panel in pending])
        found = evaluate(points.ravel())
        values, errors = found.value.reshape(points.shape), found.error.reshape(points.shape)
        roundings = errors if found.rounding is None else found.rounding.reshape(points.shape)
        expansion = _expand(values, errors, np.stack([panel.rounding() for panel in pending]), least)
        middles = points[:, SIZE // 2]
        room = np.zeros(len(pending)) if enough is None else np.asarray(enough(middles), float)
        full = len(done) + 2 * len(pending) > _MOST
        following: list[Panel] = []
        for i, panel in enumerate(pending):
            tail, noise, size = expansion.tail[i], expansion.noise[i], expansion.size[i]
            holds = bool(tail <= relative * size + noise)
            # the error of the worst node is stated for the whole panel: it may not differ much between them
            even = noise <= 10 * max(expansion.best[i], relative * size) or expansion.best[i] > 0.1 * size
            even |= afar > 0 and expansion.peak[i] < _NEGLIGIBLE
            remote = float(values[i].max()) < afar
            closed = holds and (even or float(values[i].max()) < _NARROW * float(values[i].min()))
            if not holds:
                closed = _missed(expansion, i) * (panel.upper - panel.lower) <= room[i]
            parts = [] if closed or full or remote else _halves(panel)
            if parts:
                following += parts
                continue
            done.append(panel)
            series.append(expansion.series[i])
            tails.append(float(min(tail, size)))
            peaks.append(float(expansion.peak[i]))
            is_log = bool(expansion.forms[i] == _LOG)
            rough = 2 * tail if holds else min(3 * expansion.rough[i], 2 * size)
            own = errors[i] if found.rounding is None else errors[i] - roundings[i]
            slack = _SLACK * expansion.moved[i] * (values[i] if is_log else 1.0)
            missed = max(float(rough) - _SLACK * float(expansion.moved[i].max()) * is_log, 0.0)
            firm.append(_firm(values[i], np.maximum(own - slack, 0.0), missed, is_log))
            forms.append(_AFAR if remote else int(expansion.forms[i]))
            # a series that does not decay is no interpolant to trust between its nodes
            doubt = _LEBESGUE * noise + (2 * tail if holds else min(3 * expansion.rough[i], 2 * size))
            relatives.append(float(doubt) + 1e-15 if is_log else 1e-15)
            absolutes.append(least if is_log else float(doubt) + _FADED * least)
        pending = following
    for column in (relatives, absolutes, tails, peaks):
        column += [0.0] * len(left_out)
    more = np.zeros((len(left_out), SIZE))
    return PanelFunction(
        [*done, *left_out], np.concatenate([np.array(series).reshape(-1, SIZE), more]),
        np.array(forms + [_AFAR] * len(left_out), np.int64), np.array(relatives), np.array(absolutes),
        np.array(tails), np.array(peaks), np.concatenate([np.array(firm).reshape(-1, 2), more[:, :2]]),
    )  # fmt: skip


@dataclass(frozen=True)
class _Expansion:
    """For each panel: the series, its form, its tail, the noise of its values, and the size both count
    against (1 for a logarithm)."""

    series: Array
    forms: Index
    tail: Array
    noise: Array
    size: Array
    peak: Array
    best: Array  # the noise of the best node
    rough: Array  # the upper half of the series
    moved: Array  # by how much one unit in the last place of the argument changes each node's value


def _firm(values: Array, errors: Array, rough: float, is_log: bool) -> tuple[float, float]:
    """(relative, absolute) error of a panel from the errors of its values and what the series misses."""
    peak = float(values.max())
    if peak <= 0:
        return 0.0, float(errors.max())
    with np.errstate(all="ignore"):
        relative = float(np.max(errors / values)) if is_log else float(errors.max()) / peak
    missed = rough if is_log else rough / peak
    relative = _LEBESGUE * relative + missed + 4e-16
    return relative, min(_LEBESGUE * float(errors.max()) + missed * peak, 2 * peak)


def _missed(expansion: _Expansion, i: int) -> float:
    """What the series misses of the function, in its own units."""
    peak = expansion.peak[i] if expansion.forms[i] == _LOG else 1.0
    return float(min(expansion.tail[i], 1.0) * peak)


def _expand(values: Array, errors: Array, shifts: Array, least: float) -> _Expansion:
    values = np.where(np.isfinite(values), values, 0.0)
    peak = values.max(axis=1)
    with np.errstate(all="ignore"):
        known = (errors <= _KNOWN * values).all(axis=1)
    # a logarithm of noise would swing without bounds between the nodes
    positive = np.asarray((values > least).all(axis=1) & known)
    zero = np.asarray((peak <= _FADED * least) & ~positive)
    # a power that fades out below the smallest numbers is followed by halving, not by a polynomial
    fading = ~positive & ((values > 0) & (values < 1e-20 * peak[:, None])).any(axis=1) & ~zero
    forms = np.where(zero, _ZERO, np.where(positive, _LOG, _FLAT))
    with np.errstate(all="ignore"):
        logs = np.log(np.where(positive[:, None], values, 1.0))
        own = np.where(positive[:, None], errors / values, errors)
    terms = np.where(positive[:, None], logs, values)
    base = terms[:, SIZE // 2].copy()
    series = (terms - base[:, None]) @ _TRANSFORM.T  # a large constant would leave its rounding everywhere
    series[:, 0] += base
    # the last coefficients of both parities: an even or odd function shows in one of them only
    tail = np.where(fading, np.inf, np.abs(series[:, -4:]).sum(axis=1))
    depth = np.abs(logs).max(axis=1, keepdims=True)
    own = own + np.where(positive[:, None], 2.3e-16 * np.maximum(depth, 4.0), 1e-15 * peak[:, None])
    moved = np.abs(np.gradient(terms, _NODES, axis=1)) * shifts
    own = own + moved
    size = np.where(positive, 1.0, peak)
    noise, best = own.max(axis=1), own.min(axis=1)
    tail, noise = np.where(zero, 0.0, tail), np.where(zero, 0.0, noise)
    rough = np.where(zero, 0.0, np.abs(series[:, SIZE // 2 :]).sum(axis=1))
    return _Expansion(series, forms.astype(np.int64), tail, noise, size, peak, best, rough, moved)


def _halves(panel: Panel) -> list[Panel]:
    """The panel in two, or none where it cannot be halved any more."""
    depth = panel.depth + 1
    if panel.side:
        if panel.last - panel.first < 1e-9 or panel.upper - panel.lower <= 1e-14 * abs(panel.anchor):
            return []
        middle = 0.5 * (panel.first + panel.last)
        return [
            logarithmic(panel.anchor, panel.side, panel.first, middle, depth, any(panel.knots)),
            logarithmic(panel.anchor, panel.side, middle, panel.last, depth),
        ]
    lower, upper = panel.lower, panel.upper
    middle = 0.5 * (lower + upper)
    if upper - lower <= 1e-14 * max(abs(lower), abs(upper)) or not lower < middle < upper:
        return []
    left, right = panel.knots
    if panel.depth >= _LINEAR_ATTEMPTS and left != right:
        anchor, side = (lower, 1) if left else (upper, -1)
        nearest, furthest = _closest(anchor, upper - lower), float(np.log(middle - lower))
        rest = (middle, upper) if left else (lower, middle)
        graded = logarithmic(anchor, side, nearest, furthest, depth, innermost=True)
        return [graded, linear(*rest, (False, False), depth)]
    return [linear(lower, middle, (left, False), depth), linear(middle, upper, (False, right), depth)]


def _closest(anchor: float, width: float) -> float:
    """Logarithm of the smallest distance from the anchor that numbers can tell apart."""
    return float(np.log(max(1e-16 * abs(anchor), 1e-300, 1e-280 * width)))
