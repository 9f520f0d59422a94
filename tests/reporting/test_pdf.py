"""The PDF: the same bytes, its attachments, nothing read from elsewhere, a clear word where it fails."""

from __future__ import annotations

import builtins
import hashlib
import os
import re
import shutil
import subprocess
import sys
import zlib
from pathlib import Path

import fixtures
import pytest

from outspread.errors import OutspreadError, ReportError
from outspread.reporting.pdf import render_pdf

HERE = Path(__file__).parent


@pytest.fixture(scope="module")
def document(page, report):
    return render_pdf(page("overspill"), report("overspill"))


def test_it_is_a_tagged_pdf_a_document(document):
    assert document.startswith(b"%PDF-1.7")
    metadata = b"".join(
        zlib.decompress(part) for part in re.findall(rb"stream\n(x.*?)\nendstream", document, re.S)
    )
    assert b'pdfaid:part="3" pdfaid:conformance="A"' in metadata
    assert b"/StructTreeRoot" in metadata + document


def test_the_bytes_are_the_same_in_another_process(document):
    program = (
        "import sys, hashlib; sys.path.insert(0, sys.argv[1]); import fixtures\n"
        "from outspread.reporting.html import render_html\n"
        "from outspread.reporting.pdf import render_pdf\n"
        "data = fixtures.overspill()\n"
        "print(hashlib.sha256(render_pdf(render_html(data), data)).hexdigest())\n"
    )
    environment = {**os.environ, "PYTHONHASHSEED": "99", "PYTHONPATH": os.pathsep.join(sys.path)}
    run = subprocess.run(
        [sys.executable, "-c", program, str(HERE)],
        env=environment,
        capture_output=True,
        text=True,
        check=True,
    )
    assert run.stdout.strip() == hashlib.sha256(document).hexdigest()
    assert run.stderr == ""


@pytest.mark.skipif(shutil.which("pdfdetach") is None, reason="needs pdfdetach of poppler-utils")
def test_the_model_and_the_results_can_be_taken_out_again(document, report, tmp_path):
    (tmp_path / "report.pdf").write_bytes(document)
    subprocess.run(["pdfdetach", "-saveall", "report.pdf"], cwd=tmp_path, check=True, capture_output=True)
    data = report("overspill")
    assert (tmp_path / "winch-bearing.yaml").read_bytes() == data.model.source
    assert (tmp_path / "winch-bearing.results.json").read_bytes() == data.results_json


@pytest.mark.skipif(shutil.which("pdftotext") is None, reason="needs pdftotext of poppler-utils")
def test_the_words_of_the_page_are_on_paper(document, tmp_path):
    (tmp_path / "report.pdf").write_bytes(document)
    text = subprocess.run(
        ["pdftotext", "-layout", "report.pdf", "-"], cwd=tmp_path, check=True, capture_output=True, text=True
    ).stdout
    assert "page 1 of" in text
    assert "SK-TN-014, revision C" in text
    assert "How to reproduce" in text
    assert "This page carries both files" not in text


def test_nothing_outside_the_report_is_read(page, report, tmp_path, caplog):
    """A page that names a local file or an address gets neither; the rest is written."""
    secret = tmp_path / "secret.txt"
    secret.write_text("a secret of the machine")
    planted = (
        f'<link rel="attachment" href="{secret.as_uri()}"><img src="http://127.0.0.1:9/x.png">'
        f'<img src="{secret.as_uri()}"></body>'
    )
    html = "<html lang='en'><title>t</title><body><p>text</p>" + planted
    written = render_pdf(html, report("overspill"))
    assert b"secret.txt" not in written
    refused = [
        record.getMessage()
        for record in caplog.records
        if "reads no address but its own" in record.getMessage()
    ]
    assert len(refused) >= 3


def test_a_machine_without_the_libraries_gets_one_clear_message(monkeypatch, capsys):
    real = builtins.__import__

    def missing(name, *arguments, **keywords):
        if name == "weasyprint":
            print("advice that the library prints")
            raise OSError("cannot load library 'libpango-1.0-0'\nmore lines")
        return real(name, *arguments, **keywords)

    monkeypatch.setattr(builtins, "__import__", missing)
    with pytest.raises(ReportError) as caught:
        render_pdf("<html></html>", fixtures.overspill())
    message = str(caught.value)
    assert "apt-get install -y --no-install-recommends libpangoft2-1.0-0 libharfbuzz-subset0" in message
    assert "libpango-1.0-0" in message
    assert "\n" not in message
    assert capsys.readouterr() == ("", "")
    assert isinstance(caught.value, OutspreadError)
    assert caught.value.exit_status == 5
