"""Sentences for a manuscript: how the effects were made, and the log of every conversion."""

from __future__ import annotations

import pandas as pd

from extractor import __version__
from extractor.api import Result
from extractor.findings import Severity
from extractor.output.record import assumption_words
from extractor.output.request import Request
from extractor.output.terminal import counted
from extractor.quantities import VOCABULARY
from extractor.words import listed


def methods(result: Result, request: Request) -> list[str]:
    """Paragraphs for the methods section, from what the tables hold."""
    return [_made(result), _precision(result, request), _checked(result)]


def _made(result: Result) -> str:
    effects, metric = result.effects, result.conversion.metric
    by_status = [
        f"{int((effects['status'] == status).sum())} {words}"
        for status, words in (
            ("converted", "were converted"),
            ("bounded", "gave only a bound"),
            ("blocked", "could not be converted"),
        )
        if (effects["status"] == status).any()
    ]
    symbol = VOCABULARY[metric].symbol
    text = (
        f"Reported statistics were converted to {metric.replace('_', ' ')} ({symbol}) with Extractor {__version__}. "
        f"Of {counted(len(effects), 'coded row')}, {listed(by_status)}. "
        "For every row all admissible routes from the reported numbers were derived, and one was chosen by a rule "
        "fixed in advance: fewest assumptions, then least loss, then the narrowest interval left by rounding, then "
        "fewest steps. Printed numbers were taken as the intervals that round to them. "
    )
    grades = effects.loc[effects["grade"] != "", "grade"].value_counts()
    if len(grades):
        named = [
            f"{_GRADES[grade]} ({counted(int(grades[grade]), 'row')})" for grade in _GRADES if grade in grades
        ]
        text += f"Effects rest on {listed(named)}. "
    assumptions = result.conversion.evidence.table.assumptions
    if assumptions:
        said = [f"{name} = {assumption_words(taken)}" for name, taken in assumptions.items()]
        text += f"Values nobody reported: {'; '.join(said)}. "
    return text.strip()


_GRADES = {
    "identity": "algebra alone",
    "approximation": "a published approximation",
    "assumption": "an assumption",
    "bound": "an inequality",
}


def _precision(result: Result, request: Request) -> str:
    effects = result.effects
    methods = effects.loc[effects["variance_method"] != "", "variance_method"].value_counts()
    ways = [f"{name} ({counted(int(count), 'row')})" for name, count in sorted(methods.items())]
    if not ways:
        return "No sampling variance could be computed."
    text = f"Sampling variances: {'; '.join(ways)}. Confidence limits are at {request.level * 100:g} %."
    standardizers = sorted(set(effects["standardizer"]) - {""})
    if standardizers:
        text += f" Standardizer: {listed(standardizers)}."
    return text


def _checked(result: Result) -> str:
    audit = result.audit
    checked = audit.rows - len(audit.unchecked)
    text = (
        f"The printed numbers of each row were compared with what the others imply: {counted(audit.checks, 'check')} "
        f"over {checked} of {counted(audit.rows, 'row')}. "
    )
    severities = [finding.severity for finding in audit.findings]
    counts = [f"{severities.count(s)} {s.word}" for s in reversed(Severity) if s in severities]
    if counts:
        return text + f"Findings: {listed(counts)}. Each was a question for the article, not a verdict on it."
    return text + "There were no findings."


def conversion_log(result: Result) -> pd.DataFrame:
    """One line per row: where it comes from, what was used, what came of it."""
    effects = result.effects
    page = result.conversion.evidence.table.fact("page")
    return pd.DataFrame(
        {
            "row": effects["row"],
            "study": effects["study"],
            "effect": _joined(effects),
            "page": page,
            "route": [_route(word) for word in effects["route"]],
            "grade": effects["grade"],
            "estimate": effects["estimate"],
            "standard_error": effects["standard_error"],
            "remarks": [
                "; ".join(filter(None, (status if status != "converted" else "", str(reason), str(taken))))
                for status, reason, taken in zip(
                    effects["status"], effects["reason"], effects["assumptions"], strict=True
                )
            ],
        }
    )


def _joined(effects: pd.DataFrame) -> list[str]:
    return [", ".join(filter(None, pair)) for pair in zip(effects["outcome"], effects["effect"], strict=True)]


def _route(word: str) -> str:
    """The reported quantities of a route, without where it leads."""
    return word.rsplit(" -> ", 1)[0]
