"""What the report shows of each row: its line in the forest plot, its findings, its route."""

from __future__ import annotations

import math
from collections.abc import Hashable, Mapping, Sequence
from typing import Any

import pandas as pd
from markupsafe import Markup

from extractor.api import Result
from extractor.findings import Finding
from extractor.output.labels import short_labels
from extractor.output.marks import SIGNS
from extractor.output.route_graph import (
    Record,
    Shape,
    Step,
    ancestors,
    in_lines,
    outline,
    route_steps,
    shape,
)
from extractor.output.scale import scale_of
from extractor.output.strips import allowed, sides, strip
from extractor.quantities import VOCABULARY
from extractor.words import plain

Line = Mapping[Hashable, Any]
"""A line of the effect table, as a record."""


def shown(value: float) -> str:
    """An effect as the report prints it: three decimals, where it is tiny its first digit, a real minus sign."""
    if not math.isfinite(value):
        return "–"
    text = f"{value:.3f}" if abs(value) >= 0.0005 or value == 0 else plain(float(f"{value:.1g}"))
    return _minus(text)


def _minus(number: str) -> str:
    """A printed number with a real minus sign, also in an exponent."""
    return number.replace("-", "−")


def sentence(text: str) -> str:
    """Text with a capital first letter; a symbol stays as it is."""
    return text[:1].upper() + text[1:] if text[:1].isascii() else text


def _ends(low: float, high: float) -> str:
    if math.isfinite(low) and math.isfinite(high):
        return f"{shown(low)} to {shown(high)}"
    return f"at least {shown(low)}" if math.isfinite(low) else f"at most {shown(high)}"


class Rows:
    """Every row of a result, ready for the template.

    scale : of the forest plot. numbers : number of each relation in the list of sources.
    """

    def __init__(self, result: Result, level: float) -> None:
        self.metric = result.conversion.metric
        self.symbol = VOCABULARY[self.metric].symbol
        self.level = f"{level * 100:g}"
        self.lines: Sequence[Line] = result.effects.to_dict("records")
        self.scale = scale_of(result.effects)
        self.sides = sides(result.effects)
        self.labels = short_labels(result.effects)
        self.page = [str(word) for word in result.conversion.evidence.table.fact("page")]
        self.findings: dict[int, list[Finding]] = {}
        for finding in result.audit.findings:
            self.findings.setdefault(finding.row, []).append(finding)
        used = dict.fromkeys(result.derivations["relation"])
        self.numbers = {str(name): at for at, name in enumerate((n for n in used if n), 1)}
        self.steps = {
            row: route_steps(part, self.numbers) for row, part in _by_row(result.derivations).items()
        }
        others = result.alternatives[~result.alternatives["chosen"].astype(bool)]
        self.others = _by_row(others)
        self._draw()

    def _draw(self) -> None:
        """Draw each shape of a route once, for all rows that share it."""
        self.routes = {row: ancestors(steps, self.metric) for row, steps in self.steps.items()}
        members: dict[tuple[object, ...], list[int]] = {}
        for row, steps in self.routes.items():
            if steps:
                key = tuple((s.quantity, s.equation, s.reported, s.grade) for s in steps.values())
                members.setdefault(key, []).append(row)
        self.shape_of: dict[int, str] = {}
        self.drawn: dict[str, Shape] = {}
        for at, rows in enumerate(members.values(), 1):
            self.drawn[f"s{at}"] = shape([self.routes[row] for row in rows], self.metric)
            self.shape_of.update(dict.fromkeys(rows, f"s{at}"))

    def shapes(self) -> list[dict[str, Any]]:
        """What rows of one shape share."""
        return [
            {"id": name, "svg": Markup(outline(drawn, self.metric))} for name, drawn in self.drawn.items()
        ]

    def by_outcome(self) -> list[dict[str, Any]]:
        """The lines of the forest plot, grouped by outcome."""
        groups: dict[str, list[dict[str, Any]]] = {}
        for line, side, label in zip(self.lines, self.sides, self.labels, strict=True):
            groups.setdefault(str(line["outcome"]), []).append(
                {
                    **self._flag(line),
                    "short": label,
                    "strip": Markup(strip(line, self.scale, side)),
                    "numbers": self._numbers(line),
                }
            )
        return [{"name": name, "rows": rows} for name, rows in groups.items()]

    def by_study(self) -> list[dict[str, Any]]:
        """The rows with their findings and routes, grouped by study."""
        groups: dict[str, list[dict[str, Any]]] = {}
        for line, page in zip(self.lines, self.page, strict=True):
            name = str(line["study"]) or "No study named"
            groups.setdefault(name, []).append(self._row(line, page))
        return [{"name": name, "rows": rows} for name, rows in groups.items()]

    def _flag(self, line: Line) -> dict[str, Any]:
        """What a row is filtered by."""
        found = self.findings.get(int(line["row"]), [])
        worst = max(f.severity for f in found) if found else None
        return {
            "row": int(line["row"]),
            "status": line["status"],
            "grade": line["grade"],
            "severity": worst.word if worst is not None else "",
            "severities": " ".join(sorted({f.severity.word for f in found})) if found else "none",
            "sign": SIGNS[worst] if worst is not None else "",
        }

    def _numbers(self, line: Line) -> str:
        if line["status"] == "blocked":
            return "–"
        if line["status"] == "bounded":
            return _ends(line["estimate_low"], line["estimate_high"])
        estimate = shown(line["estimate"])
        limits = math.isfinite(line["ci_low"])
        return f"{estimate} [{shown(line['ci_low'])}, {shown(line['ci_high'])}]" if limits else estimate

    def _row(self, line: Line, page: str) -> dict[str, Any]:
        row = int(line["row"])
        label = ", ".join(str(line[name]) for name in ("outcome", "effect") if line[name]) or f"Row {row}"
        where = f"row {row}, page {page}" if page else f"row {row}"
        found: dict[str, Any] = {
            **self._flag(line),
            "label": label,
            "where": where,
            "sentence": self._sentence(line),
            "findings": [_finding(finding) for finding in self.findings.get(row, ())],
            "steps": "",
        }
        if row in self.shape_of:
            others = self.others.get(row, [])
            found |= {
                "summary": self._summary(line, len(others)),
                "shape": self.shape_of[row],
                "steps": in_lines(self.routes[row].values()),
                "variance": self._variance(line, row),
                "others": [_other(other) for other in others],
            }
        return found

    def _sentence(self, line: Line) -> str:
        """What became of a row, in a sentence."""
        reason = str(line["reason"])
        if line["status"] == "blocked":
            return f"No effect: {reason}."
        if line["status"] == "bounded":
            return f"{self.symbol} is {_ends(line['estimate_low'], line['estimate_high'])}: {reason}."
        parts = [f"{self.symbol} = {shown(line['estimate'])}"]
        if math.isfinite(line["ci_low"]):
            parts.append(f"{self.level} % CI {shown(line['ci_low'])} to {shown(line['ci_high'])}")
        if math.isfinite(line["variance"]):
            parts.append(f"standard error {shown(line['standard_error'])}")
        allowed_from, allowed_to = (_minus(plain(line[end])) for end in ("estimate_low", "estimate_high"))
        parts.append(f"rounding allows {allowed_from} to {allowed_to}")
        said = "; ".join(parts) + f". Grade: {line['grade']}."
        if line["assumptions"]:
            said += f" Taken for granted: {line['assumptions']}."
        return f"{said} {sentence(reason)}." if reason else said

    def _summary(self, line: Line, others: int) -> str:
        leaves = [
            VOCABULARY[name].symbol for name, step in self.routes[int(line["row"])].items() if step.reported
        ]
        left = f"; {others} other{'s' if others > 1 else ''} not taken" if others else ""
        return f"Route from {', '.join(leaves)}{left}"

    def _variance(self, line: Line, row: int) -> list[str]:
        """How the variance was computed, and the steps only it needs."""
        steps, route = self.steps[row], self.routes[row]
        further = [_in_line(step) for name, step in steps.items() if name not in route and not step.reported]
        said = [f"Sampling variance: {line['variance_method']}."] if line["variance_method"] else []
        if further:
            said.append(f"For the variance also: {'; '.join(further)}.")
        return said


def _by_row(frame: pd.DataFrame) -> dict[int, list[Record]]:
    found: dict[int, list[Record]] = {}
    for record in frame.to_dict("records"):
        found.setdefault(int(record["row"]), []).append(record)
    return found


def _in_line(step: Step) -> str:
    return f"{step.symbol} = {step.shown}, by {' '.join(step.lines)}"


def _other(other: Record) -> dict[str, str]:
    return {
        "route": str(other["route"]).rsplit(" -> ", 1)[0],
        "estimate": shown(other["estimate"]),
        "span": _ends(other["low"], other["high"]),
        "distance": shown(other["distance"]),
        "grade": str(other["grade"]),
    }


def _finding(finding: Finding) -> dict[str, Any]:
    low, high = finding.expected_low, finding.expected_high
    expected = ""
    if math.isfinite(low) and math.isfinite(high):
        expected = f"{plain(low)} to {plain(high)}"
    elif math.isfinite(low) or math.isfinite(high):
        expected = f"at least {plain(low)}" if math.isfinite(low) else f"at most {plain(high)}"
    slack = f"{plain(finding.slack)} units in the last place" if math.isfinite(finding.slack) else ""
    return {
        "severity": finding.severity.word,
        "sign": SIGNS[finding.severity],
        "message": finding.message,
        "printed": finding.printed,
        "expected": expected,
        "slack": slack,
        "cells": finding.cells,
        "explanation": finding.explanation,
        "strip": Markup(allowed(_number(finding.printed), low, high)),
    }


def _number(text: str) -> float:
    """The printed number, where the text is one."""
    try:
        return float(text)
    except ValueError:
        return math.nan
