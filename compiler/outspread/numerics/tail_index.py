"""Which moments of a formula exist, decided from its structure and the tails of its inputs.

For a sub-formula u: `far` is the exponent with which P(|u| > t) falls off as a power of t (inf: faster than
any power), `near` the exponent with which P(|u| < e) falls off towards 0 (inf: u keeps away from 0).
Breiman (1965, Theory of Probability and its Applications 10, 323–331) for products; sums and extremes have
the heavier tail (Embrechts, Klüppelberg and Mikosch 1997, section 1.3). Where cancellation could make the
true tail lighter, the exponent is a lower bound and `sure` is False.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from outspread.formula.tree import Apply, Name, Node, Number
from outspread.laws.law import Law

INF = float("inf")


@dataclass(frozen=True)
class TailIndex:
    far: float
    near: float
    rate: float  # exponential rate with which P(|u| > t) falls off: inf where faster, 0 where slower
    reason: str = ""  # why `far` is finite
    sure: bool = True


def tail_index(node: Node, laws: Mapping[str, Law]) -> TailIndex:
    """The tail exponents of a formula of independent inputs."""
    if isinstance(node, Number):
        return TailIndex(INF, INF if node.value else 0.0, INF)
    if isinstance(node, Name):
        return _of_law(node.name, laws[node.name])
    assert isinstance(node, Apply)
    parts = [tail_index(argument, laws) for argument in node.arguments]
    return _combine(node, parts)


def _of_law(name: str, law: Law) -> TailIndex:
    far = min(law.tail_orders())
    reason = "" if far == INF else f"{name} itself has tails like a power of exponent {far:g}"
    low, high = law.support()
    with np.errstate(all="ignore"):
        steps = np.array([1e-60, 1e-90])
        mass = law.between(-steps, steps)
        atoms = law.atoms()
        if bool(np.any(atoms.values == 0)):
            near = 0.0
        elif low > 0 or high < 0 or mass[1] <= 0 or law.continuous_mass == 0:
            near = INF
        else:
            near = float(np.log(mass[0] / mass[1]) / np.log(steps[0] / steps[1]))
            near = round(near, 6)
    return TailIndex(far, near, _rate(law), reason)


def _rate(law: Law) -> float:
    """lim -log P(|X| > t) / t over both tails, from two far quantiles."""
    rates = []
    low, high = law.support()
    levels = np.array([1e-100, 1e-250])
    with np.errstate(all="ignore"):
        for end, quantiles in ((low, law.icdf(levels)), (high, law.iccdf(levels))):
            if np.isfinite(end):
                continue
            near, far = -np.log(levels) / np.abs(quantiles)
            change = far / near
            rates.append(INF if change > 1.15 else 0.0 if change < 0.85 else float(far))
    return min(rates, default=INF)


def _lightest(parts: list[TailIndex]) -> TailIndex:
    return min(parts, key=lambda part: part.far)


def _combine(node: Apply, parts: list[TailIndex]) -> TailIndex:
    operator = node.operator
    first = parts[0]
    sure = all(part.sure for part in parts)
    if operator in ("negate", "abs"):
        return first
    if operator in ("add", "hypot", "max", "min"):
        heavy = _lightest(parts)
        near = 1.0 if len(parts) > 1 else first.near
        rate = min(part.rate for part in parts)
        return TailIndex(heavy.far, near, rate, heavy.reason, sure)
    if operator == "multiply":
        return _product(parts, sure)
    if operator == "divide":
        return _product([first, _inverse(parts[1], "the denominator")], sure)
    if operator in ("power", "sqrt"):
        return _power(node, parts)
    if operator in ("exp", "from_decibel", "sinh", "cosh"):
        scale = np.log(10) / 10 if operator == "from_decibel" else 1.0
        far = first.rate / scale
        reason = "" if far == INF else "an exponential of a quantity with exponential tails has power tails"
        return TailIndex(far, INF, 0.0, reason, sure and first.far == INF)
    if operator in ("log", "log10", "decibel"):
        far = 0.0 if first.near == 0 else INF
        return TailIndex(far, 1.0, min(first.far, first.near), "", sure)
    if operator == "tan":
        return TailIndex(1.0, 1.0, 0.0, "the tangent has poles", sure)
    if operator == "if":
        heavy = _lightest(parts[1:])
        return TailIndex(
            heavy.far,
            min(part.near for part in parts[1:]),
            min(p.rate for p in parts[1:]),
            heavy.reason,
            sure,
        )
    if operator in ("sin", "cos", "asin", "acos", "atan", "atan2", "tanh", "erf", "sign"):
        return TailIndex(INF, 1.0, INF, "", sure)
    if operator in ("floor", "ceil"):
        return TailIndex(first.far, 0.0, first.rate, first.reason, sure)
    return TailIndex(0.0, 0.0, 0.0, f"the tails of {operator}(…) are not known", False)


def _product(parts: list[TailIndex], sure: bool) -> TailIndex:
    heavy = _lightest(parts)
    random = [part for part in parts if part.rate != INF or part.far != INF]
    rate = INF if not random else random[0].rate if len(parts) == 1 else 0.0
    constant = all(part.near == INF or part.near > 0 for part in parts)
    near = min(part.near for part in parts) if constant else 0.0
    return TailIndex(heavy.far, near, rate, heavy.reason, sure)


def _inverse(part: TailIndex, what: str) -> TailIndex:
    if part.near == INF:
        return TailIndex(INF, part.far, INF, "", part.sure)
    words = (
        "takes the value 0 with positive probability" if part.near == 0 else "comes arbitrarily close to 0"
    )
    reason = f"{what} {words}, which gives tails like a power of exponent {part.near:g}"
    return TailIndex(part.near, part.far, 0.0, reason, part.sure)


def _power(node: Apply, parts: list[TailIndex]) -> TailIndex:
    first = parts[0]
    exponent = node.arguments[1] if node.operator == "power" else Number(0.5)
    if not isinstance(exponent, Number):
        return TailIndex(0.0, 0.0, 0.0, "a power with a random exponent: its tails are not known", False)
    p = exponent.value
    base = first if p > 0 else _inverse(first, "the base of a negative power")
    size = abs(p)
    rate = base.rate if size == 1 else (INF if size < 1 and base.rate > 0 else 0.0)
    if size == 0:
        return TailIndex(INF, INF, INF)
    return TailIndex(base.far / size, base.near / size, rate, base.reason, first.sure)
