"""The shape of the project: who may import whom, how long a module may be, what a command loads.

The rules are those of DEVELOPERS.md ("One road, one direction"); nothing here looks at a number.
"""

from __future__ import annotations

import ast
import json
import os
import subprocess
import sys
from collections.abc import Iterator
from functools import cache
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent
PACKAGE = ROOT / "compiler" / "outspread"

#: Shared rooms may import one another and nothing else; every stop of the road may use them.
SHARED = ("errors", "resources", "numerics", "formula", "laws")
#: The stops, in order: each imports from the shared rooms, from itself and from the stops before it.
ROAD = ("reading", "planning", "routes", "evidence", "findings", "reporting", "comparing")

LONGEST_MODULE = 400  # lines

HEAVY = ("numpy", "scipy", "sympy", "pint", "matplotlib", "weasyprint", "ziamath", "jsonschema", "jinja2")
HEAVY_FOR_CHECK = ("matplotlib", "weasyprint", "ziamath", "sympy", "scipy", "pint")

TEN_INPUTS = """\
outspread: 1
title: Ten inputs
inputs:
""" + "".join(
    f"  part{number}: {{unit: mm, distribution: {{normal: {{mean: {number}, sd: 0.01}}}}}}\n"
    for number in range(10)
) + """\
transformation:
  outputs:
    stack:
      unit: mm
      formula: part0 + part1 + part2 + part3 + part4 + part5 + part6 + part7 + part8 + part9
requirements:
  - {name: It fits, event: stack < 40, probability: {at_least: 0.5}}
"""


def modules() -> list[Path]:
    return sorted(PACKAGE.rglob("*.py"))


def identify(path: Path) -> str:
    return path.relative_to(PACKAGE).as_posix()


@cache
def tree(path: Path) -> ast.Module:
    return ast.parse(path.read_text(encoding="utf-8"), str(path))


def dotted(path: Path) -> str:
    parts = path.relative_to(PACKAGE.parent).with_suffix("").parts
    return ".".join(parts[:-1] if parts[-1] == "__init__" else parts)


def executed(node: ast.AST) -> Iterator[ast.AST]:
    """Every node but those that only the type checker reads: a type may be named before it is made."""
    yield node
    if isinstance(node, ast.If) and ast.unparse(node.test) == "TYPE_CHECKING":
        return
    for child in ast.iter_child_nodes(node):
        yield from executed(child)


def imported(path: Path) -> Iterator[tuple[int, str]]:
    """Every module of the project that `path` imports, at its top or inside a function, with the line."""
    known = {dotted(other) for other in modules()}
    for node in executed(tree(path)):
        if isinstance(node, ast.Import):
            names = [alias.name for alias in node.names if alias.name.split(".")[0] == "outspread"]
            yield from ((node.lineno, name) for name in names)
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{identify(path)}:{node.lineno}: a relative import"
            if node.module and node.module.split(".")[0] == "outspread":
                for alias in node.names:
                    inner = f"{node.module}.{alias.name}"
                    yield node.lineno, inner if inner in known else node.module


def room(module: str) -> str:
    """`outspread.laws.law` -> laws; the package itself and the modules that stand for all of it -> front."""
    parts = module.split(".")
    return parts[1] if len(parts) > 1 and parts[1] in (*SHARED, *ROAD) else "front"


def allowed(origin: str, target: str) -> bool:
    if origin == "front" or origin == target:
        return True
    if origin in SHARED:
        return target in SHARED
    return target in SHARED or (target in ROAD and ROAD.index(target) < ROAD.index(origin))


def test_imports_follow_the_road() -> None:
    """A room imports from the shared rooms and from earlier stops; nothing imports backwards."""
    backwards = [
        f"{identify(path)}:{line}: {room(dotted(path))} imports {module}"
        for path in modules()
        for line, module in imported(path)
        if not allowed(room(dotted(path)), room(module))
    ]
    assert not backwards, "\n".join(backwards)


def test_no_import_cycle() -> None:
    """No module imports itself by way of others, not even from inside a function (`outspread` itself, which
    every import runs first and which fetches its parts when asked, is apart)."""
    uses = {dotted(path): sorted({name for _, name in imported(path)} - {"outspread"}) for path in modules()}
    done: set[str] = set()
    cycles: list[str] = []

    def visit(module: str, trail: tuple[str, ...]) -> None:
        if module in trail:
            cycles.append(" -> ".join((*trail[trail.index(module) :], module)))
        elif module not in done:
            for other in uses.get(module, ()):
                visit(other, (*trail, module))
            done.add(module)

    for module in uses:
        visit(module, ())
    assert not cycles, "\n".join(cycles)


def test_the_second_derivation_shares_no_code_with_the_routes() -> None:
    """Evidence takes what a route hands on (`routes.derived`), never the code of a route."""
    shared = [
        f"{identify(path)}:{line}: {module}"
        for path in modules()
        if room(dotted(path)) == "evidence"
        for line, module in imported(path)
        if module.startswith("outspread.routes") and module != "outspread.routes.derived"
    ]
    assert not shared, "\n".join(shared)


@pytest.mark.parametrize("path", modules(), ids=identify)
def test_module_is_short_and_says_what_it_does(path: Path) -> None:
    """A module has at most 400 lines and opens by saying what it does."""
    lines = path.read_text(encoding="utf-8").count("\n")
    assert lines <= LONGEST_MODULE, f"{lines} lines; which of its parts would know its own room?"
    assert ast.get_docstring(tree(path)) or not tree(path).body


@pytest.mark.parametrize("path", modules(), ids=identify)
def test_module_keeps_the_house_rules(path: Path) -> None:
    """No text is run as program, no fault is swallowed, nothing is exempted from the checks at large."""
    faults: list[str] = []
    for node in ast.walk(tree(path)):
        if isinstance(node, ast.Name) and node.id in ("eval", "exec"):
            faults.append(f"line {node.lineno}: {node.id}")
        if isinstance(node, ast.ExceptHandler):
            caught = "everything" if node.type is None else ast.unparse(node.type)
            if caught in ("everything", "Exception", "BaseException"):
                faults.append(f"line {node.lineno}: except {caught}")
    text = path.read_text(encoding="utf-8")
    blanket = ("type: " + "ignore\n", "# no" + "qa\n", "TO" + "DO", "FIX" + "ME", "mypy: " + "ignore-errors")
    faults += [f"contains {word!r}" for word in blanket if word in text]
    assert not faults, "\n".join(faults)


@pytest.mark.parametrize(
    "name", ["reading/model.py", "planning/plan.py", "findings/results.py", "routes/derived.py"]
)
def test_values_between_rooms_are_frozen(name: str) -> None:
    """What one room hands to the next cannot be changed by a third."""
    loose = [
        node.name
        for node in ast.walk(tree(PACKAGE / name))
        if isinstance(node, ast.ClassDef)
        and not any("frozen=True" in ast.unparse(decorator) for decorator in node.decorator_list)
    ]
    assert not loose


def test_only_the_command_knows_the_terminal() -> None:
    """Nothing but the front prints or asks for the standard streams."""
    faults = [
        f"{identify(path)}:{node.lineno}"
        for path in modules()
        if room(dotted(path)) != "front"
        for node in ast.walk(tree(path))
        if (isinstance(node, ast.Call) and isinstance(node.func, ast.Name) and node.func.id == "print")
        or (isinstance(node, ast.Attribute) and ast.unparse(node) in ("sys.stdout", "sys.stderr", "sys.argv"))
    ]
    assert not faults, "\n".join(faults)


def tracked() -> list[str]:
    command = ["git", "-c", "safe.directory=*", "ls-files"]
    listing = subprocess.run(command, cwd=ROOT, capture_output=True, text=True, check=True)
    return [name for name in listing.stdout.splitlines() if (ROOT / name).is_file()]


def test_top_level_is_as_agreed() -> None:
    """A newcomer finds nine names at the top and no tenth."""
    agreed = {
        "README.md", "DEVELOPERS.md", "pyproject.toml", "compiler", "schema", "templates", "tests", "models",
    }  # fmt: skip
    present = {name.split("/")[0] for name in tracked()}
    assert {name for name in present if not name.startswith(".")} == agreed


def test_files_speak_of_the_project_only() -> None:
    """No file speaks of where its task came from."""
    words = ("trans" + "cript", "lec" + "ture", "home" + "work", "profes" + "sor", "the se" + "ed ")
    documents = (".py", ".md", ".yaml", ".json", ".j2", ".css", ".toml", ".csv")
    found = [
        f"{name}: {word}"
        for name in tracked()
        if name.endswith(documents) and name != "tests/reference/open.json"
        for word in words
        if word in (ROOT / name).read_text(encoding="utf-8").lower()
    ]
    assert not found, "\n".join(found)


def loaded_by(*arguments: str) -> list[str]:
    """The modules in memory after the command has run in a process of its own."""
    script = (
        "import json, sys\n"
        "from outspread.command import main\n"
        f"sys.argv = ['outspread', *{list(arguments)!r}]\n"
        "try:\n"
        "    status = main()\n"
        "except SystemExit as stop:\n"
        "    status = stop.code\n"
        "assert not status, status\n"
        "print('\\n' + json.dumps(sorted(sys.modules)))\n"
    )
    run = subprocess.run(
        [sys.executable, "-c", script],
        env={**os.environ, "PYTHONPATH": str(PACKAGE.parent)},
        capture_output=True,
        text=True,
        check=False,
    )
    assert run.returncode == 0, run.stderr
    names: list[str] = json.loads(run.stdout.splitlines()[-1])
    return names


def test_help_loads_nothing_heavy() -> None:
    """`outspread --help` answers at once because it loads no library."""
    assert not set(loaded_by("--help")) & set(HEAVY)


def test_check_loads_no_library_of_later_stops(tmp_path: Path) -> None:
    """`outspread check` reads and plans: no plots, no typesetting, no symbolic engine, for normal inputs (cut
    ones too) no special functions, and for usual units no library of them."""
    model = tmp_path / "ten.yaml"
    cut = TEN_INPUTS.replace("sd: 0.01}}}", "sd: 0.01}}, truncate: {lower: -9, upper: 9}}", 5)
    assert cut.count("truncate") == 5
    model.write_text(cut, encoding="utf-8")
    assert not set(loaded_by("check", str(model))) & set(HEAVY_FOR_CHECK)
