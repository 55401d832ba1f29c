"""Letters as Markdown and as plain text, and the log into which the replies are written."""

from __future__ import annotations

import textwrap
from collections.abc import Iterable, Iterator
from pathlib import Path

import pandas as pd

from extractor.asking.letters import LOG_COLUMNS, Letter, Line, Part
from extractor.asking.questions import Aim
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
_ASKING = "We would be grateful for:"
_ASKED = "The numbers asked for above serve this result as well."
_HEADING = "Questions on printed numbers"
_PURPOSE = {
    Aim.OPENS: "Without further numbers we cannot compute an effect size for {result}.",
    Aim.TIGHTENS: "The article lets us compute a limit of the effect size only, not its value, for {result}.",
    Aim.FREES: "For {result} we have had to assume so far, as the article does not say: {supposed}.",
    Aim.COMPLETES: "For {result} we have an effect size, but not how precise it is.",
}
_UNAVAILABLE = (
    "If a number is no longer available, a short note to that effect helps us as well; there is no need to send "
    "any data beyond these. We will name your reply as the source."
)
_CLOSING = ("Thank you very much for your time.", "With kind regards,\n[name, institution, address]")


def markdown(letter: Letter) -> str:
    """A letter as Markdown."""
    lines = [
        f"**Subject:** {_subject(letter)}",
        "",
        "Dear [name of the corresponding author],",
        "",
        _opening(letter),
    ]
    lines += [piece for paragraph in _before(letter) for piece in ("", paragraph)]
    for part, asked in _numbered(letter):
        context = _escaped(_context(letter, part))
        lines += ["", f"## {_escaped(part.title)}", "", *([context, ""] if context else [])]
        lines += [_ASKING, "", *(f"{at}. {line.asked}" for at, line in asked)] if asked else [_ASKED]
        if part.instead and not _shared(letter):
            lines += ["", f"If that is not at hand, this would help as well: {part.instead}."]
    if letter.findings:
        lines += ["", f"## {_HEADING}", ""]
        lines += [f"- {_escaped(question)}" for question in letter.findings]
    if letter.numbers:
        several = len(letter.parts) > 1
        lines += ["", "## Reply table", "", f"| No. |{' Result |' if several else ''} Number | Your value |"]
        lines += [f"|---:|{'---|' if several else ''}---|---|"]
        for at, (title, line) in enumerate(letter.numbers, 1):
            lines.append(f"| {at} |{f' {_escaped(title)} |' if several else ''} {_escaped(line.asked)} | |")
    for paragraph in _after(letter):
        lines += ["", paragraph.replace("\n", "  \n")]
    return "\n".join(lines) + "\n"


def plain_text(letter: Letter) -> str:
    """A letter as plain text, for the body of an e-mail."""
    lines = [f"Subject: {_subject(letter)}", "", "Dear [name of the corresponding author],", ""]
    lines += _wrapped(_opening(letter))
    for paragraph in _before(letter):
        lines += ["", *_wrapped(paragraph)]
    for part, asked in _numbered(letter):
        lines += ["", *_wrapped(part.title), "-" * min(len(part.title), _WIDTH)]
        lines += _wrapped(f"{_context(letter, part)} {_ASKING if asked else _ASKED}".strip())
        for at, line in asked:
            lines += _wrapped(f"{at:>3}. {line.asked}:  ______", "     ")
        if part.instead and not _shared(letter):
            lines += _wrapped(f"If that is not at hand, this would help as well: {part.instead}.")
    if letter.findings:
        lines += ["", _HEADING, "-" * len(_HEADING)]
        for question in letter.findings:
            lines += _wrapped(f"  - {question}", "    ")
    for paragraph in _after(letter):
        lines += ["", *(wrapped for piece in paragraph.split("\n") for wrapped in _wrapped(piece))]
    return "\n".join(lines) + "\n"


def _numbered(letter: Letter) -> Iterator[tuple[Part, list[tuple[int, Line]]]]:
    """Each result with the numbers asked for about it, counted through the letter."""
    count = 0
    for part in letter.parts:
        fresh = [line for line in part.lines if not line.again]
        yield part, list(enumerate(fresh, count + 1))
        count += len(fresh)


def _subject(letter: Letter) -> str:
    numbers = len(letter.numbers)
    what = f"{numbers} number{'s' if numbers > 1 else ''}" if numbers else "a question"
    return f"Your study “{letter.study}”: {what} for a systematic review"


def _opening(letter: Letter) -> str:
    numbers = _NUMBERS if len(letter.numbers) > 1 else _NUMBER
    what = " and ".join(w for w, has in ((numbers, letter.numbers), (_WORDS, letter.findings)) if has)
    return _OPENING.format(study=letter.study, what=what)


def _shared(letter: Letter) -> bool:
    """Whether the same is to be said of all of several results, and so once."""
    return len({(part.aim, part.supposed, part.instead) for part in letter.parts}) == 1 < len(letter.parts)


def _before(letter: Letter) -> Iterator[str]:
    """What is said ahead of the single results."""
    if letter.groups:
        yield letter.groups
    if _shared(letter):
        yield _purpose(letter.parts[0], "these results")


def _after(letter: Letter) -> Iterator[str]:
    """What is said at the end."""
    if letter.numbers:
        if _shared(letter) and letter.parts[0].instead:
            yield f"If these are not at hand, this would help as well, for each result: {letter.parts[0].instead}."
        yield _UNAVAILABLE
    yield from _CLOSING


def _context(letter: Letter, part: Part) -> str:
    """What the article gives for a result, and what is lacking."""
    known = f"The article gives {part.known}." if part.known else ""
    return " ".join(filter(None, [known, "" if _shared(letter) else _purpose(part, "this result")]))


def _purpose(part: Part, result: str) -> str:
    return _PURPOSE[part.aim].format(result=result, supposed=part.supposed or "what we ask for here")


def _escaped(text: str) -> str:
    """Words of a sheet that are not to be taken for Markdown."""
    return "".join(f"\\{sign}" if sign in "\\`*_[]<>|#" else sign for sign in " ".join(text.split()))


def _wrapped(text: str, hang: str = "") -> list[str]:
    return textwrap.wrap(text, _WIDTH, subsequent_indent=hang, break_long_words=False, break_on_hyphens=False)


def log_frame(letters: Iterable[Letter]) -> pd.DataFrame:
    """One line for every cell that an answer fills, its value and source still blank."""
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
