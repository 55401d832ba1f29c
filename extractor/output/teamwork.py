"""What the team works with, on the terminal: questions, sensitivity, changes between runs, and the pilot."""

from __future__ import annotations

from collections.abc import Hashable, Mapping, Sequence
from typing import Any

import pandas as pd
from rich.console import Console
from rich.text import Text

from extractor.asking.batch import Unlocking
from extractor.codebook_check import Pilot
from extractor.output.terminal import between, counted, number, rows_in_words, say
from extractor.routes.sensitivity import Sensitivity
from extractor.runs.changes import STILL, Comparison
from extractor.runs.matching import KEYS
from extractor.words import listed, plain

_MOST_QUESTIONS = 8
_MOST_STUDIES = 3
_MOST_LINES = 40
_DOES = {
    "opens": "open",
    "tightens": "tighten to a point",
    "frees": "free from an assumption",
    "completes": "give a variance to",
}


def show_unlocking(to: Console, unlocking: Unlocking, rows: int) -> None:
    """What to ask about each row, then which question does most."""
    asked = unlocking.rows
    alike: dict[tuple[str, ...], list[dict[Hashable, Any]]] = {}
    for _, part in asked.groupby(["row", "does"], sort=False):
        alike.setdefault(_offered(part), []).append(part.iloc[0].to_dict())
    for (status, does, *offers), rows_of in alike.items():
        studies = list(dict.fromkeys(str(line["study"]) for line in rows_of if line["study"]))
        some = studies if len(studies) <= _MOST_STUDIES else [*studies[:_MOST_STUDIES], "others"]
        where = rows_in_words(line["row"] for line in rows_of)
        say(to, Text.assemble((where, "bold"), f" {listed(some)}" if some else "", f": {status}"), 0, 2)
        if not does:
            say(to, offers[0], 2, 2)
            continue
        say(to, f"{does}:", 2, 2)
        for offer in offers:
            say(to, offer, 4, 3)
    if len(asked):
        to.print()
    touched = asked.loc[asked["question"] != "", "row"].nunique()
    say(to, f"{touched} of {counted(rows, 'row')} would gain from an answer.")
    _show_batch(to, unlocking.batch)


def _offered(part: pd.DataFrame) -> tuple[str, ...]:
    """What a row is asked: its status, what an answer would do, and each offer; rows that are alike share it."""
    first = part.iloc[0]
    if not first["question"]:
        said = f"{first['does']}: {first['reason']}" if first["does"] else str(first["reason"])
        return str(first["status"]), "", said
    now = f"; now {between(first['now_low'], first['now_high'])}" if pd.notna(first["gain"]) else ""
    offers = []
    for line in part.to_dict("records"):
        left = "; still rests on an assumption" if line["assumption_left"] else ""
        also = f"; for its variance also {line['also']}" if line["also"] else ""
        offers.append(f"{line['choice']}. {line['question']} ({line['to_be_had']}{left}{also})")
    return str(first["status"]), f"{first['does']}{now}", *offers


def _show_batch(to: Console, batch: pd.DataFrame) -> None:
    if not len(batch):
        return
    say(to, Text("The questions that would do most", "bold"))
    for line in batch.head(_MOST_QUESTIONS).to_dict("records"):
        does = listed([f"{word} {counted(line[name], 'row')}" for name, word in _DOES.items() if line[name]])
        where = rows_in_words(line["row_numbers"])
        studies = "1 study" if line["studies"] == 1 else f"{line['studies']} studies"
        say(to, f"{line['question']}: would {does} of {studies} ({where})", 2, 2)


def show_sensitivity(to: Console, sensitivity: Sensitivity, routes: pd.DataFrame) -> None:
    """Which assumption matters, and in which rows the choice of route does."""
    if not len(sensitivity.assumptions):
        say(to, "No effect rests on an assumption.")
    else:
        say(to, Text("What rests on assumptions, the one that moves an effect most first", "bold"))
    for line in sensitivity.assumptions.to_dict("records"):
        rows = counted(int(line["rows"]), "row")
        if pd.isna(line["range_low"]):
            say(to, f"{line['assumption']}: {rows}; {line['by']}", 0, 2)
            continue
        span = f"{number(line['range_low'])} to {number(line['range_high'])}"
        if not line["rows"]:
            say(to, f"{line['assumption']} from {span}: no effect rests on it", 0, 2)
            continue
        errors = (
            f", {number(line['largest_in_se'])} standard errors" if pd.notna(line["largest_in_se"]) else ""
        )
        most = f"{number(line['largest_swing'])} (row {int(line['largest_row'])}{errors})"
        moved = f"moved by {number(line['median_swing'])} at the median and by at most {most}"
        say(to, f"{line['assumption']} from {span}: {rows}, {moved}", 0, 2)
    apart = routes[routes["beyond_rounding"].astype(bool)]
    several = int((routes["routes"] > 1).sum())
    said = f"{counted(several, 'row')} had more than one route; in {len(apart)} the routes differ beyond rounding"
    say(to, said + (":" if len(apart) else "."))
    for line in (
        apart.sort_values("spread_in_se", ascending=False, kind="stable").head(_MOST_LINES).to_dict("records")
    ):
        errors = (
            f" ({number(line['spread_in_se'])} standard errors)" if pd.notna(line["spread_in_se"]) else ""
        )
        low, high = number(line["lowest"]), number(line["highest"])
        span = f"{low} by {line['lowest_route']} to {high} by {line['highest_route']}"
        say(to, f"row {line['row']}: {span}{errors}", 2, 2)


def show_comparison(to: Console, comparison: Comparison) -> None:
    """Every effect that moved with its cause, then what differs between the runs as a whole."""
    if comparison.incomparable:
        say(to, Text(comparison.incomparable, "yellow"))
    lines = _alike(comparison.effects)
    for some in lines[:_MOST_LINES]:
        say(to, change_in_words(some), 0, 2)
    more = sum(map(len, lines[_MOST_LINES:]))
    if more:
        say(to, f"... and {counted(more, 'effect')} more; --out FILE writes all of them")
    if not len(comparison.effects):
        say(to, "No effect moved.")
    else:
        causes = comparison.effects["cause"].value_counts()
        say(
            to,
            f"{counted(len(comparison.effects), 'effect')}: {listed([f'{causes[c]} by {c}' for c in causes.index])}.",
        )
    _show_list(to, "Changed without moving an effect", comparison.unmoved)
    _show_list(to, "Between the runs as a whole", comparison.settings)


def _alike(effects: pd.DataFrame) -> list[list[dict[Hashable, Any]]]:
    """Lines of the comparison, those together of which the same is to be said: no estimate moved, for one reason."""
    found: dict[tuple[object, ...], list[dict[Hashable, Any]]] = {}
    for at, line in enumerate(effects.to_dict("records")):
        key = (line["change"], line["why"]) if line["change"] in STILL else (at,)
        found.setdefault(key, []).append(line)
    return list(found.values())


def change_in_words(lines: Sequence[Mapping[Hashable, Any]]) -> str:
    """Lines of the comparison that differ in their rows only, as a sentence."""
    line = lines[0]
    rows = rows_in_words(int(each["row"] if pd.notna(each["row"]) else each["old_row"]) for each in lines)
    labels = ", ".join(str(line[name]) for name in KEYS if line[name]) if len(lines) == 1 else ""
    said = f"{rows}{f' ({labels})' if labels else ''}: {line['change']}"
    if line["change"] not in STILL and pd.notna(line["estimate_new"]):
        before = f"{plain(line['estimate_old'])} ->" if pd.notna(line["estimate_old"]) else "now"
        said += f", {before} {plain(line['estimate_new'])}"
    return f"{said}. {str(line['cause']).capitalize()}: {line['why']}"


def show_pilot(to: Console, pilot: Pilot, duplicates: pd.DataFrame, headings: Sequence[str]) -> None:
    """What a sheet says about its codebook, then rows that may be one sample."""
    say(to, f"Piloted on {counted(pilot.rows, 'row')}.")
    _show_list(to, "Columns never filled", pilot.unfilled)
    _show_list(to, "Entries of the codebook without a column", pilot.absent)
    _show_list(to, "Columns that nobody knows; they are carried along unread", pilot.unknown)
    _show_list(to, "Headings understood only without regard to case", headings)
    lines = [
        f"{line['heading']}: {counted(line['cells'], 'cell')}, first {line['first']}: {line['problem']}"
        for line in pilot.not_understood.to_dict("records")
    ]
    _show_list(to, "Never understood", lines)
    used = [f"{word} {counted(count, 'row')}" for word, count in pilot.designs.items() if count]
    say(to, f"Designs used: {listed(used) or 'none'}.")
    never = [word for word, count in pilot.designs.items() if not count]
    if never:
        say(to, f"Designs never used: {listed(never)}.")
    _show_list(
        to, "Words that are no design", [f"'{w}': {counted(c, 'row')}" for w, c in pilot.misspelt.items()]
    )
    lines = [
        f"row {line['row_a']} ({line['study_a']}) and row {line['row_b']} ({line['study_b']}): "
        f"the same {line['alike']}: {line['shown']}"
        for line in duplicates.to_dict("records")
    ]
    _show_list(to, "Different studies with the same numbers: look whether one sample is counted twice", lines)


def _show_list(to: Console, title: str, lines: Sequence[str]) -> None:
    if not lines:
        return
    say(to, Text(f"{title}:", "bold"))
    for line in lines[:_MOST_LINES]:
        say(to, line, 2, 2)
    if len(lines) > _MOST_LINES:
        say(to, f"... and {len(lines) - _MOST_LINES} more", 2, 2)
