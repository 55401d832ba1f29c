"""Planted errors: how many the audit notices, whether it names the cell, and whether it says what happened.

    python -m tests.evidence.detection [--rows N] [--seed S] [--kinds a,b] [--workers W]

One error is planted in each row. On a subsample an independent oracle says which rows can be caught at all and
which single cells could be at fault. Exits with 1 when a target is missed.
"""

from __future__ import annotations

import argparse
import sys
import time
from collections.abc import Iterator
from dataclasses import dataclass, field, fields
from itertools import permutations
from multiprocessing import get_context

import numpy as np

from extractor.audit.constraints import constraints_of
from extractor.audit.contradictions import contradictions
from extractor.evidence import gather
from extractor.findings import Finding, Severity
from extractor.quantities import VOCABULARY
from extractor.table import Variable
from extractor.words import listed
from tests.evidence.oracle import feasible, feasible_without, row_of
from tests.evidence.planted import KINDS, Planted, plant
from tests.evidence.printing import Sheet, table

ROWS_PER_SHEET = 500
SHEETS = 40
ORACLE_ROWS = 300
CAUGHT, NAMED, FIRST, EXPLAINED = 0.98, 0.999, 0.95, 0.80
INDEX_WORDS = {
    "eta_squared": "eta squared",
    "omega_squared": "omega squared",
    "epsilon_squared": "epsilon squared",
    "cohens_f": "Cohen's f",
}
WORDS = {
    "SE labelled SD": "standard errors labelled SD",
    "SD labelled SE": "SDs labelled SE",
    "variance labelled SD": "variances labelled SD",
    "population SD": "SDs with divisor n",
    "one-tailed p": "a one-tailed p",
    "digits swapped": "two adjacent digits swapped",
    "decimal point": "a decimal point moved",
    "sign lost": "a lost or added minus sign",
    "dfs swapped": "the two df swapped",
    "N before exclusions": "N counted before exclusions",
    "ns swapped": "the ns of two groups swapped",
    "t as F": "t printed as F",
    "F as t": "F printed as t",
}
RECOGNISABLE = (
    "SE labelled SD",
    "SD labelled SE",
    "decimal point",
    "digits swapped",
    "index mislabelled",
    "one-tailed p",
    "dfs swapped",
)


LEGEND = """caught: a contradiction of any severity; incons.: called inconsistent; catchable: share of a subsample that
the oracle calls impossible; of these: share of the catchable that is caught; named: every planted cell is among the
suspects; unique: share of the caught subsample in which no single cell but the planted can be at fault; first: a
planted cell stands first there; explained: the right explanation and a planted cell stand first; suspects: cells
named on average. A slip that rounding hides leaves a possible row, which nobody could catch.
* no target for the explanation: such a slip often cannot be told from others that repair the row as well."""


@dataclass
class Tally:
    """Counts of one kind. The subsample's counts begin with ``sampled``.

    catchable : rows the oracle calls impossible. both : of these, caught. wrongly : caught though the oracle finds
    the row possible. unique : of both, rows in which no other single cell can be at fault. first : of these, a
    planted cell is named first.
    """

    rows: int = 0
    caught: int = 0
    inconsistent: int = 0
    named: int = 0
    explained: int = 0
    suspects: int = 0
    sampled: int = 0
    catchable: int = 0
    both: int = 0
    wrongly: int = 0
    unique: int = 0
    first: int = 0
    examples: list[str] = field(default_factory=list)

    def add(self, other: Tally) -> None:
        for f in fields(self):
            setattr(self, f.name, getattr(self, f.name) + getattr(other, f.name))


@dataclass(frozen=True)
class Task:
    """Rows of one kind from one seed, the first ``oracle`` of them put to the oracle."""

    kind: str
    seed: int
    rows: int
    oracle: int


def examine(task: Task) -> tuple[str, Tally]:
    """Plant, audit and count."""
    rng = np.random.default_rng(task.seed)
    tally = Tally()
    while tally.rows < task.rows:
        planted = plant(task.kind, rng, 2 * (task.rows - tally.rows))
        if planted.sheet.rows:
            _count(task, planted, min(planted.sheet.rows, task.rows - tally.rows), tally)
    return task.kind, tally


def _count(task: Task, planted: Planted, rows: int, tally: Tally) -> None:
    reported = table(planted.sheet)
    evidence = gather(reported)
    constraints = [constraints_of(block, reported) for block in evidence.blocks]
    found = {f.row - 2: f for f in contradictions(evidence, constraints)}
    tally.rows += rows
    for position in range(rows):
        finding = found.get(position)
        cells = [v for v, where in planted.cells.items() if where[position]]
        if finding is not None:
            _judge(task, planted, position, cells, finding, tally)
        if tally.sampled < task.oracle:
            _ask_the_oracle(task, planted, position, cells, finding, tally)


def _judge(
    task: Task, planted: Planted, position: int, cells: list[Variable], finding: Finding, tally: Tally
) -> None:
    named = _variables(planted.sheet, finding)
    tally.caught += 1
    tally.inconsistent += finding.severity >= Severity.INCONSISTENT
    tally.suspects += len(named)
    if set(cells) <= set(named):
        tally.named += 1
    else:
        _note(task, planted, position, f"planted {cells} not named", finding, tally)
    if named[0] in cells and finding.explanation.startswith(_right_words(planted, position, cells)):
        tally.explained += 1


def _ask_the_oracle(
    task: Task,
    planted: Planted,
    position: int,
    cells: list[Variable],
    finding: Finding | None,
    tally: Tally,
) -> None:
    tally.sampled += 1
    row = row_of(planted.sheet, position)
    if feasible(row):
        if finding is not None:
            tally.wrongly += 1
            _note(task, planted, position, "caught, though possible", finding, tally)
        return
    tally.catchable += 1
    if finding is None:
        _note(task, planted, position, "impossible, but not caught", finding, tally)
        return
    tally.both += 1
    others = [cell for cell in row.ends if cell not in cells]
    if not any(feasible_without(row, cell) for cell in others):
        tally.unique += 1
        tally.first += _variables(planted.sheet, finding)[0] in cells


def _right_words(planted: Planted, position: int, cells: list[Variable]) -> tuple[str, ...]:
    """How the right explanation may begin."""
    if planted.kind in WORDS:
        return (WORDS[planted.kind],)
    if planted.kind == "Welch F":
        symbols = [VOCABULARY[v[0]].symbol for v in planted.sheet.columns if v in cells]
        return tuple(f"{listed(some)} of a Welch test" for some in permutations(symbols))
    if planted.kind == "df of N - 1 or N":
        total = planted.truth["n_total"][position]
        now = planted.sheet.columns[cells[0]].value[position]
        return ("N printed as error df" if now == total else "N - 1 printed as error df",)
    # the index whose value this is; two may agree to the printed decimals
    heading = cells[0][0]
    printed = planted.sheet.columns[cells[0]]
    decimals = int(np.broadcast_to(printed.decimals, printed.value.shape)[position])
    now = printed.value[position]
    same = [n for n in INDEX_WORDS if abs(np.round(planted.truth[n][position], decimals) - now) < 1e-9]
    return tuple(f"{INDEX_WORDS[name]} labelled {INDEX_WORDS[heading]}" for name in same if name != heading)


def _variables(sheet: Sheet, finding: Finding) -> list[Variable]:
    headings = {name if group is None else f"{name}_{group}": (name, group) for name, group in sheet.columns}
    return [headings[cell.split(" [")[0]] for cell in finding.cells]


def _note(
    task: Task, planted: Planted, position: int, what: str, finding: Finding | None, tally: Tally
) -> None:
    said = []
    for (name, group), printed in planted.sheet.columns.items():
        decimals = int(np.broadcast_to(printed.decimals, printed.value.shape)[position])
        bound = "<" if printed.below is not None and printed.below[position] else "="
        bound = ">" if printed.above is not None and printed.above[position] else bound
        said.append(
            f"{name}{'' if group is None else f'_{group}'}{bound}{printed.value[position]:.{decimals}f}"
        )
    message = "" if finding is None else f" | {finding.message} | {finding.explanation}"
    tally.examples.append(f"{task.kind}, seed {task.seed}: {what}: {', '.join(said)}{message}")


def _tasks(kinds: list[str], rows: int, seed: int) -> Iterator[Task]:
    for kind in kinds:
        number = list(KINDS).index(kind)
        size = min(ROWS_PER_SHEET, -(-rows // SHEETS))
        sheets = -(-rows // size)
        for part in range(sheets):
            some = min(size, rows - part * size)
            asked = ORACLE_ROWS * (part + 1) // sheets - ORACLE_ROWS * part // sheets
            yield Task(kind, seed + 100_000 * number + part, some, asked)


def _share(part: int, whole: int) -> float:
    return part / whole if whole else float("nan")


def _shortfalls(kind: str, tally: Tally) -> list[str]:
    """The targets a kind misses, in words."""
    wanted = [
        ("caught of the catchable", tally.both, tally.catchable, CAUGHT),
        ("planted cells named", tally.named, tally.caught, NAMED),
        ("planted cell first where only it can be at fault", tally.first, tally.unique, FIRST),
    ]
    if kind in RECOGNISABLE:
        wanted.append(("right explanation first", tally.explained, tally.caught, EXPLAINED))
    missed = [
        f"{what}: {_share(part, whole):.2%}, wanted {least:.1%}"
        for what, part, whole, least in wanted
        if whole and part < least * whole
    ]
    if tally.wrongly:
        missed.append(f"caught though possible: {tally.wrongly} rows")
    return missed


def _print(tallies: dict[str, Tally]) -> None:
    heads = (
        "kind",
        "rows",
        "caught",
        "incons.",
        "catchable",
        "of these",
        "named",
        "unique",
        "first",
        "explained",
        "suspects",
    )
    print(f"{heads[0]:<22}" + "".join(f"{h:>10}" for h in heads[1:]))
    for kind, t in tallies.items():
        shares = (
            _share(t.caught, t.rows),
            _share(t.inconsistent, t.rows),
            _share(t.catchable, t.sampled),
            _share(t.both, t.catchable),
            _share(t.named, t.caught),
            _share(t.unique, t.both),
            _share(t.first, t.unique),
            _share(t.explained, t.caught),
        )
        mark = "" if kind in RECOGNISABLE else "*"
        print(
            f"{kind:<22}{t.rows:>10,}"
            + "".join(f"{s:>9.1%} " for s in shares)
            + f"{t.suspects / max(t.caught, 1):>9.1f} {mark}"
        )


def main(argv: list[str] | None = None) -> int:
    """Run the experiment and print its table."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--rows", type=int, default=20_000, help="rows of each kind")
    parser.add_argument("--seed", type=int, default=20261202)
    parser.add_argument("--kinds", default=",".join(KINDS))
    parser.add_argument("--workers", type=int, default=2)
    parser.add_argument("--examples", type=int, default=3, help="failing rows printed for each kind")
    options = parser.parse_args(argv)
    kinds = [k.strip() for k in options.kinds.split(",")]
    unknown = [k for k in kinds if k not in KINDS]
    if unknown:
        parser.error(f"no such kind: {', '.join(unknown)}; one of {', '.join(KINDS)}")
    started = time.perf_counter()
    tasks = list(_tasks(kinds, options.rows, options.seed))
    tallies = {kind: Tally() for kind in kinds}
    with get_context("spawn").Pool(options.workers) as pool:
        for kind, tally in pool.imap_unordered(examine, tasks, chunksize=1):
            tallies[kind].add(tally)
    print(
        f"seeds {options.seed} to {tasks[-1].seed}: 100,000 apart for the kinds, one for each sheet of a kind"
    )
    _print(tallies)
    print(LEGEND)
    print(f"seconds {time.perf_counter() - started:.0f}")
    missed = {kind: _shortfalls(kind, tally) for kind, tally in tallies.items()}
    for kind, tally in tallies.items():
        for shortfall in missed[kind]:
            print(f"BELOW TARGET {kind}: {shortfall}")
        for example in tally.examples[: options.examples]:
            print(f"  {example}")
    return 1 if any(missed.values()) else 0


if __name__ == "__main__":
    sys.exit(main())
