"""The five families by name: how one is made, and its parameter as a share of its range.

A share runs from -1 to 1 (or 0 to 1 where the family has no negative dependence), with 0 for independence
and ±1 for inputs that determine one another, so that every parameter is solved for on a bounded scale.
"""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np

from outspread.errors import LawError
from outspread.laws.dependence.clayton import ClaytonCopula
from outspread.laws.dependence.copula import Copula, IndependenceCopula
from outspread.laws.dependence.elliptical import GaussianCopula, StudentCopula
from outspread.laws.dependence.frank import FrankCopula
from outspread.laws.dependence.gumbel import GumbelCopula

ELLIPTICAL = ("gaussian", "student_t")
ARCHIMEDEAN: dict[str, Callable[[int, float], Copula]] = {
    "clayton": ClaytonCopula,
    "gumbel": GumbelCopula,
    "frank": FrankCopula,
}


def pair_copula(family: str, parameter: float, degrees_of_freedom: float | None = None) -> Copula:
    """The copula of a pair; `parameter` is the scores' correlation for gaussian and student_t.

    Raises LawError for an unknown family or a parameter out of range.
    """
    if family == "frank" and parameter == 0.0:
        return IndependenceCopula(2)
    if family in ARCHIMEDEAN:
        return ARCHIMEDEAN[family](2, parameter)
    matrix = np.array([[1.0, parameter], [parameter, 1.0]])
    if family == "gaussian":
        return GaussianCopula(matrix)
    if family != "student_t":
        known = ", ".join((*ELLIPTICAL, *ARCHIMEDEAN))
        raise LawError(f"{family!r} is no family of copulas; write one of {known}")
    if degrees_of_freedom is None:
        raise LawError("a Student t copula needs degrees_of_freedom", "degrees_of_freedom")
    return StudentCopula(matrix, degrees_of_freedom)


def share_range(family: str) -> tuple[float, float]:
    """The shares between which the family's parameters lie, ends excluded."""
    return (0.0, 1.0) if family in ("clayton", "gumbel") else (-1.0, 1.0)


def parameter_of_share(family: str, share: float) -> float:
    """The parameter at a share of the range: rising in it."""
    if family in ELLIPTICAL:
        return math.sin(0.5 * math.pi * share)
    if family == "clayton":
        return 2.0 * share / (1.0 - share)
    if family == "gumbel":
        return 1.0 / (1.0 - share)
    return 9.0 * share / (1.0 - abs(share))
