"""Measures how long the commands take and what accuracy a second buys: `python tests/benchmarks/speed.py`.

It prints tables and asserts nothing: times belong to the machine they were taken on.
"""

from __future__ import annotations

import argparse
import math
import os
import platform
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

import outspread

ROOT = Path(__file__).resolve().parents[2]

#: The uplink of the demo model: gamma over lognormal. (shape, scale; mean, sd of the lognormal)
SHAPE, SCALE, NOISE_MEAN, NOISE_SD = 4.2, 0.31, 0.052, 0.008
LOG_SD = math.sqrt(math.log1p((NOISE_SD / NOISE_MEAN) ** 2))
LOG_MEAN = math.log(NOISE_MEAN) - LOG_SD**2 / 2
BODY, TAIL = 20.0, 0.5  # P(ratio <= 20) is a figure of the middle, P(ratio <= 0.5) one of the far tail

RATIO_MODEL = {
    "outspread": 1,
    "title": "Gamma over lognormal",
    "inputs": {
        "signal": {"distribution": {"gamma": {"shape": SHAPE, "scale": SCALE}}},
        "noise": {"distribution": {"lognormal": {"mean": NOISE_MEAN, "sd": NOISE_SD}}},
    },
    "transformation": {"outputs": {"ratio": {"formula": "signal / noise"}}},
}

TEN_INPUTS = (
    "outspread: 1\ntitle: Ten inputs\ninputs:\n"
    + "".join(
        f"  part{k}: {{unit: mm, distribution: {{normal: {{mean: {k + 1}, sd: 0.01}}}}}}\n" for k in range(10)
    )
    + "transformation:\n  outputs:\n    stack:\n      unit: mm\n      formula: "
    + " + ".join(f"part{k}" for k in range(10))
    + "\n"
)


@dataclass(frozen=True)
class Answer:
    """What one way of working out the ratio gives, and how long it took from a loaded interpreter."""

    method: str
    seconds: float
    body: float
    tail: float
    median: float


def command_times(repeats: int) -> list[tuple[str, float]]:
    """Medians of whole processes, interpreter start included, in seconds."""
    model = ROOT / "models" / "uplink-signal-to-noise.yaml"
    with tempfile.TemporaryDirectory() as folder:
        ten = Path(folder) / "ten.yaml"
        ten.write_text(TEN_INPUTS, encoding="utf-8")
        out = ["--out", folder]
        jobs = [
            ("outspread --help", ["--help"], 0.1),
            ("outspread check, 10 inputs", ["check", str(ten)], 0.8),
            ("outspread derive, 2 inputs, HTML", ["derive", str(model), "--only", "html", *out], 4.0),
            ("outspread derive, 2 inputs, PDF", ["derive", str(model), "--only", "pdf", *out], 8.0),
        ]
        return [
            (f"{name} (aim {aim:g} s)", process_time(arguments, repeats)) for name, arguments, aim in jobs
        ]


def process_time(arguments: list[str], repeats: int) -> float:
    start_up = "import sys; from outspread.command import main; sys.exit(main())"
    program = [sys.executable, "-c", start_up, *arguments]
    environment = {**os.environ, "PYTHONPATH": str(ROOT / "compiler")}
    times = []
    for _ in range(repeats):
        start = time.perf_counter()
        done = subprocess.run(program, env=environment, capture_output=True, text=True, check=False)
        times.append(time.perf_counter() - start)
        if done.returncode:
            sys.exit(f"{' '.join(arguments)}: exit status {done.returncode}\n{done.stderr}")
    return statistics.median(times)


def by_outspread() -> tuple[float, float, float]:
    law = outspread.derive(RATIO_MODEL)["ratio"]
    return float(law.cdf(BODY)), float(law.cdf(TAIL)), float(law.icdf(0.5))


def by_sampling() -> tuple[float, float, float]:
    """The script an engineer writes first: a million draws, counted and sorted."""
    draws = np.random.default_rng(20260311)
    count = 1_000_000
    ratio = draws.gamma(SHAPE, SCALE, count) / np.exp(draws.normal(LOG_MEAN, LOG_SD, count))
    return float(np.mean(ratio <= BODY)), float(np.mean(ratio <= TAIL)), float(np.median(ratio))


def by_quadrature() -> tuple[float, float, float]:
    """The script an engineer writes next: the integral over the noise, and a root for the median."""
    from scipy import integrate, optimize, stats

    signal, noise = stats.gamma(SHAPE, scale=SCALE), stats.lognorm(LOG_SD, scale=math.exp(LOG_MEAN))

    def cdf(y: float) -> float:
        return float(integrate.quad(lambda n: signal.cdf(y * n) * noise.pdf(n), 0, math.inf)[0])

    return cdf(BODY), cdf(TAIL), float(optimize.brentq(lambda y: cdf(y) - 0.5, 1, 100, xtol=1e-12))


def by_mpmath() -> tuple[float, float, float]:
    """The same integral at 30 digits, cut at 12 standard deviations of log(noise): the yardstick."""
    from mpmath import gammainc, log, mp, mpf, npdf, quad, sqrt

    mp.dps = 30
    spread = sqrt(log(1 + (mpf(str(NOISE_SD)) / mpf(str(NOISE_MEAN))) ** 2))
    centre = log(mpf(str(NOISE_MEAN))) - spread**2 / 2
    shape, scale = mpf(str(SHAPE)), mpf(str(SCALE))

    def cdf(y: float) -> float:
        def integrand(z: Any) -> Any:
            limit = mpf(y) * mp.exp(centre + spread * z) / scale
            return npdf(z) * gammainc(shape, 0, limit, regularized=True)

        return float(quad(integrand, list(range(-12, 13, 3))))

    low, high = 1.0, 100.0
    mp.dps = 20
    for _ in range(50):
        middle = (low + high) / 2
        low, high = (middle, high) if cdf(middle) < 0.5 else (low, middle)
    mp.dps = 30
    return cdf(BODY), cdf(TAIL), (low + high) / 2


def timed(method: str, work: Callable[[], tuple[float, float, float]], repeats: int) -> Answer:
    work()  # the libraries are loaded outside the clock, for all alike
    times, answer = [], (math.nan, math.nan, math.nan)
    for _ in range(repeats):
        start = time.perf_counter()
        answer = work()
        times.append(time.perf_counter() - start)
    return Answer(method, statistics.median(times), *answer)


def relative(value: float, exact: float) -> str:
    return f"{abs(value / exact - 1):.1e}"


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--repeats", type=int, default=5, help="runs behind each median")
    repeats = parser.parse_args().repeats
    print(f"Python {platform.python_version()}, {os.cpu_count()} cores; medians of {repeats} runs\n")
    print(f"{'command, as a process':48} seconds")
    for name, seconds in command_times(repeats):
        print(f"{name:48} {seconds:7.2f}")
    exact = by_mpmath()
    print(f"\n{'gamma over lognormal: relative error of':38} seconds  {'P(<= 20)':9} {'P(<= 0.5)':9} median")
    for method, work in (
        ("outspread.derive, evidence and all", by_outspread),
        ("numpy, 1,000,000 draws", by_sampling),
        ("scipy, quad and brentq", by_quadrature),
    ):
        answer = timed(method, work, repeats)
        errors = [
            relative(value, truth)
            for value, truth in zip((answer.body, answer.tail, answer.median), exact, strict=True)
        ]
        print(f"{method:38} {answer.seconds:7.2f}  {errors[0]:9} {errors[1]:9} {errors[2]}")
    print(f"\nyardstick (mpmath, 30 digits): {exact[0]:.15g}, {exact[1]:.15g}, {exact[2]:.15g}")


if __name__ == "__main__":
    main()
