"""The copula parameter that gives two inputs a Pearson correlation, and the range that can be reached.

The correlation itself is integrated in `correlation`; normals and lognormals have closed relations.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

from outspread.errors import LawError
from outspread.laws.dependence.correlation import correlation_of_margins, extreme_correlation
from outspread.laws.dependence.families import pair_copula
from outspread.laws.dependence.margins import Margin, margin_of, normal_margin
from outspread.laws.dependence.solving import Solved, solve_parameter
from outspread.laws.law import Law


@dataclass(frozen=True)
class Range:
    """The correlations that a family can give: between `low` and `high`, each known to `error`.

    The ends themselves are not reached, but for a `low` of 0 that is independence.
    """

    low: float
    high: float
    error: float


def pearson_range(family: str, first: Law, second: Law, size: int = 2) -> Range:
    """The Pearson correlations that a copula family can give two marginals; `size` inputs in all.

    Raises DerivationError where a marginal has no variance.
    """
    return _range(family, margin_of(first), margin_of(second), size)


def parameter_from_pearson(
    family: str,
    target: float,
    first: Law,
    second: Law,
    *,
    degrees_of_freedom: float | None = None,
    size: int = 2,
    names: tuple[str, str] = ("the first input", "the second input"),
    margins: tuple[Margin, Margin] | None = None,
) -> Solved:
    """The copula parameter (scores' correlation for gaussian and student_t) that gives the inputs the
    Pearson correlation `target`, with a bound on its error.

    Closed for normals and lognormals under a Gaussian copula, linear where one input is normal, else solved.
    `margins` are those of the two laws, where the caller has them already.
    Raises LawError with the reachable range where the target lies outside it, DerivationError where a
    marginal has no variance.
    """
    if margins is None:
        margins = margin_of(first, names[0]), margin_of(second, names[1])
    if family == "gaussian":
        closed = _closed(target, first, second)
        if closed is not None:
            return closed
    reach = _range(family, *margins, size)
    independent = target == 0.0 and family in ("gaussian", "gumbel")
    if not (reach.low + reach.error < target < reach.high - reach.error) and not independent:
        raise LawError(
            f"a Pearson correlation of {target:g} between {names[0]} and {names[1]} cannot be reached by a "
            f"{family} copula with their distributions; write a value between {_inward(reach.low, 1)} and "
            f"{_inward(reach.high, -1)}"
        )
    if independent:
        return Solved(0.0 if family == "gaussian" else 1.0, 0.0)

    def measure(parameter: float) -> Solved:
        return correlation_of_margins(pair_copula(family, parameter, degrees_of_freedom), *margins)

    return solve_parameter(family, target, measure)


def _inward(end: float, direction: int) -> str:
    """The end of a range with six decimals, rounded into it, so that what is named can be written."""
    digits = 1e6
    rounded = (math.floor(end * digits) if direction < 0 else math.ceil(end * digits)) / digits
    return f"{rounded + 0.0:.6f}".rstrip("0").rstrip(".")


def _closed(target: float, first: Law, second: Law) -> Solved | None:
    """Normals: their own; lognormals: log(1 + r v w)/(s t); one normal: r over the correlation of the other
    with its own score. None where the target is out of range too, so that the range is named."""
    families = (first.family, second.family)
    if families == ("normal", "normal"):
        return Solved(target, 0.0) if -1.0 < target < 1.0 else None
    if families == ("lognormal", "lognormal"):
        s, t = (float(law.parameters["log_sd"]) for law in (first, second))
        size = math.sqrt(math.expm1(s * s)) * math.sqrt(math.expm1(t * t))
        if not math.expm1(-s * t) < target * size < math.expm1(s * t):
            return None
        value = math.log1p(target * size) / (s * t)
        return Solved(value, 1e-15 * (abs(value) + abs(target) * size / ((1.0 + target * size) * s * t)))
    if "normal" in families:
        own = extreme_correlation(normal_margin(), margin_of(second if families[0] == "normal" else first), 1)
        if not abs(target) < own.value:
            return None
        value = target / own.value
        return Solved(value, abs(value) * (own.error / own.value + 4e-16))
    return None


def _range(family: str, first: Margin, second: Margin, size: int) -> Range:
    high = extreme_correlation(first, second, 1)
    if family in ("clayton", "gumbel") or (family == "frank" and size > 2):
        return Range(0.0, high.value, high.error)
    low = extreme_correlation(first, second, -1)
    return Range(-low.value, high.value, max(low.error, high.error))
