"""Published closed forms are found in every spelling, and agree with scipy.stats and with sampling."""

from __future__ import annotations

import json
from math import log, sqrt
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from closed_form_cases import CASES, COUNTS, Case, draw, exponential, law, normal, pair, uniform
from scipy import stats

from outspread.formula.parser import parse
from outspread.reporting.latex import read as read_latex
from outspread.routes.closed_form import ClosedForm, recognise

ALL = [*CASES, *COUNTS]
SPELT = [pytest.param(case, text, id=f"{case.identifier}: {text}") for case in ALL for text in case.spellings]
PROBABILITIES = np.array([1e-60, 1e-30, 1e-12, 1e-9, 1e-6, 1e-4, 0.001, 0.01, 0.1, 0.25, 0.4, 0.5])


def found(case: Case, text: str) -> ClosedForm:
    result = recognise(parse(text), case.laws, case.dependence)
    assert result is not None
    return result


@pytest.mark.parametrize(("case", "text"), SPELT)
def test_every_spelling_gives_the_same_named_law(case: Case, text: str) -> None:
    """Equivalent formulas give one name and the same numbers up to rounding of the parameters."""
    first, other = found(case, case.spellings[0]), found(case, text)
    if case.name:
        assert other.name == case.name
    y = first.law.icdf(np.array([0.01, 0.3, 0.5, 0.9, 0.999]))
    np.testing.assert_allclose(other.law.cdf(y), first.law.cdf(y), rtol=1e-12)
    assert other.source
    assert other.derivation


@pytest.mark.parametrize("case", CASES, ids=[case.identifier for case in CASES])
def test_both_tails_agree_with_the_published_law(case: Case) -> None:
    """cdf and ccdf agree with scipy.stats relative to themselves, each in its own tail."""
    derived = found(case, case.spellings[0]).law
    p = PROBABILITIES[case.least <= PROBABILITIES]
    lower, upper = np.asarray(derived.icdf(p)), np.asarray(derived.iccdf(p))
    left, right = derived.support()
    # next to a finite end, the distance to it is rounded in y itself: compare where y resolves it
    lower = lower[(lower - left > 1e-3 * abs(left)) if np.isfinite(left) else slice(None)]
    upper = upper[(right - upper > 1e-3 * abs(right)) if np.isfinite(right) else slice(None)]
    np.testing.assert_allclose(derived.cdf(lower), case.published.cdf(lower), rtol=case.tolerance)
    np.testing.assert_allclose(derived.ccdf(upper), case.published.sf(upper), rtol=case.tolerance)


@pytest.mark.parametrize("case", CASES, ids=[case.identifier for case in CASES])
def test_the_published_density_agrees_with_the_law(case: Case) -> None:
    """The density coded from the formula and the law's own agree at 200 points."""
    form = found(case, case.spellings[0])
    p = np.linspace(0.0025, 0.9975, 200)
    y = np.asarray(form.law.icdf(p))
    np.testing.assert_allclose(form.density(y), form.law.pdf(y), rtol=1e-9)


@pytest.mark.parametrize("case", COUNTS, ids=[case.identifier for case in COUNTS])
def test_counts_agree_with_the_published_masses(case: Case) -> None:
    """Masses and both tails of counts agree with scipy.stats."""
    form = found(case, case.spellings[0])
    atoms = form.law.atoms()
    heavy = atoms.masses > 1e-12
    k = atoms.values[heavy]
    np.testing.assert_allclose(atoms.masses[heavy], case.published.pmf(k), rtol=1e-12)
    np.testing.assert_allclose(form.density(k), case.published.pmf(k), rtol=1e-12)
    np.testing.assert_allclose(form.law.cdf(k), case.published.cdf(k), rtol=1e-12)
    np.testing.assert_allclose(form.law.ccdf(k[:-1]), case.published.sf(k[:-1]), rtol=1e-11)


@pytest.mark.parametrize(("case", "text"), SPELT)
def test_sampling_the_formula_stays_in_the_band(case: Case, text: str) -> None:
    """Plain draws of the formula as written stay in the Dvoretzky–Kiefer–Wolfowitz band (1 - 1e-9)."""
    count = 20_000
    sample = np.sort(draw(case, text, count))
    cdf = np.asarray(found(case, text).law.cdf(sample))
    above = np.searchsorted(sample, sample, side="right") / count
    below = np.searchsorted(sample, sample, side="left") / count
    band = sqrt(log(2 / 1e-9) / (2 * count))
    atoms = found(case, text).law.continuous_mass < 1
    assert np.max(np.abs(cdf - above)) < band
    if not atoms:
        assert np.max(np.abs(cdf - below)) < band


REFERENCE = {
    case["id"]: case
    for case in json.loads((Path(__file__).parent.parent / "reference" / "open.json").read_text("utf-8"))
}
_BUILDERS = {
    "normal": lambda p: normal(p["mean"], p["sd"]),
    "uniform": lambda p: uniform(p["low"], p["high"]),
    "exponential": lambda p: exponential(p["rate"]),
    "chi_square": lambda p: law("chi_square", degrees_of_freedom=p["df"]),
    "lognormal": lambda p: law("lognormal", log_mean=p["mu_log"], log_sd=p["sigma_log"]),
}
#: case of open.json -> outputs that have a closed form (sources stand in that file beside each value)
COVERED = {
    "o01-jcgm101-four-normals": ("Y",),
    "o02-jcgm101-four-rectangular": ("Y",),
    "o04-jcgm101-comparison-loss-x010": ("Y",),
    "o05-jcgm101-comparison-loss-x050": ("Y",),
    "o06-cartesian-to-polar-x010": ("R",),
    "o16-max-of-six-normals": ("Y",),
    "o18-product-of-standard-normals": ("Z",),
    "o24-box-muller": ("Z1", "Z2"),
    "o25-shared-exponential-3to2": ("S", "T"),
    "o29-sum-of-ten-exponentials": ("S",),
    "o30-product-of-five-uniforms": ("Z",),
    "o35-elliptical-cep": ("R",),
    "o37-f-ratio-5-3": ("F",),
    "o39-correlated-lognormals": ("P", "R"),
    "o40-square-of-normal": ("Y",),
    "o42-log-ratio-of-exponentials": ("L",),
    "o43-student-from-normals": ("T",),
}
_ONE = {
    "sf": lambda law, check: law.ccdf(check["at"]),
    "cdf": lambda law, check: law.cdf(check["at"]),
    "pdf": lambda law, check: law.pdf(check["at"]),
    "quantile": lambda law, check: law.icdf(check["p"]),
    "mean": lambda law, check: law.mean(),
    "sd": lambda law, check: law.standard_deviation(),
    "skewness": lambda law, check: law.skewness(),
    "kurtosis": lambda law, check: law.kurtosis(),
}


def _checks() -> list[Any]:
    chosen = []
    for identifier, outputs in COVERED.items():
        for number, check in enumerate(REFERENCE[identifier]["checks"]):
            if check["quantity"] in _ONE and check.get("output") in outputs:
                chosen.append(
                    pytest.param(identifier, check, id=f"{identifier}-{number}-{check['quantity']}")
                )
    return chosen


@pytest.mark.parametrize(("identifier", "check"), _checks())
def test_published_cases(identifier: str, check: dict[str, Any]) -> None:
    """Cases of the reference file: 10 digits of the precise value, the printed digits of the quoted one."""
    case = REFERENCE[identifier]
    laws = {i["name"]: _BUILDERS[i["family"]](i["params"]) for i in case["inputs"]}
    dependence = None
    if case["dependence"]["type"] == "gaussian-copula":
        matrix = case["dependence"]["normal_score_correlation"]
        dependence = pair(*case["dependence"]["order"], matrix[0][1])
    form = recognise(parse(case["transformation"][check["output"]]), laws, dependence)
    assert form is not None
    value = float(_ONE[check["quantity"]](form.law, check))
    precise = float(check["precise"])
    assert value == pytest.approx(precise, rel=2e-11, abs=1e-15)
    assert abs(value - check["value"]) <= check["tolerance"] + 1e-15 + 2e-11 * abs(value)


def test_a_thousand_normals_give_the_root_sum_of_squares() -> None:
    """1,000 terms are one normal law (source: variances add)."""
    laws = {f"x{i}": normal(0.1 * i, 0.1 + 0.001 * i) for i in range(1000)}
    form = recognise(parse(" + ".join(f"{1 + i / 100}*x{i}" for i in range(1000))), laws, None)
    assert form is not None
    mean = sum((1 + i / 100) * 0.1 * i for i in range(1000))
    sd = sqrt(sum(((1 + i / 100) * (0.1 + 0.001 * i)) ** 2 for i in range(1000)))
    y = mean + sd * np.array([-8.0, -1.0, 0.5])
    np.testing.assert_allclose(form.law.cdf(y), stats.norm(mean, sd).cdf(y), rtol=1e-10)


def test_a_thousand_squares_give_a_chi_law() -> None:
    """The root of a sum of 1,000 squares is a scaled chi variable (scipy.stats.chi)."""
    laws = {f"x{i}": normal(0, 2) for i in range(1000)}
    form = recognise(parse("sqrt(" + " + ".join(f"x{i}^2" for i in range(1000)) + ")"), laws, None)
    assert form is not None
    y = np.array([60.0, 63.0, 66.0])
    np.testing.assert_allclose(form.law.cdf(y), stats.chi(1000, scale=2).cdf(y), rtol=1e-10)


def test_renaming_the_inputs_changes_no_bit() -> None:
    """The order of names in the alphabet has no influence on the numbers."""
    y = np.linspace(-3, 7, 21)
    results = []
    for names in ("abc", "bca", "zyx"):
        laws = {name: normal(k / 3, 0.1 + k / 7) for k, name in enumerate(names)}
        form = recognise(parse("0.3*{} + {}/7 - 1.1*{}".format(*names)), laws, None)
        assert form is not None
        results.append(form.law.cdf(y))
    assert (results[0] == results[1]).all()
    assert (results[0] == results[2]).all()


@pytest.mark.parametrize("case", ALL, ids=[case.identifier for case in ALL])
def test_the_report_can_typeset_every_formula(case: Case) -> None:
    """Densities and derivations use only LaTeX that the report's own reader knows."""
    form = found(case, case.spellings[0])
    assert read_latex(form.density_latex)
    for statement in form.derivation:
        if statement.latex:
            assert read_latex(statement.latex)
        for inline in statement.text.split("$")[1::2]:
            assert read_latex(inline)
