"""Mutation fuzzing: faults put into honest sheets, and what the command makes of each.

    python -m tests.evidence.hostile [--cases N] [--seed S] [--kind NAME] [--workers W]

Every case is one run of the command (most often ``convert``) in this process, with warnings as errors and a limit of
10 seconds of work. It must end in a table or in one clear line with the exit status of the contract: 4 for a sheet, 5
for a codebook, 2 for the words of the command. What was written must be whole and free of formulas. Prints fault kinds
by outcome, and exits with 1 on any breach. The same seed gives the same cases.
"""

from __future__ import annotations

import argparse
import gc
import re
import resource
import sys
import tempfile
import time
from collections import Counter
from collections.abc import Iterator
from multiprocessing import get_context
from pathlib import Path

from tests.fuzz import catalogue
from tests.fuzz.judging import BREACHES, OUTCOMES, STOPPED, Verdict

MEMORY = 4 << 30
"""Bytes of address space a run may take; a bomb that goes off ends in a MemoryError."""
_CHUNKS = 600
"""Chunks of 16 cases after which a process makes way for a new one, lest its caches outgrow that memory."""
_PROGRESS = 10_000
SHOWN = 20
"""Breaches that are shown in full; those that end alike are shown once."""


def examine(job: tuple[str, int]) -> tuple[str, int, Verdict, float]:
    """One case in a folder of its own."""
    kind, seed = job
    with tempfile.TemporaryDirectory() as place:
        folder = Path(place) / "in"
        folder.mkdir()
        started = time.perf_counter()
        return kind, seed, catalogue.verdict(kind, seed, folder), time.perf_counter() - started


def _bounded() -> None:
    resource.setrlimit(resource.RLIMIT_AS, (MEMORY, MEMORY))
    # what was imported stays; the collector need not look through it again and again
    gc.collect()
    gc.freeze()
    gc.set_threshold(100_000, 20, 50)


def _examined(jobs: list[tuple[str, int]], workers: int) -> Iterator[tuple[str, int, Verdict, float]]:
    with get_context("spawn").Pool(workers, _bounded, maxtasksperchild=_CHUNKS) as pool:
        yield from pool.imap_unordered(examine, jobs, chunksize=16)


def main(argv: list[str] | None = None) -> int:
    """Run the cases and print their table."""
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    parser.add_argument("--cases", type=int, default=5_000)
    parser.add_argument("--seed", type=int, default=0, help="the first seed; each kind counts up from it")
    parser.add_argument("--kind", choices=sorted(catalogue.KINDS), help="only this kind of fault")
    parser.add_argument("--workers", type=int, default=2)
    options = parser.parse_args(argv)
    kinds = {options.kind: 1} if options.kind else catalogue.KINDS
    jobs = catalogue.schedule(options.cases, options.seed, kinds)
    started = time.perf_counter()
    counts: dict[str, Counter[str]] = {kind: Counter() for kind in kinds}
    slowest = (0.0, "", 0)
    breaches: dict[tuple[str, str], list[str]] = {}
    for done, (kind, seed, verdict, seconds) in enumerate(_examined(jobs, options.workers), 1):
        counts[kind][verdict.outcome] += 1
        slowest = max(slowest, (seconds, kind, seed))
        if verdict.outcome in BREACHES:
            last = re.sub("[0-9]+", "0", verdict.breach.strip().rpartition("\n")[2])
            breaches.setdefault((verdict.outcome, last), []).append(f"{kind}, seed {seed}\n{verdict.breach}")
            print(f"{verdict.outcome}: {kind}, seed {seed}", file=sys.stderr, flush=True)
        if done % _PROGRESS == 0:
            passed = time.perf_counter() - started
            print(f"{done} cases in {passed:.0f} s", file=sys.stderr, flush=True)
    _show(counts)
    print(f"{len(jobs)} cases from seed {options.seed} in {time.perf_counter() - started:.0f} s; ", end="")
    print(f"the slowest took {slowest[0]:.1f} s ({slowest[1]}, seed {slowest[2]})")
    for (outcome, _), alike in sorted(breaches.items(), key=lambda item: -len(item[1]))[:SHOWN]:
        print(f"--- {outcome}, {len(alike)} times; first {alike[0]}")
    if len(breaches) > SHOWN:
        print(f"... and {len(breaches) - SHOWN} other breaches")
    return 1 if breaches else 0


def _show(counts: dict[str, Counter[str]]) -> None:
    seen = {outcome for found in counts.values() for outcome in found}
    outcomes = [
        outcome for outcome in (*OUTCOMES, *STOPPED, *BREACHES) if outcome in seen or outcome in BREACHES
    ]
    wide = max(map(len, counts)) + 2
    print(
        f"{'fault':<{wide}}{'cases':>8}" + "".join(f"{outcome:>{len(outcome) + 3}}" for outcome in outcomes)
    )
    totals: Counter[str] = Counter()
    for kind, found in (*counts.items(), ("all", totals)):
        if kind != "all":
            totals.update(found)
        cells = "".join(f"{found[outcome] or '-':>{len(outcome) + 3}}" for outcome in outcomes)
        print(f"{kind:<{wide}}{found.total():>8}{cells}")


if __name__ == "__main__":
    sys.exit(main())
