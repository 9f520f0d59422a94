"""Plans the derivation of a formula by parts: sub-formulas with laws of their own, each a step to the next.

Where a formula does not split because inputs recur, it is looked for the one input given whose value the rest
splits; that input is integrated over last.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import replace
from typing import Protocol

from outspread.formula.text import to_text
from outspread.formula.tree import Node, names, occurrences, substitute
from outspread.laws.law import Law
from outspread.numerics.slices.problem import MOST_COMBINATIONS, Scores
from outspread.planning.facts import Facts, Kind, kind_of
from outspread.planning.plan import PlanStep
from outspread.planning.split import Part, Splitter

_MOST_SHOWN = 4  # inputs named in a reason
_LITTLE = 0  # integrals to be done anew for each given value
_WIDEST = 60  # characters of a formula in the name of a step


class Recognised(Protocol):
    """What the planner must know of a closed form."""

    @property
    def name(self) -> str: ...

    @property
    def source(self) -> str: ...


Recognise = Callable[[Node, Mapping[str, Law], Scores | None], Recognised | None]


class TreePlanner:
    """Plans of one model's formulas by parts."""

    def __init__(self, laws: Mapping[str, Law], scores: Scores | None, recognise: Recognise):
        self._laws, self._scores, self._recognise = laws, scores, recognise
        self._kinds = {name: kind_of(law) for name, law in laws.items()}
        self._linked = _linked(scores)
        self._families = {name: law.family for name, law in laws.items()}

    def plan(self, name: str, expression: Node, any_work: bool = False) -> PlanStep | None:
        """The steps that derive the formula by parts, or None where it does not fall into such. Conditioning
        is planned where little is left to do for each given value, or `any_work` is asked for."""
        whole = self._step(self._splitter(expression).split(name, expression), ())
        if whole is not None:
            return whole
        found = self._conditioned(name, expression)
        if found is None or any_work:
            return found
        return found if _repeated_work(found.substeps[0], found.outer[0]) <= _LITTLE else None

    def _splitter(self, expression: Node, given: tuple[str, ...] = ()) -> Splitter:
        used = names(expression)
        random = [name for name in used if name in self._laws and name not in given]
        return Splitter(random, self._linked, {*self._laws, *used}, self._families)

    def _step(self, part: Part, given: tuple[str, ...]) -> PlanStep | None:
        inputs = tuple(name for name in part.inputs() if name in self._laws and name not in given)
        full = expanded(part)
        if not any(name in names(full) for name in given):
            known = self._recognise(full, {name: self._laws[name] for name in inputs}, self._scores)
            if known is not None:
                return PlanStep(
                    part.name, _derives(part, given), "closed_form",
                    f"a known closed form: {known.name}", inputs, expression=full,
                    details=(("closed form", known.name), ("source", known.source)),
                )  # fmt: skip
        kinds: dict[str, Kind] = dict(self._kinds)
        steps = []
        for own in part.parts:
            step = self._step(own, given)
            if step is None:
                return None
            steps.append(step)
            kinds[own.name] = self._kind(own)
        entering = tuple(n for n in names(part.expression) if n in kinds and n not in given)
        facts = Facts(part.expression, kinds, self._scores, entering)
        route, reason = facts.numeric_route()
        if route == "sampling":
            return None
        if steps:
            one = "comes from the step below and shares"
            come = one if len(steps) == 1 else "come from the steps below and share"
            reason += f"; {_listed([step.output for step in steps])} {come} no input with the rest"
        found = facts.step(part.name, (route, reason), ())
        return replace(found, derives=_derives(part, given), substeps=tuple(steps))

    def _kind(self, part: Part) -> Kind:
        """The kind of a part's law: discrete where all of its inputs are."""
        inputs = [self._kinds[name] for name in part.inputs() if name in self._kinds]
        if any(kind.continuous for kind in inputs):
            return Kind(True, derived=True)
        size = 1
        for kind in inputs:
            size = min(size * max(kind.atoms, 1), MOST_COMBINATIONS)
        return Kind(False, size, derived=True)

    def _conditioned(self, name: str, expression: Node) -> PlanStep | None:
        """Given one input the rest splits: the one that leaves the fewest steps to be done for each value."""
        found: list[tuple[int, int, PlanStep]] = []
        used = [n for n in names(expression) if n in self._laws]
        for place, candidate in enumerate(used):
            kind = self._kinds[candidate]
            if candidate in self._linked or kind.atoms or not kind.continuous:
                continue
            part = self._splitter(expression, (candidate,)).split(name, expression)
            step = self._step(part, (candidate,))
            if step is not None:
                found.append((_repeated_work(step, candidate), place, step))
        if not found:
            return None
        _, place, step = min(found, key=lambda item: item[:2])
        candidate = used[place]
        count = occurrences(expression, candidate)
        times = "twice" if count == 2 else f"{count} times"
        why = f"it occurs {times}" if count > 1 else "it ties the others together"
        return PlanStep(
            name, f"the law of {name}", "conditioning",
            f"given the value of {candidate} ({why}) the rest of the formula splits; {candidate} is "
            "integrated over last", tuple(used), "", (candidate,), expression=expression,
            substeps=(step,),
        )  # fmt: skip


def _derives(part: Part, given: tuple[str, ...]) -> str:
    text = to_text(part.expression)
    shown = text if len(text) <= _WIDEST else f"{text[: _WIDEST - 2]} …"
    return f"the law of {part.name} = {shown}{' given ' + given[0] if given else ''}"


def expanded(part: Part) -> Node:
    """The sub-formula in inputs alone."""
    return substitute(part.expression, {own.name: expanded(own) for own in part.parts})


def _repeated_work(step: PlanStep, given: str) -> int:
    """Number of integrals that must be done anew for each value of the given input."""
    own = int(step.route == "region_integral")
    below = sum(_repeated_work(part, given) for part in step.substeps)
    touched = step.expression is not None and given in names(step.expression)
    return below + own if touched or any(_touches(part, given) for part in step.substeps) else below


def _touches(step: PlanStep, given: str) -> bool:
    own = step.expression is not None and given in names(step.expression)
    return own or any(_touches(part, given) for part in step.substeps)


def _listed(items: list[str]) -> str:
    if len(items) > _MOST_SHOWN:
        return f"{', '.join(items[:_MOST_SHOWN])} and others"
    return " and ".join([", ".join(items[:-1]), items[-1]] if len(items) > 1 else items)


def _linked(scores: Scores | None) -> dict[str, str]:
    """For each input that depends on others the first one of its group."""
    if scores is None:
        return {}
    groups: dict[str, str] = {}
    for name in scores.order:
        if not scores.touches(name):
            continue
        key = groups.setdefault(name, name)
        for other in scores.order:
            if other != name and scores.between(name, other) != 0:
                before = groups.get(other)
                if before is not None and before != key:
                    groups = {n: key if k == before else k for n, k in groups.items()}
                groups[other] = key
    return groups
