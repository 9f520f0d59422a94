"""The pages and documents of the hand-built derivations, each made once."""

from __future__ import annotations

from functools import cache

import fixtures
import pytest

from outspread.reporting.html import render_html


@cache
def _report(name):
    return fixtures.ALL[name]()


@cache
def _page(name):
    return render_html(_report(name))


@pytest.fixture(scope="session")
def report():
    return _report


@pytest.fixture(scope="session")
def page():
    return _page
