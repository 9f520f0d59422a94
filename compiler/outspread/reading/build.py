"""From a model file or a mapping to a Model: read, check the shape, then the meaning, all faults at once.

The order is that of the model: names, constants, inputs, dependence, formulas, what is asked of the
outputs. Each part has a module beside this one; nothing is derived here.
"""

from __future__ import annotations

import hashlib
import re
from collections.abc import Mapping
from graphlib import CycleError, TopologicalSorter
from pathlib import Path as FilePath

from outspread.errors import Fault, ModelError, Place
from outspread.formula.tokens import FUNCTIONS, RESERVED
from outspread.formula.tree import names
from outspread.reading.context import Context
from outspread.reading.dependence import build_dependence, joint_inputs
from outspread.reading.distributions import build_distribution, parents, truncated
from outspread.reading.document import Document, Path, read_plain
from outspread.reading.goals import build_accuracy, build_readings, build_requirements
from outspread.reading.model import Constant, Distribution, Input, Model, Output
from outspread.reading.shape import check_shape
from outspread.reading.transformation import build_transformation, report_cycle
from outspread.reading.words import quoted
from outspread.reading.yaml_reader import LARGEST_FILE, read_yaml

#: words that make a model one on which people's safety may hang, unless it says `safety: false`
_SAFETY = re.compile(
    r"\b(strengths?|loads?|loading|pressures?|stress(es)?|safety|safely|unsafe|failures?|fails?|ruptures?|hazards?|hazardous)\b",
    re.IGNORECASE,
)


def read_model(path: str | FilePath) -> Model:
    """The model in a YAML file; CSV files that it names are read from the file's own folder.

    Raises ModelError with every fault found, each with its line and column.
    """
    file = str(path)
    return build_model(read_yaml(file, _bytes(file)), FilePath(path).parent)


def read_mapping(mapping: Mapping[str, object], name: str = "model") -> Model:
    """The model in a mapping with the keys of the file format; places in messages are key paths.

    CSV files that it names are read from the working directory. Raises ModelError.
    """
    return build_model(read_plain(name, mapping), FilePath())


def _bytes(file: str) -> bytes:
    try:
        with open(file, "rb") as stream:
            return stream.read(LARGEST_FILE + 1)
    except FileNotFoundError:
        message = "there is no such file; give the path of a model, or write one with `outspread new NAME`"
    except IsADirectoryError:
        message = "this is a folder; give the path of a model file in it"
    except (OSError, ValueError) as error:
        message = (
            f"the file cannot be read ({getattr(error, 'strerror', None) or error}); check its "
            "name and its permissions"
        )
    raise ModelError([Fault(Place(file), message)])


def build_model(document: Document, folder: FilePath) -> Model:
    """The model in a document. Raises ModelError with every fault of its shape, else of its meaning."""
    check_shape(document)
    context = Context(document, folder)
    _check_names(context)
    _constants(context)
    inputs = _inputs(context)
    by_name = {entry.name: entry for entry in inputs}
    conditional = {
        name: parents(entry.distribution) for name, entry in by_name.items() if entry.distribution is not None
    }
    dependence = build_dependence(context, conditional)
    steps, outputs = build_transformation(context)
    written_outputs = tuple(context.get(("transformation", "outputs")))
    requirements = build_requirements(context, written_outputs)
    readings = build_readings(context, written_outputs)
    accuracy = build_accuracy(context)
    if len(outputs) == len(written_outputs) and all(names(output.expression) for output in outputs):
        _check_used(context, inputs, conditional, outputs)
    if context.faults:
        raise ModelError(context.faults)
    return Model(
        file=document.file,
        source=document.source,
        sha256=hashlib.sha256(document.source).hexdigest(),
        title=context.text(("title",)),
        purpose=context.text(("purpose",)),
        record={key: context.text(("record", key)) for key in context.get(("record",)) or ()},
        safety=_safety(context),
        constants=tuple(context.constants.values()),
        inputs=inputs,
        dependence=dependence,
        steps=steps,
        outputs=outputs,
        requirements=requirements,
        readings=readings,
        accuracy=accuracy,
        data=dict(sorted(context.data.items())),
        cautions=tuple(context.text(("cautions", i)) for i in range(len(context.get(("cautions",)) or ()))),
    )


# --- names, constants, inputs ----------------------------------------------------------------------------


def _check_names(context: Context) -> None:
    """No name is a word of formulas, none is given twice."""
    first: dict[str, tuple[str, Path]] = {}
    groups: tuple[tuple[str, Path], ...] = (
        ("constant", ("constants",)),
        ("input", ("inputs",)),
        ("step", ("transformation", "where")),
        ("output", ("transformation", "outputs")),
    )
    for kind, group in groups:
        for name in context.get(group) or ():
            path = (*group, name)
            if name in RESERVED:
                what = "a function" if name in FUNCTIONS else "the number π" if name == "pi" else "a word"
                context.key_fault(path, f"{quoted(name)} is {what} of formulas; give the {kind} another name")
            if name in first:
                other, place = first[name]
                line = context.place(place).line
                where = f" in line {line}" if line else ""
                context.key_fault(
                    path, f"{quoted(name)} is the name of the {other}{where} already; rename one of them"
                )
            first.setdefault(name, (kind, path))


def _unit(context: Context, path: Path, name: str) -> str:
    """The unit at `path`, made known as that of `name`; its fault noted where there is no such unit."""
    from outspread.formula.units import unit_is_known

    unit = context.text(path)
    wrong = unit_is_known(unit)
    if wrong is None:
        context.units[name] = unit
    else:
        context.fault(path, wrong)
    return unit


def _constants(context: Context) -> None:
    for name, written in (context.get(("constants",)) or {}).items():
        path: Path = ("constants", name)
        grouped = isinstance(written, dict)
        context.constants[name] = Constant(
            name=name,
            value=float(written["value"] if grouped else written),
            unit=_unit(context, (*path, "unit"), name),
            symbol=context.text((*path, "symbol")),
            description=context.text((*path, "description")),
            basis=context.text((*path, "basis")),
            place=context.place(path),
        )


def _inputs(context: Context) -> tuple[Input, ...]:
    """Every input; one whose distribution is at fault has None there, the fault noted."""
    context.inputs = tuple(context.get(("inputs",)))
    units = {name: _unit(context, ("inputs", name, "unit"), name) for name in context.inputs}
    joint = joint_inputs(context)
    found = tuple(
        Input(
            name=name,
            distribution=_distribution(context, name, units[name], name in joint),
            unit=units[name],
            symbol=context.text(("inputs", name, "symbol")),
            description=context.text(("inputs", name, "description")),
            basis=context.text(("inputs", name, "basis")),
            place=context.place(("inputs", name)),
        )
        for name in context.inputs
    )
    graph = {entry.name: parents(entry.distribution) for entry in found if entry.distribution is not None}
    try:
        TopologicalSorter(graph).prepare()
    except CycleError as error:
        report_cycle(
            context, error.args[1], {name: ("inputs", name, "distribution") for name in context.inputs}
        )
    return found


def _distribution(context: Context, name: str, unit: str, joint: bool) -> Distribution | None:
    path: Path = ("inputs", name)
    written = context.get(path)
    if joint:
        for key in ("distribution", "truncate"):
            if key in written:
                message = (
                    f"a joint entry of `dependence` describes the input {quoted(name)} already; "
                    f"remove its {quoted(key)}"
                )
                context.key_fault((*path, key), message)
        return None
    if "distribution" not in written:
        context.key_fault(
            path,
            f"the input {quoted(name)} lacks a `distribution`; add one, such as `normal: "
            f"{{mean: 5, sd: 0.1}}`",
        )
        return None
    if name not in context.units:
        return None  # its unit is at fault
    distribution = build_distribution(context, (*path, "distribution"), unit, name)
    if distribution is None or "truncate" not in written:
        return distribution
    return truncated(context, (*path, "truncate"), distribution, unit)


# --- the whole -------------------------------------------------------------------------------------------


def _check_used(
    context: Context,
    inputs: tuple[Input, ...],
    conditional: Mapping[str, tuple[str, ...]],
    outputs: tuple[Output, ...],
) -> None:
    """Every input must occur in an output, or shape the distribution of one that does."""
    used: set[str] = set()
    waiting = [name for output in outputs for name in names(output.expression)]
    while waiting:
        name = waiting.pop()
        if name not in used:
            used.add(name)
            waiting.extend(conditional.get(name, ()))
    for entry in inputs:
        if entry.name not in used:
            context.key_fault(
                ("inputs", entry.name),
                f"the input {quoted(entry.name)} is not used by any output; remove it, or use it",
            )


def _safety(context: Context) -> bool:
    stated = context.get(("safety",))
    if stated is not None:
        return bool(stated)
    paths: list[Path] = [("title",), ("purpose",)]
    paths += [
        ("transformation", "outputs", name, "description")
        for name in context.get(("transformation", "outputs"))
    ]
    paths += [("requirements", index, "name") for index in range(len(context.get(("requirements",)) or ()))]
    return any(_SAFETY.search(context.text(path)) for path in paths)
