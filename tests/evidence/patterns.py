"""The 54 ways in which studies report, each coded as a row and run through the command line.

    python -m tests.evidence.patterns

Prints a table: number of the pattern, how it is printed, the coded row, what is expected, from which source, what the
command gave, and whether both agree. Ends with status 1 when a case fails that is not known to fall short, or when
one that is known to falls short no more.
"""

from __future__ import annotations

import csv
import math
import sys
import tempfile
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import pandas as pd
from click.testing import CliRunner
from openpyxl import Workbook
from rich.console import Console
from rich.table import Table

from extractor.commands.main import cli
from tests.evidence import patterns_01_18, patterns_19_40, patterns_41_54
from tests.evidence.patterns_data import Case, Row

CASES: list[Case] = [*patterns_01_18.CASES, *patterns_19_40.CASES, *patterns_41_54.CASES]
NUMBERS = range(1, 55)
_GRAVE = ("inconsistent", "impossible")
_IDENTITY = 1e-9


@dataclass(frozen=True, slots=True)
class Outcome:
    """What the command gave, and where that is not what was expected ("" where it is)."""

    measured: str
    fault: str


def outcome_of(case: Case, folder: Path) -> Outcome:
    """Write the sheet, convert it, read the files that were written."""
    effects, findings = _converted(case, folder)
    effect = effects.iloc[case.at]
    mine = findings[findings["row"] == effect["row"]]
    faults = [
        *_of_status(case, effect),
        *_of_numbers(case, effect),
        *_of_words(case, effect),
        *_of_audit(case, mine),
    ]
    return Outcome(_measured(case, effect, mine), "; ".join(faults))


# ---- the command ------------------------------------------------------------------------------------


def _converted(case: Case, folder: Path) -> tuple[pd.DataFrame, pd.DataFrame]:
    sheet = folder / ("coded.xlsx" if case.workbook else "coded.csv")
    (_write_workbook if case.workbook else _write)(sheet, case.rows)
    out = folder / "out"
    words = ["convert", str(sheet), "--to", case.to, "--out", str(out), *case.options]
    if case.groups:
        _write(folder / "groups.csv", case.groups)
        words += ["--groups", str(folder / "groups.csv")]
    if case.codebook:
        (folder / "ours.toml").write_text(case.codebook, encoding="utf-8")
        words += ["--codebook", str(folder / "ours.toml")]
    done = CliRunner().invoke(cli, words)
    if done.exit_code != 0:
        raise RuntimeError(
            f"pattern {case.number}: extractor {' '.join(words)}\n{done.output}"
        ) from done.exception
    texts = dict.fromkeys(("reason", "assumptions", "standardizer", "grade", "message", "explanation"), str)
    effects, findings = (
        pd.read_csv(out / name, dtype=texts, keep_default_na=False, na_values=[""]).fillna(
            dict.fromkeys(texts, "")
        )
        for name in ("effects.csv", "findings.csv")
    )
    return effects, findings


def _headings(rows: Sequence[Row]) -> list[str]:
    return list(dict.fromkeys(heading for row in rows for heading in row))


def _write(path: Path, rows: Sequence[Row]) -> None:
    with path.open("w", newline="", encoding="utf-8") as stream:
        writer = csv.DictWriter(stream, _headings(rows), restval="", lineterminator="\n")
        writer.writeheader()
        writer.writerows(rows)


def _write_workbook(path: Path, rows: Sequence[Row]) -> None:
    book = Workbook()
    sheet = book.active
    assert sheet is not None
    sheet.append(_headings(rows))
    for row in rows:
        sheet.append([row.get(heading) for heading in _headings(rows)])
    book.save(path)


# ---- what was expected ------------------------------------------------------------------------------


def _of_status(case: Case, effect: pd.Series) -> list[str]:
    faults = [] if effect["status"] == case.status else [f"status {effect['status']}, not {case.status}"]
    for name in ("grade", "standardizer"):
        wanted = getattr(case, name)
        if wanted and effect[name] != wanted:
            faults.append(f"{name} {effect[name] or 'none'}, not {wanted}")
    return faults


def _of_numbers(case: Case, effect: pd.Series) -> list[str]:
    faults = []
    if isinstance(case.value, tuple):
        for name, end, outward in zip(("estimate_low", "estimate_high"), case.value, (-1, 1), strict=True):
            if not _bounds(effect[name], end, outward):
                faults.append(f"{name} {effect[name]:.7g}, not {end:.7g}")
    elif case.value is not None:
        estimate = case.shown(float(effect["estimate"])) if case.status == effect["status"] else math.nan
        if not _meets(estimate, case.value):
            faults.append(f"{estimate:.7g}, not {case.value}")
    if case.variance is not None and not _meets(effect["variance"], case.variance):
        faults.append(f"variance {effect['variance']:.7g}, not {case.variance}")
    return faults


def _meets(found: float, wanted: float | str) -> bool:
    """A number to 1e-9 of itself; a printed text to half a unit of its last place; NaN is met by a blank."""
    if isinstance(wanted, str):
        places = len(wanted.partition(".")[2])
        return abs(found - float(wanted)) <= 0.5 * 10.0**-places + 1e-12
    if math.isnan(wanted):
        return math.isnan(found)
    return math.isclose(found, wanted, rel_tol=_IDENTITY, abs_tol=1e-12)


def _bounds(found: float, end: float, outward: int) -> bool:
    """A bound may lie outside the true one, for floating point, by a millionth of it, and never inside."""
    if math.isinf(end):
        return math.isnan(found)
    beyond = outward * (found - end)
    return -1e-12 <= beyond <= 1e-6 * max(abs(end), 1e-6)


def _of_words(case: Case, effect: pd.Series) -> list[str]:
    faults = [f"the reason does not say '{words}'" for words in case.reason if words not in effect["reason"]]
    return faults + [
        f"assumptions lack '{words}'" for words in case.said if words not in effect["assumptions"]
    ]


def _of_audit(case: Case, findings: pd.DataFrame) -> list[str]:
    if not case.finding:
        grave = findings[findings["severity"].isin(_GRAVE)]
        return [f"accused: {message}" for message in grave["message"]]
    severity, *words = case.finding
    for _, found in findings.iterrows():
        said = f"{found['message']} {found['explanation']}"
        if found["severity"] == severity and all(word in said for word in words):
            return []
    return [f"no finding {severity} with {words}"]


# ---- the table --------------------------------------------------------------------------------------


def _expected(case: Case) -> str:
    said = [case.status]
    if isinstance(case.value, tuple):
        said.append(" to ".join("…" if math.isinf(end) else f"{end:.5g}" for end in case.value))
    elif case.value is not None:
        said.append(case.value if isinstance(case.value, str) else f"{case.value:.6g}")
    said += [f"'{words}'" for words in case.reason]
    if case.finding:
        said.append(f"finding {case.finding[0]}: {', '.join(case.finding[1:])}")
    return " ".join(said)


def _measured(case: Case, effect: pd.Series, findings: pd.DataFrame) -> str:
    said = [str(effect["status"])]
    if effect["status"] == "bounded":
        ends = (effect["estimate_low"], effect["estimate_high"])
        said.append(" to ".join("…" if math.isnan(end) else f"{end:.5g}" for end in ends))
    elif effect["status"] == "converted":
        said.append(f"{case.shown(float(effect['estimate'])):.6g}")
    if effect["reason"]:
        said.append(f"({effect['reason']})")
    worst = findings[findings["severity"] != "note"] if not case.finding else findings
    said += [f"finding {s}" for s in dict.fromkeys(worst["severity"])]
    return " ".join(said)


def _coded(case: Case) -> str:
    row = {**case.rows[case.at]}
    more = len(case.rows) - 1 + len(case.groups)
    words = [f"{name} {text}" for name, text in row.items()]
    return "; ".join(words) + (f"; and {more} lines more" if more else "") + f" -> {case.to}"


def main() -> int:
    """Run all cases, print the table, count."""
    table = Table(title="54 reporting patterns", show_lines=True)
    for heading in ("no.", "printed", "coded row", "expected", "source", "measured", "ok"):
        table.add_column(heading, overflow="fold")
    passed = fell_short = 0
    wrong: list[str] = []
    for case in CASES:
        with tempfile.TemporaryDirectory() as folder:
            outcome = outcome_of(case, Path(folder))
        passed += not outcome.fault
        ok = "yes"
        if outcome.fault and case.short:
            fell_short += 1
            ok = f"falls short: {case.short}"
        elif outcome.fault or case.short:
            wrong.append(f"{case.number} {case.printed}: {outcome.fault or 'falls short no more'}")
            ok = f"NO: {outcome.fault or 'falls short no more'}"
        table.add_row(
            str(case.number), case.printed, _coded(case), _expected(case), case.source, outcome.measured, ok
        )
    Console(width=200).print(table)
    whole = {n for n in NUMBERS if not any(c.short for c in CASES if c.number == n)}
    print(
        f"{len(CASES)} cases of {len(NUMBERS)} patterns: {passed} as expected, {fell_short} known to fall short."
    )
    print(
        f"Patterns reached in every case: {len(whole)}; falling short in some: {sorted(set(NUMBERS) - whole)}"
    )
    for line in wrong:
        print(f"UNEXPECTED {line}")
    return int(bool(wrong))


if __name__ == "__main__":
    sys.exit(main())
