"""One marginal as the correlation integral sees it: its standardised quantile over a score axis.

Where the quantile function has kinks, jumps or steps, and how far out its tails still count, is found here;
`pearson` integrates.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from outspread.errors import DerivationError
from outspread.laws.dependence.levels import LARGEST_SCORE, Levels
from outspread.laws.dependence.score_table import ScoreTable
from outspread.laws.functions.normal import normal_cdf
from outspread.laws.law import Array, Law

MOST_STEPS = 64
#: second moment left out beyond the cut: 1e-26 of the variance moves a correlation by less than 1e-13
_NEGLIGIBLE = 1e-26
_CUTS = np.array([9.0, 10.0, 11.0, 12.0, 14.0, 17.0, 21.0, 26.0, 31.0, LARGEST_SCORE])


@dataclass(frozen=True)
class Margin:
    """`standard`: normal scores -> (quantile - mean) / sd. `edges`: scores between which it is smooth.

    Beyond scores of ±`cut` lies `beyond` of the second moment; `noise` bounds the rounding in `standard`,
    relative to 1 plus its size. A discrete law has `values` (standardised, ascending) and the scores `edges`
    at which one gives way to the next.
    """

    standard: Callable[[Array], Array]
    edges: Array
    cut: float
    beyond: float
    noise: float = 1e-15
    values: Array | None = None


def level_margin() -> Margin:
    """The level itself: uniform on (0, 1), whose Pearson correlation is Spearman's."""

    def standard(levels: Levels) -> Array:
        return np.asarray(np.sqrt(3.0) * (levels.lower - levels.upper))

    return Margin(_table(standard, np.zeros(0), 12.0, 1e-15), np.zeros(0), 12.0, 1e-32)


def normal_margin() -> Margin:
    """A standard normal input: its own score."""
    return Margin(lambda scores: scores, np.zeros(0), 12.0, 1e-30)


def _table(standard: Callable[[Levels], Array], edges: Array, cut: float, noise: float) -> ScoreTable:
    ends = np.unique(np.concatenate([[-cut, -0.5 * cut, 0.0, 0.5 * cut, cut], edges]))
    return ScoreTable(lambda z: standard(Levels.from_scores(z)), ends, max(4e-15, 4.0 * noise))


def margin_of(law: Law, name: str = "the input") -> Margin:
    """The margin of a law. Raises DerivationError where it has no variance or too many steps."""
    mean, spread = law.mean(), law.standard_deviation()
    if not np.isfinite(spread) or not spread > 0:
        raise DerivationError(
            f"{name} has no finite variance above 0, so that no Pearson correlation exists; give spearman or "
            "kendall"
        )

    def standard(levels: Levels) -> Array:
        with np.errstate(all="ignore"):
            low = law.icdf(np.minimum(levels.lower, 0.5))
            high = law.iccdf(np.minimum(levels.upper, 0.5))
        return np.asarray((np.where(levels.lower <= levels.upper, low, high) - mean) / spread)

    atoms = law.atoms().values
    if law.continuous_mass == 0.0:
        far = 1e-33  # the level at a score of -12
        atoms = atoms[(atoms >= law.icdf(far)) & (atoms <= law.iccdf(far))]
        ends = _scores(law, atoms)
        kept = np.abs(ends) < 12.0
        first = int(np.argmax(kept)) if kept.any() else 0
        count = int(np.sum(kept))
        values = (atoms[first : first + count + 1] - mean) / spread
        edges = ends[first : first + count]
        # a step belongs to the piece on its right, as the levels at it do
        return Margin(lambda z: values[np.searchsorted(edges, z)], edges, 12.0, 1e-26, 1e-15, values)
    if atoms.size > MOST_STEPS:
        raise DerivationError(
            f"{name} has {atoms.size} values with a probability of their own beside its density; a Pearson "
            f"correlation is solved for at most {MOST_STEPS}: give spearman or kendall"
        )
    steps = np.concatenate([_scores(law, atoms), _scores(law, atoms, below=True)])
    edges = np.unique(np.concatenate([steps, _scores(law, np.array(law.breaks(), float))]))
    cut, beyond = _cut(standard, law.tail_orders())
    edges = edges[np.abs(edges) < cut]
    # rounding of the quantile itself, in standard deviations: all that is left where sd << |mean|
    noise = 4e-16 * (1.0 + abs(mean) / spread) + law.relative_error * 0.01
    return Margin(_table(standard, edges, cut, noise), edges, cut, beyond, noise)


def _scores(law: Law, points: Array, below: bool = False) -> Array:
    """The normal scores of P(X <= x), or of P(X < x)."""
    if not points.size:
        return np.zeros(0)
    if below:
        points = np.nextafter(points, -np.inf)
    return Levels.pair(law.cdf(points), law.ccdf(points)).scores()


def _cut(standard: Callable[[Levels], Array], orders: tuple[float, float]) -> tuple[float, float]:
    """The score beyond which both tails hold next to nothing of the second moment, and what they hold.

    With x(p)² growing like p^-κ towards p = 0 a tail of probability q holds x(q)² q / (1 - κ); κ = 2/a for
    a tail of order a, and for lighter ones it falls, so that its value at the cut bounds it.
    """
    beyond = np.inf
    cut = float(_CUTS[-1])
    for score in _CUTS:
        total = 0.0
        tail = float(normal_cdf(np.array(-score)))
        near = min(10.0 * tail, 0.1)
        for side, order in zip((-1, 1), orders, strict=True):
            pairs = np.array([tail, near]), 1.0 - np.array([tail, near])
            levels = Levels.pair(*pairs) if side < 0 else Levels.pair(*pairs[::-1])
            squares = standard(levels) ** 2
            growth = float(np.log(max(squares[0], 1e-300) / max(squares[1], 1e-300)) / np.log(near / tail))
            power = max(growth, 2.0 / order, 0.0)
            if not power < 0.99:
                return cut, np.inf
            total += float(squares[0]) * tail / (1.0 - power)
        cut, beyond = float(score), total
        if total <= _NEGLIGIBLE:
            break
    return cut, beyond
