"""Laws derived by parts beside a sampling script and a quadrature: `python tests/benchmarks/parts.py`.

Each case has a known answer. Printed are the true error, the stated one and the seconds; nothing is asserted.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from math import comb, factorial

import numpy as np
from scipy import integrate, stats

from outspread.formula.parser import parse
from outspread.laws.build import build_law
from outspread.laws.derived import DerivedLaw
from outspread.laws.law import Law
from outspread.planning.tree import TreePlanner
from outspread.reading.model import Distribution
from outspread.routes.closed_form.scored import recognise_with_scores
from outspread.routes.tree import TreeDeriver

DRAWS = 1_000_000
Draw = Callable[[np.random.Generator], np.ndarray]


def law(family: str, **parameters: float) -> Law:
    return build_law(Distribution(family, parameters))


UNIFORM = law("uniform", lower=0, upper=1)


@dataclass(frozen=True)
class Case:
    """`cdf(at)` is known to be `true`; `draw` and `quadrature` are what a user would write by hand."""

    name: str
    formula: str
    laws: Mapping[str, Law]
    at: float
    true: float
    draw: Draw
    quadrature: Callable[[], float] | None = None


def uniform_sum(count: int, y: Fraction) -> float:
    terms = ((-1) ** k * comb(count, k) * (y - k) ** count for k in range(int(y) + 1))
    return float(sum(terms, Fraction(0)) / factorial(count))


def product_plus(y: float) -> float:
    """P(ab + c <= y) for uniforms and y <= 1."""
    return 0.75 * y**2 - 0.5 * y**2 * np.log(y)


CASES = (
    Case(
        "a b + c, uniforms", "a*b + c", dict.fromkeys("abc", UNIFORM), 0.5, product_plus(0.5),
        lambda g: g.random(DRAWS) * g.random(DRAWS) + g.random(DRAWS),
        lambda: integrate.dblquad(
            lambda b, a: max(0.0, min(1.0, 0.5 - a * b)), 0, 1, 0, 1, epsabs=1e-10
        )[0],
    ),
    Case(
        "product of 10 uniforms", "*".join("abcdefghij"), dict.fromkeys("abcdefghij", UNIFORM), 1e-6,
        float(stats.gamma(10).sf(-np.log(1e-6))), lambda g: g.random((10, DRAWS)).prod(axis=0),
    ),
    Case(
        "sum of 10 uniforms, tail", "+".join("abcdefghij"), dict.fromkeys("abcdefghij", UNIFORM), 1.0,
        uniform_sum(10, Fraction(1)), lambda g: g.random((10, DRAWS)).sum(axis=0),
    ),
    Case(
        "sum of 5 Cauchys", "+".join("abcde"), dict.fromkeys("abcde", law("cauchy", location=0, scale=1)),
        -100.0, float(stats.cauchy(0, 5).cdf(-100)), lambda g: g.standard_cauchy((5, DRAWS)).sum(axis=0),
    ),
    Case(
        "sum of 100 uniforms", "+".join(f"u{i}" for i in range(100)),
        {f"u{i}": UNIFORM for i in range(100)}, 45.0, uniform_sum(100, Fraction(45)),
        lambda g: g.random((100, DRAWS)).sum(axis=0),
    ),
)  # fmt: skip


def main() -> None:
    print(f"{'case':28} {'by':10} {'true error':>11} {'stated':>9} {'seconds':>8}   (relative to the value)")
    for case in CASES:
        start = time.perf_counter()
        # kept from closed forms, so that all of it is done by integration
        step = TreePlanner(case.laws, None, lambda *_: None).plan("y", parse(case.formula))
        assert step is not None
        found = TreeDeriver(case.laws, None, recognise_with_scores).derive(step).law
        assert isinstance(found, DerivedLaw)
        estimate = found.estimate("cdf", np.array([case.at]))
        row(case, "parts", estimate.value[0], estimate.error[0], start)
        start = time.perf_counter()
        share = float((case.draw(np.random.default_rng(7)) <= case.at).mean())
        row(case, "sampling", share, 4 * np.sqrt(max(share * (1 - share), 1e-12) / DRAWS), start)
        if case.quadrature is not None:
            start = time.perf_counter()
            row(case, "quadrature", case.quadrature(), float("nan"), start)


def row(case: Case, by: str, value: float, stated: float, start: float) -> None:
    off = abs(value - case.true) / case.true
    seconds = time.perf_counter() - start
    print(f"{case.name:28} {by:10} {off:11.1e} {stated / case.true:9.1e} {seconds:8.2f}", flush=True)


if __name__ == "__main__":
    main()
