"""Builds the distribution of an input: parameters to numbers or formulas, ranges, truncation, tables.

Ranges are `laws`' to judge; what it refuses is reported at the parameter to blame.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

from outspread.errors import LawError
from outspread.formula.tree import Node, names
from outspread.reading.columns import read_columns
from outspread.reading.context import Context
from outspread.reading.document import Path
from outspread.reading.model import Distribution
from outspread.reading.parameters import DIFFERENCE, PLAIN, POSITION, RECIPROCAL, SQUARE, STRUCTURED, kind_of
from outspread.reading.words import number, quoted


def build_distribution(context: Context, path: Path, unit: str, own: str) -> Distribution | None:
    """The distribution at `path` of the input `own`, with `unit`; None with the faults noted.

    The truncation beside it (`truncate` of the input) is `truncated`'s work.
    """
    family = next(iter(context.get(path)))
    inner = (*path, family)
    if family == "mixture":
        distribution = _mixture(context, inner, unit, own)
    elif family == "density":
        distribution = _density(context, inner, unit)
    elif family in {"table", "histogram", "sample"}:
        columns = _columns(context, inner)
        distribution = Distribution(family, columns, place=context.place(inner)) if columns else None
    else:
        distribution = _family(context, inner, family, unit, own)
    if distribution is None or is_conditional(distribution):
        return distribution
    return distribution if _check(context, inner, distribution) else None


def is_conditional(distribution: Distribution) -> bool:
    """Whether a parameter is a formula of other inputs."""
    return bool(parents(distribution))


def parents(distribution: Distribution) -> tuple[str, ...]:
    """The inputs that occur in the parameters, each once."""
    found: dict[str, None] = {}
    if distribution.family != "density":
        for value in distribution.parameters.values():
            if isinstance(value, Node):
                found.update(dict.fromkeys(names(value)))
    for component in distribution.components:
        found.update(dict.fromkeys(parents(component)))
    return tuple(found)


def _check(context: Context, path: Path, distribution: Distribution) -> bool:
    """Whether `laws` accepts the distribution; its refusal is noted at the parameter to blame."""
    from outspread.laws.build import build_law
    from outspread.laws.registry import FAMILIES

    try:
        if (
            distribution.family in STRUCTURED
            or distribution.lower is not None
            or distribution.upper is not None
        ):
            build_law(distribution)
        else:
            FAMILIES[distribution.family].canonical(distribution.parameters)
    except LawError as error:
        parameter = "formula" if error.parameter == "density" else error.parameter
        blamed = (*path, parameter) if parameter else path
        if parameter and blamed in context.document.spots:
            context.fault(blamed, error.message)
        else:
            context.key_fault(path, error.message)
        return False
    return True


def _family(context: Context, path: Path, family: str, unit: str, own: str) -> Distribution | None:
    values: dict[str, object] = {}
    complete = True
    for name, written in context.get(path).items():
        value = _parameter(context, (*path, name), written, family, unit, own)
        complete = complete and value is not None
        values[name] = value
    return Distribution(family, values, place=context.place(path)) if complete else None


def _parameter(context: Context, path: Path, written: Any, family: str, unit: str, own: str) -> object | None:
    """A float, a tuple or mapping of floats, or a formula of other inputs; None with the fault noted."""
    if isinstance(written, list):
        return tuple(float(entry) for entry in written)
    if isinstance(written, Mapping):
        return _quantiles(context, path, written)
    if not isinstance(written, str):
        return float(written)
    others = [name for name in context.inputs if name != own]
    node = context.parsed(path, [*context.constants, *others], "constants and other inputs")
    if node is None:
        return None
    wanted = unit_of_parameter(unit, kind_of(family, str(path[-1])))
    if not any(name in others for name in names(node)):
        return context.constant_value(path, node, wanted)
    return context.parameter(path, node, wanted)


def _quantiles(context: Context, path: Path, written: Mapping[str, Any]) -> dict[float, float] | None:
    found: dict[float, float] = {}
    for key, value in written.items():
        try:
            probability = float(key)
        except ValueError:
            context.key_fault((*path, key), f"{quoted(key)} is no probability; write one such as 0.05")
            return None
        if probability in found:
            context.key_fault(
                (*path, key), f"the probability {quoted(key)} occurs twice; give two different ones"
            )
            return None
        found[probability] = float(value)
    return found


def unit_of_parameter(unit: str, kind: str) -> str:
    """The unit in which a parameter of a distribution stands, for an input in `unit`.

    Differences of temperatures in degC are in K, differences of levels in dB.
    """
    if kind == PLAIN or unit in {"", "1"}:
        return ""
    if kind == POSITION:
        return unit
    from outspread.formula.unit import difference, parse_unit

    known = parse_unit(unit)
    size = str(difference(known)) if known.kind == "offset" else "dB" if known.kind == "level" else unit
    return {DIFFERENCE: size, RECIPROCAL: f"1/({size})", SQUARE: f"({size})^2"}[kind]


# --- truncation ------------------------------------------------------------------------------------------


def truncated(context: Context, path: Path, distribution: Distribution, unit: str) -> Distribution | None:
    """The distribution cut at the limits at `path`; None with the faults noted."""
    limits: dict[str, float] = {}
    for side, written in context.get(path).items():
        value = _limit(context, (*path, side), written, unit)
        if value is None:
            return None
        limits[side] = value
    lower, upper = limits.get("lower"), limits.get("upper")
    if lower is not None and upper is not None and not lower < upper:
        message = (
            f"`upper` is {number(upper)} and `lower` is {number(lower)}; write `upper` above `lower`"
        )
        context.fault((*path, "upper"), message)
        return None
    cut = Distribution(
        distribution.family,
        distribution.parameters,
        distribution.components,
        lower,
        upper,
        distribution.place,
    )
    if is_conditional(cut):
        return cut
    return cut if _leaves_something(context, path, cut) else None


def _leaves_something(context: Context, path: Path, cut: Distribution) -> bool:
    """Whether probability is left between the limits of `cut`; if not, the fault is noted.

    Where the limits hold the centre of a family between them this needs no figure, and the libraries that
    would compute one are not loaded: that is the usual case, and `check` must be quick.
    """
    from outspread.laws.registry import FAMILIES

    family = FAMILIES.get(cut.family)
    if family is None or family.kind != "continuous":
        return _check(context, path, cut)
    canonical = family.canonical(cut.parameters)
    low, high = family.build(canonical).support()
    least = low if cut.lower is None else max(low, cut.lower)
    most = high if cut.upper is None else min(high, cut.upper)
    if not least < most:
        message = (
            f"the limits leave probability 0; write limits that meet the distribution, "
            f"which reaches from {number(low)} to {number(high)}"
        )
        context.key_fault(path, message)
        return False
    centres = [float(canonical[name]) for name in ("mean", "location", "mode") if name in canonical]
    return any(least < centre < most for centre in centres[:1]) or _check(context, path, cut)


def _limit(context: Context, path: Path, written: Any, unit: str) -> float | None:
    if not isinstance(written, str):
        return float(written)
    node = context.parsed(path, context.constants, "constants")
    return None if node is None else context.constant_value(path, node, unit_of_parameter(unit, POSITION))


# --- mixtures, densities, tables -------------------------------------------------------------------------


def _mixture(context: Context, path: Path, unit: str, own: str) -> Distribution | None:
    weights = tuple(float(weight) for weight in context.get((*path, "weights")))
    count = len(context.get((*path, "distributions")))
    before = len(context.faults)
    if len(weights) != count:
        message = f"{count} distributions need {count} weights; given: {len(weights)}"
        context.key_fault((*path, "weights"), message)
    for index, weight in enumerate(weights):
        if not weight > 0:
            context.fault(
                (*path, "weights", index), f"the weight is {number(weight)}; write a number above 0"
            )
    if len(context.faults) == before and abs(math.fsum(weights) - 1) > 1e-9:
        message = f"the weights add up to {number(math.fsum(weights))}; make it 1"
        context.key_fault((*path, "weights"), message)
    parts = [
        build_distribution(context, (*path, "distributions", index), unit, own) for index in range(count)
    ]
    components = tuple(part for part in parts if part is not None)
    if len(context.faults) > before or len(components) < count:
        return None
    return Distribution("mixture", {"weights": weights}, components, place=context.place(path))


def _density(context: Context, path: Path, unit: str) -> Distribution | None:
    limits: dict[str, float] = {"lower": -math.inf, "upper": math.inf}
    for side in limits:
        written = context.get((*path, side))
        if written is not None:
            value = _limit(context, (*path, side), written, unit)
            if value is None:
                return None
            limits[side] = value
    if not limits["lower"] < limits["upper"]:
        context.key_fault(
            (*path, "upper"), "`upper` must be above `lower`; exchange them, or widen the support"
        )
        return None
    formula = (*path, "formula")
    if "x" in context.constants:
        context.fault(
            formula,
            "`x` is the quantity itself in a density, and a constant has this name; rename the constant",
        )
        return None
    # The density is a formula between numbers: x is the number of the quantity in its unit.
    node = context.parsed(
        formula, ["x", *context.constants], "a density may use"
    )
    if node is None:
        return None
    return Distribution(
        "density", {"density": context.with_constants(node), **limits}, place=context.place(path)
    )


def _columns(context: Context, path: Path) -> dict[str, tuple[float, ...]] | None:
    """The columns of a table, a histogram or a sample, inline or from a CSV file."""
    written = context.get(path)
    if "file" not in written:
        return {name: tuple(float(entry) for entry in column) for name, column in written.items()}
    if "column" in written:
        headers = {"values": (*path, "column")}
    else:
        headers = {name: (*path, "columns", name) for name in written["columns"]}
    found = read_columns(context, (*path, "file"), {context.text(asked): asked for asked in headers.values()})
    if found is None:
        return None
    columns = {name: found[context.text(asked)] for name, asked in headers.items()}
    return _classes(context, path, columns) if "count" in columns else columns


def _classes(
    context: Context, path: Path, columns: Mapping[str, tuple[float, ...]]
) -> dict[str, tuple[float, ...]] | None:
    """Edges and counts of a histogram whose classes stand in rows, each beginning where the last ended."""
    lower, upper = columns["lower"], columns["upper"]
    for row in range(1, len(lower)):
        if lower[row] != upper[row - 1]:
            message = (
                f"row {row + 1} of the classes begins at {number(lower[row])}, and row {row} ends at "
                f"{number(upper[row - 1])}; each class begins where the one before it ends"
            )
            context.fault((*path, "file"), message)
            return None
    return {"edges": (*lower, upper[-1]), "counts": columns["count"]}
