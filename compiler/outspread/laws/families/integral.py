"""Frame for laws that are known by their density: both tails are positive integrals of it, never differences.

The support is cut once into panels on which a 20-point Gauss rule is exact to rounding; the cdf at x is the
mass of the panels below plus one rule from the last edge to x, the ccdf likewise from above.
"""

from __future__ import annotations

from functools import cached_property

import numpy as np
import numpy.typing as npt

from outspread.laws.families.shapes import INF, NAN, Moments, ScaledLaw
from outspread.laws.law import Array
from outspread.numerics.roots import bracketed_root

Mask = npt.NDArray[np.bool_]
NODES, WEIGHTS = (array.astype(float) for array in np.polynomial.legendre.leggauss(20))
#: a panel is accepted where its rule and the same rule on its halves agree to this, relative to its mass
AGREEMENT = 1e-14
ROUNDING = 4e-16
MOST_PANELS = 20_000
#: a panel at a singular point other than 0 is not cut below this share of the point: x - point is rounded
END_SHARE = 1e-8
#: the lighter half of a panel holds at least this share of its mass
STEEPEST = 1e-5
#: masses below this carry no relative accuracy: doubles thin out below 1e-308
NEGLIGIBLE = 1e-302
#: a panel at a special point that is still too wide after so many rounds is cut all the way at once
LADDER = 4
CHUNK = 20_000
Tail = tuple[float, float]


class Panels:
    """Edges ascending; `below` and `above` are the masses on either side of each edge, `error` their
    accumulated relative error; `tails`: mass beyond the outermost edges, and the order of its power law.
    """

    def __init__(self, edges: Array, masses: Array, differences: Array, tails: tuple[Tail, Tail]):
        self.edges, self.masses, self.tails = edges, masses, tails
        first, last = tails[0][0], tails[1][0]
        self.below = np.concatenate(([first], first + np.cumsum(masses)))
        self.above = np.concatenate(((last + np.cumsum(masses[::-1]))[::-1], [last]))
        self.total = float(self.below[-1] + last)
        left, right = np.cumsum(differences), np.cumsum(differences[::-1])[::-1]
        with np.errstate(all="ignore"):
            ratios = np.concatenate((left / self.below[1:], right / self.above[:-1]))
        considered = np.concatenate((self.below[1:], self.above[:-1])) > 1e-290
        self.error = float(np.max(ratios[considered], initial=0.0))


class IntegralLaw(ScaledLaw):
    """A law with the density `standard_pdf` of z on `ends`; `centre` and `spread` say where its mass lies,
    `corners` where the density has a kink or a jump. Panels are made at the first use."""

    centre: float = 0.0
    spread: float = 1.0
    corners: tuple[float, ...] = ()

    def breaks(self) -> tuple[float, ...]:
        return tuple(self.location + self.scale * corner for corner in self.corners)

    def _density(self, z: Array) -> Array:
        with np.errstate(all="ignore"):
            return np.asarray(self.standard_pdf(z.ravel()).reshape(z.shape))

    @cached_property
    def panels(self) -> Panels:
        edges = self._first_edges()
        low, high = edges[:-1], edges[1:]
        depth = np.zeros(low.size)
        done: list[tuple[Array, Array, Array, Array]] = []
        count = 0
        for round_ in range(400):
            whole = self._rule(low, high)
            first, second = (
                self._rule(low, low + 0.5 * (high - low)),
                self._rule(low + 0.5 * (high - low), high),
            )
            halves = first + second
            middle, near_end, exhausted = self._split(low, high)
            # the exponent of a small density is itself rounded, so that its values scatter; so is the
            # distance from a singular point
            scatter = ROUNDING * np.maximum(-np.log(np.maximum(halves, NEGLIGIBLE)), 0.0)
            scatter += ROUNDING * np.maximum(np.abs(low), np.abs(high)) / (high - low)
            with np.errstate(invalid="ignore"):
                difference = np.abs(whole - halves)
                accepted = (difference <= (AGREEMENT + scatter) * halves) | (halves < NEGLIGIBLE)
            # the rule must also hold from an edge to any point between, where the density may be far smaller
            steep = np.minimum(first, second) < STEEPEST * halves
            accepted &= ~steep | (halves < NEGLIGIBLE)
            for index in np.flatnonzero(~accepted & exhausted):
                halves[index], difference[index] = self._next_to_end(low[index], high[index])
            accepted |= exhausted | (middle <= low) | (middle >= high)
            # inside, 45 halvings reach the rounding of x; ends may need many more
            accepted |= ~near_end & (depth >= 45)
            count += int(np.sum(accepted))
            if count + low.size > MOST_PANELS or round_ == 399:
                accepted[:] = True
            done.append((low[accepted], high[accepted], halves[accepted], difference[accepted]))
            rest = ~accepted
            if not np.any(rest):
                break
            cut_often = rest & near_end & (round_ >= LADDER)
            rungs = [self._ladder(low[index], high[index]) for index in np.flatnonzero(cut_often)]
            rest &= ~cut_often
            deeper = np.tile(np.where(near_end, 0.0, depth + 1)[rest], 2)
            depth = np.concatenate((deeper, np.zeros(sum(rung.size - 1 for rung in rungs))))
            low, high = (
                np.concatenate((low[rest], middle[rest], *(rung[:-1] for rung in rungs))),
                np.concatenate((middle[rest], high[rest], *(rung[1:] for rung in rungs))),
            )
        lows, highs, masses, differences = (np.concatenate(parts) for parts in zip(*done, strict=True))
        order = np.argsort(lows)
        return Panels(
            np.append(lows[order], highs[order[-1]]),
            masses[order],
            differences[order],
            (self._remainder(edges[0]), self._remainder(edges[-1])),
        )

    def _ladder(self, low: float, high: float) -> Array:
        """Edges that cut a panel towards its special point by factors of 16 down to the shortest, at once."""
        special = (*self.ends, *self.corners)
        at_low = low in special
        point, width = (low, high - low) if at_low else (high, high - low)
        count = np.ceil(np.log(width / (1e-290 + END_SHARE * abs(point))) / np.log(16.0))
        steps = width * 16.0 ** -np.arange(count + 1)
        edges = point + steps if at_low else point - steps
        return np.unique(np.append(edges, (low, high)))

    def _split(self, low: Array, high: Array) -> tuple[Array, Mask, Mask]:
        """Where to cut: in the middle, but by factors of 16 towards an end of the support or a corner.

        Also whether the panel touches such a point, and whether it is too short to be cut further.
        """
        special = np.array([*self.ends, *self.corners])
        at_low, at_high = np.isin(low, special), np.isin(high, special)
        width = high - low
        middle = low + 0.5 * width
        middle = np.where(at_high & ~at_low, high - width / 16, middle)
        middle = np.where(at_low & ~at_high, low + width / 16, middle)
        with np.errstate(invalid="ignore"):
            shortest = 1e-290 + END_SHARE * np.maximum(np.where(at_low, np.abs(low), 0.0),
                                                       np.where(at_high, np.abs(high), 0.0))  # fmt: skip
        return middle, at_low | at_high, (at_low ^ at_high) & (width <= shortest)

    def _next_to_end(self, low: float, high: float) -> tuple[float, float]:
        """Mass of a short panel at a singular point by the power law fitted there, and its error."""
        special = (*self.ends, *self.corners)
        width = high - low
        point, sign = (low, 1) if low in special else (high, -1)
        far, near = self._density(np.array([point + sign * width, point + 0.5 * sign * width]))
        if not (far > 0 and near > 0 and np.isfinite(near)):
            return 0.0, 0.0
        exponent = 1 + float(np.log2(far / near))
        if exponent <= 0:
            return INF, INF
        mass = float(width * far / exponent)
        return mass, mass * (END_SHARE if point else 1e-15)

    def _rule(self, low: Array, high: Array) -> Array:
        result = np.empty(low.shape)
        with np.errstate(invalid="ignore"):
            for start in range(0, low.size, CHUNK):
                part = slice(start, start + CHUNK)
                half = 0.5 * (high[part] - low[part])
                z = (low[part] + half)[:, None] + half[:, None] * NODES
                result[part] = half * (self._density(z) @ WEIGHTS)
        return result

    def _first_edges(self) -> Array:
        """Edges from the centre outwards: even steps, then growing ones, until the density vanishes."""
        lower, upper = self.ends
        steps = np.concatenate((np.arange(0.0, 41.0), 40 * 1.5 ** np.arange(1.0, 1700.0)))
        steps = steps[steps < 1e300 / self.spread]
        edges = [self.centre]
        for sign, end in ((-1.0, lower), (1.0, upper)):
            points = self.centre + sign * self.spread * steps
            if np.isfinite(end):
                points = np.append(points[(points > lower) & (points < upper)], end)
            else:
                points = points[np.isfinite(points)]
                # the density may vanish between two of its parts: what is 0 to the very end is left out
                present = np.flatnonzero(self._density(points) * self.spread > NEGLIGIBLE)
                points = points[: present[-1] + 2] if present.size else points[:2]
            edges.extend(points)
        return np.unique(np.concatenate((edges, self.corners)))

    def _remainder(self, edge: float) -> Tail:
        """Mass beyond the outermost edge and the order of its power law: 0 at an end of the support."""
        if edge in self.ends:
            return (0.0, INF)
        inner, outer = self._density(np.array([edge / 2, edge]))
        if not (outer * abs(edge) > NEGLIGIBLE and inner > outer):
            return (0.0, INF)
        order = float(np.log2(inner / outer)) - 1
        return (float(abs(edge) * outer / order), order) if order > 0 else (INF, 0.0)

    def _panel_of(self, z: Array) -> npt.NDArray[np.int64]:
        panels = self.panels
        index = np.searchsorted(panels.edges, z, side="right") - 1
        return np.clip(index, 0, panels.masses.size - 1)

    def _tail(self, z: Array, upper: bool) -> Array:
        """P(Z > z) or P(Z <= z): summed from its own side, or as the rest where that is the shorter way."""
        panels = self.panels
        given, outside = z, (z < panels.edges[0]) | (z > panels.edges[-1])
        z = np.clip(z, panels.edges[0], panels.edges[-1])
        index = self._panel_of(z)
        from_above = (panels.above[index + 1] < 0.5) if upper else (panels.below[index] >= 0.5)
        start = np.where(from_above, z, panels.edges[index])
        end = np.where(from_above, panels.edges[index + 1], z)
        mass = np.where(from_above, panels.above[index + 1], panels.below[index]) + self._rule(start, end)
        mass = np.where(from_above == upper, mass, 1 - mass)
        return np.asarray(np.where(outside, self._far_tail(given, upper), mass))

    def _far_tail(self, z: Array, upper: bool) -> Array:
        """The tail beyond the outermost edges, by the power law fitted there (0 or 1 without one)."""
        (first, first_order), (last, last_order) = self.panels.tails
        low, high = self.panels.edges[0], self.panels.edges[-1]
        with np.errstate(all="ignore"):
            below = first * (z / low) ** -first_order if first > 0 else np.zeros_like(z)
            above = last * (z / high) ** -last_order if last > 0 else np.zeros_like(z)
        return np.where(z < low, 1 - below if upper else below, above if upper else 1 - above)

    def standard_cdf(self, z: Array) -> Array:
        return self._tail(z, False)

    def standard_ccdf(self, z: Array) -> Array:
        return self._tail(z, True)

    def standard_icdf(self, p: Array) -> Array:
        return self._quantile(p, False)

    def standard_iccdf(self, q: Array) -> Array:
        return self._quantile(q, True)

    def _quantile(self, p: Array, upper: bool) -> Array:
        """z whose upper (or lower) tail is p, from whichever tail is the smaller."""
        small = p <= 0.5
        result = np.empty_like(p)
        result[small] = self._invert(p[small], upper)
        result[~small] = self._invert(1 - p[~small], not upper)
        return result

    def _invert(self, tail: Array, upper: bool) -> Array:
        """z whose upper (or lower) tail is `tail` <= 1/2."""
        panels = self.panels
        goal = np.clip(tail, 5e-324, 0.5)
        if upper:
            index = panels.edges.size - 1 - np.searchsorted(panels.above[::-1], goal, side="right")
        else:
            index = np.searchsorted(panels.below, goal, side="right") - 1
        index = np.clip(index, 0, panels.masses.size - 1)
        function = self.standard_ccdf if upper else self.standard_cdf

        def excess(z: Array, which: npt.NDArray[np.int64]) -> Array:
            with np.errstate(all="ignore"):
                value = np.log(np.maximum(function(z), 5e-324)) - np.log(goal[which])
            return np.asarray(-value if upper else value)

        low, high = panels.edges[index], panels.edges[index + 1]
        everything = np.arange(goal.size)
        at_low, at_high = np.minimum(excess(low, everything), 0.0), np.maximum(excess(high, everything), 0.0)
        root, _ = bracketed_root(excess, low, high, at_low, at_high)
        root = np.where(np.isnan(root), np.where(at_low == 0, low, high), root)
        beyond, order = panels.tails[1 if upper else 0]
        if beyond > 0:
            far = panels.edges[-1 if upper else 0] * (goal / beyond) ** (-1 / order)
            root = np.where(goal < beyond, far, root)
        return np.asarray(root)

    def between(self, lower: npt.ArrayLike, upper: npt.ArrayLike) -> Array:
        low, high = np.broadcast_arrays(self._standardise(lower), self._standardise(upper))
        shape = low.shape
        a = np.clip(low, self.panels.edges[0], self.panels.edges[-1]).ravel()
        b = np.clip(high, self.panels.edges[0], self.panels.edges[-1]).ravel()
        i, j = self._panel_of(a), self._panel_of(b)
        one = self._rule(a, np.maximum(b, a))
        many = self._rule(a, self.panels.edges[i + 1]) + self._rule(self.panels.edges[j], b)
        middle = np.where(
            self.panels.below[j] < 0.5,
            self.panels.below[j] - self.panels.below[np.minimum(i + 1, j)],
            self.panels.above[np.minimum(i + 1, j)] - self.panels.above[j],
        )
        value = np.where(i == j, one, many + np.maximum(middle, 0.0))
        return np.asarray(np.where((b > a), value, 0.0).reshape(shape))

    def standard_moments(self) -> Moments:
        return self._moments

    @cached_property
    def _moments(self) -> Moments:
        if not self.moment_exists(1):
            one_sided = np.isfinite(self.ends[0]) or np.isfinite(self.ends[1])
            return (INF if one_sided else NAN, NAN, NAN, NAN)
        mean = self.centre + self._central(self.centre, 1)
        variance = self._central(mean, 2) if self.moment_exists(2) else INF
        known = np.isfinite(variance)
        third = self._central(mean, 3) / variance**1.5 if known and self.moment_exists(3) else NAN
        fourth = self._central(mean, 4) / variance**2 if known and self.moment_exists(4) else NAN
        return (mean, variance, third, fourth)

    def _central(self, about: float, order: int) -> float:
        edges = self.panels.edges
        half = 0.5 * (edges[1:] - edges[:-1])
        z = (edges[:-1] + half)[:, None] + half[:, None] * NODES
        with np.errstate(all="ignore"):
            density = self._density(z)
            values = np.nan_to_num(density * (z - about) ** order, posinf=0.0, neginf=0.0)
            # next to a singular end the panel's mass is known better than by the rule
            share = np.nan_to_num(self.panels.masses / (half * (density @ WEIGHTS)), nan=1.0, posinf=1.0)
        share = np.where(self.panels.masses > NEGLIGIBLE, share, 1.0)
        return float(np.sum(half * (values @ WEIGHTS) * share))
