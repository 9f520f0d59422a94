"""Joint densities by inverse and Jacobian against published joint laws, evaluated by mpmath to 40 digits."""

from __future__ import annotations

from collections.abc import Callable

import mpmath
import numpy as np
import pytest
from jacobian_maps import MAPS, derive, draws, exponential, gamma, joint, law, normal, uniform

from outspread.formula.evaluate import compile_numpy
from outspread.formula.parser import parse
from outspread.reporting.latex import read
from outspread.routes.derived import JointLaw
from outspread.routes.jacobian import NotPossible, derive_joint, input_density

POINTS = 60
DIGITS = 1e-12  # relative


def _phi(x: mpmath.mpf) -> mpmath.mpf:
    return mpmath.npdf(x)


def _gamma_pdf(x: mpmath.mpf, shape: float, scale: float) -> mpmath.mpf:
    a, b = mpmath.mpf(shape), mpmath.mpf(scale)
    return x ** (a - 1) * mpmath.exp(-x / b) / (mpmath.gamma(a) * b**a)


def _sum_and_share(s: mpmath.mpf, t: mpmath.mpf) -> mpmath.mpf:
    beta = t * (1 - t) ** mpmath.mpf(2.5) / mpmath.beta(2, mpmath.mpf(3.5))
    return _gamma_pdf(s, 5.5, 1.5) * beta


def _pairwise_sums(u: mpmath.mpf, v: mpmath.mpf, w: mpmath.mpf) -> mpmath.mpf:
    x1, x2, x3 = (u - v + w) / 2, (u + v - w) / 2, (v + w - u) / 2
    return 6 * mpmath.exp(-x1 - 2 * x2 - 3 * x3) / 2


def _affine(a: mpmath.mpf, b: mpmath.mpf) -> mpmath.mpf:
    x = (3 * (a - 1) + b) / mpmath.mpf("6.25")
    return mpmath.npdf(x, 1, 2) / 3 / mpmath.mpf("6.25")


def _spherical(r: mpmath.mpf, t: mpmath.mpf, p: mpmath.mpf) -> mpmath.mpf:
    return r * r * mpmath.sin(t) * mpmath.exp(-r * r / 2) / (2 * mpmath.pi) ** mpmath.mpf(1.5)


def _complex_square(a: mpmath.mpf, b: mpmath.mpf) -> mpmath.mpf:
    size = mpmath.hypot(a, b)  # |z²|; two roots, |d(z²)/dz|² = 4|z|² = 4 size
    return 2 * mpmath.exp(-size / 2) / (2 * mpmath.pi) / (4 * size)


def _decibels(a: mpmath.mpf, b: mpmath.mpf) -> mpmath.mpf:
    x, y = mpmath.mpf(10) ** (a / 10), mpmath.mpf(10) ** ((a - b) / 10)
    return _gamma_pdf(x, 2, 1) * _gamma_pdf(y, 3, 1) * x * y * (mpmath.log(10) / 10) ** 2


#: joint densities: published where a source is named, else the change of variables written out by hand
TRUTH: dict[str, Callable[..., mpmath.mpf]] = {
    "affine": _affine,
    "pairwise sums": _pairwise_sums,
    # Rayleigh times uniform: A. Papoulis, Probability, Random Variables, Stochastic Processes (from memory)
    "polar": lambda r, t: r * mpmath.exp(-r * r / 2) / (2 * mpmath.pi),
    # G. E. P. Box, M. E. Muller (1958), Ann. Math. Statist. 29, 610: independent standard normals
    "Box-Muller": lambda a, b: _phi(a) * _phi(b),
    # E. Lukacs (1955), Ann. Math. Statist. 26, 319: sum gamma, share beta, independent
    "sum and share": _sum_and_share,
    # gamma sum times beta prime ratio, from the same independence
    "sum and ratio": lambda s, r: _gamma_pdf(s, 2, 2) / (1 + r) ** 2,
    "product and ratio": lambda p, q: mpmath.exp(-(p * q + p / q) / 2) / (2 * mpmath.pi) / abs(q),
    "square and cube": lambda a, b: (
        _phi(mpmath.sqrt(a)) / mpmath.sqrt(a) * _phi(mpmath.cbrt(abs(b))) / (3 * mpmath.cbrt(abs(b)) ** 2)
    ),
    "squares and one": lambda r, b: mpmath.exp(-r / 2) / (2 * mpmath.pi) / mpmath.sqrt(r - b * b),
    # n! times the product of densities: H. A. David, H. N. Nagaraja, Order Statistics (2003), section 2.2
    "order statistics": lambda a, b: 2 * _phi(a) * _phi(b),
    "spherical": _spherical,
    "complex square": _complex_square,
    "decibels": _decibels,
}


@pytest.mark.parametrize("written", [True, False], ids=["written inverse", "searched inverse"])
@pytest.mark.parametrize("name", TRUTH)
def test_the_joint_density_has_twelve_digits(name: str, written: bool) -> None:
    """At outputs of random inputs the density agrees with the published one, inside its stated error."""
    formulas, laws = MAPS[name]
    found = joint(formulas, laws, written=written)
    inputs = draws(laws, POINTS if written else 12, seed=20)
    points = np.stack([compile_numpy(parse(text), tuple(laws))(*inputs) for text in formulas.values()])
    value = found.pdf(points)
    assert found.pdf_error is not None
    error = found.pdf_error(points)
    with mpmath.workdps(40):
        exact = [TRUTH[name](*(mpmath.mpf(float(part)) for part in point)) for point in points.T]
        true_error = [abs(mpmath.mpf(float(v)) - t) for v, t in zip(value, exact, strict=True)]
        assert all(e <= stated for e, stated in zip(true_error, error, strict=True))
        assert all(e <= DIGITS * t for e, t in zip(true_error, exact, strict=True))
    assert np.all(error <= 1e-10 * value)


def test_pairwise_sums_of_exponentials_at_the_published_points() -> None:
    """Case o23 of the reference values: 6 exp(-x1 - 2 x2 - 3 x3)/2 inside the image, 0 outside."""
    formulas, laws = MAPS["pairwise sums"]
    found = joint(formulas, laws)
    points = np.array([[1.0, 1.2, 3.0], [1.0, 0.7, 1.0], [1.0, 1.1, 1.0]])
    expected = [0.1493612051035918289380272469, 0.2462549958716963855085860234, 0.0]
    np.testing.assert_allclose(found.pdf(points), expected, rtol=1e-13, atol=0.0)
    assert found.region is not None
    assert found.region(points).tolist() == [True, True, False]


def test_polar_coordinates_of_an_offset_point() -> None:
    """Case o06: r f1(r cos t) f2(r sin t) at (0.02, 0.5); setting of JCGM 102:2011, 9.3."""
    laws = {"X1": normal(0.01, 0.01), "X2": normal(0.0, 0.01)}
    found = joint({"R": "hypot(X1, X2)", "Theta": "atan2(X2, X1)"}, laws)
    value = found.pdf(np.array([[0.02], [0.5]]))[0]
    assert value == pytest.approx(15.11375753289312703339535378, rel=1e-13)


def test_box_muller_at_the_published_point_and_far_out() -> None:
    """Case o24: phi(0.3) phi(1.2); and at radius 30, where u is about 1e-196."""
    formulas, laws = MAPS["Box-Muller"]
    found = joint(formulas, laws)
    points = np.array([[0.3, 18.0], [-1.2, -24.0]])
    with mpmath.workdps(40):
        expected = [float(_phi(mpmath.mpf(a)) * _phi(mpmath.mpf(b))) for a, b in points.T]
    assert expected[0] == pytest.approx(0.07406019530294480043246751479, rel=1e-14)
    np.testing.assert_allclose(found.pdf(points), expected, rtol=1e-12)


def test_a_density_on_a_triangle() -> None:
    """Case o22: 24xy on x + y < 1 gives 24 s³ t(1 - t) (Dirichlet), here with the density as a function."""
    laws = {"X": uniform(), "Y": uniform()}
    outputs = {"S": parse("X + Y"), "T": parse("X/(X + Y)")}

    def density(inputs: np.ndarray) -> np.ndarray:
        x, y = inputs
        return np.where(x + y <= 1.0, 24.0 * x * y, 0.0)

    found = derive_joint(outputs, laws, density, {})
    assert isinstance(found, JointLaw)
    points = np.array([[0.5, 0.9, 1.2], [0.25, 0.6, 0.5]])
    expected = [0.5625, 24 * 0.9**3 * 0.6 * 0.4, 0.0]
    np.testing.assert_allclose(found.pdf(points), expected, rtol=1e-13)


def test_three_order_statistics_have_six_times_the_product() -> None:
    """Minimum, median (sum less both ends) and maximum of three: 3! f f f (David and Nagaraja, 2.2)."""
    formulas = {"a": "min(x, y, z)", "b": "x + y + z - min(x, y, z) - max(x, y, z)", "c": "max(x, y, z)"}
    laws = {name: exponential(2.0) for name in "xyz"}
    found = joint(formulas, laws)
    assert found.branches == 6
    points = np.array([[0.1, 0.5], [0.4, 0.3], [0.9, 2.0]])
    expected = [6 * 8 * np.exp(-2 * 1.4), 0.0]
    np.testing.assert_allclose(found.pdf(points), expected, rtol=1e-13)


def test_product_and_ratio_of_correlated_lognormals() -> None:
    """ln X, ln Y jointly normal (case o39): ln XY and ln X/Y are jointly normal with known covariance."""
    laws = {"X": law("lognormal", log_mean=0.0, log_sd=0.5), "Y": law("lognormal", log_mean=0.2, log_sd=0.8)}
    found = joint({"P": "X*Y", "R": "X/Y"}, laws, [[1.0, 0.6], [0.6, 1.0]])
    points = np.array([[5.0, 40.0, 1e-3, 0.02], [2.0, 40.0, 1e2, 1e-3]])
    with mpmath.workdps(40):
        a, b, c = mpmath.mpf("0.25"), mpmath.mpf("0.64"), mpmath.mpf("0.24")
        covariance = mpmath.matrix([[a + b + 2 * c, a - b], [a - b, a + b - 2 * c]])
        inverse, size = covariance**-1, mpmath.det(covariance)
        expected = []
        for p, r in points.T:
            z = mpmath.matrix([mpmath.log(mpmath.mpf(p)) - 0.2, mpmath.log(mpmath.mpf(r)) + 0.2])
            exponent = (z.T * inverse * z)[0] / 2
            expected.append(float(mpmath.exp(-exponent) / (2 * mpmath.pi * mpmath.sqrt(size)) / (p * r)))
    np.testing.assert_allclose(found.pdf(points), expected, rtol=1e-11)


@pytest.mark.parametrize("x", [-25.0, -5.0, 0.3, 5.0, 25.0])
def test_the_copula_density_is_as_good_in_the_upper_tail_as_in_the_lower(x: float) -> None:
    """A Gaussian copula over normals is the bivariate normal law, whose density is elementary."""
    laws = {"x": normal(2.0, 3.0), "y": normal(-1.0, 0.5)}
    rho = 0.8
    density = input_density(laws, [[1.0, rho], [rho, 1.0]])
    y = 0.9 * x
    given = np.array([[2.0 + 3.0 * x], [-1.0 + 0.5 * y]])
    with mpmath.workdps(40):
        u, v = (mpmath.mpf(given[0, 0]) - 2) / 3, (mpmath.mpf(given[1, 0]) + 1) * 2
        r = mpmath.mpf(rho)
        exponent = (u * u - 2 * r * u * v + v * v) / (2 * (1 - r * r))
        expected = mpmath.exp(-exponent) / (2 * mpmath.pi * 3 * mpmath.mpf("0.5") * mpmath.sqrt(1 - r * r))
    assert density(given)[0] == pytest.approx(float(expected), rel=1e-11)


@pytest.mark.parametrize("gap", [1e-3, 1e-6, 1e-9, 1e-12])
def test_digits_hold_beside_a_fold_of_the_map(gap: float) -> None:
    """Near y = 0 the inverse ±sqrt(r - x²) cancels; the density is still right to 12 digits."""
    formulas, laws = MAPS["squares and one"]
    found = joint(formulas, laws)
    points = np.array([[0.7 * 0.7 + gap], [0.7]])
    with mpmath.workdps(60):
        expected = float(TRUTH["squares and one"](*(mpmath.mpf(float(part)) for part in points[:, 0])))
    assert found.pdf(points)[0] == pytest.approx(expected, rel=DIGITS)


@pytest.mark.parametrize(
    ("formulas", "inputs", "reason"),
    [
        ({"a": "x + y", "b": "2*(x + y)"}, {"x": normal(), "y": normal()}, "functionally dependent"),
        ({"a": "x*y", "b": "log(x) + log(y)"}, {"x": gamma(2.0), "y": gamma(3.0)}, "functionally dependent"),
        ({"a": "x^2*y/y", "b": "abs(x + 3)"}, {"x": normal(), "y": normal()}, "functionally dependent"),
        ({"a": "max(x, 0)", "b": "y"}, {"x": normal(), "y": normal()}, "over a part of the support"),
        ({"a": "max(x, -20)", "b": "y"}, {"x": normal(), "y": normal()}, "over a part of the support"),
        ({"a": "x + y"}, {"x": normal(), "y": normal()}, "2 inputs for 1 output"),
        ({"a": "x", "b": "2*x"}, {"x": normal()}, "1 input for 2 outputs"),
        ({"a": "x + n", "b": "x - n"}, {"x": normal(), "n": law("poisson", mean=3.0)}, "n has atoms"),
    ],
)
def test_maps_without_a_joint_density_are_refused_with_the_reason(
    formulas: dict[str, str], inputs: dict, reason: str
) -> None:
    """Dependent outputs, a part without density, unequal numbers and atoms are told apart."""
    refused = derive(formulas, inputs)
    assert isinstance(refused, NotPossible)
    assert reason in refused.reason


def test_a_bound_that_no_input_reaches_changes_nothing() -> None:
    """max(x, 0) of a positive input is the input: the flat piece is proven empty."""
    found = joint({"a": "max(x, 0)", "b": "x + y"}, {"x": gamma(2.0), "y": normal()})
    plain = joint({"a": "x", "b": "x + y"}, {"x": gamma(2.0), "y": normal()})
    points = np.array([[0.5, 3.0], [1.0, 2.0]])
    np.testing.assert_allclose(found.pdf(points), plain.pdf(points), rtol=1e-14)


def test_the_larger_of_equal_arguments_is_that_argument() -> None:
    """max(y, y) is y, also where it is written so."""
    found = joint({"a": "max(y, y) + x", "b": "min(x, x)"}, {"x": normal(), "y": normal()})
    value = found.pdf(np.array([[0.5], [0.2]]))[0]
    assert value == pytest.approx(np.exp(-(0.3**2 + 0.2**2) / 2) / (2 * np.pi), rel=1e-14)


def test_one_output_of_one_input() -> None:
    """The square of a standard normal has the chi-square density with 1 degree of freedom."""
    found = joint({"a": "x^2"}, {"x": normal()})
    at = np.array([[0.01, 1.0, 30.0]])
    expected = np.exp(-at[0] / 2) / np.sqrt(2 * np.pi * at[0])
    np.testing.assert_allclose(found.pdf(at), expected, rtol=1e-13)
    assert found.branches == 2


def test_points_keep_their_shape() -> None:
    """Outputs of shape (n, …) give densities of shape (…); a point that is not a number has none."""
    found = joint({"a": "x + y", "b": "x - y"}, {"x": normal(), "y": normal()})
    assert found.pdf(np.zeros((2, 3, 4))).shape == (3, 4)
    assert found.pdf(np.zeros(2)).shape == ()
    assert np.isnan(found.pdf(np.array([np.nan, 0.0])))


@pytest.mark.parametrize("name", MAPS)
def test_the_written_derivation_can_be_typeset(name: str) -> None:
    """Every derivation states inverse, Jacobian and density in LaTeX that the report's reader accepts."""
    formulas, laws = MAPS[name]
    statements = joint(formulas, laws).mathematics
    assert {"inverse", "jacobian", "density"} <= {one.role for one in statements}
    for one in statements:
        read(one.latex)
        assert one.text.count("$") % 2 == 0


def test_the_polar_derivation_reads_as_in_a_textbook() -> None:
    """X = R cos T, Y = R sin T and det J = 1/R, up to typesetting."""
    formulas, laws = MAPS["polar"]
    latex = [one.latex for one in joint(formulas, laws).mathematics]
    assert r"x = R\,\cos\!\left(T\right),\quad y = R\,\sin\!\left(T\right)" in latex
    assert r"\det J = \frac{1}{R}" in latex
