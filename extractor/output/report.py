"""The report: one HTML file without a single request, in which every effect can be followed to its cells.

A view of the tables; only the glance at the pooled result is computed, by ``extractor.pooling``. Words of the sheet
are escaped by the template engine; what is marked as safe here is drawn by this program and escapes its own texts.
"""

from __future__ import annotations

import base64
import hashlib
import re
from importlib import resources
from pathlib import Path
from typing import Any

from jinja2 import Environment, FunctionLoader, StrictUndefined
from markupsafe import Markup

from extractor import __version__, cautions
from extractor.api import Result
from extractor.catalogue.relation import Grade, catalogue
from extractor.errors import UsageError
from extractor.findings import Severity
from extractor.output.marks import SIGNS
from extractor.output.prose import conversion_log, methods
from extractor.output.record import settings_in_words
from extractor.output.report_rows import Rows, sentence, shown
from extractor.output.request import Request
from extractor.output.route_graph import STYLE
from extractor.output.strips import axis, zero_line
from extractor.output.terminal import counted, rows_in_words
from extractor.pooling import Glance, Line, glance
from extractor.quantities import VOCABULARY
from extractor.words import listed, plain

MOST = 5_000
"""Rows a browser still shows with ease."""

_BREAKS = re.compile(r"\n+(?=<)")
_TEMPLATE = "report.html.jinja"
_STATUSES = ("converted", "bounded", "blocked")
_SECTIONS = (
    ("summary", "Summary"),
    ("effects", "Effects"),
    ("glance", "Pooled, at a glance"),
    ("studies", "Studies"),
    ("methods", "For the manuscript"),
    ("sources", "Formulas"),
    ("settings", "Settings"),
    ("cautions", "Cautions"),
)
_MEANINGS = {
    Severity.IMPOSSIBLE: "no data could give this value under the coded design",
    Severity.INCONSISTENT: "printed values that cannot hold together",
    Severity.DOUBTFUL: "worth another look at the page: unusual, careless rounding, or another design",
    Severity.NOTE: "something to know",
}


def write_report(result: Result, request: Request, path: Path) -> None:
    """Write the report as one self-contained HTML file.

    Raises
    ------
    UsageError
        with more rows than a browser can show.
    """
    if len(result.effects) > MOST:
        raise UsageError(
            f"--format html shows at most {MOST} rows, these are {len(result.effects)}: split the sheet"
        )
    text = render(result, request)
    path.write_text(text, encoding="utf-8", errors="backslashreplace", newline="")


def render(result: Result, request: Request) -> str:
    """The report as text."""
    environment = Environment(
        loader=FunctionLoader(_read),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    environment.filters["tight"] = _tight
    return environment.get_template(_TEMPLATE).render(_context(result, request)) + "\n"


def _tight(markup: Markup) -> Markup:
    """Markup without line breaks between tags: a browser makes a node of each, tens of thousands in a long report."""
    return Markup(_BREAKS.sub("", str(markup)))


def _read(name: str) -> str:
    return resources.files("extractor.output").joinpath(name).read_text(encoding="utf-8")


def _hash(text: str) -> str:
    return f"sha256-{base64.b64encode(hashlib.sha256(text.encode()).digest()).decode()}"


def _context(result: Result, request: Request) -> dict[str, Any]:
    """Everything the template names."""
    metric = result.conversion.metric
    symbol = VOCABULARY[metric].symbol
    rows = Rows(result, request.level)
    style, script = f"{_read('report.css')}{STYLE}{zero_line(rows.scale)}\n", _read("report.js")
    glances = _glances(result, request.level)
    log = conversion_log(result)
    fractions = ("estimate", "standard_error")
    return {
        "version": __version__,
        "title": f"Effects in {symbol}",
        "symbol": symbol,
        "level": f"{request.level * 100:g}",
        "sheet": "standard input" if request.sheet == "-" else Path(request.sheet).name,
        "style": Markup(style),
        "script": Markup(script),
        "style_hash": Markup(_hash(style)),
        "script_hash": Markup(_hash(script)),
        "sections": [s for s in _SECTIONS if s[0] != "glance" or glances],
        **_summary(result),
        "filters": _filters(result),
        "legend": _legend(symbol, request.level),
        "groups": rows.by_outcome(),
        "axis": Markup(axis(rows.scale)),
        "glances": glances,
        "studies": rows.by_study(),
        "shapes": rows.shapes(),
        "methods": methods(result, request),
        "log_headings": [name.replace("_", " ") for name in log.columns],
        "log_numbers": [at for at, name in enumerate(log.columns) if name in ("row", *fractions)],
        "log": [
            [
                shown(value) if name in fractions else str(value)
                for name, value in zip(log.columns, line, strict=True)
            ]
            for line in log.itertuples(index=False)
        ],
        "sources": [_source(name) for name in rows.numbers],
        "settings": settings_in_words(result, request),
        "cautions": (*cautions.FINDINGS, *cautions.EFFECTS),
    }


def _summary(result: Result) -> dict[str, Any]:
    """Counts by status and grade, by severity, and what could not be checked."""
    effects, audit = result.effects, result.audit
    grades = [grade.word for grade in Grade if (effects["grade"] == grade.word).any()]
    counts = []
    for status in _STATUSES:
        mine = effects[effects["status"] == status]
        numbers = [int((mine["grade"] == grade).sum()) for grade in grades]
        counts.append({"status": status, "numbers": numbers, "all": len(mine)})
    severities = [
        {
            "word": severity.word,
            "sign": SIGNS[severity],
            "findings": sum(finding.severity == severity for finding in audit.findings),
            "rows": len({finding.row for finding in audit.findings if finding.severity == severity}),
            "meaning": _MEANINGS[severity],
        }
        for severity in reversed(Severity)
    ]
    why: dict[str, list[int]] = {}
    for row, reason in audit.unchecked:
        why.setdefault(reason, []).append(row)
    by_status = [f"{line['all']} {line['status']}" for line in counts if line["all"]]
    questioned = len({f.row for f in audit.findings if f.severity >= Severity.DOUBTFUL})
    return {
        "rows_words": counted(len(effects), "row"),
        "headline": f"{listed(by_status)}; {questioned or 'none'} with a finding beyond a note.",
        "grades": grades,
        "counts": counts,
        "severities": severities,
        "checks_words": counted(audit.checks, "check"),
        "unchecked": [(reason, sentence(rows_in_words(rows))) for reason, rows in why.items()],
        "unchecked_words": f"{counted(len(audit.unchecked), 'row')} could not be checked:",
    }


def _filters(result: Result) -> list[tuple[str, list[str]]]:
    """What can be chosen to filter by: only what occurs."""
    effects = result.effects
    severities = {finding.severity for finding in result.audit.findings}
    return [
        ("status", [s for s in _STATUSES if (effects["status"] == s).any()]),
        ("severity", [s.word for s in reversed(Severity) if s in severities] + ["none"]),
        ("grade", [g.word for g in Grade if (effects["grade"] == g.word).any()]),
    ]


def _legend(symbol: str, level: float) -> str:
    return (
        f"A square is the estimate of {symbol}, larger the more precise it is; the line its {level * 100:g} % "
        "confidence limits; the pale band behind it what the rounding of the printed numbers allows. A dashed line "
        "is a bound, no estimate. An arrowhead marks a line that goes on beyond the scale."
    )


def _source(name: str) -> dict[str, str]:
    relation = catalogue()[name]
    return {
        "name": name,
        "equation": relation.equation,
        "source": relation.source.rstrip("."),
        "grade": relation.grade.word,
        "assumes": relation.assumes,
    }


def _glances(result: Result, level: float) -> list[dict[str, Any]]:
    """The pooled result of every outcome that has two rows to pool."""
    doubted = {f.row for f in result.audit.findings if f.severity >= Severity.DOUBTFUL}
    designs = result.conversion.evidence.table.fact("design")
    found = glance(result.effects, doubted, designs, level)
    return [_glance(each) for each in found if each.lines[0].pooled and each.lines[0].pooled.count > 1]


def _glance(each: Glance) -> dict[str, Any]:
    notes = [f"{sentence(warning)}." for warning in each.warnings]
    if each.bounded:
        notes.append(f"{counted(each.bounded, 'row')} with only a bound left out.")
    if each.without_variance:
        notes.append(f"{counted(each.without_variance, 'row')} without a sampling variance left out.")
    return {
        "outcome": each.outcome or "Rows that name no outcome",
        "lines": [_pooled(line) for line in each.lines],
        "mover": each.mover[0] if each.mover else None,
        "moved": shown(each.mover[1]) if each.mover else "",
        "notes": notes,
    }


def _pooled(line: Line) -> dict[str, Any]:
    if line.pooled is None:
        return {"what": line.what, "count": 0, "mean": "–", "interval": "–", "tau": "–"}
    pooled = line.pooled
    known = pooled.count > 1
    return {
        "what": line.what,
        "count": pooled.count,
        "mean": shown(pooled.mean),
        "interval": f"{shown(pooled.low)} to {shown(pooled.high)}" if known else "–",
        "tau": plain(pooled.tau_squared) if known else "–",
    }
