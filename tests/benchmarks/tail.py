"""Speed of fit and bootstrap: `python -m tests.benchmarks.tail`. Everything is a ratio of two times in this one run.

Processor time on one core, the least of several runs. The plain script is what a statistician would write in numpy in
ten minutes: sort, then for every candidate a logarithm, a power and two maxima over its tail.
"""

from __future__ import annotations

import os
import subprocess
import sys
import tempfile
import time
from dataclasses import dataclass
from math import log
from pathlib import Path

import numpy as np
from scipy.special import ndtri

from monitor.tail.gof import MODEL_KEY, Bootstrap
from monitor.tail.judge import compile_everything
from monitor.tail.judgement import Options
from monitor.tail.kernels.chance import key_of
from monitor.tail.sample import Sample
from monitor.tail.scan import find_tail, law_of
from storage.grid import cell_of

ROOT = Path(__file__).resolve().parents[2]


@dataclass(frozen=True)
class Line:
    what: str
    measured: str
    target: str
    met: bool | None

    def text(self) -> str:
        mark = {True: "met", False: "MISSED", None: ""}[self.met]
        return f"{self.what:58} {self.measured:>22}   {self.target:18} {mark}"


def least(call, runs: int = 7) -> float:
    """Least processor time of several runs, in seconds."""
    times = []
    for _ in range(runs):
        begin = time.process_time()
        call()
        times.append(time.process_time() - begin)
    return min(times)


def sizes_of(n: int, rng) -> np.ndarray:
    """A lognormal body cut at its 93 % point with a power law of exponent 2.5 above."""
    tail = rng.binomial(n, 0.07)
    edge = np.exp(3 + ndtri(0.93))
    body = np.exp(3 + ndtri(0.93 * rng.random(n - tail)))
    return np.concatenate([body, edge * rng.random(tail) ** (-1 / 1.5)])


def plain_script(sizes: np.ndarray, min_tail: int = 10) -> tuple[float, float]:
    x = np.sort(sizes)
    best, answer = np.inf, (np.nan, np.nan)
    for xmin in np.unique(x):
        tail = x[x >= xmin]
        n = tail.size
        if n < min_tail:
            break
        alpha = 1 + n / np.sum(np.log(tail / xmin))
        model = 1 - (tail / xmin) ** (1 - alpha)
        distance = max(np.max(np.arange(1, n + 1) / n - model), np.max(model - np.arange(n) / n))
        if distance < best:
            best, answer = distance, (alpha, xmin)
    return answer


def fits(rng) -> list[Line]:
    lines, ours, options = [], {}, Options()
    for n in (10**3, 10**4, 10**5, 10**6):
        sizes = sizes_of(n, rng)
        ours[n] = least(lambda sizes=sizes: find_tail(Sample.of_sizes(sizes), options), 9)
        sort = least(lambda sizes=sizes: np.sort(sizes), 9)
        aim = 4.0 if n == 10**6 else None
        lines.append(
            Line(
                f"fit of {n:,} sizes / np.sort",
                f"{ours[n] / sort:.2f}",
                "<= 4" if aim else "",
                ours[n] / sort <= aim if aim else None,
            )
        )
        if n <= 10**4:
            plain = least(lambda sizes=sizes: plain_script(sizes), 2 if n == 10**4 else 3)
            aim = 3000 if n == 10**4 else None
            lines.append(
                Line(
                    f"plain script / fit of {n:,} sizes",
                    f"{plain / ours[n]:,.0f}",
                    ">= 3 000" if aim else "",
                    plain / ours[n] >= aim if aim else None,
                )
            )
    growth = log(ours[10**6] / ours[10**4]) / log(100)
    return [*lines, Line("growth exponent of the fit, 10,000 to 1,000,000", f"{growth:.2f}", "<= 1.15", growth <= 1.15)]


def replicates(rng) -> list[Line]:
    """Full replicates of a sample of 10 000 that the law fits; decided ones of the same."""
    sizes = sizes_of(10**4, rng)
    sample, options = Sample.of_sizes(sizes), Options()
    law = law_of(sample, options)
    fit = law.fit()
    replicate = law.replicate(fit, "model", key_of(1, MODEL_KEY))
    full = least(lambda: replicate(0, 200, False)) / 200
    decided = least(lambda: replicate(0, 200, True)) / 200
    sort = least(lambda: np.sort(sizes), 15)
    plain = least(lambda: plain_script(sizes), 2)
    return [
        Line("full replicates a second, 10,000 sizes", f"{1 / full:,.0f}", ">= 4 000", 1 / full >= 4000),
        Line("decided replicates a second, 10,000 sizes", f"{1 / decided:,.0f}", ">= 10 000", 1 / decided >= 10_000),
        Line("full replicate / np.sort, 10,000 sizes", f"{full / sort:.2f}", "<= 3", full / sort <= 3),
        Line("plain script (fit alone) / full replicate", f"{plain / full:,.0f}", "", None),
        Line("plain script (fit alone) / decided replicate", f"{plain / decided:,.0f}", "", None),
    ]


def grid_window(events: int, rng) -> Sample:
    """A window on the grid: cells of a body and of a tail that begins at 100."""
    few = min(events, 10**7)
    cells, counts = np.unique(cell_of(sizes_of(few, rng)), return_counts=True)
    return Sample.of_cells(cells, counts.astype(np.int64) * (events // few))


def grids(rng) -> list[Line]:
    def tested(sample: Sample) -> None:
        options = Options(replicates=200, stop_early=False)
        law = law_of(sample, options)
        bootstrap = Bootstrap(law, law.fit(), options)
        bootstrap.answer(bootstrap.run())

    small, large = grid_window(10**4, rng), grid_window(10**9, rng)
    exact = Sample.of_sizes(sizes_of(10**4, rng))
    times = {name: least(lambda s=s: tested(s), 5) for name, s in (("grid", small), ("large", large), ("exact", exact))}
    ratio = times["large"] / times["exact"]
    return [
        Line("1e9 events on the grid / 10,000 exact, fit and 200 replicates", f"{ratio:.2f}", "about 1", ratio <= 1.5),
        Line("1e9 events on the grid / 10,000 on the grid", f"{times['large'] / times['grid']:.2f}", "", None),
        Line("replicate of 1e9 events on the grid, microseconds", f"{times['large'] / 200 * 1e6:.0f}", "", None),
    ]


def starts() -> list[Line]:
    """First compilation into an empty cache, and a start from it: processor time of processes of their own, from the
    start of the interpreter on."""
    code = "from monitor.parse.compile import warm_parsers; from monitor.tail.judge import compile_everything; "
    code += "import time; compile_everything(); tail = time.process_time(); warm_parsers(); "
    code += "print(tail, time.process_time())"
    with tempfile.TemporaryDirectory() as cache:
        environment = {**os.environ, "NUMBA_CACHE_DIR": cache, "PYTHONPATH": str(ROOT)}

        def seconds() -> list[float]:
            done = subprocess.run(
                [sys.executable, "-c", code], env=environment, capture_output=True, text=True, check=True
            )
            return [float(word) for word in done.stdout.split()]

        tail, first = seconds()
        later = min(seconds()[1] for _ in range(3))
    return [
        Line("first compilation of the tail engine, seconds", f"{tail:.1f}", "", None),
        Line("first compilation of everything, seconds", f"{first:.1f}", "<= 15", first <= 15),
        Line("start with a filled cache, seconds", f"{later:.2f}", "<= 1.5", later <= 1.5),
    ]


def main() -> None:
    compile_everything()
    rng = np.random.default_rng(1)
    for part in (fits(rng), replicates(rng), grids(rng), starts()):
        for line in part:
            print(line.text(), flush=True)


if __name__ == "__main__":
    main()
