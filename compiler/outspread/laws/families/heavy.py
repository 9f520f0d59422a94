"""Symmetric laws with heavy tails: Cauchy and Student t."""

from __future__ import annotations

import numpy as np

from outspread.laws.families.base import Family, Parameters, ParameterSet, by_quantiles, positive
from outspread.laws.families.hazard import LOG_SMALLEST, rounding
from outspread.laws.families.shapes import INF, NAN, Moments, ScaledLaw
from outspread.laws.functions.student import student_pdf, student_tail, student_tail_inverse
from outspread.laws.law import Array


class Cauchy(ScaledLaw):
    relative_error = 1e-14
    moment_order = 1.0

    def __init__(self, location: float, scale: float):
        self.location, self.scale = location, scale

    def standard_pdf(self, z: Array) -> Array:
        return np.asarray(1 / (np.pi * (1 + z * z)))

    def standard_cdf(self, z: Array) -> Array:
        return np.asarray(np.arctan2(1.0, -z) / np.pi)

    def standard_ccdf(self, z: Array) -> Array:
        return np.asarray(np.arctan2(1.0, z) / np.pi)

    def standard_icdf(self, p: Array) -> Array:
        tail = -1 / np.tan(np.pi * np.minimum(p, 0.25))
        far = 1 / np.tan(np.pi * np.minimum(1 - p, 0.25))
        return np.where(p < 0.25, tail, np.where(p > 0.75, far, np.tan(np.pi * (p - 0.5))))

    def standard_iccdf(self, q: Array) -> Array:
        return -self.standard_icdf(q)

    def standard_moments(self) -> Moments:
        return (NAN, NAN, NAN, NAN)


class StudentT(ScaledLaw):
    def __init__(self, degrees_of_freedom: float, location: float = 0.0, scale: float = 1.0):
        self.degrees_of_freedom, self.location, self.scale = degrees_of_freedom, location, scale
        self.moment_order = degrees_of_freedom
        self.relative_error = rounding(3 * LOG_SMALLEST + 30 * float(np.sqrt(degrees_of_freedom))) + 1e-12

    def standard_pdf(self, z: Array) -> Array:
        return student_pdf(self.degrees_of_freedom, z)

    def standard_cdf(self, z: Array) -> Array:
        return self.standard_ccdf(-z)

    def standard_ccdf(self, z: Array) -> Array:
        tail = student_tail(self.degrees_of_freedom, np.abs(z))
        return np.where(z >= 0, tail, 1 - tail)

    def standard_icdf(self, p: Array) -> Array:
        return -self.standard_iccdf(p)

    def standard_iccdf(self, q: Array) -> Array:
        t = student_tail_inverse(self.degrees_of_freedom, np.minimum(q, 1 - q))
        return np.where(q <= 0.5, t, -t)

    def standard_moments(self) -> Moments:
        nu = self.degrees_of_freedom
        return (
            0.0 if nu > 1 else NAN,
            nu / (nu - 2) if nu > 2 else INF if nu > 1 else NAN,
            0.0 if nu > 3 else NAN,
            3 + 6 / (nu - 4) if nu > 4 else INF if nu > 2 else NAN,
        )


class HalfCauchy(ScaledLaw):
    """|Cauchy| * scale."""

    relative_error = 1e-14
    moment_order = 1.0
    ends = (0.0, INF)

    def __init__(self, scale: float):
        self.scale = scale

    def standard_pdf(self, z: Array) -> Array:
        return np.asarray(2 / (np.pi * (1 + z * z)))

    def standard_cdf(self, z: Array) -> Array:
        return np.asarray(np.arctan(z) * (2 / np.pi))

    def standard_ccdf(self, z: Array) -> Array:
        return np.asarray(np.arctan2(1.0, z) * (2 / np.pi))

    def standard_icdf(self, p: Array) -> Array:
        near = np.tan(0.5 * np.pi * np.minimum(p, 0.5))
        far = 1 / np.tan(0.5 * np.pi * np.minimum(1 - p, 0.5))
        return np.where(p < 0.5, near, far)

    def standard_iccdf(self, q: Array) -> Array:
        return 1 / self.standard_icdf(q)

    def standard_moments(self) -> Moments:
        return (INF, NAN, NAN, NAN)


def _cauchy_from_quantiles(p1: float, x1: float, p2: float, x2: float) -> Parameters:
    z1, z2 = Cauchy(0.0, 1.0).icdf([p1, p2])
    scale = (x2 - x1) / (z2 - z1)
    return {"location": float(x1 - scale * z1), "scale": float(scale)}


FAMILIES = (
    Family(
        key="cauchy",
        title="Cauchy distribution",
        kind="continuous",
        canonical_names=("location", "scale"),
        parameter_sets=(ParameterSet(("location", "scale")), by_quantiles(_cauchy_from_quantiles)),
        builder=Cauchy,
        check=lambda parameters: positive(parameters, "scale"),
        symbols={"location": r"\mu", "scale": r"\gamma"},
        density_latex=r"\frac{1}{\pi\gamma\left(1+\left(\frac{x-\mu}{\gamma}\right)^2\right)}",
        usage="ratios of centred normal variables, resonance lines; has no mean",
        reference="Johnson, Kotz and Balakrishnan (1994), Continuous Univariate Distributions 1, ch. 16",
    ),
    Family(
        key="half_cauchy",
        title="Half-Cauchy distribution",
        kind="continuous",
        canonical_names=("scale",),
        parameter_sets=(ParameterSet(("scale",)),),
        builder=HalfCauchy,
        check=lambda parameters: positive(parameters, "scale"),
        symbols={"scale": r"\gamma"},
        density_latex=r"\frac{2}{\pi\gamma\left(1+\left(\frac{x}{\gamma}\right)^2\right)}",
        usage="size of a Cauchy variable, vague positive scales; its mean is infinite",
        reference="Johnson, Kotz and Balakrishnan (1994), Continuous Univariate Distributions 1, ch. 16",
    ),
    Family(
        key="student_t",
        title="Student t distribution",
        kind="continuous",
        canonical_names=("degrees_of_freedom", "location", "scale"),
        parameter_sets=(
            ParameterSet(("degrees_of_freedom", "location", "scale"), {"location": 0.0, "scale": 1.0}),
        ),
        builder=StudentT,
        check=lambda parameters: positive(parameters, "degrees_of_freedom", "scale"),
        symbols={"degrees_of_freedom": r"\nu", "location": r"\mu", "scale": r"\sigma"},
        density_latex=(
            r"\frac{\Gamma\left(\frac{\nu+1}{2}\right)}{\sigma\sqrt{\pi\nu}\,\Gamma\left(\frac{\nu}{2}\right)}"
            r"\left(1+\frac{1}{\nu}\left(\frac{x-\mu}{\sigma}\right)^2\right)^{-\frac{\nu+1}{2}}"
        ),
        usage="means of a few normal observations, calibration certificates with stated degrees of freedom",
        reference="JCGM 101:2008, 6.4.9; Johnson, Kotz and Balakrishnan (1995), vol. 2, ch. 28",
    ),
)
