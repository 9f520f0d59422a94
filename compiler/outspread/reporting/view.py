"""Gathers everything that the report's template shows, section by section, ready to be placed.

Formulas and numbers arrive here as finished pieces of HTML; the template adds words of its own only as
headings and column heads.
"""

from __future__ import annotations

import base64
import hashlib
import platform
from collections.abc import Mapping
from importlib.metadata import PackageNotFoundError, version
from typing import Any

from markupsafe import Markup

from outspread.findings.results import Evidence, Figure, OutputResults
from outspread.findings.writing import scale_of
from outspread.planning.plan import PlanStep
from outspread.reading.model import Output
from outspread.reporting import curves, plots, setup, tables, words
from outspread.reporting.data import ReportData
from outspread.reporting.latex import LatexError, read
from outspread.reporting.numbers import exact, grouped, rounded
from outspread.reporting.parts import Symbol
from outspread.reporting.setup import Numbering, symbol
from outspread.reporting.typeset import coded, display, sentence
from outspread.routes.derived import DerivedOutput, JointLaw, Statement, SymbolicDensity

FEWEST_POINTS = 20  # a comparison at fewer points is a row of the table, not a figure
_LIBRARIES = ("numpy", "scipy", "sympy")


def view(report: ReportData) -> dict[str, Any]:
    """The template's variables; formulas are numbered in the order of the page."""
    numbering = Numbering()
    subjects = _subjects(report)
    return {
        "title": report.model.title or report.results.title,
        "purpose": report.model.purpose,
        "record": _record(report),
        "answer": words.answer(report.results),
        "verdicts": [_verdict(verdict) for verdict in report.results.requirements],
        "setup": _setup(report, numbering),
        "plan": [_plan(step) for step in report.plan.steps],
        "joint_plan": [_plan(step) for step in report.plan.joint],
        "joint_derivations": [_joint_derivation(report, joint, numbering) for joint in report.joint],
        "derivations": [_derivation(report, output, numbering) for output in report.outputs],
        "results": [_output(report, output, subjects.get(output.name)) for output in report.results.outputs],
        "joint": _joint(report, subjects),
        "evidence": _evidence(report, subjects),
        "drivers": _drivers(report),
        "assumptions": [
            {"id": item.id, "text": coded(item.text), "made_by": item.made_by, "about": item.about}
            for item in report.results.assumptions
        ],
        "cautions": words.cautions(report.model, report.results),
        "safety": report.model.safety,
        "reproduce": _reproduce(report),
        "files": _files(report),
    }


def _subjects(report: ReportData) -> dict[str, plots.Subject]:
    """What is drawn of each output whose law is at hand."""
    laws = {derived.output: derived.law for derived in report.outputs}
    return {
        output.name: plots.Subject(
            laws[output.name],
            output,
            curves.limits(report.model, output.name),
            curves.reach(laws[output.name]),
        )
        for output in report.results.outputs
        if output.name in laws
    }


def _record(report: ReportData) -> list[tuple[str, str]]:
    """The title block's fields, the usual three first."""
    given = dict(report.model.record)
    fields = [(key, given.pop(key, "")) for key in ("number", "revision", "status")]
    fields += [(key.replace("_", " "), str(value)) for key, value in given.items()]
    return [(key, str(value)) for key, value in fields]


def _verdict(verdict: Any) -> dict[str, Any]:
    return {
        "name": verdict.name,
        "statement": verdict.statement,
        "state": verdict.verdict,
        "found": tables.cell(verdict.value),
        "unit": tables.unit(verdict.unit),
        "required": words.required(verdict),
        "reason": words.verdict_reason(verdict),
    }


def _setup(report: ReportData, numbering: Numbering) -> dict[str, Any]:
    model = report.model
    return {
        "inputs": [setup.input_row(given, report.input_laws.get(given.name)) for given in model.inputs],
        "densities": setup.densities(model, report.input_laws, numbering),
        "dependence": [words.dependence(entry) for entry in model.dependence],
        "matrices": [found for entry in model.dependence if (found := setup.matrix(entry)) is not None],
        "constants": [
            {
                "symbol": setup.own_symbol(constant.name, constant.symbol),
                "name": constant.name,
                "value": exact(constant.value),
                "unit": tables.unit(constant.unit),
                "description": constant.description,
                "basis": constant.basis,
            }
            for constant in model.constants
        ],
        "formulas": setup.formulas(model, numbering),
    }


def _plan(step: PlanStep) -> dict[str, Any]:
    return {
        "output": step.output,
        "derives": sentence(step.derives),
        "route": words.route(step.route),
        "reason": sentence(step.reason),
        "inputs": step.inputs,
        "inner": step.inner,
        "outer": step.outer,
        "ruled_out": [(words.route(out.route), sentence(out.reason)) for out in step.ruled_out],
        "details": [(key, sentence(value)) for key, value in step.details],
        "substeps": [_plan(inner) for inner in step.substeps],
    }


def _stated(report: ReportData, name: str) -> Output | None:
    return next((output for output in report.model.outputs if output.name == name), None)


def _symbol(report: ReportData, name: str) -> str:
    stated = _stated(report, name)
    return symbol(name, stated.symbol if stated is not None else "")


def _statements(statements: tuple[Statement, ...], numbering: Numbering) -> list[tuple[Markup, Markup]]:
    return [
        (
            sentence(statement.text),
            display(statement.latex, numbering.next()) if statement.latex.strip() else Markup(""),
        )
        for statement in statements
    ]


def _derivation(report: ReportData, derived: DerivedOutput, numbering: Numbering) -> dict[str, Any]:
    statements = _statements(derived.mathematics, numbering)
    symbolic = None
    if isinstance(derived.symbolic, SymbolicDensity):
        latex = derived.symbolic.latex
        if not _is_equation(latex):
            latex = rf"f_{{{_symbol(report, derived.output)}}}(y)={latex}"
        symbolic = {
            "name": derived.symbolic.name,
            "source": derived.symbolic.source,
            "formula": display(latex, numbering.next()),
        }
    return {
        "name": derived.output,
        "route": words.route(derived.route),
        "statements": statements,
        "symbolic": symbolic,
        "joint": any(derived.output in joint.outputs for joint in report.joint),
        "notes": [sentence(note) for note in derived.notes],
        "evaluations": f"{derived.evaluations:,}".replace(",", "\N{NARROW NO-BREAK SPACE}"),
        "has_evaluations": derived.evaluations > 0,
    }


def _is_equation(latex: str) -> bool:
    """Whether the formula says what it is the density of, rather than being its right-hand side only."""
    try:
        lines = read(latex)
    except LatexError:
        return True
    return any(isinstance(part, Symbol) and part.text == "=" for line in lines for part in line.parts)


def _joint_derivation(report: ReportData, joint: JointLaw, numbering: Numbering) -> dict[str, Any]:
    return {
        "names": joint.outputs,
        "branches": words.count(joint.branches),
        "several": joint.branches != 1,
        "statements": _statements(joint.mathematics, numbering),
    }


def _output(report: ReportData, output: OutputResults, subject: plots.Subject | None) -> dict[str, Any]:
    atoms, more = tables.atoms(output)
    stated = _stated(report, output.name)
    return {
        "name": output.name,
        "symbol": setup.own_symbol(output.name, stated.symbol if stated is not None else ""),
        "description": stated.description if stated is not None else "",
        "unit": tables.unit(output.unit),
        "density_unit": f"1/{tables.unit(output.unit)}" if tables.unit(output.unit) else "",
        "figures": tables.figures(output),
        "quantiles": [
            (grouped(exact(p)), tables.cell(finding, scale_of(output))) for p, finding in output.quantiles
        ],
        "intervals": tables.intervals(output.coverage, scale_of(output)),
        "at_points": [
            (grouped(exact(row.at)), tables.cell(row.pdf), tables.cell(row.cdf), tables.cell(row.ccdf))
            for row in output.values
        ],
        "discrete": subject is not None and subject.law.continuous_mass == 0.0,
        "probabilities": [(text, tables.cell(finding)) for text, finding in output.probabilities],
        "atoms": atoms,
        "more_atoms": more,
        "largest_error": grouped(rounded(output.largest_error, 1, upwards=True)),
        "shaded": exact(shaded[0]) if (shaded := tables.central(output)) else "",
        "limits": [(exact(limit.at), limit.requirement) for limit in (subject.limits if subject else ())],
        "pictures": {
            "law": plots.law_picture(subject) if subject else None,
            "tails": plots.tail_picture(subject) if subject else None,
        },
    }


def _joint(report: ReportData, subjects: Mapping[str, plots.Subject]) -> dict[str, Any]:
    joint = report.results.joint
    pictures = [
        (law.outputs, plots.joint_picture(law.pdf, *(subjects[name] for name in law.outputs)))
        for law in report.joint
        if len(law.outputs) == 2 and all(name in subjects for name in law.outputs)
    ]
    return {
        "correlation": [
            (first, second, tables.cell(finding, 1.0)) for first, second, finding in joint.correlation
        ],
        "events": [(text, tables.cell(finding)) for text, finding in joint.events],
        "pictures": pictures,
        "shown": bool(joint.correlation or joint.events or pictures),
    }


def _evidence(report: ReportData, subjects: Mapping[str, plots.Subject]) -> dict[str, Any]:
    return {
        "rows": [_evidence_row(evidence) for evidence in report.results.evidence],
        "agrees": all(evidence.agrees for evidence in report.results.evidence),
        "pictures": [
            (evidence, plots.evidence_picture(evidence, subjects[evidence.output]))
            for evidence in report.results.evidence
            if len(evidence.curve) >= FEWEST_POINTS and evidence.output in subjects
        ],
    }


def _evidence_row(evidence: Evidence) -> dict[str, Any]:
    return {
        "output": evidence.output,
        "against": evidence.against,
        "points": f"{evidence.points:,}".replace(",", "\N{NARROW NO-BREAK SPACE}"),
        "difference": grouped(rounded(evidence.largest_difference)),
        "allowed": grouped(rounded(evidence.allowed, upwards=True)),
        "confidence": exact(evidence.confidence) if evidence.confidence < 1 else "certain",
        "agrees": evidence.agrees,
        "note": evidence.note,
    }


def _drivers(report: ReportData) -> list[dict[str, Any]]:
    by_output: dict[tuple[str, str], list[dict[str, Any]]] = {}
    for driver in report.results.drivers:
        share = driver.share
        width = min(max(share.value, 0.0), 1.0) * 100 if isinstance(share, Figure) else 0.0
        row = {"input": driver.input, "cell": tables.cell(share, 1.0), "width": f"{width:.1f}", "size": width}
        by_output.setdefault((driver.output, driver.measure), []).append(row)
    return [
        {
            "output": output,
            "measure": measure,
            "rows": sorted(rows, key=lambda row: (-row["size"], row["input"])),
        }
        for (output, measure), rows in by_output.items()
    ]


def _version(package: str) -> str:
    try:
        return version(package)
    except PackageNotFoundError:
        return "not installed"


def _reproduce(report: ReportData) -> dict[str, Any]:
    results = report.results
    return {
        "file": results.file,
        "sha256": results.sha256,
        "data": sorted(_items(results.data)),
        "results_sha256": hashlib.sha256(report.results_json).hexdigest(),
        "version": results.version,
        "python": platform.python_version(),
        "libraries": ", ".join(f"{name} {_version(name)}" for name in _LIBRARIES),
        "seed": str(report.model.accuracy.seed),
        "digits": str(report.model.accuracy.digits),
    }


def _items(data: Mapping[str, str]) -> list[tuple[str, str]]:
    return list(data.items())


def results_name(report: ReportData) -> str:
    """The results file's name, which stands beside the model's."""
    stem = report.results.file
    for ending in (".yaml", ".yml"):
        stem = stem.removesuffix(ending)
    return f"{stem}.results.json"


def _files(report: ReportData) -> list[tuple[str, str]]:
    """(name, data URL) of what the report carries with it."""
    model = (report.results.file, data_url("application/yaml", report.model.source))
    return [model, (results_name(report), data_url("application/json", report.results_json))]


def data_url(kind: str, content: bytes) -> str:
    return f"data:{kind};base64,{base64.b64encode(content).decode('ascii')}"
