"""Letters to the authors of a study: the fewest numbers that would make its rows usable, and findings as questions.

A letter is a draft. What only the team knows stands in square brackets and is to be filled in before it is sent.
"""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Iterable, Iterator
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from extractor.asking.batch import groups_of, heading_of, places_of
from extractor.asking.questions import Aim, Asked, Offer
from extractor.asking.situation import GROUPED
from extractor.evidence import Block
from extractor.findings import Finding, Severity
from extractor.quantities import FACTS, VOCABULARY
from extractor.routes.conversion import Conversion
from extractor.study.terms import analysis_ids
from extractor.table import ReportedTable, Variable
from extractor.words import listed, plain, printed_text

LOG_COLUMNS = ("study", "row", "cell", "asked", "value", "source", "by", "on", "remark")
_NOT_FOR_AUTHORS = frozenset({"not understood", "two readings", "corrected", "decision without a finding"})
"""Findings about the coder's own work."""
_NOT_PRINTED = FACTS.keys() | {"tails"}
"""What coders enter and no article prints as a number."""
_MOST_FINDINGS = 4
_MOST_SHOWN = 5
_OF_CONDITIONS = ("paired", "within")
_OF_TWO = frozenset({"direction", "mean_difference", "t_value"})
"""Numbers that depend on which group comes first."""

PHRASES = {
    "direction": "which of the two had the higher mean",
    "tails": "number of tails of the printed p value, 1 or 2",
    "confidence_level": "level of the printed confidence limits, such as .95",
    "significance_level": "significance level of the printed least significant difference, such as .05",
    "n": "number of participants analysed",
    "n_total": "number of participants analysed, all groups together",
    "k_groups": "number of groups (or conditions) in this analysis",
    "mean": "mean",
    "sd": "standard deviation of the scores (not the standard error)",
    "mean_pre": "mean before treatment",
    "sd_pre": "standard deviation before treatment",
    "mean_post": "mean after treatment",
    "sd_post": "standard deviation after treatment",
    "mean_change": "mean of the change scores",
    "sd_change": "standard deviation of the change scores",
    "adjusted_mean": "mean adjusted for the covariates",
    "mean_difference": "difference of the two means, first minus second",
    "se_difference": "standard error of the difference of the two means",
    "f_value": "F value of this effect",
    "df_effect": "numerator degrees of freedom of this F",
    "df_error": "denominator (error) degrees of freedom of this test",
    "t_value": "t value of this comparison, with its sign",
    "p_value": "exact p value of this test",
    "ms_error": "error mean square of this test",
    "ss_effect": "sum of squares of this effect",
    "ss_error": "sum of squares of its error term",
    "ss_total": "total sum of squares about the grand mean",
    "ss_subjects": "sum of squares between participants",
    "correlation": "correlation of the repeated measurements",
    "covariate_r": "correlation of the covariates with the outcome within groups",
    "n_covariates": "number of covariates in the model",
    "icc": "intracluster correlation of the outcome",
    "cluster_size": "average number of participants in a cluster",
    "count_a": "number of participants of the first group with the event",
    "count_b": "number of participants of the first group without the event",
    "count_c": "number of participants of the second group with the event",
    "count_d": "number of participants of the second group without the event",
}
"""What is asked for, in words that need no knowledge of this program."""
_OF_MODELS = frozenset(PHRASES[name] for name in ("n", "n_total", "ss_total"))


@dataclass(frozen=True, slots=True)
class Line:
    """One number asked for: the row of the sheet, where the answer goes, and the words of the question.

    again : the number belongs to the whole model and was asked for with another of its rows.
    """

    row: int
    cell: str
    asked: str
    again: bool = False


@dataclass(frozen=True, slots=True)
class Part:
    """What is asked about one row.

    supposed : what has been taken for granted about it so far, in words; "" where nothing was.
    """

    title: str
    known: str
    lines: tuple[Line, ...]
    instead: str
    aim: Aim
    supposed: str = ""


@dataclass(frozen=True, slots=True)
class Letter:
    """One study's letter. ``name`` : stem of its files, safe on every system."""

    study: str
    name: str
    groups: str
    parts: tuple[Part, ...]
    findings: tuple[str, ...]

    @property
    def lines(self) -> list[Line]:
        """All cells that the answers fill, in order."""
        return [line for part in self.parts for line in part.lines]

    @property
    def numbers(self) -> list[tuple[str, Line]]:
        """Every number asked for, once, with the title of its result."""
        return [(part.title, line) for part in self.parts for line in part.lines if not line.again]


def letters(
    conversion: Conversion,
    asked: Iterable[Asked],
    findings: Iterable[Finding],
    aims: Iterable[Aim] = tuple(Aim),
) -> list[Letter]:
    """One letter for each study that can be asked something, in the order of the sheet.

    Parameters
    ----------
    asked : from ``questions.questions``; the best offer of each row is asked for, the next is named as a way out.
    findings : of the audit; those that concern the authors' own numbers become questions.
    aims : which kinds of gap to ask about.
    """
    table = conversion.evidence.table
    kinds = set(aims)
    parts: dict[str, dict[int, list[Part]]] = {}
    members: dict[str, list[tuple[int, Asked]]] = {}
    for some in asked:
        if some.aim not in kinds or not some.offers:
            continue
        counts = groups_of(some.block)[np.searchsorted(some.block.positions, some.positions)].tolist()
        for position, groups in zip(some.positions.tolist(), counts, strict=True):
            study = _study(table, position)
            part = _part(conversion, some, position, groups)
            parts.setdefault(study, {}).setdefault(position, []).append(part)
            members.setdefault(study, []).append((position, some))
    doubts: dict[str, list[str]] = {}
    for finding in findings:
        if _for_authors(finding):
            position = int(np.searchsorted(table.row_numbers, finding.row))
            doubts.setdefault(_study(table, position), []).append(_as_question(table, finding, position))
    order = {_study(table, at): at for at in reversed(range(table.rows))}
    models = analysis_ids(table, table.fact("design"))
    names = _Names()
    return [
        Letter(
            study,
            names.of(study),
            _groups_in_words(table, members.get(study, [])),
            _once(parts.get(study, {}), models),
            tuple(dict.fromkeys(doubts.get(study, [])))[:_MOST_FINDINGS],
        )
        for study in sorted(parts.keys() | doubts.keys(), key=lambda s: order[s])
    ]


def _once(parts: dict[int, list[Part]], models: NDArray[np.int64]) -> tuple[Part, ...]:
    """The parts of a study in the order of the sheet; numbers of a whole model are asked for with its first row."""
    asked: set[tuple[int, str]] = set()
    found = []
    for position, each in sorted(parts.items()):
        for part in each:
            lines = []
            for line in part.lines:
                key = int(models[position]), line.asked
                lines.append(replace(line, again=key in asked))
                if key[0] >= 0 and line.asked in _OF_MODELS:
                    asked.add(key)
            found.append(replace(part, lines=tuple(lines)))
    return tuple(found)


def _study(table: ReportedTable, position: int) -> str:
    return str(table.fact("study")[position]) or f"row {table.row_numbers[position]}"


class _Names:
    """File names: plain letters, digits and hyphens, no two alike even where case is ignored."""

    def __init__(self) -> None:
        self.taken: set[str] = set()

    def of(self, study: str) -> str:
        """The stem for a study."""
        text = unicodedata.normalize("NFKD", study.translate(_LETTERS)).encode("ascii", "ignore").decode()
        stem = re.sub(r"[^a-z0-9]+", "-", text.lower()).strip("-")[:60] or "study"
        # a letter of this name would be a device on some systems
        stem = f"study-{stem}" if stem in _DEVICES else stem
        name, count = stem, 2
        while name in self.taken:
            name, count = f"{stem}-{count}", count + 1
        self.taken.add(name)
        return name


_LETTERS = str.maketrans({"ø": "o", "Ø": "O", "æ": "ae", "œ": "oe", "ß": "ss", "ł": "l", "Ł": "L", "đ": "d"})
"""Letters that Unicode does not take for a letter and a mark."""
_DEVICES = {"con", "prn", "aux", "nul", *(f"{word}{at}" for word in ("com", "lpt") for at in range(1, 10))}


def _part(conversion: Conversion, some: Asked, position: int, groups: int) -> Part:
    table, block, best = conversion.evidence.table, some.block, some.offers[0]
    row = int(table.row_numbers[position])
    title = [str(table.fact(name)[position]) for name in ("outcome", "effect", "term")]
    page = str(table.fact("page")[position])
    said = ", ".join(filter(None, [*title, f"page {page}" if page else ""])) or f"our row {row}"
    lines = _lines(table, block, best.whole, groups, position)
    supposed = str(conversion.effects["assumptions"].iloc[position]) if some.aim is Aim.FREES else ""
    return Part(
        said,
        _printed(table, position),
        tuple(lines),
        _instead(table, block, _other_way(some.offers), groups),
        some.aim,
        _supposed(supposed.partition("; ")[0]),
    )


def _supposed(assumption: str) -> str:
    """An assumption of the effect table in words for its authors, whom it does not concern who made it."""
    text = _BY_WHOM.sub("", assumption)
    name, sign, value = text.partition(" = ")
    if not sign or name not in VOCABULARY:
        return text
    meaning = re.split("[,:]", VOCABULARY[name].meaning)[0]
    return f"{meaning} = {value}"


_BY_WHOM = re.compile(r" \([^()]*\)$")


def _other_way(offers: tuple[Offer, ...]) -> Offer | None:
    """The next offer that has nothing in common with the first, so that both can hardly be lacking; else the next."""
    return next((o for o in offers[1:] if not o.asked & offers[0].asked), offers[1] if offers[1:] else None)


def _lines(
    table: ReportedTable, block: Block, asked: frozenset[str], groups: int, position: int
) -> Iterator[Line]:
    row = int(table.row_numbers[position])
    for place in places_of(table, block, asked, groups):
        numbers = None if isinstance(place, str) else table.numbers.get(place)
        cell = numbers.place.at(row) if numbers is not None else heading_of(table, place)
        phrase = _phrase(block, place, groups)
        if place == "direction" and not table.fact("contrast")[position]:
            phrase += f", {_kind(block)} 1 or {_kind(block)} 2"
        yield Line(row, cell, phrase)


def _kind(block: Block) -> str:
    """What the groups of a design are called."""
    return "condition" if block.design in _OF_CONDITIONS else "group"


def _phrase(block: Block, place: Variable | str, groups: int) -> str:
    name, group = (place, None) if isinstance(place, str) else place
    if name == "sd_change" and block.design == "paired":
        return "standard deviation of the difference scores"
    if name == "n_total" and block.design in _OF_CONDITIONS:
        return PHRASES["n"]
    phrase = PHRASES.get(name) or VOCABULARY[name].meaning
    if group is None:
        return phrase
    more = " (and so on for every further one)" if groups == 0 and group > 1 else ""
    return f"{phrase}, {_kind(block)} {group}{more}"


def _instead(table: ReportedTable, block: Block, offer: Offer | None, groups: int) -> str:
    """Another offer in words, the groups of one number together."""
    members: dict[str, list[str]] = {}
    for place in places_of(table, block, offer.asked, groups) if offer is not None else ():
        name, group = (place, None) if isinstance(place, str) else place
        members.setdefault(name, []).extend([] if group is None else [str(group)])
    words = []
    for name, some in members.items():
        which = (
            "" if not some or (name == "sd_change" and block.design == "paired") else _of(block, groups, some)
        )
        words.append(_phrase(block, (name, None) if name in VOCABULARY else name, groups) + which)
    return "; ".join(words)


def _of(block: Block, groups: int, members: list[str]) -> str:
    kind = _kind(block)
    if groups == 0 or len(members) == groups > 1:
        return f" of each {kind}"
    return f" of {kind}{'s' if len(members) > 1 else ''} {listed(members)}"


def _printed(table: ReportedTable, position: int) -> str:
    """The first few statistics that the article gives for a row, so that its authors recognise it."""
    shown, of_groups = list[str](), dict[str, None]()
    for (name, group), numbers in table.numbers.items():
        symbol = VOCABULARY[name].symbol
        if not numbers.given[position] or name in _NOT_PRINTED or not numbers.place.column:
            continue
        if group is None:
            text = printed_text(table, (name, group), position)
            shown.append(f"{symbol} {text if text[0] in '<>' else f'= {text}'}")
        else:
            of_groups[symbol] = None
    if shown or not of_groups:
        return ", ".join(shown[:_MOST_SHOWN])
    return f"{listed(list(of_groups)[:_MOST_SHOWN])} of the groups"


def _groups_in_words(table: ReportedTable, members: list[tuple[int, Asked]]) -> str:
    """What the article says of the numbered groups, so that authors know which is which; "" where it is all one."""
    compared = [(p, some) for p, some in members if some.offers[0].asked & (GROUPED | _OF_TWO)]
    if not compared:
        return ""
    kind = "condition" if all(some.block.design in _OF_CONDITIONS for _, some in compared) else "group"
    said: list[str] = []
    for group in (1, 2):
        known = []
        for name in ("n", "mean", "sd"):
            column = table.numbers.get((name, group))
            given = {printed_text(table, (name, group), p) for p, _ in compared if column is not None} - {""}
            # a number that differs between the results does not say which group is meant
            known += [f"{VOCABULARY[name].symbol} = {text}" for text in given if len(given) == 1]
        with_numbers = f", with {listed(known)} in the article" if known else ""
        said.append(f"{kind} {group} is [name of {kind} {group}{with_numbers}]")
    counts = [groups_of(some.block)[np.searchsorted(some.block.positions, p)] for p, some in compared]
    more = "" if all(count == 2 for count in counts) else "; any further ones follow in the article's order"
    return f"In the numbering below, {said[0]} and {said[1]}{more}."


def _for_authors(finding: Finding) -> bool:
    if finding.rule in _NOT_FOR_AUTHORS or finding.severity < Severity.DOUBTFUL or not finding.cells:
        return False
    return finding.severity >= Severity.INCONSISTENT or np.isfinite(finding.expected_low)


def _as_question(table: ReportedTable, finding: Finding, position: int) -> str:
    """A finding as a question; nothing in it says that anybody erred."""
    page, outcome = (str(table.fact(name)[position]) for name in ("page", "outcome"))
    where = ", ".join([f"on page {page}"] * bool(page) + [f"for the outcome “{outcome}”"] * bool(outcome))
    start = f"{where[0].upper()}{where[1:]}, we" if where else "We"
    first, *others = [_spoken(table, cell.partition(" [")[0]) for cell in finding.cells]
    read = f"{start} read {first} as {finding.printed or 'blank'}"
    ends = [plain(e) for e in (finding.expected_low, finding.expected_high) if np.isfinite(e)]
    if finding.printed and ends and finding.severity < Severity.IMPOSSIBLE:
        one = f"a value of {'at least' if np.isfinite(finding.expected_low) else 'at most'} {ends[0]}"
        two = ends[0] if len(set(ends)) == 1 else f"a value between {' and '.join(ends)}"
        read += f"; from the other numbers we would have expected {two if len(ends) == 2 else one}"
        reasons = "exclusions, a covariate, a correction or a one-tailed test"
    else:
        read += f" and could not see how it comes about{f' beside {listed(others[:3])}' if others else ''}"
        reasons = "exclusions, weights or missing answers"
    return f"{read}. Have we misread it, or missed something, such as {reasons}?"


def _spoken(table: ReportedTable, heading: str) -> str:
    """A column in the symbols of the trade; columns of words keep their heading."""
    for (name, group), numbers in table.numbers.items():
        if numbers.place.heading == heading and name in VOCABULARY:
            return VOCABULARY[name].symbol + (f" of group {group}" if group is not None else "")
    return heading
