"""The published cases: from the terms of `open.json` to a model, and from its checks to figures of ours.

It reads, translates and looks figures up; it derives nothing and judges nothing (`test_published.py` does).
"""

from __future__ import annotations

import json
from collections.abc import Mapping
from decimal import Decimal
from fractions import Fraction
from functools import cache
from pathlib import Path
from typing import Any

Case = Mapping[str, Any]
Check = Mapping[str, Any]

#: Cases whose derivation needs what this version does not have, by the capability they wait for.
#: A case never waits because its number disagrees; `test_a_waiting_case_is_refused` holds it to that.
WAITING_CASES = {
    "o09-disc-line-picking": "inputs given by a joint density",
    "o22-triangle-density-24xy": "inputs given by a joint density",
}

#: Single checks that ask for a figure which this version does not give, by the capability they wait for.
WAITING_CHECKS = {
    ("o25-shared-exponential-3to2", "pdf[S,T]@1,2"): "joint density of fewer outputs than inputs",
    ("o43-student-from-normals", "moment-does-not-exist[T]@5"): "moments beyond the fourth",
}

#: Cases that take more than about twenty seconds, by the number that opens their name: run with `-m slow`.
SLOW = frozenset(
    {
        "o03", "o08", "o11", "o13", "o14", "o15", "o20", "o28", "o33", "o34", "o38", "o41",
    }
)  # fmt: skip

#: Cases of them that take so long, evidence included, that they are marked `long` as well and run by hand.
LONG = SLOW - {"o08", "o11", "o15", "o20", "o28", "o34"}

_PARAMETERS: dict[str, dict[str, str]] = {
    "normal": {"mean": "mean", "sd": "sd"},
    "uniform": {"low": "lower", "high": "upper"},
    "exponential": {"rate": "rate"},
    "chi_square": {"df": "degrees_of_freedom"},
    "weibull": {"shape": "shape", "scale": "scale"},
    "lognormal": {"mu_log": "log_mean", "sigma_log": "log_sd"},
    "cauchy": {"loc": "location", "scale": "scale"},
}


@cache
def cases() -> tuple[Case, ...]:
    return tuple(json.loads((Path(__file__).parent / "open.json").read_text(encoding="utf-8")))


def covered() -> tuple[Case, ...]:
    return tuple(case for case in cases() if case["id"] not in WAITING_CASES)


def distribution(family: str, params: Mapping[str, Any]) -> dict[str, Any]:
    """The distribution in the terms of the model format."""
    if family == "discrete":
        probabilities = [float(Fraction(text)) for text in params["probs"]]
        return {"categorical": {"values": list(params["values"]), "probabilities": probabilities}}
    names = _PARAMETERS[family]
    return {family: {names[key]: value for key, value in params.items() if key != "exact"}}


def dependence(terms: Mapping[str, Any]) -> list[dict[str, Any]]:
    kind = terms["type"]
    if kind == "independent":
        return []
    if kind == "joint-density":
        return [{"joint_density": {"density": terms["density"], "support": terms["support"]}}]
    measure, matrix = (
        ("pearson", terms["matrix"])
        if kind == "correlation"
        else ("normal_scores", terms["normal_score_correlation"])
    )
    rows = [list(row) for row in matrix]
    return [{"inputs": list(terms["order"]), "copula": {"gaussian": {measure: rows}}}]


def event(text: str) -> str:
    return text.replace("&", "and")


def readings(case: Case) -> dict[str, Any]:
    """What the results must state so that every check of the case finds its figure, with its error."""
    coverage: list[float] = []
    quantiles: list[float] = []
    probabilities: list[str] = []
    values: dict[str, list[float]] = {}
    for check in case["checks"]:
        quantity = check["quantity"]
        if quantity == "interval":
            coverage.append(check["p"])
        elif quantity == "quantile":
            quantiles.append(check["p"])
        elif quantity == "probability":
            probabilities.append(event(check["event"]))
        elif quantity in ("cdf", "sf", "pdf") and isinstance(check["output"], str):
            values.setdefault(check["output"], []).append(float(check["at"]))
    found: dict[str, Any] = {}
    if coverage:
        found["coverage"] = sorted(set(coverage))
    if quantiles:
        found["quantiles"] = sorted(set(quantiles))
    if probabilities:
        found["probabilities"] = probabilities
    if values:
        found["values"] = {name: sorted(set(points)) for name, points in values.items()}
    return found


def model(case: Case) -> dict[str, Any]:
    """The case as a mapping that `outspread.derive` takes in place of a file."""
    joint = case["dependence"]["type"] == "joint-density"
    mapping: dict[str, Any] = {
        "outspread": 1,
        "title": case["title"],
        "inputs": {
            item["name"]: {} if joint else {"distribution": distribution(item["family"], item["params"])}
            for item in case["inputs"]
        },
        "transformation": {
            "outputs": {name: {"formula": text} for name, text in case["transformation"].items()}
        },
    }
    entries = dependence(case["dependence"])
    if joint:
        entries[0] = {"inputs": [item["name"] for item in case["inputs"]], **entries[0]}
    if entries:
        mapping["dependence"] = entries
    wanted = readings(case)
    if wanted:
        mapping["readings"] = wanted
    return mapping


def label(check: Check) -> str:
    """A short name of the check, such as `cdf[Y]@1.3` or `interval-shortest[Y]@0.95`."""
    output = check.get("output", check.get("event"))
    outputs = ",".join(output) if isinstance(output, list) else str(output)
    at = check.get("at", check.get("p", check.get("order")))
    where = ",".join(map(str, at)) if isinstance(at, list) else at
    which = f"-{check['which']}" if "which" in check else ""
    return f"{check['quantity']}{which}[{outputs}]" + ("" if where is None else f"@{where}")


def source(check: Check) -> str:
    """Where the published figure comes from, and whether it was looked up or recalled."""
    return f"{check['source']} ({check['kind']})"


def decimals(figure: Any) -> tuple[Decimal, ...]:
    """A figure or pair of figures of `open.json` as exact decimals (a float stands for its shortest text)."""
    parts = figure if isinstance(figure, list) else [figure]
    return tuple(Decimal(part) if isinstance(part, str) else Decimal(repr(part)) for part in parts)
