"""Adaptive quadrature against integrals in closed form: the true error never exceeds the stated one."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import numpy.typing as npt
import pytest

from outspread.numerics.quadrature import GAUSS, KRONROD, NODES, integrate, panels_between

Array = npt.NDArray[np.float64]


def at_points(function: Callable[[Array], Array]) -> Callable[[Array, Array], Array]:
    return lambda x, owner: function(x)


#: integrand on [0, 1] and its integral: elementary antiderivatives
KNOWN: dict[str, tuple[Callable[[Array], Array], float]] = {
    "exponential": (np.exp, float(np.expm1(1.0))),
    "inverse root": (lambda x: x**-0.5, 2.0),
    "logarithm": (np.log, -1.0),
    "root": (np.sqrt, 2 / 3),
    "kink at an unknown point": (lambda x: np.abs(x - 1 / 3), (1 / 9 + 4 / 9) / 2),
    "jump at an unknown point": (lambda x: np.where(x < 0.1234567, 1.0, 3.0), 3 - 2 * 0.1234567),
    "fifty periods": (lambda x: np.sin(100 * np.pi * x) ** 2, 0.5),
    "narrow bell": (lambda x: 1 / (1 + (1e3 * (x - 0.5)) ** 2), 2 * float(np.arctan(500.0)) / 1e3),
    "large constant": (lambda x: 1e200 + 0 * x, 1e200),
}


@pytest.mark.parametrize("case", KNOWN)
def test_the_true_error_is_within_the_stated_one(case: str) -> None:
    """Twelve digits are asked for; ten at least must come, and the error stated must cover the true one."""
    function, exact = KNOWN[case]
    result = integrate(at_points(function), np.zeros(1), np.ones(1), np.zeros(1, np.int64), 1)
    true = abs(result.value[0, 0] - exact)
    assert true <= result.error[0, 0] + 2e-16 * abs(exact)
    assert true <= 1e-10 * abs(exact)


def test_the_rule_is_exact_for_polynomials_of_its_degree() -> None:
    """Kronrod's 21 points integrate degree 31 exactly, Gauss's 10 degree 19 (Piessens et al. 1983)."""
    for degree in range(32):
        exact = 2 / (degree + 1) if degree % 2 == 0 else 0.0
        assert NODES**degree @ KRONROD == pytest.approx(exact, abs=4e-16)
        if degree < 20:
            assert NODES**degree @ GAUSS == pytest.approx(exact, abs=4e-16)


def test_many_owners_are_integrated_at_once() -> None:
    """The integral of x^k over [0, 1] is 1 / (k + 1), for each owner k by itself."""
    powers = np.arange(200)
    result = integrate(
        lambda x, owner: x ** powers[owner], np.zeros(200), np.ones(200), powers.astype(np.int64), 200
    )
    np.testing.assert_allclose(result.value[0], 1 / (powers + 1.0), rtol=1e-13)
    assert result.evaluations % 21 == 0


def test_an_error_that_bisection_cannot_lower_stays_in_the_account() -> None:
    """Noise of size 1e-3 is not integrated to 1e-12, and the error says so."""

    def noise(x: Array, owner: Array) -> Array:
        return 1 + 1e-3 * np.sin(1e15 * x * x)

    result = integrate(noise, np.zeros(1), np.ones(1), np.zeros(1, np.int64), 1, most_panels=2_000)
    assert abs(result.value[0, 0] - 1) <= result.error[0, 0]
    assert result.error[0, 0] > 1e-9


def test_components_beyond_the_controlled_ones_do_not_cost_panels() -> None:
    """Only the first component is refined; the other keeps the error that its panels give."""

    def both(x: Array, owner: Array) -> Array:
        return np.stack([np.exp(x), np.abs(x - 1 / 3)])

    panel = np.zeros(1), np.ones(1), np.zeros(1, np.int64), 1
    easy = integrate(both, *panel, components=2, control=1)
    full = integrate(both, *panel, components=2)
    assert easy.evaluations < full.evaluations
    assert abs(easy.value[1, 0] - 5 / 18) <= easy.error[1, 0]


def test_panels_leave_out_gaps_and_repeated_points() -> None:
    lower, upper, owner = panels_between(np.array([[2.0, 0.0, np.nan, 0.0], [1.0, np.nan, 5.0, 3.0]]))
    found = sorted(zip(owner.tolist(), lower.tolist(), upper.tolist(), strict=True))
    assert found == [(0, 0.0, 2.0), (1, 1.0, 3.0), (1, 3.0, 5.0)]
