"""What each parameter of a family is, in words for the schema, and in which unit it stands.

Which families take which parameters, and in which range, is `laws.registry`'s to say; the two are held
together by the function that writes the schema's part on families.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

#: kinds of unit: the input's own; the size of a difference in it; none; its reciprocal; its square
POSITION, DIFFERENCE, PLAIN, RECIPROCAL, SQUARE = "position", "difference", "plain", "reciprocal", "square"

#: parameter -> (kind of unit, what it is)
PARAMETERS: dict[str, tuple[str, str]] = {
    "alpha": (PLAIN, "First shape parameter, above 0."),
    "beta": (PLAIN, "Second shape parameter, above 0."),
    "centre": (POSITION, "Middle of the interval."),
    "concentration": (PLAIN, "Concentration about the location, 0 or more."),
    "count": (PLAIN, "Number of observations."),
    "degrees_of_freedom": (PLAIN, "Degrees of freedom, above 0."),
    "denominator_degrees_of_freedom": (PLAIN, "Degrees of freedom of the denominator, above 0."),
    "draws": (PLAIN, "Number of draws without replacement."),
    "failures": (PLAIN, "Number of failures."),
    "first_sd": (DIFFERENCE, "Standard deviation of the first component, above 0."),
    "half_width": (DIFFERENCE, "Half the width of the interval, above 0."),
    "inner_shape": (PLAIN, "Exponent of the quantity over the scale, above 0."),
    "limit_half_width": (DIFFERENCE, "Half the width over which each limit is itself uncertain."),
    "location": (POSITION, "Location: shifts the distribution."),
    "log_mean": (PLAIN, "Mean of the natural logarithm of the quantity's number in its unit."),
    "log_sd": (PLAIN, "Standard deviation of the natural logarithm, above 0."),
    "lower": (POSITION, "Lower limit."),
    "mean": (POSITION, "Mean."),
    "mode": (POSITION, "Most probable value."),
    "noncentrality": (PLAIN, "Noncentrality, 0 or more."),
    "numerator_degrees_of_freedom": (PLAIN, "Degrees of freedom of the numerator, above 0."),
    "offset": (DIFFERENCE, "Distance of the centre from the origin, 0 or more."),
    "outer_shape": (PLAIN, "Exponent of the whole tail, above 0."),
    "population": (PLAIN, "Size of the population."),
    "probabilities": (PLAIN, "Probabilities of the values, in their order; they add up to 1."),
    "probability": (PLAIN, "Probability, from 0 to 1."),
    "quantiles": (POSITION, "Two probabilities, each with its quantile, such as {0.05: 1.2, 0.95: 3.4}."),
    "rate": (RECIPROCAL, "Rate, above 0; the reciprocal of the scale."),
    "scale": (DIFFERENCE, "Scale, above 0."),
    "sd": (DIFFERENCE, "Standard deviation, above 0."),
    "second_sd": (DIFFERENCE, "Standard deviation of the second component, above 0."),
    "shape": (PLAIN, "Shape parameter."),
    "spread": (SQUARE, "Mean of the square, above 0."),
    "successes": (PLAIN, "Number of successes."),
    "top_lower": (POSITION, "Lower end of the level top."),
    "top_ratio": (PLAIN, "Width of the level top over the width of the base, from 0 to 1."),
    "top_upper": (POSITION, "Upper end of the level top."),
    "trials": (PLAIN, "Number of trials, a whole number."),
    "upper": (POSITION, "Upper limit."),
    "values": (POSITION, "The possible values."),
}

#: (family, parameter) whose unit differs from that of the parameter's name
EXCEPTIONS: dict[tuple[str, str], str] = {
    ("inverse_gaussian", "shape"): DIFFERENCE,
    ("logit_normal", "location"): PLAIN,
    ("logit_normal", "scale"): PLAIN,
}

#: ways to state a distribution that are no family; their part of the schema is written by hand
STRUCTURED = ("observations", "mixture", "density", "table", "histogram", "sample")

LISTS = frozenset({"values", "probabilities"})
MAPS = frozenset({"quantiles"})


def kind_of(family: str, parameter: str) -> str:
    """The kind of unit in which a parameter stands."""
    return EXCEPTIONS.get((family, parameter)) or PARAMETERS[parameter][0]


def family_definitions(families: Mapping[str, Any]) -> dict[str, Any]:
    """The schema's definition of each family, by key, from the families' own parameter sets."""
    return {key: _definition(family) for key, family in families.items() if key not in STRUCTURED}


def _definition(family: Any) -> dict[str, Any]:
    sets = family.parameter_sets
    used = dict.fromkeys(name for candidate in sets for name in candidate.names)
    wanted = [[name for name in candidate.names if name not in candidate.defaults] for candidate in sets]
    shown = " or ".join(str(candidate) for candidate in sets)
    definition: dict[str, Any] = {
        "title": f"the parameters {shown}",
        "description": f"{family.title[:1].upper()}{family.title[1:]}: {family.usage}.",
        "type": "object",
        "properties": {name: _parameter(name, sets) for name in used},
        "additionalProperties": False,
    }
    if len(sets) == 1:
        if wanted[0]:
            definition["required"] = wanted[0]
    else:
        definition["oneOf"] = [
            {
                "properties": dict.fromkeys(candidate.names, True),
                "required": required,
                "additionalProperties": False,
            }
            for candidate, required in zip(sets, wanted, strict=True)
        ]
    return definition


def _parameter(name: str, sets: Any) -> dict[str, Any]:
    description = PARAMETERS[name][1]
    defaults = {candidate.defaults[name] for candidate in sets if name in candidate.defaults}
    for default in sorted(defaults):
        description += f" Default: {default:g}."
    if name in LISTS:
        return {"description": description, "$ref": "#/$defs/numbers"}
    if name in MAPS:
        return {"description": description, "$ref": "#/$defs/quantiles"}
    return {"description": description, "$ref": "#/$defs/parameter"}


def refreshed(schema: Mapping[str, Any], families: Mapping[str, Any]) -> dict[str, Any]:
    """The schema with its part on families made anew from the families' parameter sets."""
    definitions = dict(schema["$defs"])
    distribution = dict(definitions["distribution"])
    for key in distribution["properties"]:
        reference = distribution["properties"][key]["$ref"].removeprefix("#/$defs/")
        if key not in STRUCTURED:
            definitions.pop(reference)
    made = family_definitions(families)
    kept = {key: distribution["properties"][key] for key in STRUCTURED}
    listed = {key: {"description": made[key]["description"], "$ref": f"#/$defs/family_{key}"} for key in made}
    definitions["distribution"] = {**distribution, "properties": {**listed, **kept}}
    definitions.update({f"family_{key}": made[key] for key in made})
    return {**schema, "$defs": definitions}
