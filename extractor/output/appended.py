"""An output folder that is filled block by block: each block as text, put below those before it."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable
from contextlib import ExitStack
from dataclasses import dataclass, field, replace
from pathlib import Path

from extractor import cautions
from extractor.api import Reading
from extractor.audit.run import Audit
from extractor.blockwise import NOT_COMPARED, Tally
from extractor.output import trail
from extractor.output.cells import reading_notes
from extractor.output.columns import EFFECTS, FINDINGS, Table
from extractor.output.description import Resource, csv_resource, describe, resource
from extractor.output.files import encoded, output_folder
from extractor.output.package import AUDIT_FILES, CONVERT_FILES
from extractor.output.request import Request, columns_as_written, csv_headings
from extractor.output.tables import csv_lines
from extractor.routes.conversion import convert_evidence
from extractor.table import ReportedTable

_MOST_NOTES = 1_000
"""Notes kept of a sheet; more of them say no more."""


@dataclass(slots=True)
class Written:
    """One block as text.

    headings : the first line of a csv file, by file. bodies : the lines after it, or the rows of the derivations.
    relations : used in any row. sample : the block's table and effects without rows, for the description.
    """

    headings: dict[str, str]
    bodies: dict[str, bytes]
    relations: set[str]
    tally: Tally
    notes: list[str]
    sample: Sample


@dataclass(slots=True)
class Sample:
    """What the description of the folder says of its tables: their columns and how the sheet was read."""

    table: ReportedTable
    effects: Table
    findings: Table
    named: dict[str, str] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Converting:
    """Work: a block converted, audited and written."""

    request: Request

    def __call__(self, reading: Reading) -> Written:
        """The block as text."""
        request = self.request
        assert request.metric is not None
        conversion = convert_evidence(
            reading.evidence,
            request.metric,
            method=request.variance,
            level=request.level,
            standardizer=request.standardizer,
        )
        audit = reading.audit(conversion, across=False)
        effects = columns_as_written(conversion, request.rename)
        written = _audited(reading, audit, request)
        _put(written, "effects.csv", effects, request)
        written.bodies["derivations.json"] = b"".join(map(encoded, trail.rows_in_parts(conversion)))
        written.relations = trail.relations_used(conversion)
        written.tally.statuses = Counter(conversion.columns["status"].tolist())
        written.sample.named = csv_headings(conversion, request)
        written.sample.effects = {
            name: values[:0] for name, values in zip(written.sample.named, effects.values(), strict=True)
        }
        return written


@dataclass(frozen=True, slots=True)
class Auditing:
    """Work: a block audited and written."""

    request: Request

    def __call__(self, reading: Reading) -> Written:
        """The block as text."""
        return _audited(reading, reading.audit(across=False), self.request)


def _audited(reading: Reading, audit: Audit, request: Request) -> Written:
    table = reading.table
    tally = Tally(
        rows=table.rows,
        findings=Counter(finding.severity.word for finding in audit.findings),
        found=len({finding.row for finding in audit.findings}),
        checks=audit.checks,
        unchecked=len(audit.unchecked),
    )
    bare = replace(table, row_numbers=table.row_numbers[:0], numbers={}, facts={}, carried={}, cells={})
    bare = replace(bare, settings={**table.settings, "from_reported": {}, "problems": (), "conflicts": ()})
    notes = [*reading_notes(table), *reading.notes]
    frame = audit.frame
    written = Written({}, {}, set(), tally, notes, Sample(bare, {}, frame.iloc[:0]))
    _put(written, "findings.csv", frame, request)
    return written


def _put(written: Written, name: str, table: Table, request: Request) -> None:
    lines = csv_lines(table, raw=request.raw)
    written.headings[name] = next(lines)
    written.bodies[name] = b"".join(map(encoded, lines))


def write_blocks(
    folder: Path, blocks: Iterable[Written], request: Request, *, force: bool, tick: trail.Tick
) -> tuple[Tally, list[str]]:
    """Write the blocks of a sheet into ``folder``, one after the other; what became of them, and notes.

    Parameters
    ----------
    tick : told of the rows of every block that was written.

    Raises
    ------
    UsageError : as ``package.write_conversion`` does.
    """
    converting = request.metric is not None
    names = ("effects.csv", "findings.csv", "derivations.json") if converting else ("findings.csv",)
    tally, notes, relations = Tally(), dict[str, None](), set[str]()
    first: Sample | None = None
    with output_folder(folder, CONVERT_FILES if converting else AUDIT_FILES, force=force) as made:
        with ExitStack() as open_files:
            streams = {name: open_files.enter_context((made / name).open("wb")) for name in names}
            for block in blocks:
                for name, stream in streams.items():
                    if first is None:
                        stream.write(encoded(block.headings.get(name, trail.OPENING)))
                    elif name not in block.headings:
                        stream.write(b",\n")
                    stream.write(block.bodies[name])
                first = first or block.sample
                relations |= block.relations
                tally.add(block.tally)
                notes.update(dict.fromkeys(block.notes[: _MOST_NOTES - len(notes)]))
                tick(block.tally.rows)
            if converting:
                streams["derivations.json"].write(encoded(trail.closing(relations)))
        assert first is not None
        said = (*(cautions.EFFECTS if converting else ()), *cautions.FINDINGS)
        describe(made, first.table, request, _resources(made, first, request), said, [*notes, NOT_COMPARED])
    return tally, list(notes)


def _resources(made: Path, sample: Sample, request: Request) -> list[Resource]:
    points = {"row": sample.named["row"]} if sample.named else None
    found = csv_resource(
        made / "findings.csv",
        "one row per finding",
        sample.findings,
        FINDINGS,
        raw=request.raw,
        points=points,
    )
    if request.metric is None:
        return [found]
    effects = csv_resource(
        made / "effects.csv",
        "the effect table, one row per row of the sheet",
        sample.effects,
        EFFECTS,
        raw=request.raw,
        key=["row"],
        headings=sample.named,
    )
    return [
        effects,
        found,
        resource(made / "derivations.json", "how every effect came about, with the routes not taken"),
    ]
