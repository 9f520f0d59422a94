"""Probabilities and densities of two inputs, integrated over the one and over the other (Fubini's theorem).

The two orders share no panel and meet other folds, kinks and poles; each states an error, and the difference
may not exceed their sum. Families and parameters are drawn at random; they are nobody's data.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest

from outspread.formula.parser import parse
from outspread.laws.build import build_law
from outspread.laws.law import Law
from outspread.reading.model import Distribution
from outspread.routes.numeric import derive

FORMULAS = (
    "a+b", "a-b", "a*b", "a/b", "b/a", "a^2+b^2", "hypot(a,b)", "a*b+a", "max(a,b)", "min(a,b)*2", "abs(a-b)",
    "a*exp(b/4)", "atan2(a,b)", "a/(a+b)", "a^2-b", "if(a>b,a,2*b)", "max(a,0)+b", "a*b^2", "exp(-a^2)*b",
    "sqrt(abs(a))+b", "abs(a)-abs(b)", "(a-b)/(a+b)", "a+b^3", "max(a*b,a+b)", "a*b/(1+b^2)",
    "min(max(a,b),1)", "log(1+a^2)+b", "abs(a)^b", "a/(1+abs(b))", "floor(a)+b",
)  # fmt: skip
LEVELS = np.array([1e-9, 1e-4, 0.03, 0.2, 0.5, 0.8, 0.97, 0.9999])


def _families(rng: np.random.Generator) -> list[Callable[[], Distribution]]:
    def of(family: str, **parameters: float) -> Distribution:
        return Distribution(family, parameters)

    def some(low: float, high: float) -> float:
        return float(rng.uniform(low, high))

    return [
        lambda: of("normal", mean=some(-1, 1), sd=some(0.3, 2)),
        lambda: of("uniform", lower=some(-2, 0), upper=some(0.5, 3)),
        lambda: of("gamma", shape=some(0.4, 4), scale=some(0.3, 2)),
        lambda: of("logistic", location=some(-1, 1), scale=some(0.3, 1)),
        lambda: of("lognormal", log_mean=0.0, log_sd=some(0.2, 1)),
        lambda: of("exponential", mean=some(0.3, 2)),
        lambda: of("triangular", lower=-1.0, mode=some(-0.5, 1), upper=2.0),
        lambda: of("student_t", degrees_of_freedom=some(1, 6), location=0.0, scale=1.0),
        lambda: of("laplace", location=0.3, scale=some(0.3, 2)),
        lambda: of("beta", alpha=some(0.4, 3), beta=some(0.4, 3), lower=0.0, upper=1.0),
        lambda: of("gumbel_max", location=0.0, scale=1.0),
        lambda: of("weibull", shape=some(0.6, 3), scale=1.0),
    ]


def _pair(seed: int, place: int) -> dict[str, Law]:
    rng = np.random.default_rng((seed, place))
    families = _families(rng)
    first, second = rng.integers(len(families), size=2)
    return {"a": build_law(families[first]()), "b": build_law(families[second]())}


@pytest.mark.filterwarnings("ignore::RuntimeWarning")
@pytest.mark.parametrize("seed", [1, pytest.param(2, marks=pytest.mark.slow)])
@pytest.mark.parametrize("formula", FORMULAS)
def test_the_order_of_integration_does_not_matter(formula: str, seed: int) -> None:
    laws = _pair(seed, FORMULAS.index(formula))
    one = derive(parse(formula), laws, None)
    two = derive(parse(formula), laws, None, outer=("b",))
    y = one.law.rough_quantile(LEVELS)
    y = y[np.isfinite(y)]
    for kind in ("cdf", "ccdf", "pdf"):
        first, second = one.law._evaluate(kind, y), two.law._evaluate(kind, y)
        off = np.abs(first.value - second.value)
        assert np.all(off <= first.error + second.error + 4e-16 * np.abs(first.value)), (kind, y, off)
        # a value does not depend on what else is asked for in the same call
        alone = one.law._evaluate(kind, y[3:4])
        assert abs(alone.value[0] - first.value[3]) <= alone.error[0] + first.error[3] + 1e-300
