"""What each command says and returns: whole outputs and exit statuses."""

from __future__ import annotations

import builtins
import json
import os
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest
from running import outspread

import outspread as package
from outspread.command import build_parser, worst
from outspread.delivery import Order, _shown, deliver
from outspread.errors import DerivationError
from outspread.findings.results import Absent, Figure, Finding

ROOT = Path(__file__).resolve().parents[2]

#: normal minus normal: the gap is normal with mean 0.3 and standard deviation sqrt(0.06^2 + 0.1^2)
GAP = """\
outspread: 1
title: Gap of the battery hatch
inputs:
  frame: {unit: mm, distribution: {normal: {mean: 240.3, sd: 0.06}}, basis: 60 parts measured}
  hatch: {unit: mm, distribution: {normal: {mean: 240, sd: 0.1}}}
transformation:
  outputs:
    gap: {formula: frame - hatch, unit: mm}
requirements:
  - {name: The hatch closes, event: gap > 0, probability: {at_least: LIMIT}}
  - {name: The gap is not wide, quantile: {output: gap, at: 0.99, at_most: 0.8}}
"""


@pytest.fixture
def folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    monkeypatch.chdir(tmp_path)
    (tmp_path / "gap.yaml").write_text(GAP.replace("LIMIT", "0.99"), encoding="utf-8")
    return tmp_path


def test_derive_says_what_came_out(folder: Path) -> None:
    """Title, figures, verdicts, evidence, files; the figures are those of scipy.stats.norm."""
    said = outspread("derive", "gap.yaml", "--only", "json")
    assert said.err == ""
    lines = said.out.splitlines()
    assert lines[:4] == [
        "Gap of the battery hatch",
        "  gap: mean 0.3 mm, standard deviation 0.116619 mm, 95 % interval [0.0714309, 0.528569] mm",
        "  met: The hatch closes: P(gap > 0) is at least 0.99; it is 0.994951",
        "  met: The gap is not wide: the 0.99 quantile of gap is at most 0.8 mm; it is 0.571296 mm",
    ]
    assert lines[4].startswith("  evidence: ")
    assert lines[5] == "  wrote gap.results.json"
    assert said.status == 0


def test_unmet_requirement_is_status_1(folder: Path) -> None:
    """The result is written all the same."""
    Path("tight.yaml").write_text(GAP.replace("LIMIT", "0.9999"), encoding="utf-8")
    said = outspread("derive", "tight.yaml", "--only", "json")
    assert "  not met: The hatch closes: P(gap > 0) is at least 0.9999; it is 0.994951\n" in said.out
    assert said.status == 1
    verdicts = json.loads(Path("tight.results.json").read_text(encoding="utf-8"))["requirements"]
    assert [row["verdict"] for row in verdicts] == ["not met", "met"]


def test_all_three_files_go_where_they_should(folder: Path) -> None:
    """--out makes the folder; nothing is written beside the model, nothing else is left."""
    said = outspread("derive", "gap.yaml", "--out", "report/a")
    assert said.status == 0, said.err
    assert sorted(path.name for path in (folder / "report/a").iterdir()) == [
        "gap.html",
        "gap.pdf",
        "gap.results.json",
    ]
    assert [path.name for path in folder.iterdir() if path.is_file()] == ["gap.yaml"]
    assert (folder / "report/a/gap.pdf").read_bytes()[:5] == b"%PDF-"


def test_one_wrong_model_does_not_stop_the_others(folder: Path) -> None:
    """Each model has its say; the worst status counts."""
    Path("bad.yaml").write_text("outspread: 1\ntitle: T\ninputs: 3\n", encoding="utf-8")
    said = outspread("derive", "bad.yaml", "gap.yaml", "nosuch.yaml", "--only", "json")
    assert said.status == 2
    assert "  wrote gap.results.json" in said.out
    assert "bad.yaml:3:9: " in said.err
    assert "nosuch.yaml: there is no such file" in said.err
    assert "Traceback" not in said.err


def test_two_models_of_one_name_are_refused(folder: Path) -> None:
    """Neither is derived: one would overwrite the other."""
    (folder / "other").mkdir()
    (folder / "other/gap.yaml").write_text(GAP.replace("LIMIT", "0.99"), encoding="utf-8")
    said = outspread("derive", "gap.yaml", "other/gap.yaml", "--out", "r", "--only", "json")
    assert said == (
        type(said)(
            2,
            "",
            "other/gap.yaml: it would write gap.results.json, as gap.yaml does; rename one of the models or"
            " derive them into different folders\n",
        )
    )


def test_missing_system_library_still_writes_the_rest(folder: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Results and HTML are there, the message names the line to run, the status is 5."""
    from outspread.reporting import pdf

    real = builtins.__import__

    def broken(name: str, *rest: Any, **more: Any) -> Any:
        if name == "weasyprint":
            raise OSError("cannot load library 'libpangoft2-1.0-0'\nand more")
        return real(name, *rest, **more)

    monkeypatch.delitem(sys.modules, "weasyprint", raising=False)
    monkeypatch.setattr(builtins, "__import__", broken)
    said = outspread("derive", "gap.yaml")
    assert said.err == "gap.pdf: " + pdf._MISSING.format("cannot load library 'libpangoft2-1.0-0'") + "\n"
    assert "apt-get install -y --no-install-recommends libpangoft2-1.0-0 libharfbuzz-subset0" in said.err
    assert said.status == 5
    assert said.out.endswith("  wrote gap.results.json, gap.html\n")
    assert not (folder / "gap.pdf").exists()


def test_disagreeing_evidence_is_status_3(folder: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A fault put into the route: its law is wrong by 0.3 %. The results are written and say so."""
    from dataclasses import replace

    from outspread.laws.build import build_law
    from outspread.reading.model import Distribution
    from outspread.routes.engine import Engine

    right = Engine.derive

    def faulty(self: Engine, *arguments: object) -> object:
        # a spread wrong by 0.8 % moves the cdf by at most 0.002 ... 1.2 % by 0.003
        wrong = build_law(Distribution("normal", {"mean": 0.3, "sd": 0.11661903789690601 * 1.013}))
        return tuple(
            replace(row, law=wrong, symbolic=None, numeric=None)
            for row in right(self, *arguments)  # type: ignore[arg-type]
        )

    monkeypatch.setattr(Engine, "derive", faulty)
    said = outspread("derive", "gap.yaml", "--only", "json")
    assert said.status == 3
    assert said.err.startswith(
        "gap.yaml: gap: the derivation disagrees with plain sampling of 1,000,000 draws: the difference is"
    )
    evidence = json.loads(Path("gap.results.json").read_text(encoding="utf-8"))["evidence"]
    assert evidence[0]["agrees"] is False


def test_time_limit_is_status_3(folder: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The derivation is stopped; nothing is written."""
    from outspread.routes.engine import Engine

    def endless(self: Engine, *arguments: object) -> object:
        while True:
            pass

    monkeypatch.setattr(Engine, "derive", endless)
    Path("gap.yaml").write_text(
        GAP.replace("LIMIT", "0.99") + "accuracy: {time_limit: 1 s}\n", encoding="utf-8"
    )
    said = outspread("derive", "gap.yaml")
    assert said.err == (
        "gap.yaml: the derivation was stopped at its time limit of 1 s; raise `time_limit` under `accuracy`,"
        " or ask for fewer digits\n"
    )
    assert said.status == 3
    assert [path.name for path in folder.iterdir()] == ["gap.yaml"]


def test_time_limit_changes_no_figure(folder: Path) -> None:
    """With a limit that is not reached the outputs are the same."""
    outspread("derive", "gap.yaml", "--only", "json")
    before = json.loads(Path("gap.results.json").read_text(encoding="utf-8"))
    Path("gap.yaml").write_text(
        GAP.replace("LIMIT", "0.99") + "accuracy: {time_limit: 500 s}\n", encoding="utf-8"
    )
    outspread("derive", "gap.yaml", "--only", "json")
    after = json.loads(Path("gap.results.json").read_text(encoding="utf-8"))
    assert before["model"]["sha256"] != after["model"]["sha256"]
    before.pop("model"), after.pop("model")
    assert before == after


def test_refusal_of_a_route_is_status_3(folder: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """What cannot be derived is said in one line, with the output concerned."""
    from outspread.routes.engine import Engine

    def refuse(self: Engine, *arguments: object) -> object:
        raise DerivationError("no route leads to it", "gap")

    monkeypatch.setattr(Engine, "derive", refuse)
    said = outspread("derive", "gap.yaml")
    assert (said.status, said.out, said.err) == (3, "", "gap.yaml: gap: no route leads to it\n")


def test_interrupt_is_clean(folder: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Ctrl-C: one line, no traceback, no file."""
    from outspread.routes.engine import Engine

    def interrupt(self: Engine, *arguments: object) -> object:
        raise KeyboardInterrupt

    monkeypatch.setattr(Engine, "derive", interrupt)
    said = outspread("derive", "gap.yaml")
    assert (said.status, said.out) == (130, "")
    assert said.err == "outspread: stopped; no file was left half-written\n"
    assert [path.name for path in folder.iterdir()] == ["gap.yaml"]


def test_progress_only_on_a_terminal(folder: Path) -> None:
    """A terminal sees one line rewritten and gone at the end; a file sees nothing."""
    shown = outspread("derive", "gap.yaml", "--only", "json", terminal=True).err
    assert "gap.yaml: drawing the evidence" in shown
    assert shown.endswith("\r\x1b[K")
    assert "\n" not in shown
    assert outspread("derive", "gap.yaml", "--only", "json").err == ""


def test_check(folder: Path) -> None:
    """A right model gets one line, a wrong one its faults; nothing is written."""
    Path("bad.yaml").write_text(GAP.replace("LIMIT", "2"), encoding="utf-8")
    said = outspread("check", "gap.yaml", "bad.yaml")
    assert said.out == "gap.yaml: nothing is wrong; 2 inputs, 1 output, 2 requirements\n"
    assert said.err.startswith("bad.yaml:10:")
    assert said.status == 2
    assert sorted(path.name for path in folder.iterdir()) == ["bad.yaml", "gap.yaml"]


def test_plan(folder: Path) -> None:
    """The plan names the output and its route."""
    said = outspread("plan", "gap.yaml")
    assert said.status == 0
    assert "gap" in said.out
    assert outspread("plan", "nosuch.yaml").status == 2


def test_new_writes_a_model_that_derives(folder: Path) -> None:
    """The starting model checks without a fault; an existing file is left alone."""
    said = outspread("new", "spring-force")
    assert said.out == "spring-force.yaml is written; edit it, then run: outspread derive spring-force.yaml\n"
    assert outspread("check", "spring-force.yaml").status == 0
    before = Path("spring-force.yaml").read_bytes()
    again = outspread("new", "spring-force.yaml")
    assert again.err == "spring-force.yaml: it is there already and was left as it is; choose another name\n"
    assert again.status == 2
    assert Path("spring-force.yaml").read_bytes() == before
    assert outspread("new", "a/b").status == 2


def test_families() -> None:
    """Each family with its parameter sets; one by name; a near miss for a misspelt one."""
    said = outspread("families")
    assert said.status == 0
    assert "uniform\n    {lower, upper} or {centre, half_width}" in said.out
    assert outspread("families", "weibull").out.startswith(
        "weibull\n    {shape, scale, location (default 0)}"
    )
    wrong = outspread("families", "nromal")
    assert wrong.status == 2
    assert "did you mean `normal`?" in wrong.err


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ((), "the following arguments are required: COMMAND"),
        (("derive",), "the following arguments are required: MODEL"),
        (("derive", "a.yaml", "--only", "docx"), "'docx' is none of html, pdf and json"),
        (("derive", "a.yaml", "--jobs", "0"), "'0' is no number of models from 1 to 64"),
        (("compare", "a", "b"), "invalid choice: 'compare'"),
    ],
)
def test_command_line_faults(
    arguments: tuple[str, ...], message: str, capsys: pytest.CaptureFixture[str]
) -> None:
    """A command that is not understood says what is wrong, with status 2."""
    with pytest.raises(SystemExit) as stop:
        build_parser().parse_args(arguments)
    assert stop.value.code == 2
    assert message in capsys.readouterr().err


def test_help_teaches(capsys: pytest.CaptureFixture[str]) -> None:
    """The help shows a model, the commands in order of use and the exit statuses."""
    with pytest.raises(SystemExit) as stop:
        build_parser().parse_args(["--help"])
    assert stop.value.code == 0
    text = capsys.readouterr().out
    for part in ("outspread new hatch-gap", "formula: frame - hatch", "exit status:", "families"):
        assert part in text


def test_version_is_that_of_the_project(capsys: pytest.CaptureFixture[str]) -> None:
    """One version in the package and in pyproject.toml."""
    with pytest.raises(SystemExit):
        build_parser().parse_args(["--version"])
    assert capsys.readouterr().out == f"outspread {package.__version__}\n"
    assert f'\nversion = "{package.__version__}"\n' in (ROOT / "pyproject.toml").read_text(encoding="utf-8")


def test_worst_status() -> None:
    """3 before 2 before 5 before 1 before 0."""
    assert worst([0, 1, 5, 2, 3]) == 3
    assert worst([0, 1, 5, 2]) == 2
    assert worst([1, 0, 5]) == 5
    assert worst([1, 0]) == 1
    assert worst([0, 0]) == 0


def in_process(*arguments: str, cwd: Path, **environment: str) -> subprocess.CompletedProcess[str]:
    code = "import sys; from outspread.command import main; sys.exit(main())"
    return subprocess.run(
        [sys.executable, "-c", code, *arguments],
        cwd=cwd,
        env={**os.environ, "PYTHONPATH": str(ROOT / "compiler"), **environment},
        capture_output=True,
        text=True,
        check=False,
    )


def test_same_bytes_whatever_the_hash_seed_and_the_workers(folder: Path) -> None:
    """Results and HTML: two hash seeds, and two models at a time against one after the other."""
    Path("tight.yaml").write_text(GAP.replace("LIMIT", "0.9999"), encoding="utf-8")
    models = ("gap.yaml", "tight.yaml")
    first = in_process("derive", *models, "--out", "a", "--only", "json,html", cwd=folder, PYTHONHASHSEED="1")
    second = in_process(
        "derive", *models, "--out", "b", "--only", "json,html", "--jobs", "2", cwd=folder, PYTHONHASHSEED="2"
    )
    assert (first.returncode, second.returncode) == (1, 1), first.stderr + second.stderr
    assert first.stdout.replace("a/", "b/") == second.stdout
    for name in ("gap.results.json", "gap.html", "tight.results.json", "tight.html"):
        assert (folder / "a" / name).read_bytes() == (folder / "b" / name).read_bytes(), name


@pytest.mark.parametrize(
    ("finding", "text"),
    [
        (Figure(0.1166190378969, 1e-13), "0.116619"),
        (Figure(2.97612, 0.0013), "2.976 ± 0.002"),
        (Figure(3.0, 0.0), "3"),
        (Figure(0.0, 1e-15), "0 ± 2e-15"),
        (Figure(1.0, float("nan")), "none (its error could not be bounded)"),
        (Absent("the mean does not exist"), "none (the mean does not exist)"),
    ],
)
def test_figures_in_a_summary(finding: Finding, text: str) -> None:
    """An error that touches the digits that are shown stands beside them."""
    assert _shown(finding) == text


def test_deliver_can_be_called_alone(folder: Path) -> None:
    """The worker's function: one order, one outcome."""
    outcome = deliver(Order("gap.yaml", None, ("json",)))
    assert outcome.status == 0
    assert outcome.complained == ""


def test_import_loads_no_library() -> None:
    """`import outspread` is light; `derive` is fetched when it is first used."""
    code = (
        "import sys, outspread; heavy = {'numpy', 'scipy', 'jsonschema'} & set(sys.modules); print(heavy);"
        " print(outspread.derive.__name__, 'numpy' in sys.modules)"
    )
    said = subprocess.run(
        [sys.executable, "-c", code],
        env={**os.environ, "PYTHONPATH": str(ROOT / "compiler")},
        capture_output=True,
        text=True,
        check=True,
    )
    assert said.stdout.split("\n")[:2] == ["set()", "derive True"]
