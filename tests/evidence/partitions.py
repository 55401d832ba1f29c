"""Dask and one process give the same effects.

    python -m tests.evidence.partitions [--rows N] [--workers W]

A mixed honest sheet, with the terms of factorial models scattered over it, is converted at once in this process, and as
partitions in the worker processes of a local Dask cluster. Exits with 1 when any cell of the effect table differs.
"""

from __future__ import annotations

import argparse
import sys
import time

import pandas as pd

from extractor.api import read
from extractor.partitions import convert_partitions, together
from extractor.routes.conversion import convert_evidence
from tests.evidence import mixed

METRIC = "partial_eta_squared"


def cells(rows: int, kinds: int = mixed.KINDS) -> pd.DataFrame:
    """A mixed sheet; every tenth study takes part in a model of three terms that stand far apart."""
    sheets = mixed.kinds(rows, kinds)
    frame = pd.DataFrame(list(mixed.records(sheets, rows)), columns=mixed.headings(sheets))
    factorial = frame.index[frame["design"] == "factorial"][: rows // 30 * 3]
    models = len(factorial) // 3
    frame["analysis"] = ""
    for turn, term in enumerate(("A", "B", "A x B")):
        mine = factorial[turn * models : (turn + 1) * models]
        frame.loc[mine, "analysis"] = [f"model {number}" for number in range(models)]
        frame.loc[mine, "study"] = [f"modelled study {number}" for number in range(models)]
        frame.loc[mine, "term"] = term
    return frame


def single(frame: pd.DataFrame) -> pd.DataFrame:
    """The effects from one process; rows of different studies are not compared, as in partitions."""
    reading = read(frame)
    conversion = convert_evidence(reading.evidence, METRIC)
    reading.audit(conversion, across=False)
    return conversion.effects


def partitioned(frame: pd.DataFrame, workers: int) -> pd.DataFrame:
    """The effects from a local cluster of ``workers`` processes, in sheet order."""
    import dask.dataframe as dd
    from distributed import Client, LocalCluster

    with (
        LocalCluster(
            n_workers=workers, threads_per_worker=1, processes=True, dashboard_address=None
        ) as cluster,
        Client(cluster),
    ):
        spread = together(dd.from_pandas(frame, npartitions=2 * workers))
        found = convert_partitions(spread, METRIC).compute()
    return found.sort_values("row", ignore_index=True)


def differing(one: pd.DataFrame, other: pd.DataFrame) -> dict[str, int]:
    """Cells that differ by column; numbers must be equal to the last bit."""
    found = {"rows": abs(len(one) - len(other))} if len(one) != len(other) else {}
    for name in one.columns if not found else ():
        a, b = (side[name].astype(object).where(side[name].notna(), None) for side in (one, other))
        apart = int((a.to_numpy() != b.to_numpy()).sum())
        if apart:
            found[name] = apart
    return found


def main(argv: list[str] | None = None) -> int:
    """Compare, and print how long each took."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--rows", type=int, default=100_000)
    parser.add_argument("--workers", type=int, default=2)
    options = parser.parse_args(argv)
    frame = cells(options.rows)
    started = time.perf_counter()
    alone = single(frame)
    between = time.perf_counter()
    shared = partitioned(frame, options.workers)
    ended = time.perf_counter()
    found = differing(alone, shared)
    modelled = int((frame["analysis"] != "").sum())
    print(f"rows                 {len(alone):>10,}, of which {modelled:,} in models of three scattered terms")
    print(f"one process          {between - started:>10.1f} s")
    print(f"{options.workers} worker processes   {ended - between:>10.1f} s, their start included")
    print(f"cells that differ    {sum(found.values()):>10,} {found or ''}")
    return 1 if found else 0


if __name__ == "__main__":
    sys.exit(main())
