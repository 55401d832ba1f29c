"""``extractor quick``."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import click

from extractor.commands import options
from extractor.errors import UsageError
from extractor.printed.reading import quoted
from extractor.quantities import DESIGNS, VOCABULARY, Shape, close_matches

if TYPE_CHECKING:
    from collections.abc import Mapping

    from extractor.evidence import Evidence

_FAMILY = ("eta_squared", "omega_squared", "epsilon_squared", "cohens_f")
"""Metrics that are shown together: each is a function of the others and the dfs."""
_RELATED = (*_FAMILY, "partial_eta_squared", "partial_omega_squared", "generalized_eta_squared")
_TWO_GROUPS = frozenset({"t_value", "cohens_d", "hedges_g", "r", "mean_difference", "u_value", "odds_ratio"})
"""Statistics of two groups."""


@click.command(context_settings=options.SETTINGS, short_help="Convert statistics typed in APA notation.")
@click.argument("text")
@options.wanted
@click.option(
    "--design",
    shell_complete=options.completing(DESIGNS),
    metavar="DESIGN",
    help="Design of the analysis. By default a t is taken as two-group, an F as one-way; the output says so.",
)
@click.option(
    "--also",
    multiple=True,
    metavar="COLUMN=VALUE",
    help="Another column of the row, such as n_1=20 or direction=+; may be given several times.",
)
def command(text: str, wanted: options.Wanted, design: str | None, also: tuple[str, ...]) -> None:
    """Convert the statistics in TEXT, written in APA notation.

    \b
    Examples:
      extractor quick "F(2, 57) = 4.31, p = .018" --to omega_squared
      extractor quick "t(38) = -2.10" --to hedges_g --also n_1=20 --also n_2=20
      extractor quick "F(1, 38) = 4.41" --to cohens_d --also n_1=20 --also n_2=20 --also direction=+
    """
    from extractor.audit.run import audit_evidence
    from extractor.commands import running

    running.check(wanted)
    evidence, read_as = _evidence(text, design, options.pairs(also, "--also", "n_1=20"))
    conversion = running.converted(evidence, wanted.metric, wanted)
    audit = audit_evidence(evidence, conversion)
    effect = conversion.row(0)
    lines = [" ".join(text.split()), _line("read as", read_as)]
    lines += [_line("note", note) for note in _notes(evidence)]
    lines += _effect_lines(effect, wanted.level)
    lines += _p_line(evidence)
    if wanted.metric in _RELATED and effect["status"] != "blocked":
        for other in _FAMILY:
            if other != wanted.metric:
                lines += _related_line(running.converted(evidence, other, wanted).row(0))
    for finding in audit.findings:
        lines.append(f"{finding.severity.word}: {finding.message}")
    if audit.findings:
        from extractor import cautions

        lines += ["", *(f"- {caution}" for caution in cautions.FINDINGS)]
    click.echo("\n".join(lines))


def _evidence(text: str, design: str | None, columns: dict[str, str]) -> tuple[Evidence, str]:
    """The text as a sheet of one row, and how its design was settled."""
    from extractor.codebook import canonical, canonical_names
    from extractor.printed.apa import read_statistics

    for name in columns:
        if canonical(name) is None or name in ("reported", "design"):
            grouped = {q for q in VOCABULARY if VOCABULARY[q].shape is Shape.GROUP}
            near = [f"{q}_1" if q in grouped else q for q in close_matches(name, canonical_names())]
            hint = f"; did you mean {' or '.join(near)}?" if near else ""
            raise UsageError(f"--also: {quoted(name)} is no column of a sheet{hint}")
    named = {statistic.name for statistic in read_statistics(text)}
    if not named:
        raise UsageError(
            f"no statistic was found in {quoted(text)}; write it as in 'F(2, 57) = 4.31, p = .018'"
        )
    options.check_known(design, DESIGNS, "design")
    read_as = f"{design}"
    if design is None:
        two = sorted(named & _TWO_GROUPS)
        design = "two-group" if two else "one-way"
        which = f" ({VOCABULARY[two[0]].symbol} compares two groups)" if two else ""
        read_as = f"{design}{which}, unless --design says otherwise"
    from extractor.api import read
    from extractor.source.grid import typed_row

    evidence = read(typed_row({"reported": text, "design": design, **columns})).evidence
    table = evidence.table
    problems = [message for _, _, message in table.settings["problems"]]
    problems += [
        f"{numbers.place.heading}: {numbers.problem[0]}"
        for numbers in table.numbers.values()
        if numbers.problem[0]
    ]
    if problems:
        raise UsageError("; ".join(problems))
    return evidence, read_as


def _notes(evidence: Evidence) -> list[str]:
    """How the text was read, where that was not plain."""
    from extractor.output.cells import reading_notes

    table = evidence.table
    readings = [str(numbers.understood[0]) for numbers in table.numbers.values()]
    # a reading from the text names its words first; more follows only where they were not plain
    odd = [
        reading for reading in readings if reading and (not reading.startswith("from '") or "'; " in reading)
    ]
    return [*reading_notes(table), *odd, *(message for _, _, message in table.settings["conflicts"])]


def _effect_lines(effect: Mapping[str, Any], level: float) -> list[str]:
    """The effect in full."""
    from extractor.words import plain

    metric = str(effect["metric"])
    said: list[tuple[str, str]] = []
    if effect["status"] == "blocked":
        return [_line(metric, f"blocked: {effect['reason']}")]
    envelope = f"{plain(effect['estimate_low'])} to {plain(effect['estimate_high'])}"
    if effect["status"] == "bounded":
        said = [(metric, f"from {envelope}"), ("", str(effect["reason"]))]
    else:
        said = [(metric, plain(effect["estimate"])), ("rounding allows", envelope)]
        if effect["variance_method"]:
            said.append(("variance", f"{plain(effect['variance'])} ({effect['variance_method']})"))
            said.append(("standard error", plain(effect["standard_error"])))
        if effect["ci_low"] == effect["ci_low"]:
            said.append((f"{level * 100:g} % CI", f"{plain(effect['ci_low'])} to {plain(effect['ci_high'])}"))
        if effect["reason"]:
            said.append(("", str(effect["reason"])))
    said += [("grade", str(effect["grade"])), ("route", str(effect["route"]))]
    if effect["assumptions"]:
        said.append(("assumes", str(effect["assumptions"])))
    return [_line(name, value) for name, value in said]


def _related_line(effect: Mapping[str, Any]) -> list[str]:
    """A related metric in one line; nothing where there is none."""
    from extractor.words import plain

    if effect["status"] == "blocked":
        return []
    envelope = f"{plain(effect['estimate_low'])} to {plain(effect['estimate_high'])}"
    if effect["status"] == "bounded":
        return [_line(str(effect["metric"]), f"from {envelope}")]
    return [_line(str(effect["metric"]), f"{plain(effect['estimate'])} ({envelope})")]


def _p_line(evidence: Evidence) -> list[str]:
    """The p value that the printed test statistic implies; nothing where none is printed."""
    from extractor.routes.engine import Engine
    from extractor.routes.planner import search
    from extractor.words import plain

    for block in evidence.blocks:
        for route in search(block.start, block.design).get("p_two_sided", ()):
            if route.leaves & {"f_value", "t_value"}:
                p = Engine(block.leaves).run(route)
                if p.value[0] == p.value[0]:
                    return [_line("p", f"{plain(p.value[0])} ({plain(p.low[0])} to {plain(p.high[0])})")]
    return []


def _line(name: str, value: str) -> str:
    return f"{name:<24}{value}"
