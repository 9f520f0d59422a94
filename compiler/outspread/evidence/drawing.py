"""Plain sampling of a model's outputs from its own formulas: the independent second derivation.

Inputs are drawn by construction (`families`, `marginals`, `dependence`), formulas evaluated as they
stand. It shares no code with the routes nor with the laws' distribution functions. Comparing the draws
with the derived laws is left to `judging`.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from outspread.errors import DerivationError
from outspread.evidence.dependence import draw_group
from outspread.evidence.families import Generator
from outspread.evidence.marginals import draw
from outspread.formula.evaluate import compile_numpy
from outspread.formula.tree import Node, names
from outspread.laws.law import Array
from outspread.reading.distributions import parents
from outspread.reading.model import Input, Model

DRAWS = 1_000_000
BATCHES = 20
#: keys of the streams of random numbers, so that no other part of the program shares them
FIRST_STREAM, SECOND_STREAM = 0x0E51, 0x0E52

#: called with the number of the batch and the draws of all inputs and outputs in it
Observer = Callable[[int, Mapping[str, Array]], None]


@dataclass(frozen=True)
class Sample:
    """The draws of every output, in the order in which they were drawn; `label` says how."""

    outputs: Mapping[str, Array]
    label: str
    events: Mapping[str, float]  # text of a joint event -> its relative frequency

    @property
    def count(self) -> int:
        return next(iter(self.outputs.values())).size


def generator_for(seed: int, stream: int, batch: int) -> Generator:
    """The generator of one batch: Philox for the first stream, SFC64 for the second.

    Batches have their own seeds, so that the draws do not depend on the order in which they are made.
    """
    sequence = np.random.SeedSequence(entropy=seed, spawn_key=(stream, batch))
    kind = np.random.SFC64 if stream == SECOND_STREAM else np.random.Philox
    return np.random.Generator(kind(sequence))


def draw_inputs(model: Model, generator: Generator, count: int) -> dict[str, Array]:
    """`count` draws of every input, groups that depend on each other together, parents before children.

    Raises DerivationError where a distribution or a dependence cannot be drawn by construction yet.
    """
    inputs = {described.name: described for described in model.inputs}
    drawn: dict[str, Array] = {}
    for entry in model.dependence:
        drawn.update(draw_group(entry, inputs, generator, count))
    for described in _parents_first(model.inputs):
        if described.name not in drawn:
            if described.distribution is None:
                raise DerivationError(f"{described.name} has no distribution to draw from")
            drawn[described.name] = draw(described.distribution, generator, count, drawn)
    return {name: drawn[name] for name in inputs}


def _parents_first(inputs: Iterable[Input]) -> list[Input]:
    ordered: list[Input] = []
    waiting = list(inputs)
    while waiting:
        known = {described.name for described in ordered}
        open_names = {described.name for described in waiting}
        ready = [
            d
            for d in waiting
            if not (set(parents(d.distribution)) & open_names - known if d.distribution else ())
        ]
        if not ready:
            raise DerivationError("the inputs depend on each other in a circle")
        ordered.extend(ready)
        waiting = [d for d in waiting if d not in ready]
    return ordered


def draw_sample(
    model: Model,
    *,
    stream: int = FIRST_STREAM,
    observers: Sequence[Observer] = (),
    events: Mapping[str, Node] | None = None,
    count: int = DRAWS,
) -> Sample:
    """Independent draws of every output of the model: 20 batches of `count` // 20.

    `observers` see each batch with its inputs, so that nothing but the outputs is kept; `events` over
    outputs have their relative frequencies counted.
    """
    functions = [
        (output.name, names(output.expression), compile_numpy(output.expression, names(output.expression)))
        for output in model.outputs
    ]
    compiled = [
        (text, names(event), compile_numpy(event, names(event))) for text, event in (events or {}).items()
    ]
    counts = {text: 0 for text, _, _ in compiled}
    size = count // BATCHES
    kept = {output.name: np.empty(size * BATCHES) for output in model.outputs}
    for batch in range(BATCHES):
        generator = generator_for(model.accuracy.seed, stream, batch)
        values = draw_inputs(model, generator, size)
        drawn: dict[str, Array] = {}
        for name, used, function in functions:
            row = function(*(values[part] for part in used))
            drawn[name] = np.broadcast_to(np.asarray(row, float), (size,))
            kept[name][batch * size : (batch + 1) * size] = drawn[name]
        for text, used, function in compiled:
            counts[text] += int(np.count_nonzero(function(*(drawn[part] for part in used))))
        for observer in observers:
            observer(batch, {**values, **drawn})
    label = f"plain sampling of {size * BATCHES:,} draws"
    if stream == SECOND_STREAM:
        label = f"a second {label} with another generator"
    frequencies = {text: number / (size * BATCHES) for text, number in counts.items()}
    return Sample(kept, label, frequencies)
