"""The von Mises law of an angle, on one turn about its centre."""

from __future__ import annotations

import numpy as np

from outspread.laws.families.base import Family, Parameters, ParameterSet, not_negative
from outspread.laws.families.integral import IntegralLaw
from outspread.laws.families.shapes import Moments
from outspread.laws.law import Array


class VonMises(IntegralLaw):
    """An angle between location - pi and location + pi; its moments are those of the number."""

    ends = (-float(np.pi), float(np.pi))

    def __init__(self, location: float, concentration: float):
        from scipy import special

        self.location, self.concentration = location, concentration
        self.constant = float(2 * np.pi * special.i0e(concentration))
        self.spread = float(1 / np.sqrt(1 + concentration))
        self.relative_error = 2e-14 + 1e-15 * min(2 * concentration, 670.0)

    def standard_pdf(self, z: Array) -> Array:
        # exp(k cos z) / I0(k) with cos z - 1 = -2 sin²(z/2)
        return np.asarray(np.exp(-2 * self.concentration * np.sin(0.5 * z) ** 2) / self.constant)

    def standard_moments(self) -> Moments:
        _, variance, _, kurtosis = super().standard_moments()
        return (0.0, variance, 0.0, kurtosis)


def _check(parameters: Parameters) -> None:
    not_negative(parameters, "concentration")


FAMILIES = (
    Family(
        key="von_mises",
        title="von Mises distribution",
        kind="continuous",
        canonical_names=("location", "concentration"),
        parameter_sets=(ParameterSet(("location", "concentration")),),
        builder=VonMises,
        check=_check,
        symbols={"location": r"\mu", "concentration": r"\kappa"},
        density_latex=r"\frac{e^{\kappa\cos(x-\mu)}}{2\pi I_0(\kappa)}",
        usage="angles in radians, within half a turn of location",
        reference="Mardia and Jupp (2000), Directional Statistics, ch. 3",
    ),
)
