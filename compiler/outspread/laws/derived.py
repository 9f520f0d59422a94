"""Laws that come out of a derivation: cdf, ccdf and pdf by a route, quantiles and moments from those.

A route supplies `evaluate(kind, y)`; this module keeps what was computed, inverts, integrates moments and
decides from the tails which moments exist. It knows nothing of formulas or inputs.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np
import numpy.typing as npt

from outspread.laws.law import Array, Atoms, Estimates, Law
from outspread.laws.quantiles import QuantileSolver
from outspread.laws.tabulated import Tabulated
from outspread.laws.tails import Tail, observed_tail
from outspread.numerics.panels import LEAST
from outspread.numerics.quadrature import GAUSS, KRONROD, NODES

Evaluate = Callable[[str, Array], Estimates]
KINDS = ("pdf", "cdf", "ccdf")
_CANCELLED = 20.0  # times the relative error of a tail: from there on the density may tell an interval better
_SPELL = 2_000  # intervals integrated at a time


class DerivedLaw(Law):
    """`nodes`: ascending values that grade the range of the result from tail to tail, atoms included."""

    def __init__(
        self,
        evaluate: Evaluate,
        support: tuple[float, float],
        nodes: Array,
        atoms: Atoms | None = None,
        continuous_mass: float = 1.0,
        support_error: tuple[float, float] = (0.0, 0.0),
        tail_probability: float = 1e-295,
        tails: tuple[Tail, Tail] | None = None,
    ):
        self._evaluate = evaluate
        self._tabulated: Tabulated | None = None
        self._support = support
        self.support_error = support_error
        self._atoms = Atoms.none() if atoms is None else atoms
        self._continuous_mass = continuous_mass
        inside = nodes[(nodes >= support[0]) & (nodes <= support[1]) & np.isfinite(nodes)]
        self.nodes = np.unique(np.concatenate([inside, self._atoms.values]))
        self.tail_probability = tail_probability
        self._given_tails = tails
        #: added to the error of every cdf and ccdf; a route sets it where a check leaves a doubt
        self.floor_error = 0.0
        #: interior values at which the density is not smooth, as far as a route finds them
        self.turning_values: tuple[float, ...] = ()
        self._seen: dict[str, dict[float, tuple[float, float]]] = {kind: {} for kind in KINDS}
        self._quantiles: dict[bool, dict[float, tuple[float, float]]] = {False: {}, True: {}}
        self._table: tuple[Array, Array, Array] | None = None
        self._moments: tuple[Estimates, Array] | None = None

    def tabulate(
        self,
        knots: Sequence[float] = (),
        density: bool = True,
        inherited: float = 0.0,
        least: float = LEAST,
    ) -> None:
        """Keep the continuous part on panels from here on (`laws.tabulated`); `knots` are values at which it
        may not be smooth, atoms and ends of the support apart. For routes whose every value is dear. Without
        `density` that is the slope of the cdf. `inherited`: the share of the relative error that comes with
        the inputs' laws. Probabilities below `least` are taken for 0."""
        if self._continuous_mass == 0 or self._tabulated:
            return
        low, centre, high = self.rough_quantile(np.array([0.16, 0.5, 0.84])).tolist()
        scale = max(high - low, 1e-12 * abs(centre), 1e-300)
        marks = {*knots, *self.turning_values, *self._atoms.values.tolist()}
        if centre in marks:  # an atom holds the middle
            centre += 0.1 * scale
        table = Tabulated(
            self._evaluate, self._support, sorted(marks), centre, scale, self._continuous_mass,
            density=density, inherited=inherited, least=least,
        )  # fmt: skip
        self._evaluate, self._tabulated = table, table
        self.relative_error, self.floor = table.bounds()
        self.tail_probability = max(self.tail_probability, 1e3 * self.floor)
        if not density:  # an input of a next step, which breaks its panels at them
            self.turning_values = tuple(sorted(m for m in marks if self._support[0] < m < self._support[1]))
        self._seen = {kind: {} for kind in KINDS}
        self._quantiles = {False: {}, True: {}}
        self._table = None

    def singular_ends(self) -> tuple[bool, bool]:
        """Whether the density grows without bound towards a finite end, as its values there show."""
        if not self._tabulated:
            return super().singular_ends()
        found = []
        width = float(np.diff(self.rough_quantile(np.array([0.16, 0.84])))[0])
        for end, side in zip(self._support, (1.0, -1.0), strict=True):
            steps = np.maximum(width * np.array([1e-6, 1e-9]), abs(end) * np.array([1e-10, 1e-13]))
            if not np.isfinite(end):
                found.append(False)
                continue
            far, near = self.estimate("pdf", end + side * steps).value.tolist()
            found.append(near > 1.2 * far)
        return found[0], found[1]

    # --- values with errors -------------------------------------------------------------------------

    def estimate(self, kind: str, y: npt.ArrayLike) -> Estimates:
        """pdf, cdf or ccdf at y with bounds on the absolute errors."""
        points = np.asarray(y, float)
        flat = points.ravel()
        if self._tabulated:
            known = ~np.isnan(flat)
            found = np.full((2, flat.size), np.nan)
            found[:, known] = self._compute(kind, flat[known])
            return Estimates(found[0].reshape(points.shape), found[1].reshape(points.shape))
        seen = self._seen[kind]
        missing = np.array(list(dict.fromkeys(v for v in flat.tolist() if v not in seen and v == v)))
        if missing.size:
            value, error = self._compute(kind, missing)
            seen.update(zip(missing.tolist(), zip(value.tolist(), error.tolist(), strict=True), strict=True))
        pairs = [seen.get(v, (np.nan, np.nan)) for v in flat.tolist()]
        both = np.array(pairs, float).reshape(-1, 2)
        return Estimates(both[:, 0].reshape(points.shape), both[:, 1].reshape(points.shape))

    def _compute(self, kind: str, y: Array, complete: bool = True) -> tuple[Array, Array]:
        low, high = self._support
        value = np.zeros(y.size)
        error = np.zeros(y.size)
        below, above = y < low, y >= high
        if kind == "pdf":
            inside = ~below & (y <= high) & (self._continuous_mass > 0)
        else:
            inside = ~below & ~above
            value[above if kind == "cdf" else below] = 1.0
        if kind == "pdf":
            for end, side in ((low, 1.0), (high, -1.0)):
                at = inside & (y == end)
                if at.any():
                    value[at], error[at] = self._end_density(end, side)
                    inside &= ~at
        if inside.any() and self._continuous_mass > 0:
            result = self._evaluate(kind, y[inside])
            value[inside], error[inside] = result.value, result.error
        if kind != "pdf":
            if self._atoms.values.size:
                mass, doubt = self._atom_sum(kind, y[inside])
                value[inside] += mass
                error[inside] += doubt
            value = np.clip(value, 0.0, 1.0)
            error[inside] += self.floor_error
            if complete:
                self._complete(kind, y, value, error, inside & (value > 0.6))
        return value, error

    def _complete(
        self, kind: str, y: Array, value: Array, error: Array, large: npt.NDArray[np.bool_]
    ) -> None:
        """The larger of cdf and ccdf is what the smaller one leaves: it is the smaller that is known best."""
        if large.any():
            small, doubt = self._compute("ccdf" if kind == "cdf" else "cdf", y[large], complete=False)
            value[large] = 1.0 - small
            error[large] = doubt + 2.3e-16

    def continuous(self, kind: str, y: Array) -> Estimates:
        """pdf, cdf or ccdf of the continuous part alone."""
        low, high = self._support
        beyond = y < low if kind == "ccdf" else y >= high if kind == "cdf" else np.zeros(y.size, bool)
        value, error = np.where(beyond, self._continuous_mass, 0.0), np.zeros(y.size)
        inside = (y >= low) & (y <= high) & ~beyond
        if inside.any() and self._continuous_mass > 0:
            found = self._evaluate(kind, y[inside])
            value[inside], error[inside] = found.value, found.error
        return Estimates(value, error)

    def continuous_between(self, lower: Array, upper: Array) -> Estimates:
        """As a difference of tails, or, where that leaves fewer digits, as the integral of the density."""
        low, high = self._support
        mass = self._continuous_mass
        whole = upper > lower
        open_low, open_high = lower <= low, upper >= high
        value, error = np.where(whole & open_low & open_high, mass, 0.0), np.zeros(lower.shape)
        for tail, kind, at in (
            (whole & open_low & ~open_high, "cdf", upper),
            (whole & open_high & ~open_low, "ccdf", lower),
        ):
            if tail.any():
                value[tail] = self.continuous(kind, at[tail]).value
        rows = np.flatnonzero(whole & ~open_low & ~open_high)
        if rows.size:
            value[rows], error[rows] = self._cut_out(lower[rows], upper[rows])
        return Estimates(value, error)

    def _cut_out(self, lower: Array, upper: Array) -> tuple[Array, Array]:
        """`continuous_between` for ends within the support."""
        left, right = self.continuous("cdf", lower).value, self.continuous("ccdf", upper).value
        value = self._continuous_mass - left - right
        sizes = left + right
        for side, kind, first, last in (
            (left > 0.5 * self._continuous_mass, "ccdf", lower, right),
            (right > 0.5 * self._continuous_mass, "cdf", upper, left),
        ):
            if side.any():
                first_tail = self.continuous(kind, first[side]).value
                value[side] = first_tail - last[side]
                sizes[side] = first_tail + last[side]
        value = np.maximum(value, 0.0)
        error = (self.relative_error + 4e-16) * sizes + self.floor
        narrow = np.flatnonzero(error > _CANCELLED * self.relative_error * value)
        for start in range(0, narrow.size, _SPELL):
            rows = narrow[start : start + _SPELL]
            half, centre = 0.5 * (upper[rows] - lower[rows]), 0.5 * (upper[rows] + lower[rows])
            points = centre[:, None] + half[:, None] * NODES
            found = self.continuous("pdf", points.ravel())
            density, doubt = found.value.reshape(points.shape), found.error.reshape(points.shape)
            integral = half * (density @ KRONROD)
            off = half * (doubt @ KRONROD) + np.abs(integral - half * (density @ GAUSS)) + 4e-16 * integral
            better = off < error[rows]
            value[rows[better]], error[rows[better]] = integral[better], off[better]
        return value, error

    def raw_total(self, y: Array) -> Estimates:
        """cdf and ccdf at y derived apart from each other, added up: 1 where the formula has a value."""
        parts = [self._evaluate(kind, y) for kind in ("cdf", "ccdf")]
        atoms = float(self._atoms.masses.sum())
        error = parts[0].error + parts[1].error + float(self._atoms.errors.sum()) + 4e-16
        return Estimates(parts[0].value + parts[1].value + atoms, error)

    def _end_density(self, end: float, side: float) -> tuple[float, float]:
        """The density at an end of the support as its limit from inside; inf where it grows without bound."""
        low, high = self.rough_quantile(np.array([0.16, 0.84]))
        scale = max(float(high - low), 1e-300)
        steps = scale * np.array([2e-9, 1e-9, 1e-12, 1e-15])
        steps = np.maximum(steps, abs(end) * np.array([4e-13, 2e-13, 1e-13, 5e-14]))
        result = self._evaluate("pdf", end + side * steps)
        far, near, nearer, nearest = result.value.tolist()
        if nearest > 1.5 * nearer > 2.25 * near > 0:
            return np.inf, 0.0
        return near, 4 * abs(far - near) + abs(nearer - near) + float(result.error[1])

    def _atom_sum(self, kind: str, y: Array) -> tuple[Array, Array]:
        atoms = self._atoms
        last = np.searchsorted(atoms.values, y, side="right")
        sums = []
        for terms in (atoms.masses, atoms.errors):
            before = np.concatenate([[0.0], np.cumsum(terms)])
            after = np.concatenate([np.cumsum(terms[::-1])[::-1], [0.0]])
            sums.append(before[last] if kind == "cdf" else after[last])
        return sums[0], sums[1] + 2e-16 * atoms.values.size**0.5 * sums[0]

    def pdf(self, x: npt.ArrayLike) -> Array:
        return self.estimate("pdf", x).value

    def cdf(self, x: npt.ArrayLike) -> Array:
        return self.estimate("cdf", x).value

    def ccdf(self, x: npt.ArrayLike) -> Array:
        return self.estimate("ccdf", x).value

    def support(self) -> tuple[float, float]:
        return self._support

    def atoms(self) -> Atoms:
        return self._atoms

    @property
    def continuous_mass(self) -> float:
        return self._continuous_mass

    @property
    def error(self) -> float:
        """Bound on |cdf error| over the nodes."""
        worst = [
            float(np.max(self.estimate(kind, self.nodes).error, initial=0.0)) for kind in ("cdf", "ccdf")
        ]
        return max(worst)

    # --- quantiles ----------------------------------------------------------------------------------

    def icdf(self, p: npt.ArrayLike) -> Array:
        return self.estimate_quantile(p).value

    def iccdf(self, q: npt.ArrayLike) -> Array:
        return self.estimate_quantile(q, upper=True).value

    def estimate_quantile(self, p: npt.ArrayLike, upper: bool = False) -> Estimates:
        """icdf(p), or iccdf(p) where `upper`, with a bound on the error: the bracket within which the cdf
        with its stated error crosses p. Outside [0, 1]: NaN."""
        levels = np.asarray(p, float)
        flat = levels.ravel()
        low, high = self._support
        if upper:
            low, high = high, low
        seen = self._quantiles[upper]
        missing = np.array([v for v in dict.fromkeys(flat.tolist()) if v not in seen and 0 < v < 1])
        if missing.size:
            value, error = QuantileSolver(self, self._grid()).solve(missing, upper)
            seen.update(zip(missing.tolist(), zip(value.tolist(), error.tolist(), strict=True), strict=True))
        ends = {0.0: (low, 0.0), 1.0: (high, 0.0)}
        pairs = [seen.get(v) or ends.get(v, (np.nan, np.nan)) for v in flat.tolist()]
        both = np.array(pairs, float).reshape(-1, 2)
        return Estimates(both[:, 0].reshape(levels.shape), both[:, 1].reshape(levels.shape))

    def _grid(self) -> tuple[Array, Array, Array]:
        """The nodes with the ends of the support, and cdf and ccdf there."""
        if self._table is None:
            low, high = self._support
            nodes = self.nodes
            spread = nodes[-1] - nodes[0]
            first = low if np.isfinite(low) else nodes[0] - spread
            last = high if np.isfinite(high) else nodes[-1] + spread
            points = np.unique(np.concatenate([[first], nodes, [last]]))
            below = self.cdf(points)
            above = 1 - below
            # levels are looked up in the smaller tail only
            upper = below > 0.4
            above[upper] = self.ccdf(points[upper])
            self._table = points, below, above
        return self._table

    def rough_quantile(self, p: Array, upper: bool = False) -> Array:
        """Quantiles interpolated between the nodes: to grade a grid, not to be stated."""
        points, below, above = self._grid()
        tail = above[::-1] if upper else below
        along = points[::-1] if upper else points
        tail = np.maximum.accumulate(tail)
        with np.errstate(divide="ignore"):
            result = np.interp(np.log(p), np.maximum(np.log(tail), -1e4), along)
        return np.asarray(result)

    # --- moments ------------------------------------------------------------------------------------

    def tails(self) -> tuple[Tail, Tail]:
        """How the lower and the upper tail fall off (`laws.tails`)."""
        if self._given_tails is None:
            self._given_tails = (observed_tail(self, -1), observed_tail(self, 1))
        return self._given_tails

    def breaks(self) -> tuple[float, ...]:
        return self.turning_values

    def moment_exists(self, order: float) -> bool:
        return all(tail.exponent > order for tail in self.tails())

    def central(self) -> tuple[Estimates, Array]:
        """E[(Y - c)^k], k = 1..4, about c near the median, and c (see `laws.moments`)."""
        if self._moments is None:
            from outspread.laws.moments import central_moments

            centre = float(self.icdf(0.5))
            orders = [k for k in (1, 2, 3, 4) if self.moment_exists(k)]
            self._moments = central_moments(self, centre, max(orders, default=0)), np.array(centre)
        return self._moments

    def moment_estimates(self) -> Estimates:
        """Mean, standard deviation, skewness and kurtosis with error bounds; NaN where one does not exist,
        inf where it diverges."""
        from outspread.laws.moments import standardised

        raw, centre = self.central()
        return standardised(raw, float(centre))

    def mean(self) -> float:
        return float(self.moment_estimates().value[0])

    def variance(self) -> float:
        return float(self.moment_estimates().value[1]) ** 2

    def standard_deviation(self) -> float:
        return float(self.moment_estimates().value[1])

    def skewness(self) -> float:
        return float(self.moment_estimates().value[2])

    def kurtosis(self) -> float:
        return float(self.moment_estimates().value[3])
