"""The numbered register of assumptions: those the model makes and those the compiler adds.

It words and orders them; whether an assumption is acceptable is for the engineer and the reviewer.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from itertools import combinations

from outspread.evidence.drawing import DRAWS
from outspread.evidence.judging import CONFIDENCE
from outspread.findings.results import Assumption
from outspread.laws.registry import FAMILIES
from outspread.planning.plan import Plan, PlanStep
from outspread.reading.distributions import parents
from outspread.reading.model import Dependence, Distribution, Input, Model
from outspread.routes.derived import DerivedOutput, SymbolicDensity

#: words that keep their capital inside a sentence: families called after people, and a letter
NAMES = frozenset({
    "Bernoulli", "Birnbaum–Saunders", "Burr", "Cauchy", "F", "Fréchet", "Gompertz", "Gumbel", "Hoyt",
    "Kumaraswamy", "Laplace", "Lomax", "Lévy", "Maxwell", "Nakagami", "Pareto", "Poisson", "Rayleigh",
    "Rice", "Student", "Weibull",
})  # fmt: skip
PAIRS_NAMED = 6  # more independent pairs than these are put into one sentence

Row = tuple[str, str, tuple[str, ...]]  # text, made_by, about


def register(model: Model, plan: Plan, outputs: Sequence[DerivedOutput]) -> tuple[Assumption, ...]:
    """All assumptions, the model's first, numbered A1, A2, …"""
    rows: list[Row] = [
        *_constants(model),
        *(_input(described) for described in model.inputs),
        *(_dependence(entry) for entry in model.dependence),
        *_conditional(model),
        *_truncations(model),
        *_independence(model),
        *_routes(plan, outputs),
        _evidence(model),
    ]
    return tuple(
        Assumption(f"A{number}", text, made_by, about)
        for number, (text, made_by, about) in enumerate(rows, start=1)
    )


def _listed(words: Sequence[str]) -> str:
    return words[0] if len(words) == 1 else f"{', '.join(words[:-1])} and {words[-1]}"


def _constants(model: Model) -> Iterable[Row]:
    for constant in model.constants:
        unit = f" {constant.unit}" if constant.unit and constant.unit != "1" else ""
        known = f"The constant {constant.name} is {constant.value:.10g}{unit}, without uncertainty"
        basis = (
            f": {constant.basis.rstrip('.')}." if constant.basis else "; the model states no basis for it."
        )
        yield known + basis, "model", (constant.name,)


def _family(key: str) -> str:
    """The family's title inside a sentence: "Weibull distribution", "normal distribution"."""
    if key not in FAMILIES:
        return f"{key.replace('_', ' ')} distribution"
    title = FAMILIES[key].title
    return title if title.split()[0] in NAMES else title[0].lower() + title[1:]


def _input(described: Input) -> Row:
    if described.distribution is None:
        what = f"{described.name} is described jointly with other inputs"
    else:
        family = _family(described.distribution.family)
        article = "an" if family[0] in "aeiou" else "a"
        what = f"{described.name} follows {article} {family}"
        if described.distribution.family in ("density", "table", "histogram", "sample", "observations"):
            what = f"{described.name} follows the distribution given by its {described.distribution.family}"
    if described.basis:
        return f"{what}: {described.basis.rstrip('.')}.", "model", (described.name,)
    return (
        f"{what}. The model states no basis for it, so that this is an assumption by itself.",
        "model",
        (described.name,),
    )


def _dependence(entry: Dependence) -> Row:
    together = _listed(entry.inputs)
    if entry.kind == "joint_density":
        return f"{together} have the joint density that the model states.", "model", entry.inputs
    if entry.kind == "joint_sample":
        text = f"{together} follow the rows of the model's sample, each with the same probability."
        return text, "model", entry.inputs
    family = {"gaussian": "Gaussian", "student_t": "Student t"}.get(entry.family, entry.family.capitalize())
    measure = {
        "pearson": "Pearson correlation",
        "spearman": "Spearman rank correlation",
        "kendall": "Kendall rank correlation",
        "normal_scores": "correlation of the copula",
        "parameter": "parameter of the copula",
    }.get(entry.measure, entry.measure)
    size = len(entry.inputs)
    if size == 2:
        strength = f"{measure} {entry.matrix[0][1]:.10g}"
    else:
        strength = f"the {measure} matrix that the model states"
    return f"{together} depend on each other by a {family} copula with {strength}.", "model", entry.inputs


def _conditional(model: Model) -> Iterable[Row]:
    for described in model.inputs:
        given = parents(described.distribution) if described.distribution else ()
        if given:
            text = (
                f"The distribution of {described.name} is conditional on {_listed(given)};"
                " given these, it is independent of all else."
            )
            yield text, "model", (described.name, *given)


def _truncations(model: Model) -> Iterable[Row]:
    for described in model.inputs:
        cut: Distribution | None = described.distribution
        if cut is None or (cut.lower is None and cut.upper is None):
            continue
        unit = f" {described.unit}" if described.unit and described.unit != "1" else ""
        if cut.lower is None:
            limits = f"above {cut.upper:.10g}{unit}"
        elif cut.upper is None:
            limits = f"below {cut.lower:.10g}{unit}"
        else:
            limits = f"outside {cut.lower:.10g} to {cut.upper:.10g}{unit}"
        text = (
            f"{described.name} never lies {limits}: its distribution is cut there, and what remains is"
            " scaled up to probability 1."
        )
        yield text, "model", (described.name,)


def _independence(model: Model) -> Iterable[Row]:
    """Pairs of inputs that no entry joins and of which neither is conditional on the other."""
    joined = {frozenset(pair) for entry in model.dependence for pair in combinations(entry.inputs, 2)}
    for described in model.inputs:
        for parent in parents(described.distribution) if described.distribution else ():
            joined.add(frozenset((described.name, parent)))
    everyone = [described.name for described in model.inputs]
    pairs = [pair for pair in combinations(everyone, 2) if frozenset(pair) not in joined]
    if not pairs:
        return
    if len(pairs) > PAIRS_NAMED:
        exceptions = len(everyone) * (len(everyone) - 1) // 2 - len(pairs)
        but = ", those pairs apart whose dependence is stated" if exceptions else ""
        text = f"All {len(everyone)} inputs are independent of each other{but}: the model says nothing else."
        yield text, "compiler", tuple(everyone)
        return
    for first, second in pairs:
        text = f"{first} and {second} are independent: the model says nothing else."
        yield text, "compiler", (first, second)


def _leaves(step: PlanStep) -> Iterable[PlanStep]:
    yield step
    for part in step.substeps:
        yield from _leaves(part)


def _routes(plan: Plan, outputs: Sequence[DerivedOutput]) -> Iterable[Row]:
    for derived in outputs:
        if isinstance(derived.symbolic, SymbolicDensity) and derived.symbolic.name:
            source = f" ({derived.symbolic.source})" if derived.symbolic.source else ""
            text = f"The law of {derived.output} is taken to be the {derived.symbolic.name}{source}"
            checked = "; it was confirmed against the numeric law." if derived.numeric is not None else "."
            yield text + checked, "compiler", (derived.output,)
        sampled = [step for tree in plan.steps if tree.output == derived.output for step in _leaves(tree)]
        if derived.route == "sampling" or any(step.route == "sampling" for step in sampled):
            text = (
                f"The law of {derived.output} is estimated by sampling; its stated errors hold with a"
                " probability, not with certainty."
            )
            yield text, "compiler", (derived.output,)
        for text in derived.assumptions:
            yield text, "compiler", (derived.output,)


def _evidence(model: Model) -> Row:
    text = (
        f"The second derivation by {DRAWS:,} draws is compared in a band in which a right answer stays with"
        f" a probability of at least {100 * CONFIDENCE:g} %; agreement does not show that the model itself is"
        " right."
    )
    return text, "compiler", tuple(output.name for output in model.outputs)
