"""Draws from one input's distribution as the model states it: truncation, mixtures, data, formulas.

The families themselves are in `families`; dependence between inputs is `dependence`'s business.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from outspread.errors import DerivationError
from outspread.evidence.families import DRAWS, Generator
from outspread.evidence.inverses import INVERSES
from outspread.formula.evaluate import compile_numpy
from outspread.formula.tree import Node, names
from outspread.laws.law import Array
from outspread.laws.registry import FAMILIES
from outspread.reading.model import Distribution

#: below this share of accepted draws, truncation is drawn through the quantile function instead
SMALLEST_ACCEPTANCE = 1e-3
ROUNDS_AT_MOST = 10_000


def draw(
    distribution: Distribution, generator: Generator, count: int, given: Mapping[str, Array] | None = None
) -> Array:
    """`count` independent draws; `given` holds the draws of the inputs on which parameters depend.

    Raises DerivationError where no independent construction exists for the distribution.
    """
    if distribution.lower is None and distribution.upper is None:
        return _whole(distribution, generator, count, given or {})
    return _truncated(distribution, generator, count, given or {})


def canonical(distribution: Distribution, given: Mapping[str, Array] | None = None) -> dict[str, Any]:
    """The canonical parameters; formulas of other inputs become arrays with one value a draw."""
    family = FAMILIES[distribution.family]
    parameters = dict(distribution.parameters)
    if not any(isinstance(value, Node) for value in parameters.values()):
        return dict(family.canonical(parameters))
    values: dict[str, Any] = {}
    for name, value in parameters.items():
        if isinstance(value, Node):
            used = names(value)
            values[name] = compile_numpy(value, used)(*((given or {})[part] for part in used))
        else:
            values[name] = value
    chosen = family.parameter_set(parameters)
    if set(chosen.names) != set(family.canonical_names):
        raise DerivationError(
            f"a conditional {distribution.family} cannot be drawn yet from {chosen};"
            f" give it by {', '.join(family.canonical_names)}"
        )
    return {**chosen.defaults, **values}


def plain_number(d: Distribution, key: str) -> float:
    """A parameter that is a number, infinity included.

    Raises DerivationError where it depends on other inputs: such a distribution has no construction yet.
    """
    value = d.parameters[key]
    if not isinstance(value, int | float):
        raise DerivationError(f"{key} of a {d.family} that depends on other inputs cannot be drawn yet")
    return float(value)


def _whole(d: Distribution, generator: Generator, count: int, given: Mapping[str, Array]) -> Array:
    special = _SPECIAL.get(d.family)
    if special is not None:
        return special(d, generator, count, given)
    construction = DRAWS.get(d.family)
    if construction is None:
        raise DerivationError(f"the family {d.family} cannot be drawn yet, so that there is no second check")
    return np.asarray(construction(generator, count, canonical(d, given)), float)


def _truncated(d: Distribution, generator: Generator, count: int, given: Mapping[str, Array]) -> Array:
    """Rejection: what falls outside the limits is drawn again."""
    lower = -np.inf if d.lower is None else d.lower
    upper = np.inf if d.upper is None else d.upper
    values = _whole(d, generator, count, given)
    outside = np.flatnonzero((values < lower) | (values > upper))
    if outside.size > (1 - SMALLEST_ACCEPTANCE) * count and not given:
        return _between_quantiles(d, generator, count, lower, upper)
    rounds = 0
    while outside.size:
        rounds += 1
        if rounds > ROUNDS_AT_MOST:
            raise DerivationError(
                f"a {d.family} truncated so far out cannot be drawn yet, so that there is no second check"
            )
        part = {name: values_given[outside] for name, values_given in given.items()}
        # without parents every draw is alike, and more can be drawn at once than are missing
        size = outside.size if given else max(outside.size, min(count, 4096))
        fresh = _whole(d, generator, size, part)
        if given:
            good = (fresh >= lower) & (fresh <= upper)
            values[outside[good]] = fresh[good]
            outside = outside[~good]
        else:
            fresh = fresh[(fresh >= lower) & (fresh <= upper)][: outside.size]
            values[outside[: fresh.size]] = fresh
            outside = outside[fresh.size :]
    return values


def _between_quantiles(
    d: Distribution, generator: Generator, count: int, lower: float, upper: float
) -> Array:
    inverse = INVERSES.get(d.family)
    if inverse is None:
        raise DerivationError(
            f"a {d.family} truncated so far out cannot be drawn yet, so that there is no second check"
        )
    parameters = canonical(d)

    def at(tail: float, from_above: bool) -> float:
        low, high = np.asarray(tail), np.asarray(1.0 - tail)
        with np.errstate(all="ignore"):
            return float(inverse(high, low, parameters) if from_above else inverse(low, high, parameters))

    from_above = at(0.5, False) < lower
    if not from_above and at(0.5, False) < upper:
        raise DerivationError(f"a {d.family} truncated so narrowly cannot be drawn yet")
    ends = sorted(_tail_at(at, limit, from_above) for limit in (lower, upper))
    tail = ends[0] + (ends[1] - ends[0]) * (1.0 - generator.random(count))
    with np.errstate(all="ignore"):
        pair = (1.0 - tail, tail) if from_above else (tail, 1.0 - tail)
        return np.clip(inverse(*pair, parameters), lower, upper)


def _tail_at(at: Any, limit: float, from_above: bool) -> float:
    """The tail probability beyond `limit`, by bisection of the quantile function on a logarithmic scale."""
    if np.isinf(limit):
        return 0.0
    low, high = -700.0, float(np.log(0.5))
    for _ in range(200):
        middle = 0.5 * (low + high)
        inner = at(float(np.exp(middle)), from_above)
        low, high = (middle, high) if (inner > limit) == from_above else (low, middle)
    return float(np.exp(0.5 * (low + high)))


def _mixture(d: Distribution, generator: Generator, count: int, given: Mapping[str, Array]) -> Array:
    weights = np.asarray(d.parameters["weights"], float)
    choice = generator.choice(weights.size, size=count, p=weights / weights.sum())
    values = np.empty(count)
    for index, component in enumerate(d.components):
        where = np.flatnonzero(choice == index)
        part = {name: values_given[where] for name, values_given in given.items()}
        values[where] = draw(component, generator, where.size, part)
    return values


def _density(d: Distribution, generator: Generator, count: int, given: Mapping[str, Array]) -> Array:
    """Rejection under a step function: its steps are the largest of samples in each cell, raised where a
    draw shows that they are too low (von Neumann 1951). An infinite side is mapped to a finite one."""
    node = d.parameters["density"]
    if not isinstance(node, Node) or set(names(node)) - {"x"}:
        raise DerivationError("a density that depends on other inputs cannot be drawn yet")
    function = compile_numpy(node, ("x",))
    support = [plain_number(d, side) for side in ("lower", "upper")]
    start, width = (0.0, 1.0) if any(np.isinf(support)) else (support[0], support[1] - support[0])
    cells = 4096

    def mapped(t: Array) -> Array:
        """Density of t, where x is an increasing function of t on the finite interval."""
        x, slope = _stretched(t, support)
        with np.errstate(all="ignore"):
            return np.asarray(function(x) * slope)

    fractions = (np.arange(8) + 0.5) / 8
    grid = start + width * (np.arange(cells)[:, None] + fractions) / cells
    height = 1.25 * np.nanmax(mapped(grid), axis=1)
    height = np.maximum(height, 1e-9 * float(np.max(height[np.isfinite(height)])))
    kept: list[Array] = []
    total = 0
    for _ in range(ROUNDS_AT_MOST):
        if total >= count:
            break
        size = max(count - total, 4096)
        cell = generator.choice(cells, size=size, p=height / height.sum())
        t = start + width * (cell + generator.random(size)) / cells
        value = mapped(t)
        low = value > height[cell]
        if bool(np.any(low)):  # begin again under a step function that is high enough
            np.maximum.at(height, cell[low], 2.0 * value[low])
            kept, total = [], 0
            continue
        fresh = _stretched(t[generator.random(size) * height[cell] < value], support)[0]
        kept.append(fresh)
        total += fresh.size
    if total < count:
        raise DerivationError("the density given by formula cannot be drawn: it is unbounded")
    return np.concatenate(kept)[:count]


def _stretched(t: Array, support: list[float]) -> tuple[Array, Array]:
    """x and dx/dt: the identity on a finite support, else a rational map of (0, 1) onto the support."""
    lower, upper = support
    with np.errstate(all="ignore"):
        if np.isinf(lower) and np.isinf(upper):
            return (2 * t - 1) / (t * (1 - t)), (2 * t * t - 2 * t + 1) / (t * (1 - t)) ** 2
        if np.isinf(upper):
            return lower + t / (1 - t), 1 / (1 - t) ** 2
        if np.isinf(lower):
            return upper - (1 - t) / t, 1 / t**2
    return t, np.ones_like(t)


def _table(d: Distribution, generator: Generator, count: int, given: Mapping[str, Array]) -> Array:
    """Points joined by straight lines. A density: a segment by its area, in it a mixture of two triangles. A
    distribution function: a segment by its rise, uniform in it."""
    x = np.asarray(d.parameters["x"], float)
    if "cdf" in d.parameters:
        rise = np.diff(np.asarray(d.parameters["cdf"], float))
        segment = generator.choice(rise.size, size=count, p=rise / rise.sum())
        fraction = generator.random(count)
        return np.asarray(x[segment] + fraction * (x[segment + 1] - x[segment]))
    height = np.asarray(d.parameters["pdf"], float)
    area = 0.5 * (height[1:] + height[:-1]) * np.diff(x)
    segment = generator.choice(area.size, size=count, p=area / area.sum())
    left, right = height[segment], height[segment + 1]
    rising = generator.random(count) * (left + right) < right
    fraction = np.maximum(generator.random(count), generator.random(count))
    fraction = np.where(rising, fraction, 1.0 - fraction)
    return np.asarray(x[segment] + fraction * (x[segment + 1] - x[segment]))


def _histogram(d: Distribution, generator: Generator, count: int, given: Mapping[str, Array]) -> Array:
    edges = np.asarray(d.parameters["edges"], float)
    weights = np.asarray(d.parameters["counts"], float)
    cell = generator.choice(weights.size, size=count, p=weights / weights.sum())
    return np.asarray(edges[cell] + generator.random(count) * (edges[cell + 1] - edges[cell]))


def _sample(d: Distribution, generator: Generator, count: int, given: Mapping[str, Array]) -> Array:
    values = np.asarray(d.parameters["values"], float)
    return np.asarray(values[generator.integers(0, values.size, count)])


def _observations(d: Distribution, generator: Generator, count: int, given: Mapping[str, Array]) -> Array:
    """Scaled and shifted t with count - 1 degrees of freedom (JCGM 101:2008, 6.4.9.2)."""
    mean, sd, size = (plain_number(d, key) for key in ("mean", "sd", "count"))
    normal, square = generator.standard_normal(count), generator.chisquare(size - 1, count)
    standard = normal / np.sqrt(square / (size - 1))
    return np.asarray(mean + sd / np.sqrt(size) * standard)


_SPECIAL = {
    "mixture": _mixture,
    "density": _density,
    "table": _table,
    "histogram": _histogram,
    "sample": _sample,
    "observations": _observations,
}
