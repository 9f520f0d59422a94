"""Recognition of closed forms under the dependence of the model, as the planner and the engine ask for it."""

from __future__ import annotations

from collections.abc import Mapping

from outspread.formula.tree import Node
from outspread.laws.law import Law
from outspread.numerics.slices.problem import Scores
from outspread.routes.closed_form.gaussian import NormalDependence
from outspread.routes.closed_form.named import ClosedForm
from outspread.routes.closed_form.recognition import recognise


def recognise_with_scores(
    expression: Node, laws: Mapping[str, Law], scores: Scores | None
) -> ClosedForm | None:
    """The closed form of the expression, or None; `laws` in the model's order."""
    return recognise(expression, laws, dependence_of(scores))


def dependence_of(scores: Scores | None) -> NormalDependence | None:
    if scores is None:
        return None
    return NormalDependence(scores.order, tuple(tuple(float(v) for v in row) for row in scores.matrix))
