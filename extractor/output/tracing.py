"""One effect as a tree, from the estimate down to the cells it came from."""

from __future__ import annotations

import pandas as pd
from rich.console import Console
from rich.text import Text
from rich.tree import Tree

from extractor.api import Result
from extractor.catalogue.relation import catalogue
from extractor.output.terminal import between, number, printable, say, show_finding, show_tree
from extractor.routes.choice import NOTHING, Supported
from extractor.table import FloatArray, ReportedTable


def show_trace(to: Console, result: Result, position: int, level: float) -> None:
    """Print how the effect of one row came about.

    Parameters
    ----------
    position : index of the row in the effect table.
    level : confidence level of the limits, as a proportion.
    """
    effect = result.effects.iloc[position]
    row, metric = int(effect["row"]), result.conversion.metric
    labels = [str(effect[name]) for name in ("study", "outcome", "effect") if effect[name]]
    say(to, Text(", ".join([f"row {row}", *labels]), "bold"))
    _show_estimate(to, effect, metric, level)
    steps = result.derivations[result.derivations["row"] == row]
    if len(steps):
        branches = _Branches(steps, result.conversion.evidence.table, position)
        show_tree(to, branches.tree(metric))
        supported = _supported(result, position)
        if supported is not None:
            _show_precision(to, supported, branches)
    _show_rest(to, effect, result.alternatives[result.alternatives["row"] == row])
    findings = [finding for finding in result.audit.findings if finding.row == row]
    if findings:
        say(to, Text("Findings", "bold"))
        for finding in findings:
            show_finding(to, finding)


def _show_estimate(to: Console, effect: pd.Series, metric: str, level: float) -> None:
    if effect["status"] == "blocked":
        say(to, Text.assemble(("blocked", "red"), f": {effect['reason']}"))
        return
    low, high = (number(effect[end]) or "no limit" for end in ("estimate_low", "estimate_high"))
    if effect["status"] == "bounded":
        say(to, f"{metric} lies from {low} to {high}: {effect['reason']}")
        return
    estimate = number(effect["estimate"])
    say(to, f"{metric} = {estimate}; the rounding of the printed numbers allows {low} to {high}")
    if not pd.isna(effect["variance"]):
        limits = between(effect["ci_low"], effect["ci_high"])
        error = number(effect["standard_error"])
        said = f"variance {number(effect['variance'])}, standard error {error}"
        say(to, said + (f", {level * 100:g} % CI {limits}" if limits else ""))
    if effect["reason"]:
        say(to, str(effect["reason"]))


def _supported(result: Result, position: int) -> Supported | None:
    """What the precision of a row's estimate was computed from."""
    for chosen in result.conversion.chosen:
        at: FloatArray = (chosen.block.positions == position).nonzero()[0]
        if len(at):
            which = int(chosen.which[at[0]])
            return chosen.precisions.get(which) if which != NOTHING and chosen.pointed[at[0]] else None
    return None


class _Branches:
    """The steps of one row by quantity, and which of them a tree has shown."""

    def __init__(self, steps: pd.DataFrame, table: ReportedTable, position: int) -> None:
        self.table, self.position = table, position
        self.steps = {str(name): part for name, part in steps.groupby("quantity", sort=False)}
        self.shown: set[str] = set()

    def tree(self, quantity: str) -> Tree:
        """The quantity with everything it rests on."""
        tree = Tree(self._label(quantity), guide_style="dim")
        self._grow(tree, quantity)
        return tree

    def knows(self, quantity: str) -> bool:
        """Whether a tree has shown the quantity with what it rests on."""
        return quantity in self.shown or quantity not in self.steps

    def _grow(self, tree: Tree, quantity: str) -> None:
        relation = str(self.steps[quantity]["relation"].iloc[0])
        if not relation or quantity in self.shown:
            return
        self.shown.add(quantity)
        for need in catalogue()[relation].needs:
            self._grow(tree.add(self._label(need)), need)

    def _label(self, quantity: str) -> Text:
        lines = self.steps[quantity]
        first = lines.iloc[0]
        text = Text.assemble((quantity, "bold"), f" = {_values(lines)}")
        relation = str(first["relation"])
        if quantity in self.shown and relation:
            return text.append("  (as above)", "dim")
        if relation:
            text.append(f"\n{first['equation']}", "cyan")
            text.append(f"\n{first['grade']}; {first['source']}", "dim")
            return text
        said = f"  {first['role']}" + (f" ({first['source']})" if first["source"] else "")
        if first["role"] == "reported":
            said += f" in {', '.join(self._cells(lines))}"
        said += ", only a bound" if first["grade"] == "bound" else ""
        return text.append(printable(said), "dim")

    def _cells(self, lines: pd.DataFrame) -> list[str]:
        """The cells of a reported quantity, each once."""
        found = [
            str(line["cell"]).removeprefix(f"{line['quantity']} in ") for line in lines.to_dict("records")
        ]
        return list(dict.fromkeys(found))


def _values(lines: pd.DataFrame) -> str:
    return ", ".join(
        _value(value, low, high)
        for value, low, high in zip(lines["value"], lines["low"], lines["high"], strict=True)
    )


def _value(value: float, low: float, high: float) -> str:
    """A value with the interval its rounding leaves, which is wider than floating point alone."""
    said = number(value)
    if said and not high - low > 1e-9 * max(abs(low), abs(high)):
        return said
    return " ".join(filter(None, [said, f"[{number(low) or '?'}, {number(high) or '?'}]"]))


def _show_precision(to: Console, supported: Supported, branches: _Branches) -> None:
    if supported.method:
        say(to, Text.assemble(("Variance: ", "bold"), supported.method), 0, 2)
    if supported.limits:
        say(to, Text.assemble(("Confidence limits: ", "bold"), supported.limits), 0, 2)
    more = [route.gives for route in supported.further if not branches.knows(route.gives)]
    if more:
        say(to, Text("They also need", "bold"))
    for quantity in more:
        show_tree(to, branches.tree(quantity))


def _show_rest(to: Console, effect: pd.Series, alternatives: pd.DataFrame) -> None:
    if effect["assumptions"]:
        say(to, Text("Taken for granted", "bold"))
        for assumption in str(effect["assumptions"]).split("; "):
            say(to, Text(assumption), 2, 2)
    others = alternatives[~alternatives["chosen"].astype(bool)]
    if not len(others):
        return
    say(to, Text("Routes not taken", "bold"))
    for other in others.to_dict("records"):
        distance = "" if pd.isna(other["distance"]) else f", {number(other['distance'])} away"
        gives = _value(other["estimate"], other["low"], other["high"])
        say(to, Text(f"{other['route']} = {gives}{distance}; {other['grade']}"), 2, 2)
