"""Laws of functions of a normal variable: half-normal, Lévy, logit-normal, fatigue life and others."""

from __future__ import annotations

import numpy as np

from outspread.laws.families.base import (
    Family,
    Parameters,
    ParameterSet,
    by_quantiles,
    positive,
)
from outspread.laws.families.hazard import LOG_SMALLEST, rounding
from outspread.laws.families.integral import IntegralLaw
from outspread.laws.families.shapes import INF, NAN, IntervalLaw, Moments, ScaledLaw
from outspread.laws.functions.normal import (
    ROOT_TWO,
    ROOT_TWO_PI,
    exp_minus_half_square,
    normal_ccdf,
    normal_cdf,
    normal_icdf,
    normal_pdf,
)
from outspread.laws.law import Array


class HalfNormal(ScaledLaw):
    """|Z| * scale."""

    ends = (0.0, INF)
    relative_error = rounding(3 * LOG_SMALLEST)

    def __init__(self, scale: float):
        self.scale = scale

    def standard_pdf(self, z: Array) -> Array:
        return 2 * normal_pdf(z)

    def standard_cdf(self, z: Array) -> Array:
        from scipy import special

        return np.asarray(special.erf(z / ROOT_TWO))

    def standard_ccdf(self, z: Array) -> Array:
        return 2 * normal_ccdf(z)

    def standard_icdf(self, p: Array) -> Array:
        from scipy import special

        return np.asarray(np.where(p < 0.5, ROOT_TWO * special.erfinv(p), -normal_icdf((1 - p) / 2)))

    def standard_iccdf(self, q: Array) -> Array:
        return np.where(q < 0.5, -normal_icdf(q / 2), self.standard_icdf(1 - q))

    def standard_moments(self) -> Moments:
        mean = float(np.sqrt(2 / np.pi))
        variance = 1 - 2 / np.pi
        skewness = mean * (4 / np.pi - 1) / variance**1.5
        return (mean, variance, float(skewness), 3 + 8 * (np.pi - 3) / (np.pi - 2) ** 2)


class FoldedNormal(IntegralLaw):
    """|location + scale * Z|."""

    ends = (0.0, INF)

    def __init__(self, location: float, scale: float):
        self.scale = scale
        self.ratio = abs(location) / scale
        self.centre = self.ratio + 0.7
        self.relative_error = rounding(3 * LOG_SMALLEST + 40 * self.ratio) + 2e-14

    def standard_pdf(self, z: Array) -> Array:
        return normal_pdf(z - self.ratio) + normal_pdf(z + self.ratio)

    def standard_ccdf(self, z: Array) -> Array:
        return normal_ccdf(z - self.ratio) + normal_ccdf(z + self.ratio)


class Levy(ScaledLaw):
    """location + scale / Z²."""

    ends = (0.0, INF)
    relative_error = rounding(2 * LOG_SMALLEST)
    moment_order = 0.5

    def __init__(self, location: float, scale: float):
        self.location, self.scale = location, scale

    def standard_pdf(self, z: Array) -> Array:
        root = 1 / np.sqrt(z)
        return np.where(z > 0, np.nan_to_num(normal_pdf(root) * root / z), 0.0)

    def standard_cdf(self, z: Array) -> Array:
        return 2 * normal_ccdf(1 / np.sqrt(z))

    def standard_ccdf(self, z: Array) -> Array:
        from scipy import special

        return np.asarray(special.erf(1 / np.sqrt(2 * z)))

    def standard_icdf(self, p: Array) -> Array:
        return np.asarray(1 / HalfNormal(1.0).standard_iccdf(p) ** 2)

    def standard_iccdf(self, q: Array) -> Array:
        return np.asarray(1 / HalfNormal(1.0).standard_icdf(q) ** 2)

    def standard_moments(self) -> Moments:
        return (INF, NAN, NAN, NAN)


class LogitNormal(IntervalLaw):
    """1 / (1 + exp(-(location + scale * Z))) between 0 and 1."""

    relative_error = rounding(3 * LOG_SMALLEST)

    def __init__(self, location: float, scale: float):
        super().__init__(0.0, 1.0)
        self.location, self.scale = location, scale

    def _normal(self, u: Array, v: Array) -> Array:
        logit = np.where(np.abs(u - v) < 0.5, np.log1p((u - v) / v), np.log(u) - np.log(v))
        return np.asarray((logit - self.location) / self.scale)

    def unit_pdf(self, u: Array, v: Array) -> Array:
        density = exp_minus_half_square(self._normal(u, v)) / (ROOT_TWO_PI * self.scale * u * v)
        return np.where((u > 0) & (v > 0), density, 0.0)

    def unit_cdf(self, u: Array, v: Array) -> Array:
        return normal_cdf(self._normal(u, v))

    def unit_ccdf(self, u: Array, v: Array) -> Array:
        return normal_ccdf(self._normal(u, v))

    def unit_icdf(self, p: Array) -> Array:
        from scipy import special

        return np.asarray(special.expit(self.location + self.scale * normal_icdf(p)))

    def unit_iccdf(self, q: Array) -> Array:
        from scipy import special

        return np.asarray(special.expit(-self.location + self.scale * normal_icdf(q)))

    def unit_moments(self) -> Moments:
        """Over the normal variable: the integrand is smooth and decays, so that even steps converge fast."""
        from scipy import special

        z = np.arange(-12.0, 12.0, min(0.05, 0.5 / self.scale))
        weights = normal_pdf(z)
        weights /= np.sum(weights)
        values = special.expit(self.location + self.scale * z)
        mean = float(np.sum(weights * values))
        second, third, fourth = (float(np.sum(weights * (values - mean) ** k)) for k in (2, 3, 4))
        return (mean, second, third / second**1.5, fourth / second**2)


class BirnbaumSaunders(ScaledLaw):
    """scale * (w + sqrt(w² + 1))², w = shape * Z / 2."""

    ends = (0.0, INF)

    def __init__(self, shape: float, scale: float):
        self.shape, self.scale = shape, scale
        self.relative_error = rounding(3 * LOG_SMALLEST + 40 / shape)

    def _normal(self, z: Array) -> Array:
        return np.asarray((z - 1) / (np.sqrt(z) * self.shape))

    def standard_pdf(self, z: Array) -> Array:
        slope = (1 + z) / (2 * self.shape * z * np.sqrt(z))
        return np.where(z > 0, np.nan_to_num(normal_pdf(self._normal(z)) * slope), 0.0)

    def standard_cdf(self, z: Array) -> Array:
        return normal_cdf(self._normal(z))

    def standard_ccdf(self, z: Array) -> Array:
        return normal_ccdf(self._normal(z))

    def _from_normal(self, normal: Array) -> Array:
        half = 0.5 * self.shape * normal
        return np.asarray(np.exp(2 * np.arcsinh(half)))

    def standard_icdf(self, p: Array) -> Array:
        return self._from_normal(normal_icdf(p))

    def standard_iccdf(self, q: Array) -> Array:
        return self._from_normal(-normal_icdf(q))

    def standard_moments(self) -> Moments:
        a = self.shape**2
        variance = a * (1 + 1.25 * a)
        skewness = 4 * self.shape * (11 * a + 6) / (5 * a + 4) ** 1.5
        return (1 + a / 2, variance, skewness, 3 + 6 * a * (93 * a + 40) / (5 * a + 4) ** 2)


class InverseGaussian(IntegralLaw):
    """First passage time of a Brownian motion with drift."""

    ends = (0.0, INF)

    def __init__(self, mean: float, shape: float):
        self.scale, self.ratio = mean, shape / mean
        self.centre, self.spread = 1.0, min(float(1 / np.sqrt(self.ratio)), 1.0)
        self.relative_error = rounding(4 * LOG_SMALLEST + 40 * float(np.sqrt(self.ratio))) + 2e-14

    def standard_pdf(self, z: Array) -> Array:
        distance = np.sqrt(self.ratio / z) * (z - 1)
        density = np.sqrt(self.ratio / z) / z * normal_pdf(distance)
        return np.where(z > 0, np.nan_to_num(density), 0.0)

    def standard_moments(self) -> Moments:
        r = self.ratio
        return (1.0, 1 / r, float(3 / np.sqrt(r)), 3 + 15 / r)


class SkewNormal(IntegralLaw):
    """Density 2 phi(z) Phi(shape * z), moved and scaled."""

    def __init__(self, location: float, scale: float, shape: float):
        self.location, self.scale, self.shape = location, scale, shape
        self.relative_error = rounding(4 * LOG_SMALLEST) + 2e-14
        self.spread = 1 / max(1.0, abs(shape)) if abs(shape) < 50 else 0.02

    def standard_pdf(self, z: Array) -> Array:
        return 2 * normal_pdf(z) * normal_cdf(self.shape * z)

    def standard_moments(self) -> Moments:
        delta = self.shape / np.hypot(1.0, self.shape)
        mean = float(delta * np.sqrt(2 / np.pi))
        # 1 - mean², written so that a large shape does not cancel
        variance = float((np.pi - 2 * delta**2) / np.pi)
        skewness = 0.5 * (4 - np.pi) * mean**3 / variance**1.5
        return (mean, variance, float(skewness), float(3 + 2 * (np.pi - 3) * mean**4 / variance**2))


def _levy_from_quantiles(p1: float, x1: float, p2: float, x2: float) -> Parameters:
    z1, z2 = Levy(0.0, 1.0).icdf([p1, p2])
    scale = (x2 - x1) / (z2 - z1)
    return {"location": float(x1 - scale * z1), "scale": float(scale)}


def _check_inside_unit(parameters: Parameters) -> None:
    positive(parameters, "scale")


_VOLUME_1 = "Johnson, Kotz and Balakrishnan (1994), Continuous Univariate Distributions 1"
_VOLUME_2 = "Johnson, Kotz and Balakrishnan (1995), Continuous Univariate Distributions 2"

FAMILIES = (
    Family(
        key="half_normal",
        title="Half-normal distribution",
        kind="continuous",
        canonical_names=("scale",),
        parameter_sets=(ParameterSet(("scale",)),),
        builder=HalfNormal,
        check=lambda parameters: positive(parameters, "scale"),
        symbols={"scale": r"\sigma"},
        density_latex=r"\frac{1}{\sigma}\sqrt{\frac{2}{\pi}}\,e^{-\frac{x^2}{2\sigma^2}}",
        usage="size of a centred normal error whatever its sign",
        reference=f"{_VOLUME_1}, ch. 13",
    ),
    Family(
        key="folded_normal",
        title="Folded normal distribution",
        kind="continuous",
        canonical_names=("location", "scale"),
        parameter_sets=(ParameterSet(("location", "scale")),),
        builder=FoldedNormal,
        check=lambda parameters: positive(parameters, "scale"),
        symbols={"location": r"\mu", "scale": r"\sigma"},
        density_latex=(
            r"\frac{1}{\sigma\sqrt{2\pi}}\left(e^{-\frac{(x-\mu)^2}{2\sigma^2}}"
            r"+e^{-\frac{(x+\mu)^2}{2\sigma^2}}\right)"
        ),
        usage="size of a normal error with a bias",
        reference=f"{_VOLUME_1}, ch. 13",
    ),
    Family(
        key="levy",
        title="Lévy distribution",
        kind="continuous",
        canonical_names=("location", "scale"),
        parameter_sets=(
            ParameterSet(("location", "scale"), {"location": 0.0}),
            by_quantiles(_levy_from_quantiles),
        ),
        builder=Levy,
        check=lambda parameters: positive(parameters, "scale"),
        symbols={"location": r"\mu", "scale": "c"},
        density_latex=r"\sqrt{\frac{c}{2\pi}}\,\frac{e^{-\frac{c}{2(x-\mu)}}}{(x-\mu)^{3/2}}",
        usage="first passage times without drift; has no mean",
        reference=f"{_VOLUME_1}, ch. 12",
    ),
    Family(
        key="logit_normal",
        title="Logit-normal distribution",
        kind="continuous",
        canonical_names=("location", "scale"),
        parameter_sets=(ParameterSet(("location", "scale")),),
        builder=LogitNormal,
        check=_check_inside_unit,
        symbols={"location": r"\mu", "scale": r"\sigma"},
        density_latex=(
            r"\frac{1}{\sigma\sqrt{2\pi}}\,\frac{1}{x(1-x)}"
            r"\,e^{-\frac{\left(\ln\frac{x}{1-x}-\mu\right)^2}{2\sigma^2}}"
        ),
        usage="proportions whose log-odds are normal",
        reference=f"{_VOLUME_1}, ch. 12 (system SB)",
    ),
    Family(
        key="birnbaum_saunders",
        title="Birnbaum–Saunders (fatigue life) distribution",
        kind="continuous",
        canonical_names=("shape", "scale"),
        parameter_sets=(ParameterSet(("shape", "scale")),),
        builder=BirnbaumSaunders,
        check=lambda parameters: positive(parameters, "shape", "scale"),
        symbols={"shape": r"\alpha", "scale": r"\beta"},
        density_latex=(
            r"\frac{x+\beta}{2\alpha x\sqrt{2\pi\beta x}}"
            r"\,e^{-\frac{1}{2\alpha^2}\left(\frac{x}{\beta}+\frac{\beta}{x}-2\right)}"
        ),
        usage="cycles to failure by fatigue",
        reference="Birnbaum and Saunders (1969), Journal of Applied Probability 6, 319-327",
    ),
    Family(
        key="inverse_gaussian",
        title="Inverse Gaussian distribution",
        kind="continuous",
        canonical_names=("mean", "shape"),
        parameter_sets=(ParameterSet(("mean", "shape")),),
        builder=InverseGaussian,
        check=lambda parameters: positive(parameters, "mean", "shape"),
        symbols={"mean": r"\mu", "shape": r"\lambda"},
        density_latex=r"\sqrt{\frac{\lambda}{2\pi x^3}}\,e^{-\frac{\lambda(x-\mu)^2}{2\mu^2x}}",
        usage="first passage times with drift, wear to a limit",
        reference=f"{_VOLUME_1}, ch. 15",
    ),
    Family(
        key="skew_normal",
        title="Skew normal distribution",
        kind="continuous",
        canonical_names=("location", "scale", "shape"),
        parameter_sets=(ParameterSet(("location", "scale", "shape")),),
        builder=SkewNormal,
        check=lambda parameters: positive(parameters, "scale"),
        symbols={"location": r"\xi", "scale": r"\omega", "shape": r"\alpha"},
        density_latex=(
            r"\frac{2}{\omega}\,\varphi\left(\frac{x-\xi}{\omega}\right)"
            r"\Phi\left(\alpha\,\frac{x-\xi}{\omega}\right)"
        ),
        usage="nearly normal quantities with one longer tail",
        reference="Azzalini (1985), Scandinavian Journal of Statistics 12, 171-178",
    ),
)
