"""What the structure of one formula tells: which numeric route leads through it and what it solves for.

A formula may hold, beside inputs, the names of sub-formulas whose laws earlier steps derive; of those only
the kind is known before anything is computed.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from outspread.formula.tree import Name, Node, occurrences
from outspread.laws.law import Law
from outspread.numerics.slices import cases
from outspread.numerics.slices.problem import MOST_COMBINATIONS, Scores
from outspread.numerics.slices.solve import PARAMETER, Frame, Solver
from outspread.planning.plan import PlanStep, RuledOut

MOST_OWNERS = 5_000  # combinations of discrete inputs beside two continuous ones


@dataclass(frozen=True)
class Kind:
    """What a plan must know of a law: whether it has a continuous part, the number of its atoms, whether its
    density is unbounded at an end, and whether it comes out of an earlier step."""

    continuous: bool
    atoms: int = 0
    singular: bool = False
    derived: bool = False


def kind_of(law: Law) -> Kind:
    atoms = int(law.atoms().values.size) if law.continuous_mass < 1 else 0
    return Kind(law.continuous_mass > 0, atoms, any(law.singular_ends()))


class Facts:
    """What the structure of one formula tells."""

    def __init__(
        self, expression: Node, kinds: Mapping[str, Kind], scores: Scores | None, used: tuple[str, ...]
    ):
        self.expression, self.kinds, self.scores, self.used = expression, kinds, scores, used
        self.continuous = tuple(name for name in used if kinds[name].continuous)
        self.discrete = tuple(name for name in used if kinds[name].atoms)
        self.mixed = tuple(name for name in self.discrete if kinds[name].continuous)
        self.derived = tuple(name for name in used if kinds[name].derived)

    def combinations(self) -> int:
        size = 1
        for name in self.discrete:
            size *= self.kinds[name].atoms + (name in self.mixed)
        return size

    def _dependent_discrete(self) -> bool:
        return self.scores is not None and any(
            self.scores.between(name, other) != 0
            for name in self.discrete
            for other in self.used
            if other != name
        )

    def numeric_route(self) -> tuple[str, str]:
        """(route, reason) of the most exact numeric route."""
        if self._dependent_discrete():
            return "sampling", "a discrete input depends on another input"
        count, size = len(self.continuous), self.combinations()
        if count == 0 and size <= MOST_COMBINATIONS:
            return "enumeration", "all inputs are discrete: every combination of their values is gone through"
        beside = f", for each of {size:,} combinations of the discrete ones" if self.discrete else ""
        if count == 1 and size <= MOST_COMBINATIONS:
            return "change_of_variables", f"one continuous input: every branch of the inverse{beside}"
        if count == 2 and size <= MOST_OWNERS:
            return (
                "region_integral",
                f"two continuous inputs: the region where the formula stays below a value{beside}",
            )
        if count <= 2:
            return "sampling", f"the discrete inputs have {size:,} combinations of values"
        return "sampling", f"{count} continuous inputs enter"

    def ruled_out(self, route: str) -> list[RuledOut]:
        if route != "sampling":
            return [RuledOut("sampling", "a route with a deterministic error bound applies")]
        count = len(self.continuous)
        return [
            RuledOut("change_of_variables", f"{count} continuous inputs, not one"),
            RuledOut("region_integral", f"{count} continuous inputs; two can be integrated exactly")
            if count != 2
            else RuledOut(
                "region_integral", "too many combinations of discrete inputs, or they are dependent"
            ),
        ]

    def step(self, output: str, chosen: tuple[str, str], ruled_out: tuple[RuledOut, ...]) -> PlanStep:
        route, reason = chosen
        inner = ""
        outer: tuple[str, ...] = ()
        details: list[tuple[str, str]] = []
        if route == "change_of_variables":
            inner = self.continuous[0]
        elif route == "region_integral":
            inner, exact = self.inner()
            outer = tuple(name for name in self.continuous if name != inner)
            details.append(("limits", _limits(inner, exact)))
        elif route == "sampling" and self.continuous:
            inner, exact = self.inner()
            outer = tuple(name for name in self.used if name != inner)
            if exact:
                details.append(("integrated exactly", inner))
                reason += f"; {inner} is integrated exactly, the others are sampled"
            else:
                inner, outer = "", self.used
        return PlanStep(
            output, f"the law of {output}", route, reason, self.used, inner, outer, ruled_out, tuple(details),
            expression=self.expression,
        )

    def inner(self) -> tuple[str, bool]:
        """The input whose limits are found exactly: one for which the formula can be solved, if there is one,
        and among those the one that occurs least."""
        candidates = [name for name in self.continuous if name not in self.mixed] or list(self.continuous)
        if self.scores is not None and len(self.continuous) > 2:
            candidates = sorted(candidates, key=self.scores.touches)
        event = cases.comparison("less_equal", self.expression, Name(PARAMETER))
        ranked = sorted(
            candidates,
            key=lambda name: (
                not solvable(event, name),
                occurrences(self.expression, name),
                not self.kinds[name].derived,
                self.kinds[name].singular,
                -candidates.index(name),
            ),
        )
        return ranked[0], solvable(event, ranked[0])


def solvable(event: Node, name: str) -> bool:
    """Whether every comparison can be solved for the name by formula."""
    return Solver(event, Frame(name, np.array([-1.0, 0.0, 1.0])), structure_only=True).exact


def _limits(inner: str, exact: bool) -> str:
    if exact:
        return f"the formula is solved for {inner} in closed form"
    return f"the formula is solved for {inner} by isolating its roots in interval arithmetic"


