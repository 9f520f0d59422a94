"""From a model file to the files that are left beside it, and the sentences that say what came out.

It derives through `derivation`, writes whole files only, and turns every fault of one model into text, so
that it does not stop the others. It prints nothing: `command` does.
"""

from __future__ import annotations

import math
import signal
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

from outspread.errors import DerivationError, OutspreadError, ReportError

if TYPE_CHECKING:
    from outspread.derivation import Derivation
    from outspread.findings.results import Finding, OutputResults, Results

MISSING_LIBRARY = 5

@dataclass(frozen=True)
class Order:
    """What is wanted for one model: `out` is a folder or None for the model's own; `kinds` of KINDS."""

    file: str
    out: str | None
    kinds: tuple[str, ...]


@dataclass(frozen=True)
class Outcome:
    """What one model came to: texts for the two streams and an exit status."""

    said: str
    complained: str
    status: int


def targets(order: Order) -> dict[str, Path]:
    """The files that an order writes, by kind."""
    source = Path(order.file)
    folder = Path(order.out) if order.out else source.parent
    name = source.name.removesuffix(".yaml").removesuffix(".yml")
    suffixes = {"json": ".results.json", "html": ".html", "pdf": ".pdf"}
    return {
        kind: folder / f"{name}{suffixes[kind]}" for kind in ("json", "html", "pdf") if kind in order.kinds
    }


def deliver(order: Order, progress: Callable[[str], None] | None = None) -> Outcome:
    """Derives one model and writes what is wanted of it."""
    from outspread.derivation import derive_model
    from outspread.reading.build import read_model

    try:
        derivation = derive_model(read_model(order.file), progress)
        return _write(order, derivation, progress or (lambda words: None))
    except DerivationError as error:
        output = f"{error.output}: " if error.output else ""
        return Outcome("", f"{order.file}: {output}{error}\n", error.exit_status)
    except OutspreadError as error:
        return Outcome("", f"{error}\n", error.exit_status)
    except OSError as error:
        where = error.filename or order.file
        return Outcome("", f"{where}: it cannot be written: {error.strerror or error}\n", 2)


def deliver_all(orders: Sequence[Order], workers: int) -> Iterator[Outcome]:
    """The outcomes in the order of the orders, `workers` models at a time, each in a process of its own."""
    from concurrent.futures import ProcessPoolExecutor
    from multiprocessing import get_context

    pool = ProcessPoolExecutor(workers, mp_context=get_context("spawn"), initializer=_stop_quietly)
    try:
        yield from pool.map(deliver, orders)
    finally:
        pool.shutdown(cancel_futures=True)


def _stop_quietly() -> None:
    """Ctrl-C reaches the workers too: they clean up and leave, and the first process says so."""

    def leave(number: int, frame: object) -> None:
        raise SystemExit(130)

    signal.signal(signal.SIGINT, leave)


def _write(order: Order, derivation: Derivation, progress: Callable[[str], None]) -> Outcome:
    from outspread.findings.writing import encode, write_bytes

    paths = targets(order)
    content = encode(derivation.results)
    written: list[str] = []
    complaints = ""
    if "json" in paths:
        write_bytes(paths["json"], content)
        written.append(str(paths["json"]))
    if "html" in paths or "pdf" in paths:
        progress("writing the report")
        from outspread.reporting.data import ReportData
        from outspread.reporting.html import render_html

        data = ReportData(
            derivation.model,
            derivation.plan,
            derivation.outputs,
            derivation.joint,
            derivation.results,
            content,
            derivation.input_laws,
        )
        html = render_html(data)
        if "html" in paths:
            write_bytes(paths["html"], html.encode("utf-8"))
            written.append(str(paths["html"]))
        if "pdf" in paths:
            try:
                pdf = _pdf(html, data)
            except ReportError as error:
                complaints = f"{paths['pdf']}: {error}\n"
            else:
                write_bytes(paths["pdf"], pdf)
                written.append(str(paths["pdf"]))
    said = "\n".join([*summary(derivation.results), f"  wrote {', '.join(written)}"]) + "\n"
    status = status_of(derivation.results)
    disagreements = [row for row in derivation.results.evidence if not row.agrees]
    for row in disagreements:
        note = f" ({row.note})" if row.note else ""
        complaints += (
            f"{order.file}: {row.output}: the derivation disagrees with {row.against}: the difference"
            f" is {row.largest_difference:.3g} where {row.allowed:.3g} is allowed{note}\n"
        )
    if complaints and status in (0, 1) and not disagreements:
        status = MISSING_LIBRARY
    return Outcome(said, complaints, status)


def _pdf(html: str, data: object) -> bytes:
    from outspread.reporting.data import ReportData
    from outspread.reporting.pdf import render_pdf

    assert isinstance(data, ReportData)
    return render_pdf(html, data)


def status_of(results: Results) -> int:
    """0 all requirements met; 1 one is not, or undecided; 3 the evidence disagrees."""
    if not all(row.agrees for row in results.evidence):
        return 3
    return 0 if all(row.verdict == "met" for row in results.requirements) else 1


def summary(results: Results) -> list[str]:
    """What came out: each output's figures, each requirement in one sentence, the evidence."""
    lines = [results.title]
    lines += [f"  {_figures(output)}" for output in results.outputs]
    for row in results.requirements:
        unit = f" {row.unit}" if row.unit and row.unit != "1" else ""
        lines.append(f"  {row.verdict}: {row.name}: {row.statement}; it is {_shown(row.value)}{unit}")
    good = sum(row.agrees for row in results.evidence)
    lines.append(f"  evidence: {good} of {len(results.evidence)} comparisons agree")
    return lines


def _figures(output: OutputResults) -> str:
    unit = f" {output.unit}" if output.unit and output.unit != "1" else ""
    text = f"{output.name}: mean {_shown(output.mean)}{unit}, standard deviation "
    text += f"{_shown(output.standard_deviation)}{unit}"
    row = output.headline_interval()
    if row is not None:
        interval = f"[{_shown(row.lower)}, {_shown(row.upper)}]{unit}"
        text += f", {100 * row.probability:g} % interval {interval}"
    return text


def _shown(finding: Finding) -> str:
    """Six digits at most for reading, the error beside it where it would touch them; the file has it all."""
    from outspread.findings.results import Absent
    from outspread.findings.writing import rounded

    if isinstance(finding, Absent):
        return f"none ({finding.because})"
    if not math.isfinite(finding.error):
        return "none (its error could not be bounded)"
    value, error = rounded(finding.value, finding.error)
    if error > 1e-6 * abs(value):
        return f"{value:.6g} ± {error:.1g}"
    return f"{value:.6g}"
