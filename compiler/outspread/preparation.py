"""The first stops of the road for one model: the laws of its inputs and its plan, before anything is derived.

Apart from `derivation`, so that checking and planning load none of what deriving needs.
"""

from __future__ import annotations

from outspread.errors import Fault, LawError, ModelError
from outspread.laws.build import build_law
from outspread.laws.law import Law
from outspread.planning.choose import make_plan
from outspread.planning.plan import Plan
from outspread.reading.distributions import is_conditional
from outspread.reading.model import Model
from outspread.routes.closed_form.scored import recognise_with_scores


def plan_model(model: Model) -> tuple[Plan, dict[str, Law]]:
    """The plan of a model, and the laws of those inputs that have one of their own.

    Raises ModelError where a parameter is out of range, DerivationError where no route leads through.
    """
    laws = build_laws(model)
    return make_plan(model, laws, recognise_with_scores), laws


def build_laws(model: Model) -> dict[str, Law]:
    """The law of each input whose distribution is given by numbers alone.

    Raises ModelError, with the place of the distribution, where parameters are out of range.
    """
    laws: dict[str, Law] = {}
    faults = []
    for described in model.inputs:
        distribution = described.distribution
        if distribution is None or is_conditional(distribution):
            continue
        try:
            laws[described.name] = build_law(distribution)
        except LawError as error:
            faults.append(Fault(distribution.place, error.message))
    if faults:
        raise ModelError(faults)
    return laws
