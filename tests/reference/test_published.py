"""Every published case: is the true error within the stated one, and within what the route promises?

The figures, their sources and the independent values of 20 to 28 digits stand in `open.json`; each check
prints its source, and says `from memory` where the printed figure was recalled and not looked up.
"""

from __future__ import annotations

import math
import sys
from collections.abc import Iterator
from dataclasses import dataclass
from decimal import Decimal
from functools import lru_cache
from typing import Any

import published_cases as published
import pytest

import outspread
from outspread.errors import OutspreadError
from outspread.findings.results import Absent, Figure, Finding, OutputResults, Results

#: What a route promises, as a relative error: 10 correct digits where nothing is sampled.
EXACT_ROUTES = frozenset({"closed_form", "change_of_variables", "region_integral", "jacobian", "enumeration"})
TEN_DIGITS = Decimal("1e-10")
#: Moments are promised to the digits asked for (8 unless the model says otherwise).
EIGHT_DIGITS = Decimal("1e-8")
TEN_DIGIT_QUANTITIES = frozenset({"cdf", "sf", "pdf", "quantile"})


@lru_cache(maxsize=2)
def derivation(identifier: str) -> Any:
    case = next(case for case in published.cases() if case["id"] == identifier)
    return outspread.derive(published.model(case))


@dataclass(frozen=True)
class Comparison:
    """One number of ours against the independent and the printed one."""

    label: str
    source: str
    ours: Decimal
    stated: Decimal
    precise: Decimal
    printed: Decimal
    tolerance: Decimal
    promise: Decimal | None
    slack: Decimal = Decimal(0)  # what rounding the argument to a double moves the figure by
    unavoidable: Decimal = Decimal(0)  # what rounding in the formula's terms moves it by

    def faults(self) -> Iterator[str]:
        off = abs(self.ours - self.precise)
        ours = f"ours {self.ours:.17g}, stated error {self.stated:.2e}"
        if off > self.stated + self.slack:
            yield f"{self.label}: {ours}; true error {off:.2e} against {self.precise:.17g} [{self.source}]"
        if self.promise is not None and off > self.promise + self.slack:
            yield f"{self.label}: {ours}; true error {off:.2e} exceeds the promised {self.promise:.2e}"
        if self.promise is not None and self.stated > self.promise + self.unavoidable:
            yield f"{self.label}: {ours}; the route promises {self.promise:.2e}"
        if abs(self.ours - self.printed) > self.tolerance + self.stated + self.slack:
            yield f"{self.label}: {ours}; printed {self.printed:.17g} +- {self.tolerance:.1e} [{self.source}]"


def figure(finding: Finding, label: str) -> Figure:
    assert isinstance(finding, Figure), f"{label}: said not to exist: {finding.because}"
    return finding


def output_of(results: Results, name: str) -> OutputResults:
    return next(output for output in results.outputs if output.name == name)


def absent_as_published(output: OutputResults, check: published.Check) -> Iterator[str]:
    """A moment that does not exist is said not to exist, with a reason; so are those built upon it."""
    moments = (output.mean, output.standard_deviation, output.skewness, output.kurtosis)
    for order, finding in enumerate(moments, 1):
        if order >= check["order"] and not (isinstance(finding, Absent) and finding.because):
            label = published.label(check)
            yield f"{label}: moment {order} is stated as {finding} [{published.source(check)}]"


def row_value(output: OutputResults, check: published.Check) -> Finding:
    row = next(row for row in output.values if row.at == float(check["at"]))
    return {"cdf": row.cdf, "sf": row.ccdf, "pdf": row.pdf}[check["quantity"]]


def probability(results: Results, check: published.Check) -> Finding:
    text = published.event(check["event"])
    for output in results.outputs:
        for stated, finding in output.probabilities:
            if stated == text:
                return finding
    return dict(results.joint.events)[text]


def correlation(results: Results, pair: list[str]) -> Finding:
    return next(finding for a, b, finding in results.joint.correlation if {a, b} == set(pair))


def interval(output: OutputResults, check: published.Check, which: str) -> tuple[Finding, Finding]:
    found = next(
        item for item in output.coverage if item.kind == which and item.probability == check["p"]
    )
    return found.lower, found.upper


def joint_density(derived: Any, check: published.Check) -> Figure:
    point = dict(zip(check["output"], map(float, check["at"]), strict=True))
    value = float(derived.joint_pdf(point))
    law = next(law for law in derived.joint if set(law.outputs) == set(point))
    return Figure(value, law.relative_error * abs(value))


def findings(derived: Any, check: published.Check) -> tuple[Finding, ...]:
    """Our figures for the check: two for an interval, else one."""
    results: Results = derived.results
    quantity, name = check["quantity"], check.get("output")
    if quantity == "probability":
        return (probability(results, check),)
    if quantity == "correlation":
        return (correlation(results, name),)
    if isinstance(name, list):
        return (joint_density(derived, check),)
    output = output_of(results, name)
    if quantity == "interval":
        return interval(output, check, check["which"])
    if quantity == "quantile":
        return (dict(output.quantiles)[check["p"]],)
    if quantity in ("cdf", "sf", "pdf"):
        return (row_value(output, check),)
    moment = {
        "mean": output.mean,
        "sd": output.standard_deviation,
        "skewness": output.skewness,
        "kurtosis": output.kurtosis,
    }
    return (moment[quantity],)


def slope(derived: Any, check: published.Check) -> float:
    """How fast the figure changes with its argument, by ours: it only ever multiplies rounding errors."""
    at = check.get("at")
    if not isinstance(at, int | float) or check["quantity"] not in ("cdf", "sf", "pdf"):
        return 0.0
    law = derived[check["output"]]
    if check["quantity"] != "pdf":
        return float(law.pdf(at))
    width = 500 * math.ulp(at)
    return abs(float(law.pdf(at + width)) - float(law.pdf(at - width))) / (2 * width)


def rounding(derived: Any, check: published.Check) -> Decimal:
    """How far the figure moves because its decimal argument is not a double (near a fold: visibly)."""
    at = check.get("at")
    if not isinstance(at, float):
        return Decimal(0)
    off = abs(Decimal(at) - Decimal(repr(at)))
    rate = slope(derived, check)
    return off * Decimal(rate) if off and math.isfinite(rate) else Decimal(0)


def unavoidable(derived: Any, check: published.Check) -> Decimal:
    """What 16 roundings (2^-52 relative) of the argument move the figure by: the condition of the problem.

    A figure that rounding alone moves by more than ten digits allow cannot be stated to ten digits; the
    true error is held to the promise all the same.
    """
    at = check.get("at")
    if not isinstance(at, int | float):
        return Decimal(0)
    rate = slope(derived, check)
    return Decimal(16 * sys.float_info.epsilon * abs(at) * rate) if math.isfinite(rate) else Decimal(0)


def promise(derived: Any, check: published.Check, precise: Decimal) -> Decimal | None:
    """The largest error that the route allows itself; None where sampling only states its error."""
    quantity, name = check["quantity"], check.get("output")
    if quantity == "pdf" and isinstance(name, list):
        return TEN_DIGITS * (abs(precise) or Decimal(1))
    if quantity in ("correlation", "probability"):
        return None
    if output_of(derived.results, name).route not in EXACT_ROUTES:
        return None
    relative = TEN_DIGITS if quantity in TEN_DIGIT_QUANTITIES else EIGHT_DIGITS
    return relative * (abs(precise) or Decimal(1))


def comparisons(derived: Any, check: published.Check) -> Iterator[Comparison]:
    label, source = published.label(check), published.source(check)
    precise, printed = published.decimals(check["precise"]), published.decimals(check["value"])
    tolerance = Decimal(repr(check["tolerance"]))
    against_symmetric = check.get("note", "").startswith("precise entry is the symmetric interval")
    for index, finding in enumerate(findings(derived, check)):
        stated = figure(finding, label)
        exact = precise[index]
        if against_symmetric:
            symmetric = interval(output_of(derived.results, check["output"]), check, "symmetric")[index]
            twin = figure(symmetric, label)
            ours, error = Decimal(twin.value), Decimal(twin.error)
            name = f"{label} (symmetric)"
            yield Comparison(name, source, ours, error, exact, printed[index], tolerance, None)
            exact = Decimal(stated.value)
        yield Comparison(
            label, source, Decimal(stated.value), Decimal(stated.error), exact, printed[index], tolerance,
            promise(derived, check, exact), rounding(derived, check), unavoidable(derived, check),
        )  # fmt: skip


def law_faults(derived: Any, check: published.Check) -> Iterator[str]:
    """The law's own functions agree with the published figure within the error that the law states."""
    quantity = check["quantity"]
    if quantity not in ("cdf", "sf") or not isinstance(check["output"], str):
        return
    law = derived[check["output"]]
    ours = Decimal(float((law.cdf if quantity == "cdf" else law.ccdf)(float(check["at"]))))
    (precise,) = published.decimals(check["precise"])
    off = abs(ours - precise)
    allowed = Decimal(float(law.error)) + rounding(derived, check)
    if off > allowed:
        yield f"{published.label(check)}: law says {ours:.17g}; true error {off:.2e} > stated {allowed:.2e}"


def marks(number: str) -> list[pytest.MarkDecorator]:
    """The marks of a case by the number that opens its name."""
    found = [pytest.mark.slow] if number in published.SLOW else []
    return [*found, pytest.mark.long] if number in published.LONG else found


COVERED = [
    pytest.param(
        case,
        id=case["id"],
        marks=marks(case["id"].split("-")[0]),
    )
    for case in published.covered()
]


@pytest.mark.parametrize("case", COVERED)
def test_published_case(case: published.Case) -> None:
    """Every check of the case holds: within the stated error, the promised one and the printed tolerance."""
    derived = derivation(case["id"])
    faults: list[str] = []
    for check in case["checks"]:
        label = published.label(check)
        if (case["id"], label) in published.WAITING_CHECKS:
            continue
        print(f"{case['id']} {label}: {published.source(check)}")
        if check["quantity"] == "moment-does-not-exist":
            faults += absent_as_published(output_of(derived.results, check["output"]), check)
            continue
        for comparison in comparisons(derived, check):
            faults += comparison.faults()
        faults += law_faults(derived, check)
    assert not faults, f"{case['id']}:\n" + "\n".join(faults)


@pytest.mark.parametrize("identifier", published.WAITING_CASES)
def test_a_waiting_case_is_refused(identifier: str) -> None:
    """A case on the waiting list is refused in words, so the list shrinks when the capability arrives."""
    case = next(case for case in published.cases() if case["id"] == identifier)
    with pytest.raises(OutspreadError) as refusal:
        outspread.derive(published.model(case))
    assert refusal.value.exit_status == 3
    assert "joint density" in str(refusal.value)


def test_waiting_checks_exist() -> None:
    """Every name on the waiting lists is a name of the reference file: no case is lost by a typing error."""
    known = {(case["id"], published.label(check)) for case in published.cases() for check in case["checks"]}
    assert set(published.WAITING_CHECKS) <= known
    assert set(published.WAITING_CASES) <= {case["id"] for case in published.cases()}
    assert len(published.cases()) == 43
    assert sum(len(case["checks"]) for case in published.cases()) == 177
