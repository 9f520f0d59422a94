"""The results file: JSON with fixed keys, each number to the digits that its stated error supports.

Errors are printed as 1, 2 or 5 times a power of ten, rounded up, and include the rounding of the value;
values end at the decimal place of their error. An error below 1e-10 of the scale of a figure is printed
as that: rounding noise, which differs between machines, is far below it and cannot show.
"""

from __future__ import annotations

import json
import math
import os
import tempfile
from collections.abc import Mapping
from decimal import ROUND_CEILING, ROUND_HALF_EVEN, Context, Decimal
from pathlib import Path

from outspread.findings.results import Absent, Figure, Finding, OutputResults, Results, Verdict

FLOOR = Decimal("1e-10")
FORMAT = 1
#: allowed differences below this are rounding and quadrature noise
ROUNDING = 1e-6
_WIDE = Context(prec=1000, Emin=-999999, Emax=999999)

Value = dict[str, object]


def rounded(value: float, error: float, scale: float = 0.0) -> tuple[float, float]:
    """The value and the error as they are printed; |printed value - true| <= printed error.

    `scale` is the size of the figures beside which this one is read: a mean of 1e-17 beside a standard
    deviation of 1 is printed as 0. Exact values (error 0) are left alone.
    """
    if error == 0.0:
        return value + 0.0, 0.0
    exact = Decimal(value)
    bound = max(Decimal(error), FLOOR * max(abs(exact), Decimal(scale)))
    stated = _ceiling(bound)
    while True:
        place = Decimal(1).scaleb(stated.adjusted())
        shown = exact.quantize(place, rounding=ROUND_HALF_EVEN, context=_WIDE)
        if bound + abs(shown - exact) <= stated:
            return float(shown) + 0.0, float(stated)
        stated = _ceiling(stated * Decimal("1.01"))


def _ceiling(bound: Decimal) -> Decimal:
    """The smallest of 1, 2, 5 times a power of ten that is not below `bound`."""
    power = Decimal(1).scaleb(bound.adjusted())
    return next(
        step * power for step in (Decimal(1), Decimal(2), Decimal(5), Decimal(10)) if step * power >= bound
    )


def number(value: float) -> float | str:
    """A plain number; infinities as text, because JSON has none."""
    return value + 0.0 if math.isfinite(value) else str(value)


def finding(found: Finding, scale: float = 0.0) -> Value:
    """{"value": v, "error": e}, or {"exists": false, "because": …}."""
    if isinstance(found, Absent):
        return {"exists": False, "because": found.because}
    if not (math.isfinite(found.value) and math.isfinite(found.error)):
        return {"exists": False, "because": "the figure or its error is not finite"}
    value, error = rounded(found.value, found.error, scale)
    return {"value": value, "error": error}


def _significant(value: float, digits: int = 3) -> float | str:
    """A size that is only compared, to a few digits."""
    if not math.isfinite(value):
        return str(value)
    return float(f"{value:.{digits - 1}e}")


def _difference(difference: float, allowed: float) -> Value:
    """A difference and what is allowed. Where what is allowed is only rounding, both are given to powers of
    ten, since the rounding itself differs from machine to machine."""
    if not (math.isfinite(difference) and 0.0 < allowed < ROUNDING):
        return {"largest_difference": _significant(difference), "allowed": _larger(allowed)}
    power = math.ceil(math.log10(allowed))
    place = Decimal(1).scaleb(power - 1)
    shown = Decimal(difference).quantize(place, rounding=ROUND_HALF_EVEN, context=_WIDE)
    return {"largest_difference": float(shown) + 0.0, "allowed": float(Decimal(1).scaleb(power))}


def _larger(value: float, digits: int = 3) -> float | str:
    """The same, never rounded down."""
    if not math.isfinite(value) or value == 0.0:
        return number(value)
    exact = Decimal(value)
    place = Decimal(1).scaleb(exact.adjusted() - digits + 1)
    return float(exact.quantize(place, rounding=ROUND_CEILING))


def scale_of(output: OutputResults) -> float:
    """The size against which positions of this output are read: its standard deviation, else its spread."""
    if isinstance(output.standard_deviation, Figure) and output.standard_deviation.value > 0.0:
        return output.standard_deviation.value
    for row in output.coverage:
        if isinstance(row.lower, Figure) and isinstance(row.upper, Figure):
            return row.upper.value - row.lower.value
    return 0.0


def as_document(results: Results) -> Value:
    """The results as nested dictionaries, keys in the order of the file."""
    return {
        "outspread": FORMAT,
        "version": results.version,
        "model": {
            "file": results.file,
            "title": results.title,
            "sha256": results.sha256,
            "data": dict(results.data),
        },
        "outputs": {output.name: _output(output) for output in results.outputs},
        "joint": {
            "correlation": [
                {"outputs": [a, b], **finding(found, 1.0)} for a, b, found in results.joint.correlation
            ],
            "events": [{"event": text, **finding(found)} for text, found in results.joint.events],
        },
        "requirements": [_requirement(row) for row in results.requirements],
        "evidence": [
            {
                "output": row.output,
                "against": row.against,
                "points": row.points,
                **_difference(row.largest_difference, row.allowed),
                "agrees": row.agrees,
            }
            for row in results.evidence
        ],
        "drivers": [
            {"output": row.output, "input": row.input, **finding(row.share, 1.0), "measure": row.measure}
            for row in results.drivers
        ],
        "assumptions": [
            {"id": row.id, "text": row.text, "made_by": row.made_by} for row in results.assumptions
        ],
    }


def _output(output: OutputResults) -> Value:
    scale = scale_of(output)
    return {
        "unit": output.unit,
        "route": output.route,
        "support": {"lower": finding(output.support[0], scale), "upper": finding(output.support[1], scale)},
        "atoms": {
            "count": output.atom_count,
            "mass": finding(output.atom_mass),
            "listed": [
                {"at": _position(row.at, scale), "probability": finding(row.probability)}
                for row in output.atoms
            ],
        },
        "mean": finding(output.mean, scale),
        "standard_deviation": finding(output.standard_deviation, scale),
        "skewness": finding(output.skewness, 1.0),
        "kurtosis": finding(output.kurtosis, 1.0),
        "median": finding(output.median, scale),
        "mode": finding(output.mode, scale),
        "quantiles": [{"probability": p, **finding(found, scale)} for p, found in output.quantiles],
        "coverage": [
            {
                "probability": row.probability,
                "kind": row.kind,
                "lower": finding(row.lower, scale),
                "upper": finding(row.upper, scale),
            }
            for row in output.coverage
        ],
        "values": [
            {
                "at": row.at,
                "pdf": finding(row.pdf),
                "cdf": finding(row.cdf),
                "ccdf": finding(row.ccdf),
            }
            for row in output.values
        ],
        "probabilities": [{"event": text, **finding(found)} for text, found in output.probabilities],
        "largest_error": _larger(output.largest_error, 1),
    }


def _position(at: float, scale: float) -> float:
    """Where an atom lies: to the last digit that two machines share."""
    return rounded(at, 1e-12 * max(abs(at), scale, 1e-300), scale)[0] if at != round(at) else at + 0.0


def _requirement(row: Verdict) -> Value:
    return {
        "name": row.name,
        "statement": row.statement,
        "verdict": row.verdict,
        "sense": row.sense,
        "limit": row.limit,
        **finding(row.value),
    }


def encode(results: Results) -> bytes:
    """The results file's bytes: UTF-8, one value a line, a newline at the end."""
    text = json.dumps(as_document(results), indent=2, ensure_ascii=False, allow_nan=False)
    return (text + "\n").encode("utf-8")


def write_bytes(path: Path, content: bytes) -> None:
    """Writes a file as a whole or not at all: a reader never sees half of it, and a fault leaves the old one.

    Raises OSError where the folder cannot be written to.
    """
    handle, name = tempfile.mkstemp(dir=path.parent, prefix=f".{path.name}.", suffix=".part")
    try:
        with os.fdopen(handle, "wb") as file:
            file.write(content)
            file.flush()
            os.fsync(file.fileno())
        os.chmod(name, 0o666 & ~_umask())
        os.replace(name, path)
    finally:
        Path(name).unlink(missing_ok=True)  # gone already where the replacement was reached


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask


def write_results(results: Results, path: Path) -> bytes:
    """Writes the results file and returns its bytes."""
    content = encode(results)
    write_bytes(path, content)
    return content


def read_results(path: str | os.PathLike[str]) -> Mapping[str, object]:
    """A results file as nested dictionaries, as `as_document` makes them.

    Raises ValueError, naming the file, where it is no results file of this format.
    """
    try:
        document = json.loads(Path(path).read_text(encoding="utf-8"))
    except (UnicodeDecodeError, json.JSONDecodeError) as error:
        raise ValueError(f"{path} is no results file: {error}") from None
    if not isinstance(document, dict) or document.get("outspread") != FORMAT or "outputs" not in document:
        raise ValueError(f"{path} is no results file of format {FORMAT}")
    return document
