"""Distribution functions written out in mpmath from the textbook formulas, beyond double precision.

Formulas: Johnson, Kotz and Balakrishnan, Continuous Univariate Distributions 1 (1994) and 2 (1995); JCGM
101:2008 for the curvilinear trapezoid. Incomplete integrals without a closed form are integrated by
mpmath's tanh-sinh rule from the density, never as 1 minus the other tail.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import mpmath as mp
import numpy as np

Number = Any
Function = Callable[[Number], Number]

DIGITS = 50


@dataclass(frozen=True)
class Reference:
    pdf: Function
    cdf: Function
    ccdf: Function


def by_quadrature(pdf: Function, lower: Number, upper: Number, scale: Number) -> Reference:
    """Tails of a density as sums of panels that grow from the point outwards until nothing is added.

    Each panel by the 40-point Gauss rule of numpy, evaluated in mpmath: its nodes are exact to 1e-16 of the
    panel, which changes an integral over a few e-folds by no more than 1e-14.
    """
    nodes, weights = np.polynomial.legendre.leggauss(40)
    rule = [(mp.mpf(float(x)), mp.mpf(float(w))) for x, w in zip(nodes, weights, strict=True)]

    def panel(low: Number, high: Number) -> Number:
        half, middle = (high - low) / 2, (high + low) / 2
        return abs(half) * mp.fsum(w * pdf(middle + half * x) for x, w in rule)

    def integral(start: Number, step: Number, end: Number) -> Number:
        total, point, width = mp.mpf(0), start, step
        for _ in range(4000):
            following = point + width
            last = (following >= end) if step > 0 else (following <= end)
            following = end if last else following
            part = panel(point, following)
            total += part
            if last or (part <= total * mp.mpf(10) ** -20 and part < abs(pdf(start)) * scale):
                break
            point, width = following, width * mp.mpf("1.1")
        return total

    return Reference(pdf, lambda x: integral(x, -scale, lower), lambda x: integral(x, scale, upper))


def cancelling(function: Callable[[], Number]) -> Number:
    """A difference evaluated with enough digits to keep DIGITS of them at probability 1e-300."""
    with mp.workdps(300 + DIGITS):
        return function()


def normal(mean: float, sd: float) -> Reference:
    def z(x: Number) -> Number:
        return (x - mp.mpf(mean)) / mp.mpf(sd)

    root = mp.sqrt(2)
    return Reference(
        lambda x: mp.exp(-(z(x) ** 2) / 2) / (mp.mpf(sd) * mp.sqrt(2 * mp.pi)),
        lambda x: mp.erfc(-z(x) / root) / 2,
        lambda x: mp.erfc(z(x) / root) / 2,
    )


def lognormal(log_mean: float, log_sd: float) -> Reference:
    inner = normal(log_mean, log_sd)
    return Reference(
        lambda x: inner.pdf(mp.log(x)) / x, lambda x: inner.cdf(mp.log(x)), lambda x: inner.ccdf(mp.log(x))
    )


def hazard(cumulative: Function, mirrored: bool = False) -> Reference:
    def near(x: Number) -> Number:
        return mp.exp(-cumulative(x))

    def far(x: Number) -> Number:
        return -mp.expm1(-cumulative(x))

    def pdf(x: Number) -> Number:
        # a derivative in 2 * DIGITS digits; the step is relative to x
        with mp.workdps(3 * DIGITS):
            step = abs(x) * mp.mpf(10) ** -DIGITS
            return abs(cumulative(x + step) - cumulative(x - step)) / (2 * step) * near(x)

    return Reference(pdf, near, far) if mirrored else Reference(pdf, far, near)


def weibull(shape: float, scale: float, location: float = 0) -> Reference:
    return hazard(lambda x: ((x - mp.mpf(location)) / mp.mpf(scale)) ** mp.mpf(shape))


def exponential(rate: float) -> Reference:
    return hazard(lambda x: x * mp.mpf(rate))


def rayleigh(scale: float) -> Reference:
    return hazard(lambda x: (x / mp.mpf(scale)) ** 2 / 2)


def gompertz(shape: float, scale: float) -> Reference:
    return hazard(lambda x: mp.mpf(shape) * mp.expm1(x / mp.mpf(scale)))


def gumbel_max(location: float, scale: float) -> Reference:
    return hazard(lambda x: mp.exp(-(x - mp.mpf(location)) / mp.mpf(scale)), mirrored=True)


def gumbel_min(location: float, scale: float) -> Reference:
    return hazard(lambda x: mp.exp((x - mp.mpf(location)) / mp.mpf(scale)))


def frechet(shape: float, scale: float, location: float = 0) -> Reference:
    return hazard(lambda x: ((x - mp.mpf(location)) / mp.mpf(scale)) ** -mp.mpf(shape), mirrored=True)


def generalised_extreme_value(location: float, scale: float, shape: float) -> Reference:
    s = mp.mpf(shape)
    return hazard(lambda x: (1 + s * (x - mp.mpf(location)) / mp.mpf(scale)) ** (-1 / s), mirrored=True)


def pareto(shape: float, scale: float) -> Reference:
    return hazard(lambda x: mp.mpf(shape) * mp.log(x / mp.mpf(scale)))


def lomax(shape: float, scale: float) -> Reference:
    return hazard(lambda x: mp.mpf(shape) * mp.log1p(x / mp.mpf(scale)))


def generalised_pareto(location: float, scale: float, shape: float) -> Reference:
    s = mp.mpf(shape)
    return hazard(lambda x: mp.log1p(s * (x - mp.mpf(location)) / mp.mpf(scale)) / s)


def burr(inner_shape: float, outer_shape: float, scale: float) -> Reference:
    return hazard(lambda x: mp.mpf(outer_shape) * mp.log1p((x / mp.mpf(scale)) ** mp.mpf(inner_shape)))


def log_logistic(shape: float, scale: float) -> Reference:
    return burr(shape, 1, scale)


def kumaraswamy(alpha: float, beta: float, lower: float, upper: float) -> Reference:
    width = mp.mpf(upper) - mp.mpf(lower)
    return hazard(lambda x: -mp.mpf(beta) * mp.log1p(-(((x - mp.mpf(lower)) / width) ** mp.mpf(alpha))))


def power_function(shape: float, lower: float, upper: float) -> Reference:
    width = mp.mpf(upper) - mp.mpf(lower)
    return hazard(lambda x: -mp.mpf(shape) * mp.log((x - mp.mpf(lower)) / width), mirrored=True)


def logistic(location: float, scale: float) -> Reference:
    def odds(x: Number) -> Number:
        return mp.exp((x - mp.mpf(location)) / mp.mpf(scale))

    return Reference(
        lambda x: odds(x) / (1 + odds(x)) ** 2 / mp.mpf(scale),
        lambda x: odds(x) / (1 + odds(x)),
        lambda x: 1 / (1 + odds(x)),
    )


def laplace(location: float, scale: float) -> Reference:
    def half(x: Number) -> Number:
        return mp.exp(-abs(x - mp.mpf(location)) / mp.mpf(scale)) / 2

    return Reference(
        lambda x: half(x) / mp.mpf(scale),
        lambda x: half(x) if x < location else 1 - half(x),
        lambda x: half(x) if x > location else 1 - half(x),
    )


def cauchy(location: float, scale: float) -> Reference:
    def z(x: Number) -> Number:
        return (x - mp.mpf(location)) / mp.mpf(scale)

    return Reference(
        lambda x: 1 / (mp.pi * mp.mpf(scale) * (1 + z(x) ** 2)),
        lambda x: mp.atan2(1, -z(x)) / mp.pi,
        lambda x: mp.atan2(1, z(x)) / mp.pi,
    )


def half_cauchy(scale: float) -> Reference:
    inner = cauchy(0, scale)
    return Reference(
        lambda x: 2 * inner.pdf(x),
        lambda x: 2 * mp.atan(x / mp.mpf(scale)) / mp.pi,
        lambda x: 2 * inner.ccdf(x),
    )


def lower_gamma(a: Number, x: Number) -> Number:
    """P(a, x) by its power series (DLMF 8.7.1), whose terms are all positive."""
    term = total = 1 / a
    n = 0
    while term > total * mp.mpf(10) ** (-DIGITS - 5):
        n += 1
        term *= x / (a + n)
        total += term
    return total * mp.exp(-x + a * mp.log(x) - mp.loggamma(a))


def upper_gamma(a: Number, x: Number) -> Number:
    """Q(a, x), with enough digits where it is the rest of P(a, x)."""
    if x > a + 30:
        return mp.gammainc(a, x) / mp.gamma(a)
    with mp.workdps(8 * DIGITS):
        return 1 - lower_gamma(a, x)


def gamma(shape: float, scale: float) -> Reference:
    a, s = mp.mpf(shape), mp.mpf(scale)
    return Reference(
        lambda x: mp.exp((a - 1) * mp.log(x / s) - x / s - mp.loggamma(a)) / s,
        lambda x: lower_gamma(a, x / s),
        lambda x: upper_gamma(a, x / s),
    )


def chi_square(degrees_of_freedom: float) -> Reference:
    return gamma(degrees_of_freedom / 2, 2)


def root_of_gamma(shape: float, spread: Number) -> Reference:
    """sqrt(spread * G), G gamma of this shape."""
    inner = gamma(shape, 1)
    return Reference(
        lambda x: inner.pdf(x * x / spread) * 2 * x / spread,
        lambda x: inner.cdf(x * x / spread),
        lambda x: inner.ccdf(x * x / spread),
    )


def chi(degrees_of_freedom: float) -> Reference:
    return root_of_gamma(degrees_of_freedom / 2, mp.mpf(2))


def maxwell(scale: float) -> Reference:
    return root_of_gamma(1.5, 2 * mp.mpf(scale) ** 2)


def nakagami(shape: float, spread: float) -> Reference:
    return root_of_gamma(shape, mp.mpf(spread) / mp.mpf(shape))


def inverse_gamma(shape: float, scale: float) -> Reference:
    inner, s = gamma(shape, 1), mp.mpf(scale)
    return Reference(
        lambda x: inner.pdf(s / x) * s / x**2, lambda x: inner.ccdf(s / x), lambda x: inner.cdf(s / x)
    )


def lower_beta(a: Number, b: Number, u: Number, v: Number) -> Number:
    """I_u(a, b) by the series of DLMF 8.17.8, whose terms are all positive."""
    if u > 0.97:
        # the rest of the other tail, with enough digits for a rest of 1e-300
        with mp.workdps(350 + DIGITS):
            return 1 - lower_beta(b, a, v, 1 - v)
    term = total = mp.mpf(1)
    n = 0
    while term > total * mp.mpf(10) ** (-mp.mp.dps - 5):
        term *= u * (a + b + n) / (a + 1 + n)
        n += 1
        total += term
    return total * mp.exp(a * mp.log(u) + b * mp.log(v) - mp.log(a) - mp.log(mp.beta(a, b)))


def beta(alpha: float, beta: float, lower: float, upper: float) -> Reference:
    a, b, low, width = mp.mpf(alpha), mp.mpf(beta), mp.mpf(lower), mp.mpf(upper) - mp.mpf(lower)

    def u(x: Number) -> Number:
        return (x - low) / width

    return Reference(
        lambda x: u(x) ** (a - 1) * (1 - u(x)) ** (b - 1) / mp.beta(a, b) / width,
        lambda x: lower_beta(a, b, u(x), 1 - u(x)),
        lambda x: lower_beta(b, a, 1 - u(x), u(x)),
    )


def student_t(degrees_of_freedom: float, location: float, scale: float) -> Reference:
    nu = mp.mpf(degrees_of_freedom)

    def z(x: Number) -> Number:
        return (x - mp.mpf(location)) / mp.mpf(scale)

    def beyond(t: Number) -> Number:
        u = nu / (nu + t * t)
        tail = lower_beta(nu / 2, mp.mpf(1) / 2, u, 1 - u) / 2
        return tail if t >= 0 else 1 - tail

    constant = mp.gamma((nu + 1) / 2) / (mp.sqrt(mp.pi * nu) * mp.gamma(nu / 2) * mp.mpf(scale))
    return Reference(
        lambda x: constant * (1 + z(x) ** 2 / nu) ** (-(nu + 1) / 2),
        lambda x: beyond(-z(x)),
        lambda x: beyond(z(x)),
    )


def f(numerator_degrees_of_freedom: float, denominator_degrees_of_freedom: float) -> Reference:
    m, n = mp.mpf(numerator_degrees_of_freedom), mp.mpf(denominator_degrees_of_freedom)

    def u(x: Number) -> Number:
        return m * x / (m * x + n)

    return Reference(
        lambda x: (
            (m / n) ** (m / 2) * x ** (m / 2 - 1) * (1 + m * x / n) ** (-(m + n) / 2) / mp.beta(m / 2, n / 2)
        ),
        lambda x: lower_beta(m / 2, n / 2, u(x), 1 - u(x)),
        lambda x: lower_beta(n / 2, m / 2, n / (m * x + n), u(x)),
    )


def half_normal(scale: float) -> Reference:
    s = mp.mpf(scale) * mp.sqrt(2)
    return Reference(lambda x: 2 * normal(0, scale).pdf(x), lambda x: mp.erf(x / s), lambda x: mp.erfc(x / s))


def folded_normal(location: float, scale: float) -> Reference:
    up, down = normal(location, scale), normal(-location, scale)
    return Reference(
        lambda x: up.pdf(x) + down.pdf(x),
        lambda x: cancelling(lambda: up.cdf(x) - up.cdf(-x)),
        lambda x: up.ccdf(x) + down.ccdf(x),
    )


def levy(location: float, scale: float) -> Reference:
    def ratio(x: Number) -> Number:
        return mp.sqrt(mp.mpf(scale) / (2 * (x - mp.mpf(location))))

    return Reference(
        lambda x: ratio(x) * mp.exp(-(ratio(x) ** 2)) / (mp.sqrt(mp.pi) * (x - mp.mpf(location))),
        lambda x: mp.erfc(ratio(x)),
        lambda x: mp.erf(ratio(x)),
    )


def birnbaum_saunders(shape: float, scale: float) -> Reference:
    a, b, inner = mp.mpf(shape), mp.mpf(scale), normal(0, 1)

    def z(x: Number) -> Number:
        return (mp.sqrt(x / b) - mp.sqrt(b / x)) / a

    return Reference(
        lambda x: inner.pdf(z(x)) * (x + b) / (2 * a * x * mp.sqrt(b * x)),
        lambda x: inner.cdf(z(x)),
        lambda x: inner.ccdf(z(x)),
    )


def logit_normal(location: float, scale: float) -> Reference:
    inner = normal(location, scale)
    return Reference(
        lambda x: inner.pdf(mp.log(x / (1 - x))) / (x * (1 - x)),
        lambda x: inner.cdf(mp.log(x / (1 - x))),
        lambda x: inner.ccdf(mp.log(x / (1 - x))),
    )


def inverse_gaussian(mean: float, shape: float) -> Reference:
    m, k = mp.mpf(mean), mp.mpf(shape)
    root = mp.sqrt(2)

    def tail(x: Number, sign: int) -> Number:
        with mp.workdps(3 * DIGITS):
            a, b = mp.sqrt(k / x) * (x / m - 1), mp.sqrt(k / x) * (x / m + 1)
            second = mp.exp(2 * k / m) * mp.erfc(b / root) / 2
            return mp.erfc(-a / root) / 2 + second if sign < 0 else mp.erfc(a / root) / 2 - second

    return Reference(
        lambda x: mp.sqrt(k / (2 * mp.pi * x**3)) * mp.exp(-k * (x - m) ** 2 / (2 * m**2 * x)),
        lambda x: tail(x, -1),
        lambda x: tail(x, 1),
    )


def skew_normal(location: float, scale: float, shape: float) -> Reference:
    inner, w = normal(0, 1), mp.mpf(scale)

    def pdf(x: Number) -> Number:
        z = (x - mp.mpf(location)) / w
        return 2 * inner.pdf(z) * inner.cdf(mp.mpf(shape) * z) / w

    return by_quadrature(pdf, -mp.inf, mp.inf, w / 16 / max(1, abs(shape)))


def rice(offset: float, scale: float) -> Reference:
    v, s = mp.mpf(offset), mp.mpf(scale)
    square = noncentral_chi_square(2, (v / s) ** 2) if offset else chi_square(2)
    return Reference(
        lambda x: x / s**2 * mp.exp(-(x * x + v * v) / (2 * s * s)) * mp.besseli(0, x * v / s**2),
        lambda x: square.cdf((x / s) ** 2),
        lambda x: square.ccdf((x / s) ** 2),
    )


def hoyt(shape: float, spread: float) -> Reference:
    """Tails by integrating the two-dimensional normal density along rays; the trapezoidal rule in the angle
    converges geometrically because the integrand is periodic and analytic."""
    q, w = mp.mpf(shape), mp.mpf(spread)
    large = w / (1 + q * q)  # squares of the two standard deviations
    small = w - large

    def over_angles(function: Function) -> Number:
        count = 1200
        total = mp.mpf(0)
        for i in range(count):
            angle = 2 * mp.pi * i / count
            a = mp.cos(angle) ** 2 / small + mp.sin(angle) ** 2 / large
            total += function(a)
        return total / count

    root = mp.sqrt(small * large)
    return Reference(
        lambda x: over_angles(lambda a: x * mp.exp(-x * x * a / 2)) / root,
        lambda x: over_angles(lambda a: -mp.expm1(-x * x * a / 2) / a) / root,
        lambda x: over_angles(lambda a: mp.exp(-x * x * a / 2) / a) / root,
    )


def noncentral_chi_square(degrees_of_freedom: float, noncentrality: float) -> Reference:
    nu, c = mp.mpf(degrees_of_freedom), mp.mpf(noncentrality)

    def mixed(tail: Callable[[Number, Number], Number], x: Number) -> Number:
        """Poisson mixture of central laws (JKB 2, eq. 29.2)."""
        weight, total, j = mp.exp(-c / 2), mp.mpf(0), 0
        while True:
            part = weight * tail(nu / 2 + j, x / 2)
            total += part
            j += 1
            weight *= c / 2 / j
            if j > c and (weight < total * mp.mpf(10) ** -40 or part < total * mp.mpf(10) ** -40):
                return total

    return Reference(
        lambda x: (
            mp.exp(-(x + c) / 2) / 2 * (x / c) ** (nu / 4 - 0.5) * mp.besseli(nu / 2 - 1, mp.sqrt(c * x))
        ),
        lambda x: mixed(lower_gamma, x),
        lambda x: mixed(lambda a, y: mp.gammainc(a, y) / mp.gamma(a), x),
    )


def von_mises(location: float, concentration: float) -> Reference:
    """On the turn between the doubles nearest to -pi and pi, where the law ends by definition."""
    m, k = mp.mpf(location), mp.mpf(concentration)
    constant = 2 * mp.pi * mp.besseli(0, k)
    half_turn = mp.mpf(float(mp.pi))
    scale = 1 / mp.sqrt(1 + k) / 8
    return by_quadrature(lambda x: mp.exp(k * mp.cos(x - m)) / constant, m - half_turn, m + half_turn, scale)


def log_uniform(lower: float, upper: float) -> Reference:
    a, b = mp.mpf(lower), mp.mpf(upper)
    span = mp.log(b / a)
    return Reference(lambda x: 1 / (x * span), lambda x: mp.log(x / a) / span, lambda x: mp.log(b / x) / span)


def arcsine(lower: float, upper: float) -> Reference:
    a, b = mp.mpf(lower), mp.mpf(upper)
    return Reference(
        lambda x: 1 / (mp.pi * mp.sqrt((x - a) * (b - x))),
        lambda x: 2 / mp.pi * mp.asin(mp.sqrt((x - a) / (b - a))),
        lambda x: 2 / mp.pi * mp.asin(mp.sqrt((b - x) / (b - a))),
    )


def uniform(lower: float, upper: float) -> Reference:
    a, b = mp.mpf(lower), mp.mpf(upper)
    return Reference(lambda x: 1 / (b - a), lambda x: (x - a) / (b - a), lambda x: (b - x) / (b - a))


def trapezoidal(lower: float, top_lower: float, top_upper: float, upper: float) -> Reference:
    a, c, d, b = (mp.mpf(value) for value in (lower, top_lower, top_upper, upper))
    height = 2 / (b + d - a - c)

    def below(x: Number) -> Number:
        if x < c:
            return height * (x - a) ** 2 / (c - a) / 2
        if x < d:
            return height * ((c - a) / 2 + x - c)
        return 1 - above(x)

    def above(x: Number) -> Number:
        if x >= d:
            return height * (b - x) ** 2 / (b - d) / 2 if b > d else mp.mpf(0)
        return 1 - below(x)

    def pdf(x: Number) -> Number:
        return height * ((x - a) / (c - a) if x < c else mp.mpf(1) if x <= d else (b - x) / (b - d))

    return Reference(pdf, below, above)


def triangular(lower: float, mode: float, upper: float) -> Reference:
    return trapezoidal(lower, mode, mode, upper)


def curvilinear_trapezoidal(lower: float, upper: float, limit_half_width: float) -> Reference:
    a, b, d = mp.mpf(lower), mp.mpf(upper), mp.mpf(limit_half_width)
    middle, w = (a + b) / 2, (b - a) / 2

    def pdf(x: Number) -> Number:
        # JCGM 101:2008, 6.4.3.2, equation (4)
        return mp.log((w + d) / max(abs(x - middle), w - d)) / (4 * d)

    def tail(distance: Number) -> Number:
        """Mass farther than `distance` from the middle on one side, by integrating equation (4)."""
        h = w + d
        if distance >= w - d:
            return (h - distance - distance * mp.log(h / distance)) / (4 * d)
        return mp.mpf(1) / 2 - mp.log(h / (w - d)) / (4 * d) * distance

    return Reference(
        pdf,
        lambda x: tail(middle - x) if x < middle else 1 - tail(x - middle),
        lambda x: tail(x - middle) if x > middle else 1 - tail(middle - x),
    )
