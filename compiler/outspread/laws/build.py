"""From a distribution as the model states it to a law, truncation, mixtures and data included.

Formulas among the parameters (conditional inputs) must have been resolved to numbers before.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from outspread.errors import LawError
from outspread.formula.tree import Node
from outspread.laws.compound.density import FormulaLaw
from outspread.laws.compound.mixture import MixtureLaw
from outspread.laws.compound.sample import sample_law
from outspread.laws.compound.table import cdf_table, density_table, histogram
from outspread.laws.compound.truncated import truncate
from outspread.laws.families.base import as_number, positive, whole
from outspread.laws.law import Law
from outspread.laws.registry import FAMILIES

if TYPE_CHECKING:
    from outspread.reading.model import Distribution


@dataclass(frozen=True)
class Construction:
    """A way to state a distribution that is no family: its parameter sets in words, and what it is for."""

    key: str
    title: str
    parameter_sets: tuple[str, ...]
    usage: str


CONSTRUCTIONS: dict[str, Construction] = {
    made.key: made
    for made in (
        Construction(
            "observations",
            "Mean of repeated normal observations",
            ("{mean, sd, count}",),
            "a few readings with their mean and sd: scaled and shifted t (JCGM 101:2008, 6.4.9.2)",
        ),
        Construction(
            "mixture", "Mixture", ("{weights, components}",), "one of several distributions, chosen at random"
        ),
        Construction(
            "density",
            "Density by formula",
            ("{density, lower, upper}",),
            "a formula of x that integrates to 1",
        ),
        Construction("table", "Table", ("{x, pdf}", "{x, cdf}"), "points joined by straight lines"),
        Construction(
            "histogram", "Histogram", ("{edges, counts}",), "each bin's share spread evenly over it"
        ),
        Construction("sample", "Sample", ("{values}",), "every value of a sample equally likely"),
    )
}


def build_law(distribution: Distribution) -> Law:
    """The law of a distribution whose parameters are numbers.

    Raises LawError with the parameter to blame: unknown family, parameters that do not fit together or are
    out of range, a density that does not integrate to 1, truncation that leaves nothing.
    """
    law = _untruncated(distribution)
    if distribution.lower is None and distribution.upper is None:
        return law
    return truncate(law, distribution.lower, distribution.upper)


def _untruncated(distribution: Distribution) -> Law:
    parameters = distribution.parameters
    key = distribution.family
    if key == "mixture":
        return _mixture(distribution)
    if key == "density":
        return _density(parameters)
    if key == "table":
        _expect(key, parameters, ("x", "pdf"), ("x", "cdf"))
        if "pdf" in parameters:
            return density_table(_column(parameters, "x"), _column(parameters, "pdf"))
        return cdf_table(_column(parameters, "x"), _column(parameters, "cdf"))
    if key == "histogram":
        _expect(key, parameters, ("edges", "counts"))
        return histogram(_column(parameters, "edges"), _column(parameters, "counts"))
    if key == "sample":
        _expect(key, parameters, ("values",))
        return sample_law(_column(parameters, "values"))
    if key == "observations":
        return _observations(parameters)
    family = FAMILIES.get(key)
    if family is None:
        raise LawError(f"there is no family {key!r}, and one that `outspread families` lists would be right")
    return family.build(family.canonical(parameters))


def _expect(key: str, parameters: Mapping[str, object], *sets: tuple[str, ...]) -> None:
    if not any(set(parameters) == set(names) for names in sets):
        choices = " or ".join("{" + ", ".join(names) + "}" for names in sets)
        written = ", ".join(parameters) or "none"
        raise LawError(f"the parameters of {key} do not fit together ({written} given), write {choices}")


def _column(parameters: Mapping[str, Any], name: str) -> tuple[float, ...]:
    value = as_number(name, parameters[name])
    if not isinstance(value, tuple):
        raise LawError(f"{name} must be a list of numbers", name)
    return value


def _mixture(distribution: Distribution) -> MixtureLaw:
    weights = _column(distribution.parameters, "weights")
    components = distribution.components
    if len(weights) != len(components) or not components:
        raise LawError(
            f"{len(weights)} weights and {len(components)} distributions are given,"
            " and as many of the one as of the other would be right",
            "weights",
        )
    if min(weights) < 0:
        raise LawError(f"a weight is {min(weights):g}, and 0 or more would be right", "weights")
    total = float(np.sum(weights))
    if abs(total - 1) > 1e-9:
        raise LawError(f"the weights add up to {total:.12g}, and 1 would be right", "weights")
    pairs = zip(weights, components, strict=True)
    parts = [(weight, build_law(part)) for weight, part in pairs if weight > 0]
    return MixtureLaw(np.array([weight / total for weight, _ in parts]), tuple(law for _, law in parts))


def _density(parameters: Mapping[str, Any]) -> FormulaLaw:
    _expect("density", parameters, ("density", "lower", "upper"))
    formula = parameters["density"]
    if not isinstance(formula, Node):
        raise LawError("the density must be a formula of x", "density")
    return FormulaLaw(formula, _limit(parameters, "lower"), _limit(parameters, "upper"))


def _limit(parameters: Mapping[str, Any], name: str) -> float:
    """A number, or an infinite one: the only parameters that may be infinite."""
    try:
        value = float(parameters[name])
    except (TypeError, ValueError):
        raise LawError(f"{name} is {parameters[name]!r}, and a number would be right", name) from None
    if np.isnan(value):
        raise LawError(f"{name} is not a number, and a number would be right", name)
    return value


def _observations(parameters: Mapping[str, Any]) -> Law:
    _expect("observations", parameters, ("mean", "sd", "count"))
    values = {name: as_number(name, parameters[name]) for name in ("mean", "sd", "count")}
    positive(values, "sd")
    whole(values, "count", least=2)
    family = FAMILIES["student_t"]
    return family.build(
        family.canonical(
            {
                "degrees_of_freedom": values["count"] - 1,
                "location": values["mean"],
                "scale": values["sd"] / float(np.sqrt(values["count"])),
            }
        )
    )
