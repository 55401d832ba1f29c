"""Statistics in APA notation, several in one text -> readings by quantity.

``F(2, 57) = 4.31, p = .018, η² = .13`` is the notation of the Publication Manual of the American
Psychological Association; spellings that keyboards and copied PDFs make of it are taken too. What was not
read is said, never dropped. A text that speaks of two tests is refused: nobody can tell which is meant.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from functools import lru_cache

from extractor.printed.reading import BLANK, Reading, quoted, refuse, tidy
from extractor.printed.reported import PROBABILITIES, read_number
from extractor.printed.symbols import EFFECT_SIZES, SPELLINGS, quantity_of
from extractor.quantities import VOCABULARY

LONGEST = 5000
"""Longer texts are articles, not cells."""


@dataclass(frozen=True, slots=True)
class Statistic:
    """One statistic of a text.

    name : the quantity it reports.
    dfs : its degrees of freedom in the order printed; empty where none were.
    reading : its value or bound.
    text : the words it was read from.
    """

    name: str
    dfs: tuple[Reading, ...]
    reading: Reading
    text: str


DEGREES: dict[str, tuple[str, ...]] = {
    "f_value": ("df_effect", "df_error"),
    "welch_f": ("df_effect", "welch_df_error"),
    "t_value": ("df",),
    "r": ("df",),
    "chi_squared": ("df",),
    "h_value": ("df",),
}
"""What stands in the brackets after a statistic. The df of χ² and H are read but are no df of a t."""

# A name after one of these words is another statistic: a partial r, Glass's d, an adjusted p, a Welch t.
_FOREIGN = re.compile(
    r"(?:partial|part|multiple|adjusted|adj\.|corrected|bonferroni|holm|glass(?:'s?)?|welch(?:'s)?|forsythe"
    r"|hedges'?|robust|median|change)[ -]$",
    re.IGNORECASE,
)
_FOREIGN_LONGEST = 20
_OTHER_TESTS = (
    (
        "a multivariate test",
        re.compile(r"wilks|pillai|hotelling|\broy's|manova|multivariate|Λ", re.IGNORECASE),
    ),
    ("a test of variances", re.compile(r"levene|bartlett|forsythe|mauchly|cochran", re.IGNORECASE)),
)
"""Tests whose F is not the F of an effect on one outcome."""
_TAIL = re.compile(r"\b(one|two|1|2)[- ](?:tailed|sided|tail)\b", re.IGNORECASE)
_LONE_NS = re.compile(r"(?<![\w.])(?:n\. ?s\.|ns|NS|N\. ?S\.)(?![\w]| ?[=<>])")
_JOINTS = re.compile(r"[\s,;.:()\[\]{}|/]+|\b(?:and|with)\b")


@dataclass(frozen=True, slots=True)
class _Grammar:
    """The expressions of one decimal mark."""

    statistic: re.Pattern[str]
    interval: re.Pattern[str]
    two_dfs: re.Pattern[str]


@lru_cache(maxsize=2)
def _grammar(mark: str) -> _Grammar:
    """Compiled expressions; a mark before a space ends a number, one before a digit belongs to it."""
    own, other = (r"\.", ",") if mark == "." else (",", r"\.")
    power = r"(?:[eE][-+]?[0-9]{1,4}| ?[×x] ?10 ?(?:\^ ?[-+]?[0-9]+|[⁻⁺]?[⁰¹²³⁴⁵⁶⁷⁸⁹]+|-[0-9]+))?"
    simple = rf"[-+]?(?:[0-9]*{own}[0-9]+|[0-9]+)"
    number = (
        rf"(?:[-+] ?)?(?:[0-9]{{1,3}}(?:[{other}' ][0-9]{{3}})+(?![0-9])(?:{own}[0-9]+)?"
        rf"|[1-9][0-9]{{0,2}}(?:{own}[0-9]{{3}})+{other}[0-9]+"
        rf"|[0-9]*(?:{own}|·)[0-9]+|[0-9]*{other}[0-9]+|[0-9]+){power}%?"
    )
    names = "|".join(f"(?:{pattern})" for _, pattern in SPELLINGS)
    statistic = re.compile(
        rf"(?<![\w²])(?P<name>{names}|[a-z]+(?:_[a-z]+)+) ?"
        rf"(?:\((?P<round>[^()]{{0,60}})\)|\[(?P<square>[^\[\]]{{0,60}})\]"
        rf"|_?\{{?(?P<flat>{simple}(?: ?[,;] ?{simple})?)\}}?)?"
        rf" ?(?:= ?(?=[<>≤≥]))?(?P<sign><=|>=|[=<>≤≥]) ?"
        rf"(?P<value>{number}|n\. ?s\.|ns\b)(?P<marks> ?[*†‡§]+)?"
    )
    separator = (
        r"(?: ?; ?| ?, ?| to | ?\.\. ?| - |-)" if mark == "." else r"(?: ?; ?| ?, | to | ?\.\. ?| - |-)"
    )
    level = rf"(?:(?P<level>[0-9]{{2}}(?:{own}[0-9]+)?) ?% ?)"
    interval = re.compile(
        rf"(?<!\w)(?:{level}?(?:CIs?|confidence interval)|CI_?\{{?(?P<sub>[0-9]{{2}})%?\}}?)"
        rf"(?: (?:for|of) (?P<of>[^\[(=:,;]{{1,30}}?))? ?[:=]? ?[\[(]? ?"
        rf"(?P<low>{simple}){separator}(?P<high>{simple})(?![0-9%]) ?[\])]?"
    )
    two_dfs = re.compile(
        rf"(?<!\w)(?:df|d\.f\.|dfs) ?= ?(?P<a>{simple}) ?[,;/] ?(?P<b>{simple})(?= ?(?:[,;).]|$))"
    )
    return _Grammar(statistic, interval, two_dfs)


def _split_dfs(text: str, count: int) -> list[str] | None:
    """Degrees of freedom apart; None where their number does not fit the statistic.

    A comma with a space always separates; one without does only if it must, so that ``t(31,4)`` keeps a
    decimal comma and ``F(2,57)`` is two numbers.
    """
    text = text.strip()
    for separator in (r" ?; ?|, | ?/ ?", r" ?; ?|, ?| ?/ ?"):
        parts = re.split(separator, text)
        if len(parts) == count:
            return parts
    return None


@lru_cache(maxsize=1 << 16)
def _number(raw: str, name: str, mark: str, rounding: str, alpha: float) -> Reading:
    """A number of a text as a value of quantity ``name``; the same few numbers recur from row to row."""
    return read_number(raw, VOCABULARY[name], decimal_mark=mark, rounding=rounding, alpha=alpha)


class _Reader:
    """Reads one text; keeps what it took so that the rest can be named."""

    def __init__(self, text: str, decimal_mark: str, rounding: str, alpha: float) -> None:
        self.text = tidy(text).replace("’", "'").replace("‘", "'")
        self.mark, self.rounding, self.alpha = decimal_mark, rounding, alpha
        self.found: list[tuple[int, Statistic]] = []
        self.taken: list[tuple[int, int]] = []
        self.used = bytearray(len(self.text))

    def number(self, raw: str, name: str) -> Reading:
        """A number of the text as a value of quantity ``name``."""
        return _number(raw, name, self.mark, self.rounding, self.alpha)

    def free(self, span: tuple[int, int]) -> bool:
        """Whether nothing has been read from this part of the text."""
        return not any(self.used[span[0] : span[1]])

    def keep(self, span: tuple[int, int], *statistics: Statistic) -> None:
        """Record what a part of the text says."""
        self.taken.append(span)
        self.used[span[0] : span[1]] = b"\x01" * (span[1] - span[0])
        self.found += [(span[0], statistic) for statistic in statistics]

    def read(self) -> None:
        """Read everything there is."""
        grammar = _grammar(self.mark)
        for match in grammar.two_dfs.finditer(self.text):
            self.two_dfs(match)
        for match in grammar.statistic.finditer(self.text):
            self.statistic(match)
        for match in _LONE_NS.finditer(self.text):
            if self.free(match.span()):
                reading = self.number(match.group(), "p_value")
                self.keep(match.span(), Statistic("p_value", (), reading, match.group()))
        for match in _TAIL.finditer(self.text):
            if self.free(match.span()):
                self.keep(match.span(), Statistic("tails", (), self.number(match[1], "tails"), match.group()))
        self.found.sort(key=lambda pair: pair[0])
        for match in grammar.interval.finditer(self.text):
            self.interval(match)

    def two_dfs(self, match: re.Match[str]) -> None:
        """``df = 2, 57`` written apart from its F."""
        self.keep(
            match.span(),
            Statistic("df_effect", (), self.number(match["a"], "df_effect"), match.group()),
            Statistic("df_error", (), self.number(match["b"], "df_error"), match.group()),
        )

    def statistic(self, match: re.Match[str]) -> None:
        """A name, its degrees of freedom, a relation sign and a number."""
        name, text = quantity_of(match["name"]), match.group()
        if (
            name is None
            or not self.free(match.span())
            or _FOREIGN.search(self.text[max(match.start() - _FOREIGN_LONGEST, 0) : match.start()])
        ):
            return
        inside = match["round"] or match["square"] or match["flat"] or ""
        dfs: tuple[Reading, ...] = ()
        extra: list[Statistic] = []
        if inside and name in PROBABILITIES:
            tail = _TAIL.fullmatch(inside.strip())
            if tail is None:
                return
            extra.append(Statistic("tails", (), self.number(tail[1], "tails"), tail.group()))
        elif inside:
            if name == "chi_squared":
                inside, size, total = inside.partition("N")
                inside = inside.strip(" ,;")
                if size:
                    extra.append(Statistic("n_total", (), self.number(size + total, "n_total"), size + total))
            if name not in DEGREES:
                return
            parts = _split_dfs(inside, len(DEGREES[name]))
            if parts is None:
                return
            dfs = tuple(self.number(part, df) for part, df in zip(parts, DEGREES[name], strict=True))
        sign, value = match["sign"], match["value"]
        reading = self.number(value if sign == "=" else f"{sign} {value}", name)
        self.keep(match.span(), Statistic(name, dfs, reading, text), *extra)

    def interval(self, match: re.Match[str]) -> None:
        """Confidence limits: of the effect size they name, or of the last one printed before them."""
        if not self.free(match.span()):
            return
        if match["of"]:
            owner = quantity_of(match["of"].strip())
        else:
            before = [s.name for at, s in self.found if at < match.start()]
            owner = next((n for n in reversed(before) if n in EFFECT_SIZES or n == "mean_difference"), None)
        if owner is None:
            return
        names = ("effect_ci_low", "effect_ci_high")
        if owner == "mean_difference":
            names = ("ci_low_difference", "ci_high_difference")
        elif owner not in EFFECT_SIZES:
            return
        low, high = self.number(match["low"], names[0]), self.number(match["high"], names[1])
        if low.low > high.high:
            return
        text = match.group().strip()
        limits = [Statistic(names[0], (), low, text), Statistic(names[1], (), high, text)]
        level = match["level"] or match["sub"]
        if level:
            limits.append(Statistic("confidence_level", (), self.number(level, "confidence_level"), text))
        self.keep(match.span(), *limits)

    def remainder(self) -> str:
        """The words nothing was read from."""
        pieces, at = [], 0
        for start, end in [*sorted(self.taken), (len(self.text), len(self.text))]:
            pieces.append(self.text[at:start])
            at = max(at, end)
        kept = [piece.strip(" ,;.:") for piece in pieces if _JOINTS.sub("", piece)]
        return " … ".join(kept)


def read_statistics(
    text: str, decimal_mark: str = ".", rounding: str = "nearest", alpha: float = 0.05
) -> list[Statistic]:
    """The statistics of a text, in the order printed.

    Parameters
    ----------
    text : free text with statistics in APA notation.
    decimal_mark, rounding, alpha : as for ``reported.read_number``.

    Returns
    -------
    Statistics; confidence limits give one for each limit and one for the level. None from a text longer than
    LONGEST characters.
    """
    if len(text) > LONGEST:
        return []
    reader = _Reader(text, decimal_mark, rounding, alpha)
    reader.read()
    return [statistic for _, statistic in sorted(reader.found, key=lambda pair: pair[0])]


def _same(a: Reading, b: Reading) -> bool:
    """Whether two readings say the same."""
    return str(a) == str(b) and a.decimals == b.decimals


def _narrower(name: str, a: Reading, b: Reading) -> Reading | None:
    """Of two printed p values of one test, such as ``p = .018, p < .05``, the one that says more."""
    if name not in PROBABILITIES or not (a.given and b.given) or a.comparator == b.comparator == "=":
        return None
    if max(a.low, b.low) > min(a.high, b.high):
        return None
    return min(a, b, key=lambda reading: reading.high - reading.low)


def columns_from_text(
    text: str, decimal_mark: str = ".", rounding: str = "nearest", alpha: float = 0.05
) -> tuple[dict[str, Reading], str, str]:
    """What a text gives, as if it had been coded in columns.

    Returns
    -------
    readings : by quantity name; each says in ``understood`` which words it was read from.
    understood : what was left out, "" where nothing was.
    problem : why the text was refused as a whole, "" otherwise; then there are no readings.
    """
    if len(text) > LONGEST:
        return {}, "", f"{quoted(text)} has more than {LONGEST} characters; keep the statistics of one test"
    reader = _Reader(text, decimal_mark, rounding, alpha)
    reader.read()
    gathered: dict[str, tuple[Reading, str]] = {}
    notes: list[str] = []
    for _, statistic in reader.found:
        given = [(statistic.name, statistic.reading)]
        if statistic.name in ("chi_squared", "h_value"):
            notes += [f"df {df} of {quoted(statistic.text)} is no df of a t" for df in statistic.dfs]
        else:
            given += list(zip(DEGREES.get(statistic.name, ()), statistic.dfs, strict=False))
        if statistic.name == "chi_squared" and any(df.low > 1 or not df.given for df in statistic.dfs):
            notes.append(f"{quoted(statistic.text)} compares more than two groups or outcomes; left out")
            continue
        for name, reading in given:
            held = gathered.get(name)
            if held is None or _same(held[0], reading):
                gathered.setdefault(name, (reading, statistic.text))
                continue
            inner = _narrower(name, held[0], reading)
            if inner is None:
                both = f"{quoted(held[1])} and {quoted(statistic.text)}"
                symbol = VOCABULARY[name].symbol
                return {}, "", f"the text gives two {symbol}: {both}; keep the statistics of one test"
            gathered[name] = (inner, held[1] if inner is held[0] else statistic.text)
    for kind, pattern in _OTHER_TESTS:
        word = pattern.search(reader.text)
        if word is not None and "f_value" in gathered:
            advice = "keep only the F of the effect on this outcome"
            return {}, "", f"the text speaks of {kind} ({quoted(word.group())}); {advice}"
    rest = reader.remainder()
    if rest:
        notes.append(f"not read: {quoted(rest, 200)}")
    return {name: _sourced(*held) for name, held in gathered.items()}, "; ".join(notes), ""


def _sourced(reading: Reading, text: str) -> Reading:
    """A reading that says which words it came from."""
    if reading.problem:
        return refuse(f"{quoted(text)}: {reading.problem}")
    if not reading.given:
        return BLANK
    source = f"from {quoted(text)}"
    understood = f"{source}; {reading.understood}" if reading.understood else source
    return Reading(
        reading.value,
        reading.low,
        reading.high,
        reading.unit,
        reading.decimals,
        reading.comparator,
        understood,
    )
