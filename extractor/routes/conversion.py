"""From evidence to the effect table: one row per row of the sheet, whatever became of it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from extractor.catalogue.refusals import why_no_route, why_no_value
from extractor.codebook import EFFECT_COLUMNS
from extractor.errors import UsageError
from extractor.evidence import Block, Evidence
from extractor.quantities import METRICS, STANDARDIZERS, VOCABULARY, Role, close_matches, is_signed
from extractor.routes.choice import NOTHING, STANDARDIZED, Chosen, assumptions_of, choose, grade_of, support
from extractor.routes.planner import search
from extractor.routes.unlock import in_words, unlocking_sets
from extractor.sampling.precision import methods_of, standardizer_of
from extractor.table import FloatArray, ObjectArray

if TYPE_CHECKING:
    import pandas as pd

Column = NDArray[np.generic] | ObjectArray

_SCOPED = frozenset(
    {"contrast_weight", "direction", "k_groups", "tails", "confidence_level", "one_factor", "only_factor"}
)
"""Leaves that are coded facts or consequences of them: a row that has only these reports nothing."""


@dataclass
class Conversion:
    """The effect table and what it was made of.

    columns : the effect table by column, in the contract's order, the sheet's unknown columns after them; each of
    shape (rows,).
    """

    columns: dict[str, Column]
    chosen: list[Chosen]
    evidence: Evidence
    metric: str

    @cached_property
    def effects(self) -> pd.DataFrame:
        """The effect table as a frame."""
        import pandas as pd

        return pd.DataFrame(self.columns)

    def row(self, position: int) -> Mapping[str, object]:
        """One row of the effect table."""
        return {name: values[position] for name, values in self.columns.items()}

    def note_findings(self, words: ObjectArray) -> None:
        """Enter the summary of each row's findings."""
        self.columns["findings"] = words
        if "effects" in self.__dict__:
            self.effects["findings"] = words


def convert_evidence(
    evidence: Evidence,
    metric: str,
    *,
    method: str | None = None,
    level: float = 0.95,
    standardizer: str = "",
) -> Conversion:
    """Turn every row into ``metric``, or say why not.

    Parameters
    ----------
    method : "exact" or "large-sample" sampling variance; None takes each metric's preferred one.
    level : confidence level of the limits.
    standardizer : for d and g, accept only this one; "" takes each design's usual one where it can be had.

    Raises
    ------
    UsageError
        for an unknown metric, method or standardizer.
    """
    check_metric(metric)
    check_method(metric, method)
    check_standardizer(standardizer)
    table = _Effects(evidence, metric, standardizer)
    chosen = [choose(block, metric, standardizer) for block in evidence.blocks]
    support(chosen, method, level)
    for each in chosen:
        table.enter(each)
    return Conversion(table.all_columns(), chosen, evidence, metric)


def check_metric(metric: str) -> None:
    """Raise ``UsageError`` unless the metric is known."""
    if metric not in METRICS:
        near = close_matches(metric, METRICS)
        hint = f"did you mean {near[0]}? " if near else ""
        raise UsageError(f"metric '{metric}' is not known: {hint}known are {', '.join(METRICS)}")


def check_method(metric: str, method: str | None) -> None:
    """Raise ``UsageError`` unless the metric has a variance by this method."""
    offered = methods_of(metric)
    if method is not None and method not in offered:
        raise UsageError(f"{metric} has no '{method}' variance: it has {' and '.join(offered)}")


def check_standardizer(standardizer: str) -> None:
    """Raise ``UsageError`` unless the standardizer is known or blank."""
    if standardizer and standardizer not in STANDARDIZERS:
        raise UsageError(f"standardizer '{standardizer}' is not known: known are {', '.join(STANDARDIZERS)}")


class _Effects:
    """The columns of the effect table while they are being filled, one array per column over all rows."""

    def __init__(self, evidence: Evidence, metric: str, standardizer: str) -> None:
        self.evidence, self.metric, self.standardizer = evidence, metric, standardizer
        self.left_out = _left_out(evidence)
        rows = evidence.table.rows
        self.numbers: dict[str, FloatArray] = {
            name: np.full(rows, np.nan)
            for name in (
                "estimate",
                "variance",
                "ci_low",
                "ci_high",
                "n_total",
                "estimate_low",
                "estimate_high",
            )
        }
        self.words: dict[str, ObjectArray] = {
            name: np.full(rows, "", dtype=object)
            for name in (
                "grade",
                "route",
                "assumptions",
                "standardizer",
                "variance_method",
                "status",
                "reason",
            )
        }
        self.words["status"][:] = "blocked"
        self.words["reason"][:] = evidence.blocked
        orientation = evidence.table.fact("orientation")
        self.flipped = (orientation == "-") & is_signed(metric)

    def enter(self, chosen: Chosen) -> None:
        """Enter one block."""
        block = chosen.block
        for index, route in enumerate(chosen.routes):
            mine = chosen.which == index
            if not mine.any():
                continue
            rows = block.positions[mine]
            estimate = chosen.estimates[index]
            pointed = chosen.pointed[mine]
            flip = np.where(self.flipped[rows], -1.0, 1.0)
            self._set("estimate", rows, estimate.value[mine] * flip)
            self._set_interval("estimate_low", "estimate_high", rows, estimate.low[mine], estimate.high[mine])
            self.words["status"][rows] = np.where(pointed, "converted", "bounded")
            supported = chosen.precisions.get(index)
            taken = (route, *(supported.further if supported else ()))
            said = assumptions_of(block, taken)
            self.words["grade"][rows] = grade_of(taken).word
            self.words["route"][rows] = route_words(route.leaves, self.metric)
            self.words["assumptions"][rows] = self._remarked(rows, said)
            if self.metric in STANDARDIZED:
                self.words["standardizer"][rows] = standardizer_of(route.standardizer, block.design)
            if supported is not None:
                exact = rows[pointed]
                self._set("variance", exact, supported.variance)
                self._set_interval("ci_low", "ci_high", exact, supported.low, supported.high)
                known = np.isfinite(supported.variance)
                self.words["variance_method"][exact[known]] = supported.method
                if not supported.method:
                    self.words["reason"][exact] = (
                        "no sampling variance is known for this design and standardizer"
                    )
                elif supported.missing:
                    lacking = ", ".join(_explained(name) for name in supported.missing)
                    self.words["reason"][exact] = np.where(
                        known,
                        f"no confidence limits without {lacking}",
                        f"no sampling variance or limits without {lacking}",
                    )
            self.words["reason"][rows[~pointed]] = "only a bound is reported; a bound is not an estimate"
        self._enter_totals(chosen)
        self._refuse(chosen)

    def _remarked(self, rows: NDArray[np.intp], said: list[str]) -> ObjectArray:
        texts = np.full(len(rows), "; ".join(said), dtype=object)
        extra = [self.evidence.remarks[rows]]
        if is_signed(self.metric):
            extra.append(self.evidence.contrasts[rows])
        if self.flipped[rows].any():
            extra.append(
                np.where(self.flipped[rows], "sign flipped: a lower score is the better outcome", "")
            )
        for more in extra:
            texts = np.where(texts == "", more, np.where(more == "", texts, texts + "; " + more))
        return texts

    def _enter_totals(self, chosen: Chosen) -> None:
        routes = search(chosen.block.start, chosen.block.design).get("n_total", ())
        if routes:
            self._set("n_total", chosen.block.positions, chosen.engine.run(routes[0]).value)

    def _refuse(self, chosen: Chosen) -> None:
        """Say of the rows without a value why, and what would open them."""
        left = chosen.block.positions[chosen.which == NOTHING]
        if not len(left):
            return
        block = chosen.block
        if chosen.routes:
            reported = frozenset(block.leaves) - frozenset(block.assumed)
            reason = why_no_value(self.metric, block.design, reported)
        else:
            reason = refusal(block, self.metric, self.standardizer)
        said = self.left_out[left]
        self.words["reason"][left] = np.where(said == "", reason, reason + ". Left out: " + said)

    def _set(self, name: str, rows: NDArray[np.intp], values: FloatArray) -> None:
        self.numbers[name][rows] = np.where(np.isfinite(values), values, np.nan)

    def _set_interval(
        self, low_name: str, high_name: str, rows: NDArray[np.intp], low: FloatArray, high: FloatArray
    ) -> None:
        flipped = self.flipped[rows]
        self._set(low_name, rows, np.where(flipped, -high, low))
        self._set(high_name, rows, np.where(flipped, -low, high))

    def all_columns(self) -> dict[str, Column]:
        """The effect table by column."""
        table = self.evidence.table
        columns: dict[str, Column] = {
            "row": table.row_numbers,
            **{name: table.fact(name) for name in ("study", "outcome", "effect")},
            "metric": np.full(table.rows, self.metric, dtype=object),
            **self.numbers,
            "standard_error": np.sqrt(self.numbers["variance"]),
            **self.words,
            "findings": np.full(table.rows, "", dtype=object),
        }
        ordered = {name: columns[name] for name in EFFECT_COLUMNS}
        for heading, words in table.carried.items():
            while heading in ordered:
                heading += " (sheet)"
            ordered[heading] = words
        return ordered


def _explained(name: str) -> str:
    """A quantity as a reason names it: one that no column holds with its meaning."""
    quantity = VOCABULARY[name]
    return name if quantity.role is Role.REPORTED else f"{name} ({quantity.meaning})"


def route_words(leaves: frozenset[str], metric: str) -> str:
    """A route in one cell: what it starts from and where it leads."""
    silent = ("contrast_weight", "k_groups", "one_factor", "only_factor")
    shown = sorted(leaf for leaf in leaves if leaf not in silent)
    return f"{', '.join(shown)} -> {metric}"


def _left_out(evidence: Evidence) -> ObjectArray:
    """What of each row was not understood or not used, shape (rows,)."""
    table = evidence.table
    said: ObjectArray = evidence.remarks.copy()

    def add(position: int, message: str) -> None:
        if message not in said[position]:
            said[position] = f"{said[position]}; {message}" if said[position] else message

    for kind in ("problems", "understood"):
        for number, _, message in table.settings.get(kind, ()):
            add(int(np.searchsorted(table.row_numbers, number)), message)
    for column in table.numbers.values():
        for position in np.flatnonzero((column.problem != "") & ~column.given):
            add(int(position), str(column.problem[position]))
    return said


def refusal(block: Block, metric: str, standardizer: str = "") -> str:
    """Why a block has no route to a metric over a standardizer ("" for any), and which numbers would open one."""
    reported = frozenset(block.leaves) - _SCOPED - frozenset(block.assumed) | frozenset(block.partial)
    sets = unlocking_sets(block.start, block.design, metric, standardizer=standardizer)
    why = why_no_route(metric, block.design, reported, sets)
    return f"{why}. Would open it: {in_words(sets)}" if sets else why
