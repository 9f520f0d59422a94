"""Hand-built derivations that differ in kind, for the report alone: invented Skerry data, no engine."""

from __future__ import annotations

import hashlib
import json
import math
from dataclasses import replace

import numpy as np
from simple_laws import ArcsineLaw, CauchyLaw, ClippedNormalLaw, NormalLaw, PoissonLaw

from outspread.findings.results import (
    Absent,
    Assumption,
    AtomFigure,
    Coverage,
    Driver,
    Evidence,
    Figure,
    Joint,
    OutputResults,
    Results,
    ValueRow,
    Verdict,
)
from outspread.formula.tree import Apply, Name, Number, add, subtract
from outspread.planning.plan import Plan, PlanStep, RuledOut
from outspread.reading.model import (
    Accuracy,
    Constant,
    Dependence,
    Distribution,
    Input,
    Model,
    Output,
    Readings,
    Requirement,
    Step,
)
from outspread.reporting.data import ReportData
from outspread.routes.derived import DerivedOutput, JointLaw, Statement, SymbolicDensity


def _moment(value, scale):
    if math.isnan(value):
        return Absent("the defining integral does not converge: both tails fall as 1/y²")
    return Figure(value, 1e-11 * scale)


def output_results(name, unit, route, law, quantiles=(0.001, 0.5, 0.999), values=(), probabilities=()):
    """Findings read off a law, with errors in proportion."""
    spread = float(law.icdf(0.84) - law.icdf(0.16)) / 2 or 1.0
    discrete = law.continuous_mass == 0

    def at(p):
        value = float(law.icdf(p))
        return Figure(value, 0.0 if discrete else 3e-11 * spread)

    atoms = law.atoms()
    order = np.sort(np.argsort(-atoms.masses, kind="stable")[:200])
    lower, upper = law.support()
    shown = [k for k in order if atoms.masses[k] > 0]
    return OutputResults(
        name=name,
        unit=unit,
        route=route,
        support=tuple(
            Figure(end, 0.0) if math.isfinite(end) else Absent(f"unbounded {side}")
            for end, side in ((lower, "below"), (upper, "above"))
        ),
        atoms=tuple(
            AtomFigure(float(atoms.values[k]), Figure(float(atoms.masses[k]), float(atoms.errors[k])))
            for k in shown
        ),
        atom_count=int(atoms.values.size),
        atom_mass=Figure(1.0, 0.0)
        if discrete
        else Figure(float(atoms.masses.sum()), 1e-14 * atoms.values.size),
        mean=_moment(law.mean(), spread),
        standard_deviation=_moment(math.sqrt(law.variance()), spread),
        skewness=_moment(law.skewness(), 1),
        kurtosis=_moment(law.kurtosis(), 1),
        median=at(0.5),
        mode=Absent("the density is unbounded at both ends") if any(law.singular_ends()) else at(0.5),
        quantiles=tuple((p, at(p)) for p in quantiles),
        coverage=tuple(
            Coverage(p, kind, at((1 - p) / 2), at((1 + p) / 2))
            for p in (0.95, 0.99)
            for kind in ("symmetric", "shortest")
        ),
        values=tuple(
            ValueRow(
                x,
                Absent("the law is discrete and has no density")
                if discrete
                else Figure(float(law.pdf(x)), 2e-11 * float(law.pdf(x))),
                Figure(float(law.cdf(x)), 2e-12 * float(law.cdf(x))),
                Figure(float(law.ccdf(x)), 2e-12 * float(law.ccdf(x))),
            )
            for x in values
        ),
        probabilities=tuple(probabilities),
        largest_error=3e-12,
    )


def sampling_evidence(name, law, agrees=True, n=1_000_000):
    allowed = math.sqrt(math.log(2 / 1e-4) / (2 * n))
    points = np.asarray(law.icdf((np.arange(200) + 0.5) / 200), float)
    wave = 0.3 * np.sin(np.linspace(0, 9, 200)) * np.linspace(0.2, 1, 200) + (0.0 if agrees else 1.1)
    curve = tuple(zip(points.tolist(), (wave * allowed).tolist(), strict=True))
    largest = max(abs(d) for _, d in curve)
    return (
        Evidence(name, "plain sampling of 1,000,000 draws", n, largest, allowed, agrees, 0.9999, curve),
        Evidence(
            name, "integral of the density", 201, 4.1e-13, 2e-11, True, note="panel by panel against the cdf"
        ),
    )


def build(model, plan, outputs, joint, results, laws):
    payload = json.dumps({"outspread": 1, "model": {"sha256": model.sha256}}, indent=1).encode()
    return ReportData(model, plan, outputs, joint, results, payload, laws)


def model(**changes):
    source = b"outspread: 1\ntitle: fixture\n"
    base = Model(
        file="models/winch-bearing.yaml",
        source=source,
        sha256=hashlib.sha256(source).hexdigest(),
        title="Clearance between the winch bearing and its shaft",
        purpose="Shows that the bearing of the recovery winch can be assembled cold.",
        record={"number": "SK-TN-014", "revision": "C", "status": "for review"},
        safety=False,
        constants=(),
        inputs=(),
        dependence=(),
        steps=(),
        outputs=(),
        requirements=(),
        readings=Readings(),
        accuracy=Accuracy(),
    )
    return replace(base, **changes)


def results_for(model, outputs, **changes):
    base = Results(
        version="0.1.0",
        file=model.file.rsplit("/", 1)[-1],
        title=model.title,
        sha256=model.sha256,
        data={},
        outputs=outputs,
        joint=Joint((), ()),
        requirements=(),
        evidence=(),
        drivers=(),
        assumptions=(
            Assumption("A1", "The inputs follow the distributions stated in the model.", "model"),
            Assumption(
                "A2", "Inputs that no entry of `dependence` names together are independent.", "compiler"
            ),
        ),
    )
    return replace(base, **changes)


def normal_input(name, symbol, mean, sd, unit="mm", **more):
    return Input(name, Distribution("normal", {"mean": mean, "sd": sd}), unit, symbol, **more)


def clearance():
    """Two continuous inputs, region and integral, a closed form beside; one requirement not met."""
    law = NormalLaw(0.02, math.hypot(0.004, 0.005))
    bore = normal_input(
        "bore",
        "D",
        42.02,
        0.004,
        description="Bearing bore, as delivered",
        basis="Capability study, 125 parts, 2025-03",
    )
    shaft = normal_input(
        "shaft", "d", 42.0, 0.005, description="Shaft diameter", basis="Inspection record SK-IR-3"
    )
    written = subtract(Name("bore"), Name("shaft"))
    output = Output(
        "clearance", "bore - shaft", written, written, "mm", r"\Delta", "Diametral clearance at assembly"
    )
    the_model = model(
        inputs=(bore, shaft),
        outputs=(output,),
        constants=(Constant("expansion", 11.5e-6, "1/K", r"\alpha", "", "Handbook value for carbon steel"),),
        dependence=(
            Dependence(("bore", "shaft"), "copula", "gaussian", "pearson", ((1.0, 0.3), (0.3, 1.0))),
        ),
        steps=(Step("gap", "bore - shaft", written, "mm"),),
        requirements=(
            Requirement(
                "The parts can be assembled",
                "probability",
                "clearance > 0.002",
                Apply("greater", (Name("clearance"), Number(0.002, "0.002"))),
                at_least=0.999,
            ),
            Requirement("The fit is not sloppy", "quantile", output="clearance", at=0.99, at_most=0.045),
        ),
    )
    plan = Plan(
        (
            PlanStep(
                "clearance",
                "the distribution of the clearance from two inputs",
                "region_integral",
                "Two inputs, a formula that is monotone in each: the limits of the region are found in one.",
                ("bore", "shaft"),
                inner="shaft",
                outer=("bore",),
                ruled_out=(
                    RuledOut("change_of_variables", "two inputs enter; it needs one."),
                    RuledOut("sampling", "an exact route applies, and sampling would give three digits."),
                ),
                details=(("closed form", "difference of two normals"), ("panels", "24")),
            ),
        )
    )
    mathematics = (
        Statement(
            r"The clearance is at most $y$ exactly where the shaft is at least $D-y$; the region is",
            r"\mathcal{R}_y=\left\{(D,d)\in\mathbb{R}^2:\ D-d\le y\right\}=\left\{(D,d):\ d\ge D-y\right\}",
            "region",
        ),
        Statement(
            "Its probability is the integral of the joint density, inner limits found exactly:",
            r"F_\Delta(y)=\int_{-\infty}^{\infty} f_D(D)\int_{D-y}^{\infty} f_d(d)\,\mathrm{d}d\,\mathrm{d}D",
            "cdf",
        ),
        Statement(
            "With the auxiliary output $v=D$ the map is one to one, and its Jacobian is",
            r"J=\det\begin{pmatrix}\frac{\partial \Delta}{\partial D}&\frac{\partial \Delta}{\partial d}\\"
            r"\frac{\partial v}{\partial D}&\frac{\partial v}{\partial d}\end{pmatrix}"
            r"=\begin{vmatrix}1&-1\\1&0\end{vmatrix}=1",
            "jacobian",
        ),
        Statement(
            "Differentiating under the integral sign gives the density:",
            r"f_\Delta(y)=\int_{-\infty}^{\infty} f_D(D)\,f_d(D-y)\,\mathrm{d}D"
            r"=\int_{-\infty}^{\infty}\frac{1}{2\pi\sigma_D\sigma_d}\exp\left(-\frac{(D-\mu_D)^2}{2\sigma_D^2}"
            r"-\frac{(D-y-\mu_d)^2}{2\sigma_d^2}\right)\mathrm{d}D",
            "density",
        ),
        Statement("The integral is known in closed form (Papoulis 2002, section 6-2).", "", "closed_form"),
    )
    symbolic = SymbolicDensity(
        r"f_\Delta(y)=\frac{1}{\sqrt{2\pi}\,\sigma}\exp\left(-\frac{(y-\mu)^2}{2\sigma^2}\right),\qquad "
        r"\mu=0.02,\ \sigma=\sqrt{\sigma_D^2+\sigma_d^2}",
        law.pdf,
        "normal distribution",
        "Papoulis 2002, section 6-2",
    )
    derived = DerivedOutput("clearance", "region_integral", law, mathematics, symbolic, evaluations=18_432)
    findings = output_results(
        "clearance",
        "mm",
        "region_integral",
        law,
        values=(0.0, 0.01),
        probabilities=(("clearance < 0", Figure(float(law.cdf(0.0)), 1e-14)),),
    )
    results = results_for(
        the_model,
        (findings,),
        requirements=(
            Verdict(
                "The parts can be assembled",
                "not met",
                "P(clearance > 0.002) is at least 0.999",
                Figure(float(law.ccdf(0.002)), 2e-12),
                0.999,
                "at_least",
            ),
            Verdict(
                "The fit is not sloppy",
                "met",
                "the 0.99 quantile of clearance is at most 0.045 mm",
                Figure(float(law.icdf(0.99)), 1e-12),
                0.045,
                "at_most",
                "mm",
            ),
        ),
        evidence=sampling_evidence("clearance", law),
        drivers=(
            Driver("clearance", "shaft", Figure(25 / 41, 1e-9), "share of the variance (first-order index)"),
            Driver("clearance", "bore", Figure(16 / 41, 1e-9), "share of the variance (first-order index)"),
        ),
    )
    laws = {"bore": NormalLaw(42.02, 0.004), "shaft": NormalLaw(42.0, 0.005)}
    return build(the_model, plan, (derived,), (), results, laws)


def overspill():
    """A law with an atom: max(x, 0)."""
    law = ClippedNormalLaw(0.4, 1.0)
    level = normal_input(
        "level", "h", 0.4, 1.0, "cm", description="Wave level above the rim", basis="Tank trial"
    )
    written = Apply("max", (Name("level"), Number(0.0, "0")))
    output = Output("spill", "max(level, 0)", written, written, "cm", "s", "Height of water over the rim")
    the_model = model(title="Water over the rim of the battery well", inputs=(level,), outputs=(output,))
    plan = Plan(
        (
            PlanStep(
                "spill",
                "the distribution of the spill",
                "change_of_variables",
                "One input enters.",
                ("level",),
            ),
        )
    )
    mathematics = (
        Statement("Below the rim the formula is flat, which gives an atom:", r"P(s=0)=F_h(0)", "inverse"),
        Statement("Above it the inverse has one branch:", r"f_s(y)=f_h(y),\qquad y>0", "density"),
    )
    derived = DerivedOutput("spill", "change_of_variables", law, mathematics)
    findings = output_results("spill", "cm", "change_of_variables", law, values=(0.0, 1.0))
    results = results_for(the_model, (findings,), evidence=sampling_evidence("spill", law))
    return build(the_model, plan, (derived,), (), results, {"level": NormalLaw(0.4, 1.0)})


def missed():
    """A discrete law."""
    law = PoissonLaw(5.2)
    lost = Input("lost", Distribution("poisson", {"mean": 3.5}), "1", "B", "Shaded messages", "Ship passages")
    corrupt = Input(
        "corrupt", Distribution("poisson", {"mean": 1.7}), "1", "C", "Wrong checksum", "Receiver log"
    )
    written = add(Name("lost"), Name("corrupt"))
    output = Output("missed", "lost + corrupt", written, written, "1", "N", "Messages missed in one week")
    the_model = model(title="Messages missed in one week", inputs=(lost, corrupt), outputs=(output,))
    plan = Plan(
        (PlanStep("missed", "the sum of two counts", "closed_form", "Poisson sums.", ("lost", "corrupt")),)
    )
    derived = DerivedOutput(
        "missed",
        "closed_form",
        law,
        (
            Statement(
                "The sum of independent Poisson counts is Poisson:",
                r"N\sim\mathrm{Poisson}(\lambda_B+\lambda_C)",
                "closed_form",
            ),
        ),
    )
    findings = output_results("missed", "1", "closed_form", law, values=(0.0, 5.0, 14.0))
    verdict = Verdict(
        "The bulletin has its data",
        "met",
        "P(missed <= 14) is at least 0.995",
        Figure(float(law.cdf(14)), 1e-13),
        0.995,
        "at_least",
    )
    results = results_for(
        the_model, (findings,), requirements=(verdict,), evidence=sampling_evidence("missed", law)
    )
    return build(
        the_model, plan, (derived,), (), results, {"lost": PoissonLaw(3.5), "corrupt": PoissonLaw(1.7)}
    )


def tilt():
    """Two outputs of two inputs with a joint density."""
    inputs = (
        normal_input(
            "along", "a", -0.2, 0.85, "deg", description="Reading along the arm", basis="Ten days at anchor"
        ),
        normal_input(
            "across", "c", 0.15, 0.76, "deg", description="Reading across the arm", basis="The same days"
        ),
    )
    roll = add(Name("along"), Name("across"))
    pitch = subtract(Name("along"), Name("across"))
    outputs = (
        Output("roll", "along + across", roll, roll, "deg", r"\varphi", "Roll of the mast head"),
        Output("pitch", "along - across", pitch, pitch, "deg", r"\theta", "Pitch of the mast head"),
    )
    the_model = model(title="Two-axis tilt correction of the mast head", inputs=inputs, outputs=outputs)
    sigma = math.hypot(0.85, 0.76)
    laws = {"roll": NormalLaw(-0.05, sigma), "pitch": NormalLaw(-0.35, sigma)}
    derived = tuple(DerivedOutput(name, "jacobian", law) for name, law in laws.items())
    along, across = NormalLaw(-0.2, 0.85), NormalLaw(0.15, 0.76)

    def density(points):
        return along.pdf((points[0] + points[1]) / 2) * across.pdf((points[0] - points[1]) / 2) / 2

    joint = JointLaw(
        ("roll", "pitch"),
        density,
        (
            Statement(
                "The map is linear and has one inverse:",
                r"a=\frac{\varphi+\theta}{2},\qquad c=\frac{\varphi-\theta}{2}",
                "inverse",
            ),
            Statement("Its Jacobian is constant:", r"J=\begin{vmatrix}1&1\\1&-1\end{vmatrix}=-2", "jacobian"),
            Statement(
                "The joint density is",
                r"f_{\varphi,\theta}(\varphi,\theta)=\frac{1}{2}\,f_a\left(\frac{\varphi+\theta}{2}\right)"
                r"f_c\left(\frac{\varphi-\theta}{2}\right)",
                "density",
            ),
        ),
    )
    findings = tuple(
        output_results(name, "deg", "jacobian", law, values=(0.0, 2.0)) for name, law in laws.items()
    )
    event = "roll > -3 and roll < 3 and pitch > -3 and pitch < 3"
    plan = Plan(
        tuple(
            PlanStep(
                name, f"the marginal of {name}", "jacobian", "As many outputs as inputs.", ("along", "across")
            )
            for name in laws
        ),
        (
            PlanStep(
                "roll, pitch", "the joint law", "jacobian", "Two outputs of two inputs.", ("along", "across")
            ),
        ),
    )
    results = results_for(
        the_model,
        findings,
        joint=Joint((("roll", "pitch", Figure(0.11147, 1e-9)),), ((event, Figure(0.98812345, 3e-7)),)),
        requirements=(
            Verdict(
                "The vane stays within its class",
                "not met",
                f"P({event}) is at least 0.995",
                Figure(0.98812345, 3e-7),
                0.995,
                "at_least",
            ),
        ),
        evidence=(*sampling_evidence("roll", laws["roll"]), *sampling_evidence("pitch", laws["pitch"])),
        drivers=tuple(
            Driver(output, name, Figure(share, 1e-9), "share of the variance (first-order index)")
            for output in laws
            for name, share in (("along", 0.5557), ("across", 0.4443))
        ),
    )
    return build(the_model, plan, derived, (joint,), results, {"along": along, "across": across})


def mooring():
    """Safety: cautions in full; one requirement undecided, its probability close to the limit."""
    law = NormalLaw(68.0, 11.5)
    inputs = (
        Input(
            "strength",
            Distribution("normal", {"mean": 110.0, "sd": 10.2}, lower=60.0),
            "kN",
            "R",
            "Breaking strength",
            "Twelve pull tests",
        ),
        normal_input(
            "load",
            "Q",
            42.0,
            5.4,
            "kN",
            description="Largest line load of one year",
            basis="Hindcast of 22 winters",
        ),
    )
    written = subtract(Name("strength"), Name("load"))
    output = Output("margin", "strength - load", written, written, "kN", "M", "Strength less load")
    the_model = model(
        title="Breaking strength of the mooring line against the yearly maximum load",
        record={},
        safety=True,
        cautions=("Fatigue and chafe beyond two years are outside this note.",),
        inputs=inputs,
        outputs=(output,),
    )
    plan = Plan(
        (
            PlanStep(
                "margin",
                "strength less load",
                "sampling",
                "No exact route in this version.",
                ("strength", "load"),
            ),
        )
    )
    derived = DerivedOutput(
        "margin", "sampling", law, assumptions=("Sobol' points are scrambled.",), notes=("16 randomisations",)
    )
    findings = output_results("margin", "kN", "sampling", law, values=(0.0, 20.0))
    results = results_for(
        the_model,
        (findings,),
        requirements=(
            Verdict(
                "The line holds through one year",
                "undecided",
                "P(margin <= 0) is at most 1e-06",
                Figure(1.02e-6, 0.3e-6),
                1e-6,
                "at_most",
            ),
        ),
        evidence=sampling_evidence("margin", law, agrees=False),
    )
    return build(the_model, plan, (derived,), (), results, {"load": NormalLaw(42.0, 5.4)})


def ratio():
    """Absent moments; no requirement."""
    law = CauchyLaw()
    inputs = (normal_input("first", "", 0, 1, "1"), normal_input("second", "x_2", 0, 1, "1"))
    written = Apply("divide", (Name("first"), Name("second")))
    output = Output("quotient", "first / second", written, written, "1")
    the_model = model(title="Ratio of two centred errors", purpose="", inputs=inputs, outputs=(output,))
    plan = Plan(
        (PlanStep("quotient", "ratio of two normals", "closed_form", "Known: Cauchy.", ("first", "second")),)
    )
    symbolic = SymbolicDensity(
        r"\frac{1}{\pi\left(1+y^2\right)}", law.pdf, "Cauchy distribution", "Marsaglia 1965"
    )
    derived = DerivedOutput("quotient", "closed_form", law, (), symbolic, NormalLaw(0, 1))
    findings = output_results("quotient", "1", "closed_form", law, values=(0.0, 10.0))
    results = results_for(the_model, (findings,), evidence=sampling_evidence("quotient", law))
    return build(
        the_model, plan, (derived,), (), results, {"first": NormalLaw(0, 1), "second": NormalLaw(0, 1)}
    )


def bearing_angle():
    """A density that is unbounded at both ends of a bounded support."""
    law = ArcsineLaw()
    phase = Input(
        "phase", Distribution("uniform", {"lower": 0, "upper": 1}), "1", r"\phi", "Phase", "Free running"
    )
    written = Apply("power", (Apply("sin", (Name("phase"),)), Number(2.0, "2")))
    output = Output("share", "sin(phase)^2", written, written, "1", "q", "Share of the carrier")
    the_model = model(title="Share of the carrier at a free phase", inputs=(phase,), outputs=(output,))
    plan = Plan(
        (PlanStep("share", "a function of one input", "change_of_variables", "One input.", ("phase",)),)
    )
    derived = DerivedOutput("share", "change_of_variables", law)
    findings = output_results("share", "1", "change_of_variables", law, values=(0.0, 0.5))
    findings = replace(
        findings,
        values=(replace(findings.values[0], pdf=Absent("the density is unbounded here")), findings.values[1]),
    )
    results = results_for(the_model, (findings,), evidence=sampling_evidence("share", law))
    return build(the_model, plan, (derived,), (), results, {})


ALL = {
    "clearance": clearance,
    "overspill": overspill,
    "missed": missed,
    "tilt": tilt,
    "mooring": mooring,
    "ratio": ratio,
    "bearing_angle": bearing_angle,
}
