"""Properties that every law has, at random parameters and points (hypothesis)."""

from __future__ import annotations

import itertools
from typing import Any

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from outspread.errors import LawError
from outspread.laws.law import Law
from outspread.laws.registry import FAMILIES

EPSILON = float(np.finfo(float).eps)
SHAPES = st.floats(0.3, 12.0)
SCALES = st.floats(0.05, 20.0)
PLACES = st.floats(-50.0, 50.0)
SHARES = st.floats(0.02, 0.98)

#: how each canonical parameter is drawn, by its name; families with special needs follow
BY_NAME: dict[str, st.SearchStrategy[Any]] = {
    **dict.fromkeys(("shape", "alpha", "beta", "inner_shape", "outer_shape"), SHAPES),
    **dict.fromkeys(("degrees_of_freedom", "concentration"), SHAPES),
    **dict.fromkeys(("numerator_degrees_of_freedom", "denominator_degrees_of_freedom"), SHAPES),
    **dict.fromkeys(("scale", "sd", "rate", "spread", "log_sd", "noncentrality", "offset"), SCALES),
    **dict.fromkeys(("mean", "location", "log_mean", "lower"), PLACES),
    "probability": SHARES,
    "successes": SHAPES,
    "trials": st.integers(1, 60).map(float),
}


def _ordered(*names: str) -> st.SearchStrategy[dict[str, float]]:
    steps = st.lists(st.floats(0.1, 10.0), min_size=len(names), max_size=len(names))
    return steps.map(lambda drawn: dict(zip(names, np.cumsum(drawn).tolist(), strict=True)))


SPECIAL: dict[str, st.SearchStrategy[dict[str, Any]]] = {
    "uniform": _ordered("lower", "upper"),
    "arcsine": _ordered("lower", "upper"),
    "log_uniform": _ordered("lower", "upper"),
    "triangular": _ordered("lower", "mode", "upper"),
    "trapezoidal": _ordered("lower", "top_lower", "top_upper", "upper"),
    "curvilinear_trapezoidal": st.builds(
        lambda lower, width, share: {
            "lower": lower,
            "upper": lower + width,
            "limit_half_width": 0.5 * share * width,
        },
        PLACES,
        SCALES,
        SHARES,
    ),
    **{
        key: st.builds(
            lambda lower, width, a, b, key=key: {
                "lower": lower,
                "upper": lower + width,
                **({"shape": a} if key == "power_function" else {"alpha": a, "beta": b}),
            },
            PLACES,
            SCALES,
            SHAPES,
            SHAPES,
        )
        for key in ("beta", "kumaraswamy", "power_function")
    },
    "inverse_gaussian": st.builds(lambda mean, shape: {"mean": mean, "shape": shape}, SCALES, SCALES),
    "poisson": SCALES.map(lambda mean: {"mean": mean}),
    "hoyt": st.builds(lambda q, w: {"shape": q, "spread": w}, st.floats(0.1, 1.0), SCALES),
    "nakagami": st.builds(lambda m, w: {"shape": m, "spread": w}, st.floats(0.5, 12.0), SCALES),
    **{
        key: st.builds(
            lambda location, scale, shape: {"location": location, "scale": scale, "shape": shape},
            PLACES,
            SCALES,
            st.floats(-0.6, 0.6),
        )
        for key in ("generalised_extreme_value", "generalised_pareto", "skew_normal")
    },
    "logit_normal": st.builds(lambda m, s: {"location": m, "scale": s}, st.floats(-3, 3), st.floats(0.1, 3)),
    "lognormal": st.builds(lambda m, s: {"log_mean": m, "log_sd": s}, st.floats(-3, 3), st.floats(0.05, 2)),
    "hypergeometric": st.just({"population": 50.0, "successes": 12.0, "draws": 20.0}),
    "discrete_uniform": st.integers(-5, 5).map(lambda low: {"lower": float(low), "upper": low + 7.0}),
    "categorical": st.just({"values": (0.5, 2.0, 7.0), "probabilities": (0.2, 0.5, 0.3)}),
}


def laws(key: str) -> st.SearchStrategy[Law]:
    family = FAMILIES[key]
    if key in SPECIAL:
        drawn = SPECIAL[key]
    else:
        drawn = st.fixed_dictionaries({name: BY_NAME[name] for name in family.canonical_names})
    return drawn.map(lambda given: family.build(family.canonical(given)))


ALL = sorted(FAMILIES)
CONTINUOUS = [key for key in ALL if FAMILIES[key].kind == "continuous"]
few = settings(max_examples=8, deadline=None, derandomize=True, suppress_health_check=list(HealthCheck))


@pytest.mark.parametrize("key", ALL)
def test_cdf_rises_and_complements_ccdf(key: str) -> None:
    """The cdf never falls, lies in [0, 1], and cdf + ccdf = 1 to rounding; it is 0 and 1 at the ends."""

    @few
    @given(laws(key))
    def check(law: Law) -> None:
        p = np.array([1e-12, 1e-6, 0.01, 0.1, 0.3, 0.5, 0.7, 0.9, 0.99, 1 - 1e-9])
        x = np.unique(np.concatenate((law.icdf(p), law.iccdf(p))))
        cdf, ccdf = law.cdf(x), law.ccdf(x)
        slack = 4 * law.relative_error + 8 * EPSILON
        assert np.all(np.diff(cdf) >= -slack * cdf[1:])
        assert np.all(np.diff(ccdf) <= slack * ccdf[:-1])
        assert np.all((cdf >= 0) & (cdf <= 1) & (ccdf >= 0) & (ccdf <= 1))
        np.testing.assert_allclose(cdf + ccdf, 1, atol=slack)
        low, high = law.support()
        assert law.cdf(np.nextafter(low, -np.inf)) == 0
        assert law.ccdf(high) == 0
        assert law.cdf(high) == 1
        assert np.all(np.isnan([law.cdf(np.nan), law.pdf(np.nan), law.icdf(np.nan), law.icdf(-0.1)]))

    check()


@pytest.mark.parametrize("key", ALL)
def test_quantiles_invert_both_tails(key: str) -> None:
    """cdf(icdf(p)) >= p and cdf just before is below p, up to the error stated; the same for ccdf."""

    @few
    @given(laws(key), st.floats(1e-12, 0.999))
    def check(law: Law, p: float) -> None:
        for upper in (False, True):
            x = float(law.iccdf(p) if upper else law.icdf(p))
            # one ulp of the argument moves the probability by this much
            width = 4 * np.spacing(max(abs(x), abs(law.support()[0]) if np.isfinite(law.support()[0]) else 0))
            step = float(law.pdf(x)) * width if np.isfinite(law.pdf(x)) else 0.01
            slack = step + (4 * law.relative_error + 8 * EPSILON)
            before = x - width
            if upper:
                assert law.ccdf(x) <= p + slack
                assert law.ccdf(before) >= p - slack or x == law.support()[0]
            else:
                assert law.cdf(x) >= p - slack
                assert law.cdf(before) <= p + slack or x == law.support()[0]

    check()


@pytest.mark.parametrize("key", CONTINUOUS)
def test_density_integrates_to_between(key: str) -> None:
    """The integral of the density over an interval inside equals `between`, also for narrow intervals."""
    nodes, weights = np.polynomial.legendre.leggauss(40)

    @few
    @given(laws(key), st.floats(0.02, 0.98), st.sampled_from([1e-9, 1e-4, 0.02]))
    def check(law: Law, p: float, share: float) -> None:
        low = float(law.icdf(p))
        high = float(law.icdf(p + share * p * (1 - p)))
        cuts = [low, *(point for point in law.breaks() if low < point < high), high]
        if high >= law.support()[1]:
            return
        total = 0.0
        for a, b in itertools.pairwise(cuts):
            total += 0.5 * (b - a) * float(weights @ law.pdf(a + 0.5 * (b - a) * (1 + nodes)))
        # the width b - a is exact, the points are rounded: the density may vary by an ulp of x
        assert float(law.between(low, high)) == pytest.approx(total, rel=2e-11)

    check()


@pytest.mark.parametrize("key", ALL)
def test_between_adds_up(key: str) -> None:
    """between(a, b) + between(b, c) = between(a, c), and nothing lies between a point and itself."""

    @few
    @given(laws(key), st.lists(st.floats(0.001, 0.999), min_size=3, max_size=3))
    def check(law: Law, levels: list[float]) -> None:
        a, b, c = np.sort(law.icdf(levels))
        assert float(law.between(a, b) + law.between(b, c)) == pytest.approx(
            float(law.between(a, c)), rel=1e-11, abs=1e-14
        )
        assert law.between(b, b) == 0
        assert law.between(c, a) == 0 or c == a
        assert float(law.between(-np.inf, np.inf)) == pytest.approx(1, abs=1e-12)

    check()


@pytest.mark.parametrize("key", CONTINUOUS)
def test_moments_agree_with_the_quantile_integral(key: str) -> None:
    """The mean and variance equal the integrals of icdf(p) and its square over p, where they exist."""
    nodes, weights = np.polynomial.legendre.leggauss(12)
    halvings = np.concatenate(([0.0], 0.5 ** np.arange(80, 0, -1.0)))

    def points(kinks: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Probabilities up to 1/2 and their weights: panels that halve towards 0, cut at the kinks."""
        edges = np.unique(np.concatenate((halvings, kinks[(kinks > 0) & (kinks < 0.5)])))
        middle, half = 0.5 * (edges[1:] + edges[:-1]), 0.5 * np.diff(edges)
        return (middle[:, None] + half[:, None] * nodes).ravel(), (half[:, None] * weights).ravel()

    @settings(parent=few, max_examples=3)
    @given(laws(key))
    def check(law: Law) -> None:
        if not law.moment_exists(4.5):
            return
        breaks = np.array(law.breaks(), float)
        (p, v), (q, w) = points(law.cdf(breaks)), points(law.ccdf(breaks))
        low, high = law.icdf(p), law.iccdf(q)
        mean = float(v @ low + w @ high)
        variance = float(v @ (low - mean) ** 2 + w @ (high - mean) ** 2)
        assert abs(law.mean() - mean) <= 1e-8 * law.standard_deviation() + 1e-13 * abs(mean)
        assert law.variance() == pytest.approx(variance, rel=1e-6)

    check()


def test_registry_refuses_what_is_no_number() -> None:
    """Text where a number belongs is a LawError that names the parameter."""
    with pytest.raises(LawError) as caught:
        FAMILIES["normal"].canonical({"mean": "wide", "sd": 1})
    assert caught.value.parameter == "mean"
