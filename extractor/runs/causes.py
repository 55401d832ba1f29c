"""Why an effect differs between two runs: a cell, a decision, the codebook, the options, or the program itself."""

from __future__ import annotations

import math
from collections.abc import Iterator

import pandas as pd

from extractor.runs.folder import Run

_SAME = 1e-9
"""Numbers closer than this, relatively, are the same number computed on another machine."""
_OPTIONS = ("level", "variance", "standardizer")
_READING = ("rounding", "decimal_mark", "alpha", "design")
_FOUR = ("input", "decision", "codebook", "options")


def differ(a: float, b: float) -> bool:
    """Whether two numbers are apart; blanks are alike."""
    return not (math.isnan(a) and math.isnan(b)) and not math.isclose(a, b, rel_tol=_SAME)


def arrow(name: str, before: object, after: object) -> str:
    """What it was and what it is, "F [H12]: 43.1 -> 4.31"."""
    return f"{name}: {_shown(before)} -> {_shown(after)}"


def _shown(value: object) -> str:
    return "none" if value in (None, "", {}) else str(value)


def value_of(assumption: object) -> object:
    """The value of an assumption as the settings write it; None where there is none."""
    return assumption.get("value") if isinstance(assumption, dict) else assumption


class Causes:
    """Why rows moved.

    matched : (old row, new row) of the effects that both runs have.
    """

    def __init__(self, old: Run, new: Run, matched: list[tuple[int, int]]) -> None:
        self.old, self.new, self.matched = old, new, matched
        self.options = [
            arrow(n, old.settings.get(n), new.settings.get(n))
            for n in _OPTIONS
            if old.settings.get(n) != new.settings.get(n)
        ]
        self.metric = [arrow("metric", old.settings.get("metric"), new.settings.get("metric"))] * (
            old.settings.get("metric") != new.settings.get("metric")
        )
        self.reading = [
            arrow(f"codebook, {n}", old.settings.get(n), new.settings.get(n))
            for n in _READING
            if old.settings.get(n) != new.settings.get(n)
        ]
        self.other_codebook = self._codebook(old) != self._codebook(new)
        self.by_study: dict[str, list[str]] | None = None

    @staticmethod
    def _codebook(run: Run) -> list[object]:
        return [source for source in run.sources if str(source.get("title", "")).startswith("codebook")]

    def of(self, before: pd.Series, after: pd.Series) -> tuple[str, list[str]]:
        """The cause in one word, and in sentences."""
        rows = int(before["row"]), int(after["row"])
        found: dict[str, list[str]] = {word: [] for word in _FOUR}
        for text in self.cells(*rows):
            decided = self._decision(text)
            found["decision" if decided else "input"].append(decided or text)
        found["codebook"] = [*self._assumed(*rows), *self._read_otherwise(*rows)]
        if any(differ(before[n], after[n]) for n in ("variance", "ci_low", "ci_high")) or bool(
            before["standardizer"] != after["standardizer"]
        ):
            found["options"] = list(self.options)
        found["options"] += self.metric
        found["input"] += [
            arrow(n, before[n], after[n]) for n in ("study", "outcome", "effect") if before[n] != after[n]
        ]
        said = [(word, texts) for word, texts in found.items() if texts]
        if said:
            return " and ".join(word for word, _ in said), [text for _, texts in said for text in texts]
        others = self._in_the_study(str(after["study"]))
        if others:
            return "another row", others
        if self.old.version != self.new.version:
            return "version", [f"version {self.old.version} -> {self.new.version}", *self._formulas(*rows)]
        if self.reading:
            return "codebook", self.reading
        return "not explained", [
            "nothing that the folders record differs; the codebook or the groups sheet may"
        ]

    def cells(self, old_row: int, new_row: int) -> list[str]:
        """Cells of a row that differ, as "F [H12]: 43.1 -> 4.31"; from its route where cells were not recorded."""
        before, after = self.old.cells(old_row), self.new.cells(new_row)
        if before is None or after is None:
            return self._leaves(old_row, new_row)
        a, b = _by_heading(before), _by_heading(after)
        return [
            arrow(b.get(h, a.get(h, ("", "")))[0], a.get(h, ("", None))[1], b.get(h, ("", None))[1])
            for h in dict.fromkeys([*a, *b])
            if not self._alike(a.get(h, ("", ""))[1], b.get(h, ("", ""))[1])
        ]

    def _alike(self, before: str, after: str) -> bool:
        """Whether two cells are the same; another codebook may show the same number with other digits."""
        if before == after or not self.other_codebook:
            return before == after
        try:
            return float(before) == float(after)
        except ValueError:
            return False

    def _leaves(self, old_row: int, new_row: int) -> list[str]:
        """The same from the reported quantities that both routes start from."""
        before, after = (
            {
                (s["quantity"], s.get("group", 0)): s
                for s in run.steps(row)
                if s["role"] in ("reported", "coded")
            }
            for run, row in ((self.old, old_row), (self.new, new_row))
        )
        return [
            arrow(str(after[key].get("cell", key[0])), before[key].get("value"), after[key].get("value"))
            for key in before.keys() & after.keys()
            if before[key].get("value") != after[key].get("value")
        ]

    def _decision(self, text: str) -> str:
        """The note of a decision about a changed cell that only one of the runs has."""
        cell = text.rpartition(": ")[0]
        notes = [[n for n in run.notes if n.startswith(f"{cell} corrected")] for run in (self.old, self.new)]
        if notes[0] == notes[1]:
            return ""
        return notes[1][0] if notes[1] else f"no longer: {notes[0][0]}"

    def _assumed(self, old_row: int, new_row: int) -> list[str]:
        before, after = (
            {str(s["quantity"]): s.get("value") for s in run.steps(row) if s["role"] == "assumed"}
            for run, row in ((self.old, old_row), (self.new, new_row))
        )
        return [
            arrow(f"codebook, assumed {name}", before[name], after[name])
            for name in sorted(before.keys() & after.keys())
            if before[name] != after[name]
        ] + [
            arrow(f"codebook, assumed {name}", before.get(name), after.get(name))
            for name in sorted(before.keys() ^ after.keys())
            if self._supplied(self.old, name) != self._supplied(self.new, name)
        ]

    @staticmethod
    def _supplied(run: Run, name: str) -> object:
        assumptions = run.settings.get("assumptions")
        return value_of(assumptions.get(name)) if isinstance(assumptions, dict) else None

    def _read_otherwise(self, old_row: int, new_row: int) -> list[str]:
        """Cells with the same number but another rounding interval: read by other rules."""
        before, after = (
            {(s["quantity"], s.get("group", 0)): s for s in run.steps(row) if s["role"] == "reported"}
            for run, row in ((self.old, old_row), (self.new, new_row))
        )
        other = [
            str(after[key].get("cell", key[0]))
            for key in before.keys() & after.keys()
            if before[key].get("value") == after[key].get("value")
            and any(differ(_number(before[key], end), _number(after[key], end)) for end in ("low", "high"))
        ]
        if not other:
            return []
        return self.reading or [f"codebook, printed decimals of {', '.join(sorted(other))}"]

    def _in_the_study(self, study: str) -> list[str]:
        """Cells that changed in any row of a study; in all rows where the study has none."""
        if self.by_study is None:
            labels = dict(zip(self.new.effects["row"], self.new.effects["study"], strict=True))
            self.by_study = {}
            for pair in self.matched:
                self.by_study.setdefault(str(labels[pair[1]]), []).extend(self.cells(*pair))
        return self.by_study.get(study, [])

    def _formulas(self, old_row: int, new_row: int) -> Iterator[str]:
        """Relations of the row whose formula differs, or that only one run used."""
        used = [
            {str(s["relation"]) for s in run.steps(row) if s.get("relation")}
            for run, row in ((self.old, old_row), (self.new, new_row))
        ]
        for name in sorted(used[0] & used[1]):
            a, b = (run.relations.get(name, {}).get("equation") for run in (self.old, self.new))
            if a != b:
                yield f"{name}: {a} -> {b}"
        if used[0] != used[1]:
            yield f"another route: {', '.join(sorted(used[1] - used[0])) or 'fewer steps'}"


def _by_heading(cells: dict[str, str]) -> dict[str, tuple[str, str]]:
    """(cell with address, text) by heading: a row that moved down the sheet keeps its headings."""
    return {cell.rpartition(" [")[0] or cell: (cell, text) for cell, text in cells.items()}


def _number(step: dict[str, object], end: str) -> float:
    value = step.get(end)
    return float(value) if isinstance(value, (int, float)) else math.nan
