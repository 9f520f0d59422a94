"""Builds the entries of `dependence`: which inputs, which copula and strength, joint densities and samples.

It checks what can be said without a law: names, shape of the matrix, ranges, positive definiteness. Whether
two marginals can reach a correlation is left to the derivation.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import replace
from typing import Any

from outspread.reading.columns import read_columns
from outspread.reading.context import Context
from outspread.reading.document import Path
from outspread.reading.model import Dependence
from outspread.reading.words import listed, number, quoted, suggestion

ELLIPTICAL = ("gaussian", "student_t")
Matrix = tuple[tuple[float, ...], ...]


def build_dependence(context: Context, conditional: Mapping[str, tuple[str, ...]]) -> tuple[Dependence, ...]:
    """The entries under `dependence`. `conditional`: for each input those that shape its distribution."""
    found: list[Dependence] = []
    named: dict[str, int] = {}
    for index in range(len(context.get(("dependence",)) or ())):
        path: Path = ("dependence", index)
        inputs = _inputs(context, path, named, conditional)
        if inputs is None:
            continue
        entry = _entry(context, path, inputs)
        if entry is not None:
            found.append(replace(entry, basis=context.text((*path, "basis"))))
    return tuple(found)


def joint_inputs(context: Context) -> frozenset[str]:
    """The inputs that a joint density or sample describes, and that have no distribution of their own."""
    return frozenset(
        name
        for entry in context.get(("dependence",)) or ()
        if "copula" not in entry
        for name in entry["inputs"]
    )


def _inputs(
    context: Context, path: Path, named: dict[str, int], conditional: Mapping[str, tuple[str, ...]]
) -> tuple[str, ...] | None:
    before = len(context.faults)
    inputs: list[str] = []
    for position, name in enumerate(context.get((*path, "inputs"))):
        place = (*path, "inputs", position)
        if name not in context.inputs:
            context.fault(place, f"{quoted(name)} is no input; {suggestion(name, context.inputs, 'inputs')}")
        elif name in inputs:
            context.fault(place, f"the input {quoted(name)} is named twice in one entry; name it once")
        elif name in named:
            message = (
                f"the input {quoted(name)} is named by entry {named[name] + 1} of `dependence` "
                "already; join the two entries"
            )
            context.fault(place, message)
        elif conditional.get(name):
            parents = listed(conditional[name], "and")
            message = (
                f"the input {quoted(name)} depends on {parents} through its distribution; remove "
                "one of the two dependences"
            )
            context.fault(place, message)
        inputs.append(name)
    named.update((name, int(path[-1])) for name in inputs if name not in named)
    return tuple(inputs) if len(context.faults) == before else None


def _entry(context: Context, path: Path, inputs: tuple[str, ...]) -> Dependence | None:
    if context.get((*path, "copula")) is not None:
        return _copula(context, path, inputs)
    if context.get((*path, "joint_density")) is not None:
        return _joint_density(context, path, inputs)
    return _joint_sample(context, path, inputs)


def _joint_density(context: Context, path: Path, inputs: tuple[str, ...]) -> Dependence | None:
    inner = (*path, "joint_density")
    known, kinds = [*inputs, *context.constants], "inputs of this entry and constants"
    density = context.parsed((*inner, "density"), known, kinds)
    support = context.parsed((*inner, "support"), known, kinds, event=True)
    if density is None or support is None:
        return None
    parameters = {"density": context.with_constants(density), "support": context.with_constants(support)}
    return Dependence(inputs, "joint_density", parameters=parameters, place=context.place(path))


def _joint_sample(context: Context, path: Path, inputs: tuple[str, ...]) -> Dependence | None:
    columns = (*path, "joint_sample", "columns")
    before = len(context.faults)
    for name in context.get(columns):
        if name not in inputs:
            context.key_fault(
                (*columns, name),
                f"{quoted(name)} is no input of this entry; {suggestion(name, inputs, 'its inputs')}",
            )
    for name in inputs:
        if name not in context.get(columns):
            context.key_fault(columns, f"`columns` names no column for the input {quoted(name)}; add it")
    if len(context.faults) > before:
        return None
    headers = {context.text((*columns, name)): (*columns, name) for name in inputs}
    found = read_columns(context, (*path, "joint_sample", "file"), headers)
    if found is None:
        return None
    values = tuple(found[context.text((*columns, name))] for name in inputs)
    return Dependence(inputs, "joint_sample", parameters={"columns": values}, place=context.place(path))


# --- copulas ---------------------------------------------------------------------------------------------


def _copula(context: Context, path: Path, inputs: tuple[str, ...]) -> Dependence | None:
    family = next(iter(context.get((*path, "copula"))))
    inner = (*path, "copula", family)
    written = context.get(inner)
    measure = next(key for key in written if key != "degrees_of_freedom")
    strength = (*inner, measure)
    matrix = _matrix(context, strength, written[measure], len(inputs), family)
    parameters: dict[str, object] = {}
    if "degrees_of_freedom" in written:
        degrees = float(written["degrees_of_freedom"])
        if not degrees > 0:
            message = f"`degrees_of_freedom` is {number(degrees)}; write a number above 0"
            context.fault((*inner, "degrees_of_freedom"), message)
            return None
        parameters["degrees_of_freedom"] = degrees
    if matrix is None or not _in_range(context, strength, matrix, family, measure):
        return None
    if family in ELLIPTICAL and not _positive_definite(context, strength, matrix, measure):
        return None
    return Dependence(inputs, "copula", family, measure, matrix, parameters, context.place(path))


def _matrix(context: Context, path: Path, written: Any, count: int, family: str) -> Matrix | None:
    """The full symmetric matrix; None with the fault noted."""
    name = quoted(path[-1])
    if not isinstance(written, list):
        if count > 2 and family in ELLIPTICAL:
            message = (
                f"{name} is one number for {count} inputs; write a full matrix of {count} rows in "
                "the order of `inputs`"
            )
            context.fault(path, message)
            return None
        value = float(written)
        return tuple(tuple(1.0 if i == j else value for j in range(count)) for i in range(count))
    if len(written) != count or any(len(row) != count for row in written):
        widths = " or ".join(str(width) for width in sorted({len(row) for row in written}))
        message = (
            f"{name} is a {len(written)}×{widths} matrix; "
            f"write a {count}×{count} matrix in the order of `inputs`"
        )
        context.fault(path, message)
        return None
    matrix = tuple(tuple(float(entry) for entry in row) for row in written)
    before = len(context.faults)
    for i in range(count):
        if matrix[i][i] != 1:
            context.fault(
                (*path, i, i),
                f"the diagonal of {name} has {number(matrix[i][i])} in row {i + 1}; write 1",
            )
        for j in range(i):
            if matrix[i][j] != matrix[j][i]:
                message = (
                    f"{name} is not symmetric: row {i + 1}, column {j + 1} is {number(matrix[i][j])}, and "
                    f"row {j + 1}, column {i + 1} is {number(matrix[j][i])}; make them equal"
                )
                context.fault((*path, i, j), message)
    if family not in ELLIPTICAL and len({matrix[i][j] for i in range(count) for j in range(i)}) > 1:
        context.fault(path, f"a {family} copula has one strength for all its inputs; write one number")
    return matrix if len(context.faults) == before else None


def _in_range(context: Context, path: Path, matrix: Matrix, family: str, measure: str) -> bool:
    right = _range(family, measure, len(matrix))
    good = True
    for i in range(len(matrix)):
        for j in range(i):
            value = matrix[i][j]
            if right[0](value):
                continue
            good = False
            place = (*path, i, j) if (*path, i, j) in context.document.spots else path
            pair = f" in row {i + 1}, column {j + 1}" if place != path else ""
            context.fault(place, f"{quoted(path[-1])} is {number(value)}{pair}; write {right[1]}")
            if place == path:
                return False
    return good


def _range(family: str, measure: str, count: int) -> tuple[Any, str]:
    """Whether a strength is possible, and the possible ones in words (Nelsen 2006, section 4.2 and 4.6)."""
    if measure == "parameter":
        if family == "clayton":
            return (lambda v: v > 0), "a number above 0"
        if family == "gumbel":
            return (lambda v: v >= 1), "a number of at least 1"
        if count > 2:
            return (lambda v: v > 0), "a number above 0 for more than two inputs"
        return (lambda v: v != 0), "a number other than 0 (0 is independence: leave the entry out)"
    if family == "clayton" or (family == "frank" and count > 2):
        return (lambda v: 0 < v < 1), f"a number strictly between 0 and 1 for a {family} copula"
    if family == "gumbel":
        return (lambda v: 0 <= v < 1), "a number from 0 to below 1 for a gumbel copula"
    if family == "frank":
        return (lambda v: -1 < v < 1 and v != 0), "a number strictly between -1 and 1 other than 0"
    return (lambda v: -1 < v < 1), "a number strictly between -1 and 1"


def _positive_definite(context: Context, path: Path, matrix: Matrix, measure: str) -> bool:
    """Whether the copula's own correlation matrix is positive definite.

    Rank correlations are turned into it (Lindskog, McNeil, Schmock 2003: r = sin(pi tau / 2); for the
    Gaussian copula r = 2 sin(pi rho_S / 6)). For `pearson` over marginals that are not normal this is the
    necessary condition on the matrix itself.
    """
    if len(matrix) == 2:
        return True  # |r| < 1 is enough
    import numpy as np

    own = np.array(matrix)
    if measure == "kendall":
        own = np.sin(math.pi * own / 2)
    elif measure == "spearman":
        own = 2 * np.sin(math.pi * own / 6)
    np.fill_diagonal(own, 1.0)
    smallest = float(np.linalg.eigvalsh(own)[0])
    if smallest > 1e-12:
        return True
    what = "" if measure in {"pearson", "normal_scores"} else " of the copula that belongs to it"
    message = (
        f"the matrix{what} is not positive definite: its smallest eigenvalue is {smallest:.3g}; "
        "such correlations cannot occur together, so bring some closer to 0"
    )
    context.fault(path, message)
    return False
