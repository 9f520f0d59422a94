"""Every mistake that a model can hold: edits of one right model, and the whole of what is then reported.

The expected texts are what a user is meant to read, decided by reading them; each place was counted by
hand or follows from the edit.
"""
# ruff: noqa: E501  (the messages stand as the user sees them, one line each)

from __future__ import annotations

from pathlib import Path

FOLDER = Path(__file__).parent / "data"

Edit = tuple[str, str]

BASE = """\
outspread: 1
title: Gap
inputs:
  bore:
    unit: mm
    distribution: {normal: {mean: 42.02, sd: 0.004}}
  shaft:
    unit: mm
    distribution: {normal: {mean: 42, sd: 0.005}}
transformation:
  where:
    gap: bore - shaft
  outputs:
    clearance:
      formula: gap
      unit: mm
requirements:
  - name: Fits
    event: clearance > 0
    probability: {at_least: 0.99}
readings:
  quantiles: [0.1]
"""


def edited(edits: list[Edit]) -> str:
    """The right model with each edit made once."""
    text = BASE
    for old, new in edits:
        assert old in text, old
        text = text.replace(old, new, 1)
    return text


CASES: list[tuple[str, list[Edit], str]] = [
    (
        "another format",
        [
            ("outspread: 1", "outspread: 2"),
        ],
        "m.yaml:1:12: the model has format 2, and this version of outspread reads format 1; update outspread"
    ),
    (
        "no format",
        [
            ("outspread: 1\n", ""),
        ],
        "m.yaml:1:1: the key `outspread` is missing; a model begins with `outspread: 1`"
    ),
    (
        "format in words",
        [
            ("outspread: 1", "outspread: one"),
        ],
        "m.yaml:1:12: the format is the text `one`, and this version of outspread reads format 1; write `outspread: 1`"
    ),
    (
        "misspelt key at the top",
        [
            ("title: Gap", "titel: Gap"),
        ],
        "m.yaml:2:1: unknown key `titel` at the top of the model; did you mean `title`?"
    ),
    (
        "several faults at once",
        [
            ("title: Gap", "titel: Gap"),
            ("sd: 0.005", "sdd: 0.005"),
            ("at_least: 0.99", "at_least: 99"),
        ],
        "m.yaml:2:1: unknown key `titel` at the top of the model; did you mean `title`?\n"
        "m.yaml:9:39: unknown key `sdd` in `normal`; did you mean `sd`?\n"
        "m.yaml:20:29: `at_least` is the number 99; write a probability from 0 to 1"
    ),
    (
        "unknown key at the top",
        [
            ("title: Gap", "title: Gap\nanswer: 42"),
        ],
        "m.yaml:3:1: unknown key `answer` at the top of the model; its keys: `outspread`, `title`, `purpose`, `record`, `safety`, `cautions`, `constants`, `inputs`, `dependence`, `transformation`, `requirements`, `readings` and `accuracy`"
    ),
    (
        "empty title",
        [
            ("title: Gap", "title:"),
        ],
        "m.yaml:2:1: `title` is empty; write text"
    ),
    (
        "title that is a truth value",
        [
            ("title: Gap", "title: true"),
        ],
        "m.yaml:2:8: `title` is the truth value `true`; write text, or quote it if it is meant as text"
    ),
    (
        "title without a letter",
        [
            ("title: Gap", 'title: ""'),
        ],
        "m.yaml:2:8: `title` is empty text; write text"
    ),
    (
        "misspelt section",
        [
            ("transformation:", "transformations:"),
        ],
        "m.yaml:10:1: unknown key `transformations` at the top of the model; did you mean `transformation`?"
    ),
    (
        "no outputs",
        [
            ("  outputs:\n    clearance:\n      formula: gap\n      unit: mm\n", "  outputs: {}\n"),
        ],
        "m.yaml:13:3: `outputs` is an empty group of keys; write a group of outputs"
    ),
    (
        "output without a formula",
        [
            ("      formula: gap\n", ""),
        ],
        "m.yaml:14:5: `clearance` lacks the key `formula`; add it"
    ),
    (
        "output as bare text",
        [
            ("    clearance:\n      formula: gap\n      unit: mm\n", "    clearance: gap\n"),
        ],
        "m.yaml:14:16: `clearance` is the text `gap`; write a group of keys with `formula`"
    ),
    (
        "unknown route",
        [
            ("formula: gap", "formula: gap\n      route: closedform"),
        ],
        "m.yaml:16:14: `route` is the text `closedform`; did you mean `closed_form`?"
    ),
    (
        "safety in words",
        [
            ("title: Gap", "title: Gap\nsafety: maybe"),
        ],
        "m.yaml:3:9: `safety` is the text `maybe`; write `true` or `false`"
    ),
    (
        "cautions not a list",
        [
            ("title: Gap", "title: Gap\ncautions: none"),
        ],
        "m.yaml:3:11: `cautions` is the text `none`; write a list of texts"
    ),
    (
        "misspelt family",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "{norml: {mean: 42.02, sd: 0.004}}"),
        ],
        "m.yaml:6:20: unknown family `norml`; did you mean `normal`?"
    ),
    (
        "family that does not exist",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "{bell: {mean: 42.02, sd: 0.004}}"),
        ],
        "m.yaml:6:20: unknown family `bell`; `outspread families` lists those that exist"
    ),
    (
        "two families",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "{normal: {mean: 1, sd: 2}, uniform: {lower: 1, upper: 2}}"),
        ],
        "m.yaml:6:46: `distribution` has `normal` and `uniform`; keep one of them"
    ),
    (
        "family without parameters",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "normal"),
        ],
        "m.yaml:6:19: `distribution` is the text `normal`; write one family with its parameters, such as `{normal: {mean: 5, sd: 0.1}}`"
    ),
    (
        "empty distribution",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "{}"),
        ],
        "m.yaml:6:5: `distribution` is an empty group of keys; write one family with its parameters, such as `{normal: {mean: 5, sd: 0.1}}`"
    ),
    (
        "no value for distribution",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", ""),
        ],
        "m.yaml:6:5: `distribution` is empty; write one family with its parameters, such as `{normal: {mean: 5, sd: 0.1}}`"
    ),
    (
        "no distribution",
        [
            ("    distribution: {normal: {mean: 42.02, sd: 0.004}}\n", ""),
        ],
        "m.yaml:4:3: the input `bore` lacks a `distribution`; add one, such as `normal: {mean: 5, sd: 0.1}`"
    ),
    (
        "formula cut by a comma",
        [
            ("    clearance:\n      formula: gap\n      unit: mm", "    clearance: {formula: max(gap, 0), unit: mm}"),
        ],
        "m.yaml:14:35: unknown key `0)` in `clearance`; a formula with commas needs quotes where it stands between { and }"
    ),
    (
        "misspelt parameter",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "{normal: {mean: 42.02, std: 0.004}}"),
        ],
        "m.yaml:6:42: unknown key `std` in `normal`; did you mean `sd`?"
    ),
    (
        "missing parameter",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "{normal: {mean: 42.02}}"),
        ],
        "m.yaml:6:20: `normal` needs either `mean` and `sd`, or `quantiles`; given: `mean`"
    ),
    (
        "missing parameter of a single set",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "{uniform: {lower: 1}}"),
        ],
        "m.yaml:6:20: `uniform` needs either `lower` and `upper`, or `centre` and `half_width`, or `quantiles`; given: `lower`"
    ),
    (
        "parameters of two sets",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "{gamma: {shape: 1, scale: 2, rate: 3}}"),
        ],
        "m.yaml:6:20: `gamma` needs either `shape` and `scale`, or `shape` and `rate`, or `mean` and `sd`; given: `shape`, `scale` and `rate`"
    ),
    (
        "parameter that is a list",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "{normal: {mean: 42.02, sd: [1]}}"),
        ],
        "m.yaml:6:46: `sd` is a list; write a number, a constant's name or a formula"
    ),
    (
        "decimal comma",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "{normal: {mean: 42.02, sd: '0,004'}}"),
        ],
        "m.yaml:6:48: a comma stands outside a function's arguments; write a decimal point, as in 1.5\n"
        "    0,004\n"
        "     ^"
    ),
    (
        "parameter out of range",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "{normal: {mean: 42.02, sd: -1}}"),
        ],
        "m.yaml:6:46: sd is -1, and a number above 0 would be right"
    ),
    (
        "limits in the wrong order",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "{uniform: {lower: 2, upper: 1}}"),
        ],
        "m.yaml:6:47: upper is 1 and lower is 2, and upper above lower would be right"
    ),
    (
        "parameter that is no name",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "{normal: {mean: 42.02, sd: shafft}}"),
        ],
        "m.yaml:6:46: `shafft` is not defined; did you mean `shaft`?\n"
        "    shafft\n"
        "    ^^^^^^"
    ),
    (
        "parameter that is not finite",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "{normal: {mean: 1/0, sd: 1}}"),
        ],
        "m.yaml:6:35: 1/0 divides by zero; write a constant with a finite value\n"
        "    1/0\n"
        "    ^^^"
    ),
    (
        "parameter in another dimension",
        [
            ("inputs:", "constants:\n  play: {value: 1, unit: s}\ninputs:"),
            ("{normal: {mean: 42.02, sd: 0.004}}", "{normal: {mean: 42.02, sd: play}}"),
        ],
        "m.yaml:8:46: the formula's result is in s, and a result in mm is wanted; change the formula or the unit\n"
        "    play\n"
        "    ^^^^"
    ),
    (
        "inputs conditional on each other",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "{normal: {mean: shaft, sd: 1}}"),
            ("mean: 42,", "mean: bore,"),
        ],
        "m.yaml:6:19: `bore` uses `shaft` uses `bore`: a cycle; define one of them without the others"
    ),
    (
        "input conditional on itself",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "{normal: {mean: bore, sd: 1}}"),
        ],
        "m.yaml:6:35: `bore` is not defined; constants and other inputs: `shaft`\n"
        "    bore\n"
        "    ^^^^"
    ),
    (
        "empty truncation",
        [
            ("sd: 0.004}}", "sd: 0.004}}\n    truncate: {}"),
        ],
        "m.yaml:7:5: `truncate` is an empty group of keys; write a group of keys with `lower` or `upper`"
    ),
    (
        "truncation limits in the wrong order",
        [
            ("sd: 0.004}}", "sd: 0.004}}\n    truncate: {lower: 43, upper: 42}"),
        ],
        "m.yaml:7:34: `upper` is 42 and `lower` is 43; write `upper` above `lower`"
    ),
    (
        "truncation by an unknown name",
        [
            ("sd: 0.004}}", "sd: 0.004}}\n    truncate: {lower: limit}"),
        ],
        "m.yaml:7:23: `limit` is not defined; there are no constants\n"
        "    limit\n"
        "    ^^^^^"
    ),
    (
        "weights that are too few",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "{mixture: {weights: [1], distributions: [{normal: {mean: 1, sd: 2}}, {normal: {mean: 2, sd: 2}}]}}"),
        ],
        "m.yaml:6:30: 2 distributions need 2 weights; given: 1"
    ),
    (
        "weights that do not add up",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "{mixture: {weights: [0.5, 0.6], distributions: [{normal: {mean: 1, sd: 2}}, {normal: {mean: 2, sd: 0}}]}}"),
        ],
        "m.yaml:6:30: the weights add up to 1.1; make it 1\n"
        "m.yaml:6:118: sd is 0, and a number above 0 would be right"
    ),
    (
        "negative weight",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "{mixture: {weights: [-0.5, 1.5], distributions: [{normal: {mean: 1, sd: 2}}, {normal: {mean: 2, sd: 2}}]}}"),
        ],
        "m.yaml:6:40: the weight is -0.5; write a number above 0"
    ),
    (
        "misspelt family in a mixture",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "{mixture: {weights: [1], distributions: [{norml: {mean: 1, sd: 2}}]}}"),
        ],
        "m.yaml:6:61: unknown family `norml`; did you mean `normal`?"
    ),
    (
        "density of another name",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "{density: {formula: 2*y, lower: 0, upper: 1}}"),
        ],
        "m.yaml:6:41: `y` is not defined; a density may use: `x`\n"
        "    2*y\n"
        "      ^"
    ),
    (
        "density on an empty support",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "{density: {formula: 2*x, lower: 1, upper: 0}}"),
        ],
        "m.yaml:6:54: `upper` must be above `lower`; exchange them, or widen the support"
    ),
    (
        "density and a constant x",
        [
            ("inputs:", "constants:\n  x: 3\ninputs:"),
            ("{normal: {mean: 42.02, sd: 0.004}}", "{density: {formula: 2*x, lower: 0, upper: 1}}"),
        ],
        "m.yaml:8:39: `x` is the quantity itself in a density, and a constant has this name; rename the constant"
    ),
    (
        "sample without a column",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "{sample: {file: a.csv}}"),
        ],
        "m.yaml:6:20: `sample` needs either `values`, or `file` and `column`; given: `file`"
    ),
    (
        "sample from a missing file",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "{sample: {file: b.csv, column: gap}}"),
        ],
        "m.yaml:6:35: there is no file `b.csv` beside the model; did you mean `bad.csv`?"
    ),
    (
        "sample from a missing column",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "{sample: {file: a.csv, column: gaps}}"),
        ],
        "m.yaml:6:50: the file `a.csv` has no column `gaps`; did you mean `gap`?"
    ),
    (
        "sample outside the folder",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "{sample: {file: ../a.csv, column: gap}}"),
        ],
        "m.yaml:6:35: the file `../a.csv` lies outside the model's folder; put it beside the model"
    ),
    (
        "sample from an absolute path",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "{sample: {file: /etc/passwd, column: gap}}"),
        ],
        "m.yaml:6:35: the file `/etc/passwd` lies outside the model's folder; put it beside the model"
    ),
    (
        "sample with a bad number",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "{sample: {file: bad.csv, column: gap}}"),
        ],
        "DATA/bad.csv:3:1: column `gap`: `0,2` is no finite number; write a number with a decimal point, such as 0.5\n"
        "DATA/bad.csv:4:1: column `gap`: the cell is empty; write a number with a decimal point, such as 0.5"
    ),
    (
        "sample with semicolons",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "{sample: {file: semicolon.csv, column: gap}}"),
        ],
        "m.yaml:6:58: the file `semicolon.csv` has no column `gap`; its cells are separated by semicolons, and commas are needed"
    ),
    (
        "histogram with gaps between classes",
        [
            ("{normal: {mean: 42.02, sd: 0.004}}", "{histogram: {file: classes.csv, columns: {lower: from, upper: to, count: n}}}"),
        ],
        "m.yaml:6:38: row 2 of the classes begins at 1.5, and row 1 ends at 1; each class begins where the one before it ends"
    ),
    (
        "unknown unit",
        [
            ("    unit: mm\n    distribution: {normal: {mean: 42.02", "    unit: mmm\n    distribution: {normal: {mean: 42.02"),
        ],
        "m.yaml:5:11: mmm is not a known unit; did you mean mm?"
    ),
    (
        "units that do not fit",
        [
            ("    unit: mm\n    distribution: {normal: {mean: 42.02", "    unit: kg\n    distribution: {normal: {mean: 42.02"),
        ],
        "m.yaml:12:17: shaft is in mm, and bore is in kg; a sum must have one dimension\n"
        "    bore - shaft\n"
        "           ^^^^^"
    ),
    (
        "unit of the output that does not follow",
        [
            ("formula: gap\n      unit: mm", "formula: gap\n      unit: kg"),
        ],
        "m.yaml:15:16: the formula's result is in mm, and a result in kg is wanted; change the formula or the unit\n"
        "    gap\n"
        "    ^^^"
    ),
    (
        "name that is a function",
        [
            ("  bore:", "  exp:"),
        ],
        "m.yaml:4:3: `exp` is a function of formulas; give the input another name\n"
        "m.yaml:12:10: `bore` is not defined; inputs, constants, steps and outputs: `exp`, `shaft`, `gap` and `clearance`\n"
        "    bore - shaft\n"
        "    ^^^^"
    ),
    (
        "name that is a number",
        [
            ("  bore:", "  pi:"),
        ],
        "m.yaml:4:3: `pi` is the number π of formulas; give the input another name\n"
        "m.yaml:12:10: `bore` is not defined; inputs, constants, steps and outputs: `pi`, `shaft`, `gap` and `clearance`\n"
        "    bore - shaft\n"
        "    ^^^^"
    ),
    (
        "name that is a word",
        [
            ("  bore:", "  and:"),
        ],
        "m.yaml:4:3: `and` is a word of formulas; give the input another name\n"
        "m.yaml:12:10: `bore` is not defined; inputs, constants, steps and outputs: `and`, `shaft`, `gap` and `clearance`\n"
        "    bore - shaft\n"
        "    ^^^^"
    ),
    (
        "name that is no identifier",
        [
            ("  bore:", "  1bore:"),
        ],
        "m.yaml:4:3: `1bore` is no name; a name begins with a letter and has only letters A-Z, digits and `_`, at most 60"
    ),
    (
        "name with a dash",
        [
            ("  bore:", "  bore-1:"),
        ],
        "m.yaml:4:3: `bore-1` is no name; a name begins with a letter and has only letters A-Z, digits and `_`, at most 60"
    ),
    (
        "name given twice",
        [
            ("  bore:", "  clearance:"),
        ],
        "m.yaml:12:10: `bore` is not defined; inputs, constants, steps and outputs: `clearance`, `shaft` and `gap`\n"
        "    bore - shaft\n"
        "    ^^^^\n"
        "m.yaml:14:5: `clearance` is the name of the input in line 4 already; rename one of them"
    ),
    (
        "key given twice",
        [
            ("  shaft:", "  bore:"),
        ],
        "m.yaml:7:3: the key `bore` occurs twice in one group, first in line 4; remove one"
    ),
    (
        "undefined name in a formula",
        [
            ("gap: bore - shaft", "gap: bore - shafft"),
        ],
        "m.yaml:12:17: `shafft` is not defined; did you mean `shaft`?\n"
        "    bore - shafft\n"
        "           ^^^^^^"
    ),
    (
        "two undefined names in a quoted formula",
        [
            ("gap: bore - shaft", 'gap: "bored - shafft"'),
        ],
        "m.yaml:12:11: `bored` is not defined; did you mean `bore`?\n"
        "    bored - shafft\n"
        "    ^^^^^\n"
        "m.yaml:12:19: `shafft` is not defined; did you mean `shaft`?\n"
        "    bored - shafft\n"
        "            ^^^^^^"
    ),
    (
        "undefined name in a folded formula",
        [
            ("gap: bore - shaft", "gap: >-\n      bore -\n      shafft"),
        ],
        "m.yaml:12:10: `shafft` is not defined; did you mean `shaft`?\n"
        "    bore - shafft\n"
        "           ^^^^^^"
    ),
    (
        "formula that ends too early",
        [
            ("gap: bore - shaft", "gap: bore -"),
        ],
        "m.yaml:12:15: the formula ends behind -; write a number or a name there\n"
        "    bore -\n"
        "         ^"
    ),
    (
        "formula with a foreign sign",
        [
            ("gap: bore - shaft", "gap: bore − shaft"),
        ],
        "m.yaml:12:15: '−' has no meaning in a formula; write -\n"
        "    bore − shaft\n"
        "         ^"
    ),
    (
        "formula without an input",
        [
            ("inputs:", "constants:\n  play: {value: 1, unit: mm}\ninputs:"),
            ("formula: gap", "formula: play"),
        ],
        "m.yaml:17:16: the output `clearance` contains no input, so that it has no distribution; use at least one input"
    ),
    (
        "cycle of two",
        [
            ("gap: bore - shaft", "gap: bore - shaft * clearance"),
        ],
        "m.yaml:12:10: `gap` uses `clearance` uses `gap`: a cycle; define one of them without the others"
    ),
    (
        "cycle of one",
        [
            ("gap: bore - shaft", "gap: bore - gap"),
        ],
        "m.yaml:12:10: `gap` is defined by itself; define it without its own name"
    ),
    (
        "input that is not used",
        [
            ("gap: bore - shaft", "gap: bore"),
        ],
        "m.yaml:7:3: the input `shaft` is not used by any output; remove it, or use it"
    ),
    (
        "constant that is no number",
        [
            ("inputs:", "constants:\n  play: much\ninputs:"),
        ],
        "m.yaml:4:9: `play` is the text `much`; write a number, or a group of keys with `value`"
    ),
    (
        "constant without a value",
        [
            ("inputs:", "constants:\n  play: {unit: mm}\ninputs:"),
        ],
        "m.yaml:4:3: `play` lacks the key `value`; add it"
    ),
    (
        "requirement without an event",
        [
            ("    event: clearance > 0\n", ""),
        ],
        "m.yaml:18:5: entry 1 of `requirements` needs either `event` and `probability`, or `quantile`; given: `probability`"
    ),
    (
        "requirement without a name",
        [
            ("  - name: Fits\n    event", "  - event"),
        ],
        "m.yaml:18:5: entry 1 of `requirements` lacks the key `name`; add it"
    ),
    (
        "requirement of two kinds",
        [
            ("    event: clearance > 0\n", "    event: clearance > 0\n    quantile: {output: clearance, at: 0.5, at_most: 1}\n"),
        ],
        "m.yaml:18:5: entry 1 of `requirements` needs either `event` and `probability`, or `quantile`; given: `event`, `quantile` and `probability`"
    ),
    (
        "requirement given twice",
        [
            ("    event: clearance > 0\n    probability: {at_least: 0.99}\n", "    event: clearance > 0\n    probability: {at_least: 0.99}\n  - name: Fits\n    event: clearance > 0\n    probability: {at_least: 0.99}\n"),
        ],
        "m.yaml:21:11: the requirement `Fits` occurs twice, first as entry 1; give each its own name"
    ),
    (
        "probability above 1",
        [
            ("at_least: 0.99", "at_least: 99"),
        ],
        "m.yaml:20:29: `at_least` is the number 99; write a probability from 0 to 1"
    ),
    (
        "probability without a bound",
        [
            ("at_least: 0.99", ""),
        ],
        "m.yaml:20:5: `probability` is an empty group of keys; write a group of keys with `at_least` or `at_most`"
    ),
    (
        "bounds that contradict",
        [
            ("at_least: 0.99", "at_least: 0.9, at_most: 0.1"),
        ],
        "m.yaml:20:43: `at_least` is 0.9 and `at_most` is 0.1: nothing meets both; exchange them"
    ),
    (
        "event over a misspelt output",
        [
            ("event: clearance > 0", "event: clearence > 0"),
        ],
        "m.yaml:19:12: `clearence` is not defined; did you mean `clearance`?\n"
        "    clearence > 0\n"
        "    ^^^^^^^^^"
    ),
    (
        "event over an input",
        [
            ("event: clearance > 0", "event: bore > 0"),
        ],
        "m.yaml:19:12: `bore` is not defined; outputs: `clearance`\n"
        "    bore > 0\n"
        "    ^^^^"
    ),
    (
        "event that is a number",
        [
            ("event: clearance > 0", "event: clearance"),
        ],
        "m.yaml:19:12: the event is a number, and a condition is wanted; compare it, as in a > 0\n"
        "    clearance\n"
        "    ^^^^^^^^^"
    ),
    (
        "quantile without a bound",
        [
            ("    event: clearance > 0\n    probability: {at_least: 0.99}\n", "    quantile: {output: clearance, at: 0.5}\n"),
        ],
        "m.yaml:19:5: `quantile` needs `at_least` or `at_most`; given: none of them"
    ),
    (
        "quantile of an unknown output",
        [
            ("    event: clearance > 0\n    probability: {at_least: 0.99}\n", "    quantile: {output: bore, at: 0.5, at_most: 1}\n"),
        ],
        "m.yaml:19:24: `bore` is no output; outputs: `clearance`"
    ),
    (
        "quantile at 1",
        [
            ("    event: clearance > 0\n    probability: {at_least: 0.99}\n", "    quantile: {output: clearance, at: 1, at_most: 1}\n"),
        ],
        "m.yaml:19:39: `at` is the number 1; write a probability strictly between 0 and 1"
    ),
    (
        "quantile bounds that contradict",
        [
            ("    event: clearance > 0\n    probability: {at_least: 0.99}\n", "    quantile: {output: clearance, at: 0.5, at_least: 2, at_most: 1}\n"),
        ],
        "m.yaml:19:66: `at_least` is 2 and `at_most` is 1: nothing meets both; exchange them"
    ),
    (
        "readings that are no probabilities",
        [
            ("quantiles: [0.1]", "quantiles: [0, 0.1, 1, x]"),
        ],
        "m.yaml:22:15: entry 1 of `quantiles` is the number 0; write a probability strictly between 0 and 1\n"
        "m.yaml:22:23: entry 3 of `quantiles` is the number 1; write a probability strictly between 0 and 1\n"
        "m.yaml:22:26: entry 4 of `quantiles` is the text `x`; write a probability strictly between 0 and 1"
    ),
    (
        "readings that are no list",
        [
            ("quantiles: [0.1]", "quantiles: 0.1"),
        ],
        "m.yaml:22:14: `quantiles` is the number 0.1; write a list of probabilities"
    ),
    (
        "reading given twice",
        [
            ("quantiles: [0.1]", "quantiles: [0.1, 0.1]"),
        ],
        "m.yaml:22:20: `quantiles` has 0.1 twice; remove one"
    ),
    (
        "values of an unknown output",
        [
            ("quantiles: [0.1]", "values: {clearence: [1]}"),
        ],
        "m.yaml:22:12: `clearence` is no output; did you mean `clearance`?"
    ),
    (
        "probability of half an event",
        [
            ("quantiles: [0.1]", 'probabilities: ["clearance <"]'),
        ],
        "m.yaml:22:30: the formula ends behind <; write a number or a name there\n"
        "    clearance <\n"
        "              ^"
    ),
    (
        "misspelt reading",
        [
            ("quantiles: [0.1]", "quantile: [0.1]"),
        ],
        "m.yaml:22:3: unknown key `quantile` in `readings`; did you mean `quantiles`?"
    ),
    (
        "accuracy out of range",
        [
            ("title: Gap", "title: Gap\naccuracy: {digits: 13, seed: -1}"),
        ],
        "m.yaml:3:20: `digits` is the number 13; write a whole number from 1 to 12\n"
        "m.yaml:3:30: `seed` is the number -1; write a whole number from 0 to 9007199254740991"
    ),
    (
        "digits that are no whole number",
        [
            ("title: Gap", "title: Gap\naccuracy: {digits: 3.5}"),
        ],
        "m.yaml:3:20: `digits` is the number 3.5; write a whole number from 1 to 12"
    ),
    (
        "time limit without a known unit",
        [
            ("title: Gap", "title: Gap\naccuracy: {time_limit: 5 days}"),
        ],
        "m.yaml:3:24: `time_limit` is `5 days`; write a time such as `60 s`, `5 min` or `1 h`"
    ),
    (
        "time limit of nothing",
        [
            ("title: Gap", "title: Gap\naccuracy: {time_limit: 0}"),
        ],
        "m.yaml:3:24: `time_limit` is `0`; write a time such as `60 s`, `5 min` or `1 h`"
    ),
    (
        "dependence of an unknown input",
        [
            ("transformation:", "dependence:\n  - inputs: [bore, shaaft]\n    copula: {gaussian: {pearson: 0.3}}\ntransformation:"),
        ],
        "m.yaml:11:20: `shaaft` is no input; did you mean `shaft`?"
    ),
    (
        "dependence of one input",
        [
            ("transformation:", "dependence:\n  - inputs: [bore]\n    copula: {gaussian: {pearson: 0.3}}\ntransformation:"),
        ],
        "m.yaml:11:13: `inputs` has 1 entry; write a list of two or more inputs"
    ),
    (
        "dependence names an input twice",
        [
            ("transformation:", "dependence:\n  - inputs: [bore, bore]\n    copula: {gaussian: {pearson: 0.3}}\ntransformation:"),
        ],
        "m.yaml:11:20: the input `bore` is named twice in one entry; name it once"
    ),
    (
        "two entries name one input",
        [
            ("transformation:", "dependence:\n  - inputs: [bore, shaft]\n    copula: {gaussian: {pearson: 0.3}}\n  - inputs: [shaft, bore]\n    copula: {gaussian: {pearson: 0.3}}\ntransformation:"),
        ],
        "m.yaml:13:14: the input `shaft` is named by entry 1 of `dependence` already; join the two entries\n"
        "m.yaml:13:21: the input `bore` is named by entry 1 of `dependence` already; join the two entries"
    ),
    (
        "dependence without a kind",
        [
            ("transformation:", "dependence:\n  - inputs: [bore, shaft]\n    basis: Trial\ntransformation:"),
        ],
        "m.yaml:11:5: entry 1 of `dependence` needs exactly one of `copula`, `joint_density` or `joint_sample`; given: none of them"
    ),
    (
        "misspelt copula",
        [
            ("transformation:", "dependence:\n  - inputs: [bore, shaft]\n    copula: {gauss: {pearson: 0.3}}\ntransformation:"),
        ],
        "m.yaml:12:14: unknown copula `gauss`; did you mean `gaussian`?"
    ),
    (
        "two copulas",
        [
            ("transformation:", "dependence:\n  - inputs: [bore, shaft]\n    copula: {gaussian: {pearson: 0.3}, clayton: {kendall: 0.3}}\ntransformation:"),
        ],
        "m.yaml:12:40: `copula` has `gaussian` and `clayton`; keep one of them"
    ),
    (
        "two strengths",
        [
            ("transformation:", "dependence:\n  - inputs: [bore, shaft]\n    copula: {gaussian: {pearson: 0.3, kendall: 0.2}}\ntransformation:"),
        ],
        "m.yaml:12:14: `gaussian` needs exactly one of `pearson`, `spearman`, `kendall` or `normal_scores`; given: `pearson` and `kendall`"
    ),
    (
        "unknown strength",
        [
            ("transformation:", "dependence:\n  - inputs: [bore, shaft]\n    copula: {gaussian: {rho: 0.3}}\ntransformation:"),
        ],
        "m.yaml:12:25: unknown key `rho` in `gaussian`; its keys: `pearson`, `spearman`, `kendall` and `normal_scores`"
    ),
    (
        "student_t without degrees of freedom",
        [
            ("transformation:", "dependence:\n  - inputs: [bore, shaft]\n    copula: {student_t: {kendall: 0.3}}\ntransformation:"),
        ],
        "m.yaml:12:14: `student_t` lacks the key `degrees_of_freedom`; add it"
    ),
    (
        "degrees of freedom below 0",
        [
            ("transformation:", "dependence:\n  - inputs: [bore, shaft]\n    copula: {student_t: {kendall: 0.3, degrees_of_freedom: -1}}\ntransformation:"),
        ],
        "m.yaml:12:60: `degrees_of_freedom` is -1; write a number above 0"
    ),
    (
        "correlation of 1",
        [
            ("transformation:", "dependence:\n  - inputs: [bore, shaft]\n    copula: {gaussian: {pearson: 1}}\ntransformation:"),
        ],
        "m.yaml:12:34: `pearson` is 1; write a number strictly between -1 and 1"
    ),
    (
        "clayton with negative dependence",
        [
            ("transformation:", "dependence:\n  - inputs: [bore, shaft]\n    copula: {clayton: {kendall: -0.3}}\ntransformation:"),
        ],
        "m.yaml:12:33: `kendall` is -0.3; write a number strictly between 0 and 1 for a clayton copula"
    ),
    (
        "gumbel parameter below 1",
        [
            ("transformation:", "dependence:\n  - inputs: [bore, shaft]\n    copula: {gumbel: {parameter: 0.5}}\ntransformation:"),
        ],
        "m.yaml:12:34: `parameter` is 0.5; write a number of at least 1"
    ),
    (
        "matrix of the wrong shape",
        [
            ("transformation:", "dependence:\n  - inputs: [bore, shaft]\n    copula: {gaussian: {pearson: [[1, 0.3]]}}\ntransformation:"),
        ],
        "m.yaml:12:34: `pearson` is a 1×2 matrix; write a 2×2 matrix in the order of `inputs`"
    ),
    (
        "matrix that is not symmetric",
        [
            ("transformation:", "dependence:\n  - inputs: [bore, shaft]\n    copula: {gaussian: {pearson: [[1, 0.3], [0.2, 1]]}}\ntransformation:"),
        ],
        "m.yaml:12:46: `pearson` is not symmetric: row 2, column 1 is 0.2, and row 1, column 2 is 0.3; make them equal"
    ),
    (
        "matrix without ones on its diagonal",
        [
            ("transformation:", "dependence:\n  - inputs: [bore, shaft]\n    copula: {gaussian: {pearson: [[2, 0.3], [0.3, 1]]}}\ntransformation:"),
        ],
        "m.yaml:12:36: the diagonal of `pearson` has 2 in row 1; write 1"
    ),
    (
        "matrix entry out of range",
        [
            ("transformation:", "dependence:\n  - inputs: [bore, shaft]\n    copula: {gaussian: {pearson: [[1, 3], [3, 1]]}}\ntransformation:"),
        ],
        "m.yaml:12:44: `pearson` is 3 in row 2, column 1; write a number strictly between -1 and 1"
    ),
    (
        "one number for three inputs",
        [
            ("transformation:", "  shim:\n    unit: mm\n    distribution: {uniform: {lower: 0, upper: 1}}\ntransformation:"),
            ("transformation:", "dependence:\n  - inputs: [bore, shaft, shim]\n    copula: {gaussian: {pearson: 0.3}}\ntransformation:"),
            ("gap: bore - shaft", "gap: bore - shaft - shim"),
        ],
        "m.yaml:15:34: `pearson` is one number for 3 inputs; write a full matrix of 3 rows in the order of `inputs`"
    ),
    (
        "matrix that is not positive definite",
        [
            ("transformation:", "  shim:\n    unit: mm\n    distribution: {uniform: {lower: 0, upper: 1}}\ntransformation:"),
            ("transformation:", "dependence:\n  - inputs: [bore, shaft, shim]\n    copula: {gaussian: {pearson: [[1, 0.9, -0.9], [0.9, 1, 0.9], [-0.9, 0.9, 1]]}}\ntransformation:"),
            ("gap: bore - shaft", "gap: bore - shaft - shim"),
        ],
        "m.yaml:15:34: the matrix is not positive definite: its smallest eigenvalue is -0.8; such correlations cannot occur together, so bring some closer to 0"
    ),
    (
        "dependent and conditional",
        [
            ("transformation:", "dependence:\n  - inputs: [bore, shaft]\n    copula: {gaussian: {pearson: 0.3}}\ntransformation:"),
            ("{normal: {mean: 42.02, sd: 0.004}}", "{normal: {mean: shaft, sd: 1}}"),
        ],
        "m.yaml:11:14: the input `bore` depends on `shaft` through its distribution; remove one of the two dependences"
    ),
    (
        "joint density beside a distribution",
        [
            ("transformation:", "dependence:\n  - inputs: [bore, shaft]\n    joint_density: {density: bore*shaft, support: bore > 0}\ntransformation:"),
        ],
        "m.yaml:6:5: a joint entry of `dependence` describes the input `bore` already; remove its `distribution`\n"
        "m.yaml:9:5: a joint entry of `dependence` describes the input `shaft` already; remove its `distribution`"
    ),
    (
        "tab in the indentation",
        [
            ("  bore:", '\tbore:'),
        ],
        "m.yaml:4:1: a tab in the indentation; indent with spaces"
    ),
    (
        "alias",
        [
            ("title: Gap", "title: *gap"),
        ],
        "m.yaml:2:8: the alias `*gap` is not allowed; write the value out"
    ),
    (
        "anchor",
        [
            ("title: Gap", "title: &gap Gap"),
        ],
        "m.yaml:2:8: the anchor `&gap` is not allowed; write each value out where it is used"
    ),
    (
        "tag",
        [
            ("title: Gap", "title: !gap Gap"),
        ],
        "m.yaml:2:8: the tag `!gap` is not allowed; remove it, or quote the text that starts with `!`"
    ),
    (
        "octal or decimal",
        [
            ("42.02", "042"),
        ],
        "m.yaml:6:35: `042` can be read as octal or as decimal; quote it, or drop the leading zeros"
    ),
    (
        "base 60 or text",
        [
            ("title: Gap", "title: 12:30"),
        ],
        "m.yaml:2:8: `12:30` can be read as a number to base 60 or as text; quote it"
    ),
    (
        "infinite number",
        [
            ("42.02", ".inf"),
        ],
        "m.yaml:6:35: `.inf` is no finite number; leave out a limit that does not exist, or quote it"
    ),
    (
        "number that is too large",
        [
            ("42.02", "1e999"),
        ],
        "m.yaml:6:35: `1e999` is too large for a number; the largest is 1.7e308"
    ),
    (
        "colon inside a text",
        [
            ("title: Gap", "title: Gap: bore to shaft"),
        ],
        "m.yaml:2:11: a colon followed by a space cannot stand here; quote the text that contains it, or check the indentation"
    ),
    (
        "bracket that is not closed",
        [
            ("{mean: 42.02, sd: 0.004}}", "{mean: 42.02, sd: 0.004}"),
        ],
        "m.yaml:7:3: a `{…}` or `[…]` is not closed or lacks a comma before this"
    ),
    (
        "second document",
        [
            ("readings:", "---\nreadings:"),
        ],
        "m.yaml:21:1: a second document starts here; a model file holds one"
    ),
    (
        "control character",
        [
            ("title: Gap", 'title: Gap\x07'),
        ],
        "m.yaml:2:11: the control character U+0007 cannot stand in a model; remove it"
    ),
]
