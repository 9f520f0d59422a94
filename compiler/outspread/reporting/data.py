"""What a report is made from: the values of the stops before, gathered and never changed here."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from outspread.findings.results import Results
from outspread.laws.law import Law
from outspread.planning.plan import Plan
from outspread.reading.model import Model
from outspread.routes.derived import DerivedOutput, JointLaw


@dataclass(frozen=True)
class ReportData:
    """One derivation, complete. `input_laws` holds the law of each input that has one, in the input's
    unit; `results_json` is the results file as written, byte for byte, for the PDF's attachment."""

    model: Model
    plan: Plan
    outputs: tuple[DerivedOutput, ...]
    joint: tuple[JointLaw, ...]
    results: Results
    results_json: bytes
    input_laws: Mapping[str, Law] = field(default_factory=dict)
