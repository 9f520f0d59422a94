"""The report as a page: complete, self-contained, safe, in order, the same every time."""

from __future__ import annotations

import html as html_text
import re
import subprocess
import sys
from dataclasses import replace
from html.parser import HTMLParser
from pathlib import Path

import fixtures
import numpy as np
import pytest

from outspread.findings.results import Absent, Figure
from outspread.findings.writing import scale_of
from outspread.reporting import curves, plots
from outspread.reporting.html import render_html
from outspread.reporting.numbers import error_text, value_text
from outspread.reporting.ticks import tick_labels

HERE = Path(__file__).parent
KINDS = tuple(fixtures.ALL)
SECTIONS = (
    "verdicts", "setup", "plan", "derivation", "result", "evidence", "drivers", "assumptions", "cautions",
    "reproduce",
)  # fmt: skip


class Page(HTMLParser):
    """Collects what the checks ask for; HTML void elements need no end."""

    VOID = frozenset({"meta", "img", "br", "link", "hr", "input"})

    def __init__(self, text):
        super().__init__()
        self.open, self.ids, self.addresses, self.images, self.headings = [], [], [], [], []
        self.tables, self.tags, self.words = [], set(), []
        self.feed(text)

    def handle_starttag(self, tag, attributes):
        values = dict(attributes)
        self.tags.add(tag)
        if tag not in self.VOID:
            self.open.append(tag)
        if "id" in values:
            self.ids.append(values["id"])
        self.addresses += [values[key] for key in ("href", "src", "action", "data") if key in values]
        if tag == "img":
            self.images.append(values)
        if re.fullmatch(r"h[1-6]", tag):
            self.headings.append(int(tag[1]))
        if tag == "table":
            self.tables.append({"caption": False, "scope": True})
        if tag == "caption":
            self.tables[-1]["caption"] = True
        if tag == "th" and "scope" not in values:
            self.tables[-1]["scope"] = False

    def handle_endtag(self, tag):
        assert self.open.pop() == tag, f"</{tag}> closes nothing"

    def handle_data(self, data):
        if self.open and self.open[-1] != "style":
            self.words.append(data)

    @property
    def text(self):
        return re.sub(r"\s+", " ", "".join(self.words))


@pytest.fixture(scope="module")
def parsed(page):
    found = {}

    def get(name):
        if name not in found:
            found[name] = Page(page(name))
        return found[name]

    return get


@pytest.mark.parametrize("name", KINDS)
def test_the_sections_stand_in_the_order_of_a_reviewers_questions(parsed, name):
    found = [identity for identity in parsed(name).ids if identity in SECTIONS]
    assert tuple(found) == SECTIONS


@pytest.mark.parametrize("name", KINDS)
def test_nothing_is_asked_from_outside(parsed, page, name):
    """Every address is inside the page or carried by it; there is no script and no import."""
    assert all(address.startswith(("data:", "#")) for address in parsed(name).addresses)
    assert not parsed(name).tags & {"script", "iframe", "object", "embed", "link", "form"}
    styles = "".join(re.findall(r"<style.*?</style>", page(name), re.DOTALL))
    assert "url(" not in styles
    assert "@import" not in styles


@pytest.mark.parametrize("name", KINDS)
def test_every_link_has_its_target(parsed, name):
    page = parsed(name)
    inside = [address[1:] for address in page.addresses if address.startswith("#")]
    assert inside
    assert set(inside) <= set(page.ids)
    assert len(set(page.ids)) == len(page.ids)


@pytest.mark.parametrize("name", KINDS)
def test_readers_who_cannot_see_are_served(parsed, page, name):
    """Every picture has its words, every table a caption and scopes, no level of heading is skipped."""
    found = parsed(name)
    assert '<html lang="en">' in page(name)
    assert all(image.get("alt", "").strip() for image in found.images)
    assert all(table["caption"] and table["scope"] for table in found.tables)
    assert found.headings[0] == 1
    assert all(after - before <= 1 for before, after in zip(found.headings, found.headings[1:], strict=False))


def figures(output):
    """All figures of an output with the scale by which the results file rounds each."""
    scale = scale_of(output)
    yield from (
        (found, scale) for found in (output.mean, output.standard_deviation, output.median, output.mode)
    )
    yield from ((found, 1.0) for found in (output.skewness, output.kurtosis))
    yield from ((found, scale) for found in output.support)
    yield from ((found, scale) for _, found in output.quantiles)
    yield from ((end, scale) for row in output.coverage for end in (row.lower, row.upper))
    yield from ((found, 0.0) for row in output.values for found in (row.cdf, row.ccdf))
    if output.atom_mass != Figure(1.0, 0.0):  # the table of a discrete law has no column for a density
        yield from ((row.pdf, 0.0) for row in output.values)
    yield from ((found, 0.0) for _, found in output.probabilities)


@pytest.mark.parametrize("name", KINDS)
def test_every_figure_is_printed_with_its_error_or_the_reason_why_there_is_none(parsed, report, name):
    text = parsed(name).text.replace("−", "-")
    for output in report(name).results.outputs:
        for found, scale in figures(output):
            if isinstance(found, Absent):
                assert found.because in text
                continue
            value = value_text(found.value, found.error, scale)
            error = error_text(found.value, found.error, scale)
            assert found.error == 0 or "±" in text or "Error" in text
            for part in (value, error):
                plain = re.sub("[⁰¹²³⁴⁵⁶⁷⁸⁹⁻]+", lambda m: m[0].translate(_PLAIN), part).replace("−", "-")
                assert plain in text, part


_PLAIN = str.maketrans("⁰¹²³⁴⁵⁶⁷⁸⁹⁻", "0123456789-")


def test_the_first_section_answers_in_words_and_numbers(parsed, report):
    text = parsed("clearance").text
    assert "One of two requirements is not met: “The parts can be assembled”." in text
    assert "With probability 0.95, clearance lies between 0.007450 and 0.03255\xa0mm" in text.replace(
        " mm", "\xa0mm"
    )
    assert "at least 0.999" in text


def test_an_undecided_requirement_says_why_and_is_not_called_met(parsed):
    text = parsed("mooring").text
    assert "undecided" in text
    assert "the limit lies within the stated error of the figure" in text
    assert "An undecided requirement is not a met one" in text


def test_a_disagreement_stands_above_every_verdict(parsed):
    text = parsed("mooring").text
    warning = text.index("Do not use this result: a second derivation of margin disagrees with the first.")
    assert warning < text.index("Requirements of the model")


def test_safety_brings_the_cautions_that_refer_to_codes_and_licensed_practice(parsed):
    assert "does not replace the codes, standards and regulations" in parsed("mooring").text
    assert "licensed or chartered" in parsed("mooring").text
    assert "licensed or chartered" not in parsed("clearance").text


def test_what_no_model_states_is_said_not_to_be_stated(parsed):
    assert "not stated" in parsed("ratio").text
    assert "The model states no requirement" in parsed("ratio").text


def test_hostile_text_stays_text():
    """A model's words are never markup: title, names, basis, units and formulas of a hostile model."""
    nasty = "<script>alert(1)</script>&\"'><img src=x onerror=alert(1)>"
    data = fixtures.overspill()
    model = replace(
        data.model,
        title=nasty,
        purpose=nasty,
        record={"number": nasty, "revision": nasty},
        inputs=tuple(
            replace(item, basis=nasty, description=nasty, symbol=nasty) for item in data.model.inputs
        ),
        outputs=tuple(replace(item, unit=nasty, symbol=nasty, text=nasty) for item in data.model.outputs),
        cautions=(nasty,),
    )
    outputs = tuple(replace(item, unit=nasty) for item in data.results.outputs)
    text = render_html(replace(data, model=model, results=replace(data.results, outputs=outputs)))
    found = Page(text)
    assert "script" not in found.tags
    assert all(image["src"].startswith("data:") and "onerror" not in image for image in found.images)
    assert html_text.escape(nasty, quote=False).split("&")[0] in text


def test_the_page_is_the_same_under_another_hash_seed(page):
    program = (
        "import sys, hashlib; sys.path.insert(0, sys.argv[1]); import fixtures\n"
        "from outspread.reporting.html import render_html\n"
        "print(hashlib.sha256(render_html(fixtures.overspill()).encode()).hexdigest())\n"
    )
    import hashlib
    import os

    environment = {**os.environ, "PYTHONHASHSEED": "4711", "PYTHONPATH": os.pathsep.join(sys.path)}
    run = subprocess.run(
        [sys.executable, "-c", program, str(HERE)],
        env=environment,
        capture_output=True,
        text=True,
        check=True,
    )
    assert run.stdout.strip() == hashlib.sha256(page("overspill").encode()).hexdigest()


def test_formulas_are_numbered_from_one_without_a_gap(parsed):
    numbers = [int(identity[3:]) for identity in parsed("clearance").ids if identity.startswith("eq-")]
    assert numbers == list(range(1, len(numbers) + 1))
    assert len(numbers) >= 8


def test_limits_are_read_from_events_and_from_quantile_requirements(report):
    found = curves.limits(report("clearance").model, "clearance")
    assert [limit.at for limit in found] == [0.002, 0.045]


@pytest.mark.parametrize("name", KINDS)
def test_curves_have_at_most_400_points_and_stay_finite(report, name):
    for derived in report(name).outputs:
        law = derived.law
        reach = curves.reach(law)
        low, high = curves.window(reach)
        assert np.isfinite([low, high]).all()
        assert low < high
        both = curves.sample(law, low, high)
        assert both.density.x.size <= 400
        assert np.isfinite(both.density.y).all()
        assert both.density.top > 0
        assert both.x.size <= 500
        assert (np.diff(both.cdf) >= -1e-12).all()
        x, below, above = curves.tails(law, *curves.tail_window(reach))
        assert x.size <= 400
        assert np.nanmax(below) <= 1.0
        assert np.nanmax(above) <= 1.0


def test_the_range_of_a_figure_is_that_of_the_quantiles(report):
    """Rough ranges come close to the exact quantiles, of the normal law for instance."""
    law = report("clearance").outputs[0].law
    reach = curves.reach(law)
    for p in (5e-4, 1e-6, 1e-12):
        for rough, exact in zip(reach.beyond(p), (float(law.icdf(p)), float(law.iccdf(p))), strict=True):
            assert abs(rough - exact) < 0.2 * law.sigma
    assert curves.tail_window(reach)[2] == 1e-12


def test_drawing_asks_a_law_for_few_values(report):
    """A derived law integrates for each value: a report must not cost more than the derivation."""
    asked = []

    class Counting(type(report("clearance").outputs[0].law)):
        def pdf(self, x):
            asked.append(np.size(x))
            return super().pdf(x)

        def cdf(self, x):
            asked.append(np.size(x))
            return super().cdf(x)

        def ccdf(self, x):
            asked.append(np.size(x))
            return super().ccdf(x)

        def icdf(self, p):
            asked.append(20 * np.size(p))
            return super().icdf(p)

    data = report("clearance")
    law = Counting(0.02, 0.0064)
    plots.law_picture(plots.Subject(law, data.results.outputs[0], (), curves.reach(law)))
    plots.tail_picture(plots.Subject(law, data.results.outputs[0], (), curves.reach(law)))
    assert sum(asked) < 1100


def test_an_unbounded_density_is_marked_where_it_is_unbounded(report):
    law = report("bearing_angle").outputs[0].law
    curve = curves.sample(law, *curves.window(curves.reach(law))).density
    assert curve.unbounded == (0.0, 1.0)


def test_thinning_keeps_the_largest_difference():
    points = tuple((float(k), 0.0) for k in range(5000))
    points = (*points[:1234], (1234.0, 9.0), *points[1235:])
    _, y = curves.thinned(points)
    assert y.size <= 400
    assert y.max() == 9.0


def test_a_figure_without_a_bound_is_not_printed_as_exact():
    assert error_text(1.0, float("inf")) == "unknown"
    assert isinstance(Figure(1.0, 0.0), Figure)


@pytest.mark.parametrize(
    ("places", "labels", "power"),
    [
        ([0.0, 0.25, 0.5], ["0.00", "0.25", "0.50"], 0),
        ([-2e-6, 0.0, 2e-6], ["−2", "0", "2"], -6),
        ([42.0198, 42.02, 42.0202], ["42.0198", "42.0200", "42.0202"], 0),
        ([0.0, 250000.0], ["0.0", "2.5"], 5),
        ([3.0], ["3"], 0),
    ],
)
def test_ticks_are_told_apart_and_their_power_is_named_once(places, labels, power):
    assert tick_labels(places) == (labels, power)


def test_a_cut_input_states_the_parameters_of_the_whole_law():
    """The canonical parameters are those of the law before it is cut, and the cut stands beside them."""
    from outspread.laws.build import build_law
    from outspread.reading.model import Distribution, Input
    from outspread.reporting.setup import input_row

    stated = Distribution("normal", {"mean": 60.009, "sd": 0.003}, lower=60.0, upper=60.018)
    row = input_row(Input(name="bore", distribution=stated, unit="mm"), build_law(stated))
    text = str(row.canonical)
    assert "60.009" in text
    assert "0.003" in text
    assert text.endswith("; cut to 60 … 60.018")
