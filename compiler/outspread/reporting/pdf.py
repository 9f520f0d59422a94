"""Turns the report's HTML into a PDF/A-3 with the model and the results attached; the same bytes every time.

Fonts are those that two of the dependencies carry; nothing else is read and nothing is requested.
"""

from __future__ import annotations

import contextlib
import hashlib
import io
import warnings
from collections.abc import Iterator
from datetime import UTC, datetime
from importlib.resources import files
from pathlib import Path
from typing import Any

from outspread.errors import ReportError
from outspread.reporting.data import ReportData
from outspread.reporting.view import data_url, results_name

#: attachments carry a date in PDF/A; ours says nothing about the clock
_NO_DATE = datetime(2000, 1, 1, tzinfo=UTC)
_MISSING = (
    "the PDF needs libraries of the system that are not installed ({}): on Debian or Ubuntu, "
    "`apt-get install -y --no-install-recommends libpangoft2-1.0-0 libharfbuzz-subset0` would put them "
    "there; the HTML report needs none of them"
)


def render_pdf(html: str, report: ReportData) -> bytes:
    """The PDF of the page that `render_html` made of this report. Raises ReportError (exit status 5)."""
    weasyprint = _weasyprint()
    fonts = _fonts()
    fetcher = _fetcher(weasyprint, frozenset(path.as_uri() for _, path, _ in fonts))
    page = _page_margins(report)
    with warnings.catch_warnings():  # the library leaves its own colour profile to the collector to close
        warnings.simplefilter("ignore", ResourceWarning)
        return _written(weasyprint, html, report, _font_faces(fonts) + page, fetcher)


def _written(weasyprint: Any, html: str, report: ReportData, css: str, fetcher: Any) -> bytes:
    style = weasyprint.CSS(string=css, url_fetcher=fetcher)
    document = weasyprint.HTML(string=html, url_fetcher=fetcher)
    return bytes(
        document.write_pdf(
            stylesheets=[style],
            pdf_variant="pdf/a-3a",
            pdf_identifier=hashlib.sha256(html.encode()).digest()[:16],
            attachments=_attachments(weasyprint, fetcher, report),
        )
    )


def _weasyprint() -> Any:
    """The library, or a ReportError that names what the system lacks."""
    said = io.StringIO()
    try:
        with contextlib.redirect_stdout(said):  # it prints advice there before it raises
            import weasyprint
    except OSError as error:
        raise ReportError(_MISSING.format(str(error).splitlines()[0])) from error
    return weasyprint


def _fonts() -> list[tuple[str, Path, str]]:
    """(family, file, weight) of the faces that matplotlib and ziamath carry."""
    ours = Path(str(files("matplotlib"))) / "mpl-data" / "fonts" / "ttf"
    mathematics = Path(str(files("ziamath"))) / "fonts" / "STIXTwoMath-Regular.ttf"
    return [
        ("DejaVu Sans", ours / "DejaVuSans.ttf", "normal"),
        ("DejaVu Sans", ours / "DejaVuSans-Bold.ttf", "bold"),
        ("DejaVu Sans Mono", ours / "DejaVuSansMono.ttf", "normal"),
        ("STIX Two Math", mathematics, "normal"),
    ]


def _font_faces(fonts: list[tuple[str, Path, str]]) -> str:
    faces = (
        f'@font-face {{ font-family: "{family}"; src: url("{path.as_uri()}"); font-weight: {weight}; }}'
        for family, path, weight in fonts
    )
    return "\n".join(faces)


def _page_margins(report: ReportData) -> str:
    """Running header and foot: document number and revision, title, page of pages."""
    record = report.model.record
    number, revision = record.get("number", ""), record.get("revision", "")
    label = ", revision ".join(part for part in (number, revision) if part) if number else ""
    status = record.get("status", "")
    font = "font: 7.5pt 'DejaVu Sans'; color: #4c5358"
    return f"""
@page {{
  @top-left {{ content: {_quoted(label or report.results.file)}; {font}; }}
  @top-right {{ content: {_quoted(_shortened(report.model.title))}; {font}; }}
  @bottom-left {{ content: {_quoted(str(status))}; {font}; }}
  @bottom-right {{ content: "page " counter(page) " of " counter(pages); {font}; }}
}}
"""


def _shortened(text: str, most: int = 90) -> str:
    return text if len(text) <= most else text[: most - 1].rstrip() + "…"


def _quoted(text: str) -> str:
    """A CSS string of any text: everything but letters, digits and spaces by its code point."""
    return '"' + "".join(c if c.isalnum() or c == " " else f"\\{ord(c):x} " for c in text) + '"'


def _fetcher(weasyprint: Any, allowed: frozenset[str]) -> Any:
    """Gives `data:` and the shipped fonts, and refuses all else before anything is opened."""
    from weasyprint.urls import URLFetcher

    def fetch(self: Any, url: str, headers: Any = None) -> Any:
        if not url.startswith("data:") and url not in allowed:
            raise ValueError(f"a report reads no address but its own: {url[:200]}")
        return URLFetcher.fetch(self, url, headers)

    # made at run time, because the library that holds the base class has no types
    return type("OwnAddressesOnly", (URLFetcher,), {"fetch": fetch})()


def _attachments(weasyprint: Any, fetcher: Any, report: ReportData) -> list[Any]:
    files_carried: Iterator[tuple[str, str, bytes, str, str]] = iter(
        [
            (report.results.file, "application/yaml", report.model.source, "The model", "Source"),
            (results_name(report), "application/json", report.results_json, "The results", "Data"),
            *(
                (name, "text/csv", content, "Data of the model", "Source")
                for name, content in sorted(report.model.data.items())
            ),
        ]
    )
    return [
        weasyprint.Attachment(
            url=data_url(kind, content),
            url_fetcher=fetcher,
            name=name,
            description=description,
            created=_NO_DATE,
            modified=_NO_DATE,
            relationship=relationship,
        )
        for name, kind, content, description, relationship in files_carried
    ]
