"""What a comparison of coders says on the terminal and in files."""

from __future__ import annotations

import math
from collections.abc import Sequence
from pathlib import Path

import pandas as pd
from rich.console import Console
from rich.text import Text

from extractor.coders.comparison import EFFECT
from extractor.coders.displacement import DECIDES, MOVES_IN_WORDS, NOTHING
from extractor.coders.reconcile import Reconciliation
from extractor.errors import UsageError
from extractor.output.consensus import Settled, has_agreed, write_consensus
from extractor.output.files import output_folder
from extractor.output.merged import write_merged
from extractor.output.tables import write_csv
from extractor.output.terminal import counted, number, rows_in_words, say
from extractor.printed.reading import quoted
from extractor.words import listed, plain

CONSENSUS, MERGED = "consensus.xlsx", "merged.xlsx"
FILES = ("agreement.csv", "disputes.csv", "rows.csv", CONSENSUS)
CAUTION = "Agreement between coders is not correctness: two coders can share a misreading."
MOST_DISPUTES = 20
_HEADINGS = ("variable", "rows", "agree", "raw", "kappa", "AC1", "ICC", "alpha")
_LABEL = 28


def write_comparison(folder: Path, found: Reconciliation, *, raw: bool, force: bool) -> list[str]:
    """Write agreement, disputes, rows and the workbook to settle them in; notes say what it could not hold.

    Raises
    ------
    UsageError : the folder exists without ``force``, or its workbook holds agreed values, which are not overwritten.
    """
    filled = folder / CONSENSUS
    if force and filled.is_file() and has_agreed(filled):
        advice = "read it with --consensus, or choose another folder for --out"
        raise UsageError(f"{quoted(filled, 200)} holds agreed values: {advice}")
    with output_folder(folder, FILES, force=force) as made:
        write_csv(found.agreement, made / FILES[0], raw=raw)
        write_csv(found.disputes.drop(columns=["of_effect", "of_column"]), made / FILES[1], raw=raw)
        write_csv(found.effects, made / FILES[2], raw=raw)
        return write_consensus(found, made / CONSENSUS)


def write_settled(folder: Path, found: Reconciliation, settled: Settled, *, force: bool) -> list[str]:
    """Write the merged sheet; notes say what is still open. Raises as ``output_folder`` does."""
    with output_folder(folder, (MERGED,), force=force) as made:
        return write_merged(found, settled, made / MERGED)


def show_comparison(to: Console, found: Reconciliation, names: Sequence[str]) -> None:
    """Whose sheets, how well they agree, and what is in dispute."""
    for coder, name, sheet in zip(found.coders, names, found.sheets, strict=True):
        say(to, f"{coder} = {name}, {counted(sheet.table.rows, 'row')}", 0, 4)
    both = len(found.effects) - len(found.single)
    loose = int((found.effects["matched"] != "").sum())
    matched = f"{counted(both, 'row')} matched"
    say(to, matched + (f", {loose} of them not by equal labels alone" if loose else "") + ".")
    to.print()
    _show_agreement(to, found)
    _show_disputes(to, found)
    _show_single(to, found)


def _show_agreement(to: Console, found: Reconciliation) -> None:
    share = f"{found.tolerance:g}"
    more = f" or they differ by at most {share} of the larger" if found.tolerance else ""
    level = f"{found.level * 100:g} %"
    say(
        to,
        "Agreement before anything is settled. Numbers agree where their rounding intervals overlap"
        f"{more}; a blank against a number or a word is a disagreement. Limits at {level}.",
    )
    lines = []
    for row in found.agreement.to_dict("records"):
        coefficients = [_with_limits(row, name) for name in ("kappa", "ac1", "icc")]
        name = f"effect in {row['variable']}" if row["kind"] == EFFECT else str(row["variable"])
        counts = [name, str(row["rows"]), str(row["all_agree"]), _two(row["raw_agreement"])]
        lines.append([*counts, *coefficients, _two(row["alpha"])])
    widths = [max(len(line[at]) for line in (list(_HEADINGS), *lines)) for at in range(len(_HEADINGS))]
    for at, line in enumerate([list(_HEADINGS), *lines]):
        cells = [
            cell.ljust(width) if not column else cell.rjust(width)
            for column, (cell, width) in enumerate(zip(line, widths, strict=True))
        ]
        to.print(Text("  ".join(cells).rstrip(), "" if at else "bold"), soft_wrap=True)
    to.print()


def _with_limits(row: dict[str, object] | dict[object, object], name: str) -> str:
    low, high = _two(row[f"{name}_low"]), _two(row[f"{name}_high"])
    return _two(row[name]) + (f" [{low}, {high}]" if low and high else "")


def _two(value: object) -> str:
    """A coefficient with two decimals; 0.996 is not shown as perfect."""
    if not isinstance(value, float) or math.isnan(value):
        return ""
    shown = f"{value:.2f}".replace("-0.00", "0.00")
    return f"{value:.3f}" if shown == "1.00" and value < 0.9995 else shown


def _show_disputes(to: Console, found: Reconciliation) -> None:
    disputes = found.disputes
    if not len(disputes):
        say(to, "No cell is in dispute.")
        return
    touching = int((disputes["moves"] != MOVES_IN_WORDS[NOTHING]).sum())
    verb = "touches" if touching == 1 else "touch"
    what = f", {touching} of them {verb} {found.metric}" if found.metric else ""
    say(
        to,
        f"{counted(len(disputes), 'cell')} in dispute{what}"
        + (", the gravest first:" if found.metric else ":"),
    )
    shown = disputes.head(MOST_DISPUTES if found.metric is None else min(max(touching, 1), MOST_DISPUTES))
    for at, record in enumerate(shown.to_dict("records"), 1):
        head = f"{at}. {_named(record)}: "
        say(to, Text.assemble((head, "bold"), _dispute(found, record)), 2, 3)
    left = len(disputes) - len(shown)
    if left:
        say(to, f"and {left} more; --out DIR writes all of them", 2, 2)


def _named(record: dict[object, object] | dict[str, object]) -> str:
    words = [str(record[name]) for name in ("study", "outcome", "effect")]
    label = ", ".join(" ".join(word.split()) for word in words if word) or "a row without labels"
    return label if len(label) <= 3 * _LABEL else label[: 3 * _LABEL - 1] + "…"


def _dispute(found: Reconciliation, record: dict[object, object] | dict[str, object]) -> str:
    said = []
    for coder in found.coders:
        text, cell = str(record[coder]) or "blank", str(record[f"{coder} cell"])
        address = cell[cell.rfind("[") :] if cell.endswith("]") else ""
        said.append(" ".join(filter(None, (coder, text, address))))
    sentence = f"{record['variable']} is {'; '.join(said)}"
    if found.metric is not None:
        sentence += f". It {record['moves']}"
        shift = record["shift"]
        if record["moves"] != MOVES_IN_WORDS[DECIDES] and isinstance(shift, float) and shift > 0:
            ends = f"{number(record['estimate'])} to {number(record['changed'])}"
            in_se = record["shift_in_se"]
            errors = f", {plain(in_se)} standard errors" if isinstance(in_se, float) and in_se > 0 else ""
            sentence += f" by {plain(shift)} ({ends}{errors})"
    if record["fits"]:
        whose = "no coder's value" if record["fits"] == "none" else f"only the value of {record['fits']}"
        sentence += f"; {whose} fits the other numbers of the row"
    return sentence


def _show_single(to: Console, found: Reconciliation) -> None:
    if not len(found.single):
        return
    to.print()
    say(to, f"{counted(len(found.single), 'row')} that not every coder has:")
    for record in found.single.to_dict("records"):
        rows = [
            f"{coder} {rows_in_words([int(record[f'row {coder}'])])}"
            for coder in found.coders
            if not pd.isna(record[f"row {coder}"])
        ]
        hint = f" ({record['hint']})" if record["hint"] else ""
        say(to, f"{_named(record)}: {listed(rows)}, not with {record['absent']}{hint}", 2, 3)
