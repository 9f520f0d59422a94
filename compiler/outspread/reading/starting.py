"""The commented model that `outspread new NAME` writes to start from; where it goes is left to `command`."""

from __future__ import annotations

import re

from outspread.reading.words import quoted

_TEXT = """\
# A model for Outspread. `outspread check {name}.yaml` reads it, `outspread derive {name}.yaml` derives it.
outspread: 1                     # format of this file
title: {title}
purpose: Says what the result is used for, and what is decided with it.
record: {{number: TN-001, revision: A, status: draft}}   # free texts for the title block

# Numbers with a name. They may stand in formulas and as parameters of distributions.
constants:
  stiffness: {{value: 12.5, unit: N/mm, basis: Data sheet of the spring}}

# The uncertain quantities. `outspread families` lists the distributions and their parameters.
inputs:
  travel:
    symbol: s                    # LaTeX, for the report
    unit: mm
    description: Travel of the spring
    distribution: {{normal: {{mean: 8.0, sd: 0.15}}}}
    basis: Where the distribution comes from
  preload:
    symbol: F_0
    unit: N
    description: Force at zero travel
    distribution: {{uniform: {{lower: 18, upper: 22}}}}
    # truncate: {{lower: 18.5}}    # cuts a distribution, for example at an inspection limit
    basis: Where the distribution comes from

# What is not listed here is independent.
# dependence:
#   - inputs: [travel, preload]
#     copula: {{gaussian: {{pearson: 0.3}}}}

transformation:
  where:                         # named steps, if they help
    spring_force: stiffness * travel
  outputs:
    force:
      symbol: F
      formula: preload + spring_force
      unit: N                    # is checked against the formula
      description: Force of the spring

requirements:
  - name: The force is large enough
    event: force > 110           # numbers are in the outputs' units
    probability: {{at_least: 0.95}}
  - name: The force is not too large
    quantile: {{output: force, at: 0.99, at_most: 130}}

readings:                        # what is stated beside the standard set
  coverage: [0.95, 0.99]
  quantiles: [0.001, 0.5, 0.999]
  probabilities: ["force < 115"]

accuracy: {{digits: 8, seed: 20260401, time_limit: 60 s}}
"""


def starting_model(name: str, schema: str = "") -> str:
    """The text of a small model that reads without a fault, titled after `name`.

    `schema` is the path or URL of the schema for a first line that editors read; none: no such line.
    Raises ValueError where `name` is no plain file name (letters, digits, `-`, `_` and `.`).
    """
    if not re.fullmatch(r"[A-Za-z0-9][A-Za-z0-9_.-]{0,99}", name):
        raise ValueError(
            f"{quoted(name)} is no name for a model; use letters, digits, `-` and `_`, such as `spring-force`"
        )
    name = name.removesuffix(".yaml")
    words = re.sub(r"[-_.]+", " ", name).strip() or name
    title = words[:1].upper() + words[1:]
    # A title such as `12` or `true` would be read as a number or a truth value.
    if not re.match(r"[A-Za-z]", title) or title.lower() in {"true", "false", "null"}:
        title = f'"{title}"'
    reference = f"# yaml-language-server: $schema={schema}\n" if schema else ""
    return reference + _TEXT.format(name=name, title=title)
