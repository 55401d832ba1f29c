"""How fast sheets of mixed rows are converted and audited, beside a row-by-row loop and beside the floor.

    python -m tests.evidence.speed [--most ROWS] [--workers W] [--sample N]

Sheets of 1e3, 1e4, ... rows (``mixed``: all designs, exact variance and confidence limits) are read, converted and
audited stage by stage, and by the whole command ``convert --out``. Beside them stand

- a row-by-row loop, written as one would write it well: per row the effect from F and its dfs, its exact variance as a
  Poisson mixture of beta moments, its limits by a bracketing root finder on ``scipy.stats.ncf``. It is timed on a
  sample and scaled to the rows that have a variance;
- the floor: only the calls of ``scipy.special`` that cannot be avoided, on contiguous arrays. For converting, the
  non-centrality of both limits by ``ncfdtrinc``; for auditing, wherever a p is printed with a test, printed or implied,
  the p of both ends of its F and the F of both ends of the p, once; and Bartlett's p of every row with SDs and ns.

Times are processor seconds, which a busy machine disturbs less than the clock.
"""

from __future__ import annotations

import argparse
import math
import os
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import NamedTuple, TypeVar

import numpy as np
from scipy import optimize, special, stats

from extractor import collector
from extractor.audit.constraints import constraints_of
from extractor.audit.homogeneity import bartlett_from_sds
from extractor.audit.propagation import propagate
from extractor.audit.run import audit_evidence
from extractor.catalogue.relation import BETWEEN, catalogue
from extractor.codebook import default_codebook
from extractor.evidence import Evidence, gather
from extractor.routes.conversion import Conversion, convert_evidence
from extractor.sheet import read_table
from extractor.table import FloatArray
from tests.evidence import mixed

Made = TypeVar("Made")

METRIC = "partial_eta_squared"
_STARTS = 7


@dataclass
class Timed:
    """Processor seconds per stage, and what the whole command took.

    clock, shared : seconds by the clock of the whole command in one process, and in as many as there are processors.
    """

    rows: int
    command: float
    peak: float
    clock: float
    shared: float = math.nan
    read: float = math.nan
    gather: float = math.nan
    first: float = math.nan
    convert: float = math.nan
    audit: float = math.nan
    loop: float = math.nan
    floor: float = math.nan
    audit_floor: float = math.nan


def seconds(work: Callable[[], Made]) -> tuple[float, Made]:
    """Processor seconds of a call, and what it gave."""
    started = time.process_time()
    made = work()
    return time.process_time() - started, made


class Used(NamedTuple):
    """What a command used, its children included: seconds of the processors, MiB at the peak, seconds by the clock."""

    processor: float
    peak: float
    clock: float


def command(arguments: list[str]) -> Used:
    """Run a command and look at what it used."""
    started = time.perf_counter()
    process = subprocess.Popen(
        [sys.executable, *arguments], stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL
    )
    _, status, used = os.wait4(process.pid, 0)
    if status:
        raise RuntimeError(f"{arguments} ended with {status}")
    return Used(used.ru_utime + used.ru_stime, used.ru_maxrss / 1024, time.perf_counter() - started)


# ---- what it is measured against ----------------------------------------------------------------------


def tests_of(conversion: Conversion) -> tuple[FloatArray, FloatArray, FloatArray]:
    """F and its dfs of the rows that have a variance, as their own routes give them."""
    found: list[tuple[FloatArray, FloatArray, FloatArray]] = []
    for chosen in conversion.chosen:
        for index, supported in chosen.precisions.items():
            steps = dict(chosen.engine.all_steps(chosen.routes[index]))
            for further in supported.further:
                steps |= chosen.engine.all_steps(further)
            if not {"df_effect", "df_error"} <= steps.keys():
                continue
            rows = np.flatnonzero((chosen.which == index) & chosen.pointed)
            known = rows[np.isfinite(supported.variance)]
            v1, v2 = (steps[name].value[known] for name in ("df_effect", "df_error"))
            eta = steps[METRIC].value[known]
            found.append((eta / (1 - eta) * v2 / v1, v1, v2))
    f, v1, v2 = (np.concatenate(parts) for parts in zip(*found, strict=True))
    return f, v1, v2


def one_row(f: float, v1: float, v2: float, level: float = 0.95) -> tuple[float, float, float, float]:
    """Partial eta squared with exact variance and limits, for one row."""
    eta = v1 * f / (v1 * f + v2)
    total = v1 + v2 + 1
    lam = max(0.0, v1 * f * (v2 - 2) / v2 - v1)
    counts = np.arange(int(lam / 2 + 9 * math.sqrt(lam / 2) + 20))
    weights = stats.poisson.pmf(counts, lam / 2)
    a, whole = v1 / 2 + counts, (v1 + v2) / 2 + counts
    mean = (weights * a / whole).sum()
    variance = (weights * a * (a + 1) / (whole * (whole + 1))).sum() - mean**2
    ends = []
    for p in ((1 + level) / 2, (1 - level) / 2):

        def apart(noncentrality: float, p: float = p) -> float:
            return float(stats.ncf.cdf(f, v1, v2, noncentrality)) - p

        if stats.f.cdf(f, v1, v2) <= p:
            ends.append(0.0)
            continue
        top = max(4.0, 2 * v1 * f)
        while apart(top) > 0:
            top *= 2
        lam_at = float(optimize.brentq(apart, 0.0, top, xtol=1e-9, rtol=1e-9))
        ends.append(lam_at / (lam_at + total))
    return eta, variance, ends[0], ends[1]


def loop_seconds(f: FloatArray, v1: FloatArray, v2: FloatArray, sample: int) -> float:
    """Seconds of the loop over all these rows, from a sample of them."""
    rows = np.random.default_rng(1).choice(len(f), size=min(sample, len(f)), replace=False)
    tests = [(float(f[i]), float(v1[i]), float(v2[i])) for i in rows]
    return seconds(lambda: [one_row(*test) for test in tests])[0] / len(tests) * len(f)


def floor_seconds(f: FloatArray, v1: FloatArray, v2: FloatArray) -> float:
    """Seconds of the special functions of the limits alone."""
    with np.errstate(all="ignore"):
        return seconds(lambda: [special.ncfdtrinc(v1, v2, np.full(len(f), p), f) for p in (0.975, 0.025)])[0]


def audit_floor_seconds(evidence: Evidence) -> float:
    """Seconds of the special functions that tie every printed p to its test, and test every row's SDs, once."""
    tests: list[tuple[FloatArray, ...]] = []
    spreads: list[tuple[FloatArray, ...]] = []
    for block in evidence.blocks:
        own = constraints_of(block, evidence.table)
        domain = own.domain.copy()
        consistent = ~propagate(own.design, domain)
        names = ("f_value", "p_two_sided", "df_effect", "df_error")
        if "p_value" in own.domain.low and all(name in domain.low for name in names):
            pairs = [domain.pair(name) for name in names]
            known = consistent & (pairs[2][0] == pairs[2][1]) & (pairs[3][0] == pairs[3][1])
            dfs = pairs[2][0][known], pairs[3][0][known]
            tests += [(*dfs, f[known], p[known]) for f, p in zip(*pairs[:2], strict=True)]
        if block.design in BETWEEN and {"n", "sd"} <= block.leaves.keys() - block.bounds:
            n, sd = block.leaves["n"].value, block.leaves["sd"].value
            judged = (n >= 2).all(axis=1) & (sd > 0).all(axis=1)
            chi_squared, df, _ = bartlett_from_sds(n[judged], sd[judged])
            spreads.append((np.full_like(chi_squared, df), chi_squared))
    df1, df2, f, p = (np.ascontiguousarray(np.concatenate(parts)) for parts in zip(*tests, strict=True))
    of, bartlett = (np.ascontiguousarray(np.concatenate(parts)) for parts in zip(*spreads, strict=True))
    # the catalogue's own: accurate in both tails, as rounding intervals of p near 0 and 1 need
    tails, quantiles = (catalogue()[name].formula for name in ("p_from_f", "f_from_p"))
    with np.errstate(all="ignore"):
        return seconds(lambda: (tails(f, df1, df2), quantiles(p, df1, df2), special.chdtrc(of, bartlett)))[0]


# ---- the measurement ----------------------------------------------------------------------------------


def measure(rows: int, folder: Path, workers: int, sample: int) -> Timed:
    """Everything about a sheet of so many rows; beyond 1e5 only the whole command, which works in blocks there."""
    path = folder / f"mixed-{rows}.csv"
    mixed.write(path, rows)
    called = [
        "-m",
        "extractor",
        "convert",
        str(path),
        "--to",
        METRIC,
        "--force",
        "--out",
        str(folder / "out"),
    ]
    more = ["--workers", str(workers)] if workers > 1 else []
    whole, peak, clock = command([*called, *more])
    if rows > 100_000:
        return Timed(rows, whole, peak, clock)
    shared = command([*called, "--workers", str(os.cpu_count() or 1)]).clock
    read, table = seconds(lambda: read_table(path, default_codebook()))
    gathering, evidence = seconds(lambda: gather(table))
    first, _ = seconds(lambda: convert_evidence(evidence, METRIC))
    again, conversion = seconds(lambda: convert_evidence(evidence, METRIC))
    audit, _ = seconds(lambda: audit_evidence(evidence, conversion))
    tests = tests_of(conversion)
    loop = loop_seconds(*tests, sample)
    floors = floor_seconds(*tests), audit_floor_seconds(evidence)
    stages = (read, gathering, first, again, audit)
    return Timed(rows, whole, peak, clock, shared, *stages, loop, *floors)


def starts() -> list[tuple[str, float, float]]:
    """Start-up against the libraries alone: name, ratio of the fastest starts, most that is allowed."""
    cases = [
        ("extractor --version / import click", ["-m", "extractor", "--version"], "import click", 1.6),
        (
            "extractor quick / import numpy, scipy.special",
            ["-m", "extractor", "quick", "F(2, 57) = 4.5", "--to", "omega_squared"],
            "import numpy, scipy.special",
            2.5,
        ),
    ]
    found = []
    for name, ours, theirs, most in cases:
        both = [(command(ours).processor, command(["-c", theirs]).processor) for _ in range(_STARTS)]
        found.append((name, min(a for a, _ in both) / min(b for _, b in both), most))
    return found


def report(timed: list[Timed]) -> None:
    """The table of all sizes, and the ratios."""
    head = f"{'rows':>9} {'read':>8} {'gather':>8} {'convert':>8} {'audit':>8} {'command':>9} {'peak MiB':>9}"
    print(
        "microseconds of processor time per row (convert: plans made; command: everything, planning included)"
    )
    print(head)
    for t in timed:
        each = (t.read, t.gather, t.convert, t.audit, t.command)
        cells = " ".join(f"{'-' if math.isnan(s) else f'{s / t.rows * 1e6:.1f}':>8}" for s in each)
        print(f"{t.rows:>9,} {cells} {t.peak:>10.0f}")
    print("\nrows per second: convert, audit")
    for t in timed:
        if not math.isnan(t.convert):
            print(f"{t.rows:>9,} {t.rows / t.convert:>10,.0f} {t.rows / t.audit:>10,.0f}")
    last = [t for t in timed if not math.isnan(t.convert)][-1]
    print(f"\nat {last.rows:,} rows")
    print(f"row-by-row loop (sample, scaled)       {last.loop:>8.1f} s")
    print(f"loop / engine                          {last.loop / last.convert:>8.1f}   at least 50 wanted")
    print(f"loop / whole command                   {last.loop / last.command:>8.1f}   at least 20 wanted")
    print(f"the same by the clock                  {last.loop / last.clock:>8.1f}")
    print(f"by the clock, {os.cpu_count()} processes              {last.loop / last.shared:>8.1f}")
    print(f"engine / floor                         {last.convert / last.floor:>8.2f}   at most 3 wanted")
    print(f"audit / floor                          {last.audit / last.audit_floor:>8.2f}   at most 5 wanted")
    print(f"planning, once for each way of reporting {last.first - last.convert:>6.1f} s")
    large = [t for t in timed if t.rows >= 10_000]
    if len(large) > 1:
        power = math.log(large[-1].command / large[0].command) / math.log(large[-1].rows / large[0].rows)
        print(
            f"scaling exponent {large[0].rows:,} to {large[-1].rows:,}   {power:>8.2f}   at most 1.05 wanted"
        )


def main(argv: list[str] | None = None) -> None:
    """Measure and print."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--most", type=int, default=1_000_000, help="largest sheet, in rows")
    parser.add_argument("--workers", type=int, default=1, help="processes of the whole command")
    parser.add_argument("--sample", type=int, default=300, help="rows of the row-by-row loop")
    options = parser.parse_args(argv)
    collector.ease()
    sizes = [size for size in (1_000, 10_000, 100_000, 1_000_000) if size <= options.most]
    with tempfile.TemporaryDirectory() as folder:
        timed = [measure(size, Path(folder), options.workers, options.sample) for size in sizes]
    report(timed)
    for name, ratio, most in starts():
        print(f"{name:<46} {ratio:>5.2f}   at most {most} wanted")


if __name__ == "__main__":
    main()
