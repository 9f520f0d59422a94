"""Writes the report as one HTML page that needs no script, no font and no request.

The page is the source of the PDF too (`pdf`); what it shows is gathered by `view`.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

from markupsafe import Markup

from outspread.reporting.data import ReportData
from outspread.resources import read_text

if TYPE_CHECKING:
    from jinja2 import Environment


def environment() -> Environment:
    """Jinja with every value escaped and no undefined name forgiven; templates come with the package."""
    from jinja2 import Environment, FunctionLoader, StrictUndefined

    return Environment(
        loader=FunctionLoader(lambda name: read_text("templates", name)),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )


def render_html(report: ReportData) -> str:
    """The report as a self-contained HTML page (UTF-8 text, the same bytes for the same derivation)."""
    from outspread.reporting.view import view

    sheets = {"shared": "report.css", "screen": "screen.css", "paper": "print.css"}
    style = {use: Markup(read_text("templates", name)) for use, name in sheets.items()}  # shipped, so safe
    template = environment().get_template("report.html.j2")
    return template.render(style=style, **view(report))
