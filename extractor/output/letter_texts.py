"""Letters as Markdown and as plain text, and the log into which the replies are written."""

from __future__ import annotations

import textwrap
from collections.abc import Iterable
from pathlib import Path

import pandas as pd

from extractor.asking.letters import LOG_COLUMNS, Letter
from extractor.output.files import output_folder
from extractor.output.tables import write_csv

LOG = "replies.csv"
_WIDTH = 78
_OPENING = (
    "we are preparing a systematic review, [title of the review], which includes your study, listed with us as "
    "“{study}” ([full reference]). To do justice to it, may we ask you for {what}?"
)
_NUMBER = "the number listed below"
_NUMBERS = "the few numbers listed below"
_WORDS = "a word on the printed numbers below"
_HEADING = "Questions on printed numbers"
_CLOSING = (
    "If a number is no longer available, a short note to that effect helps us as well; there is no need to send "
    "any data beyond these. We will name your reply as the source.",
    "Thank you very much for your time.",
    "With kind regards,\n[name, institution, address]",
)


def markdown(letter: Letter) -> str:
    """A letter as Markdown."""
    lines = [
        f"**Subject:** {_subject(letter)}",
        "",
        "Dear [name of the corresponding author],",
        "",
        _opening(letter),
    ]
    if letter.groups:
        lines += ["", letter.groups]
    number = 0
    for part in letter.parts:
        lines += ["", f"## {_escaped(part.title)}", "", _context(part.known, part.purpose)]
        lines += ["", "We would be grateful for:", ""]
        for line in part.lines:
            number += 1
            lines.append(f"{number}. {line.asked}")
        if part.instead:
            lines += ["", f"If that is not at hand, this would help as well: {part.instead}."]
    if letter.findings:
        lines += ["", f"## {_HEADING}", ""]
        lines += [f"- {_escaped(question)}" for question in letter.findings]
    if letter.lines:
        lines += ["", "## Reply table", "", "| No. | Number | Your value |", "|---:|---|---|"]
        lines += [f"| {at} | {_escaped(line.asked)} | |" for at, line in enumerate(letter.lines, 1)]
    for paragraph in _CLOSING:
        lines += ["", paragraph.replace("\n", "  \n")]
    return "\n".join(lines) + "\n"


def plain_text(letter: Letter) -> str:
    """A letter as plain text, for the body of an e-mail."""
    lines = [f"Subject: {_subject(letter)}", "", "Dear [name of the corresponding author],", ""]
    lines += _wrapped(_opening(letter))
    if letter.groups:
        lines += ["", *_wrapped(letter.groups)]
    number = 0
    for part in letter.parts:
        lines += ["", *_wrapped(part.title), "-" * min(len(part.title), _WIDTH)]
        lines += _wrapped(f"{_context(part.known, part.purpose)} We would be grateful for:")
        for line in part.lines:
            number += 1
            lines += _wrapped(f"{number:>3}. {line.asked}:  ______", "     ")
        if part.instead:
            lines += _wrapped(f"If that is not at hand, this would help as well: {part.instead}.")
    if letter.findings:
        lines += ["", _HEADING, "-" * len(_HEADING)]
        for question in letter.findings:
            lines += _wrapped(f"  - {question}", "    ")
    for paragraph in _CLOSING:
        lines += ["", *(wrapped for piece in paragraph.split("\n") for wrapped in _wrapped(piece))]
    return "\n".join(lines) + "\n"


def _subject(letter: Letter) -> str:
    numbers = len(letter.lines)
    what = f"{numbers} number{'s' if numbers > 1 else ''}" if numbers else "a question"
    return f"Your study “{letter.study}”: {what} for a systematic review"


def _opening(letter: Letter) -> str:
    numbers = _NUMBERS if len(letter.lines) > 1 else _NUMBER
    what = " and ".join(w for w, has in ((numbers, letter.lines), (_WORDS, letter.findings)) if has)
    return _OPENING.format(study=letter.study, what=what)


def _context(known: str, purpose: str) -> str:
    return f"The article gives {known}. {purpose}" if known else purpose


def _escaped(text: str) -> str:
    """Words of a sheet that are not to be taken for Markdown."""
    return "".join(f"\\{sign}" if sign in "\\`*_[]<>|#" else sign for sign in " ".join(text.split()))


def _wrapped(text: str, hang: str = "") -> list[str]:
    return textwrap.wrap(text, _WIDTH, subsequent_indent=hang, break_long_words=False, break_on_hyphens=False)


def log_frame(letters: Iterable[Letter]) -> pd.DataFrame:
    """One line for every number asked for, its value and source still blank."""
    lines = [
        {"study": letter.study, "row": line.row, "cell": line.cell, "asked": line.asked}
        for letter in letters
        for line in letter.lines
    ]
    return pd.DataFrame(lines, columns=list(LOG_COLUMNS), dtype=object).fillna("")


def write_letters(folder: Path, letters: list[Letter], *, force: bool) -> None:
    """Two files for each letter, and the log.

    With ``force`` an existing folder keeps every file that is not written anew.

    Raises
    ------
    UsageError : the folder exists without ``force``, or it cannot be written.
    """
    with output_folder(folder, (LOG,), force=force) as made:
        for letter in letters:
            for ending, text in ((".md", markdown(letter)), (".txt", plain_text(letter))):
                path = made / f"{letter.name}{ending}"
                path.write_text(text, encoding="utf-8", errors="backslashreplace", newline="")
        write_csv(log_frame(letters), made / LOG)
