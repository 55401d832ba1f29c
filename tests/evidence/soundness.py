"""No honest paper is accused: simulated honest rows through the whole audit.

    python -m tests.evidence.soundness [--rows N] [--seed S] [--workers W]

Raw scores are drawn, statistics computed from the raw scores, then printed: six rows in ten are one-way or two-group,
the others factorial, within, paired, mixed, covariance-adjusted or pre-post-control. The audit must call none of them
impossible or inconsistent. Exits with 1 when it does.
"""

from __future__ import annotations

import argparse
import sys
import time
from collections import Counter
from multiprocessing import get_context

import numpy as np

from extractor.audit.run import audit_evidence
from extractor.evidence import gather
from extractor.findings import Severity
from tests.evidence.honest import honest_sheet
from tests.evidence.honest_designs import honest_design_sheet
from tests.evidence.printing import Sheet, table

ROWS_PER_SHEET = 500


def examine(seed: int) -> tuple[int, int, Counter[str], list[str]]:
    """One sheet: its rows, the comparisons made, counts by design and severity, and any false alarm in words."""
    rng = np.random.default_rng(seed)
    make = honest_design_sheet if rng.random() < 0.4 else honest_sheet
    sheet = make(rng, ROWS_PER_SHEET)
    reported = table(sheet)
    evidence = gather(reported)
    blocked = sorted({str(w) for w in evidence.blocked} - {""})
    if blocked:
        return 0, 0, Counter(), [f"seed {seed}: an honest row is blocked: {blocked[0]}"]
    audit = audit_evidence(evidence, None)
    counts: Counter[str] = Counter({f"rows, {sheet.facts['design']}": sheet.rows})
    alarms = []
    for finding in audit.findings:
        counts[finding.severity.word] += 1
        if finding.severity >= Severity.INCONSISTENT:
            alarms.append(
                f"seed {seed} row {finding.row}: {finding.message} | {_row(sheet, finding.row - 2)}"
            )
    return sheet.rows, audit.checks, counts, alarms


def _row(sheet: Sheet, position: int) -> str:
    return ", ".join(
        f"{v[0]}{v[1] or ''}={p.value[position]:.{p.decimals}f}" for v, p in sheet.columns.items()
    )


def main(argv: list[str] | None = None) -> int:
    """Run the simulation and print its table."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--rows", type=int, default=1_000_000)
    parser.add_argument("--seed", type=int, default=20261201)
    parser.add_argument("--workers", type=int, default=2)
    options = parser.parse_args(argv)
    started = time.perf_counter()
    sheets = -(-options.rows // ROWS_PER_SHEET)
    seeds = range(options.seed, options.seed + sheets)
    total = checks = 0
    counts: Counter[str] = Counter()
    alarms: list[str] = []
    with get_context("spawn").Pool(options.workers) as pool:
        for rows, made, found, said in pool.imap_unordered(examine, seeds, chunksize=8):
            total += rows
            checks += made
            counts.update(found)
            alarms.extend(said)
    print(f"seeds {options.seed} to {options.seed + sheets - 1}, {ROWS_PER_SHEET} rows each")
    print(f"honest rows          {total:>12,}")
    print(f"comparisons          {checks:>12,}")
    for name in sorted(counts):
        print(f"{name:<20} {counts[name]:>12,}")
    print(f"impossible           {counts['impossible']:>12,}")
    print(f"inconsistent         {counts['inconsistent']:>12,}")
    print(f"seconds              {time.perf_counter() - started:>12.0f}")
    for alarm in alarms[:20]:
        print("FALSE ALARM", alarm)
    return 1 if alarms else 0


if __name__ == "__main__":
    sys.exit(main())
