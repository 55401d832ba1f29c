"""The provenance hangs together: what PROV-JSON names is there, and the effect leads back to the sheet."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path

from extractor.api import Result
from extractor.output.prov import write_prov
from extractor.output.request import Request


def test_every_reference_is_declared(
    converted: Callable[[str], tuple[Result, Request]], tmp_path: Path
) -> None:
    """PROV-JSON (W3C Member Submission, 24 April 2013): relations refer to declared entities, activities, agents."""
    result, request = converted("omega_squared")
    write_prov(result, request.sheet, tmp_path / "provenance.json")
    said = json.loads((tmp_path / "provenance.json").read_text(encoding="utf-8"))
    declared = {**said["entity"], **said["activity"], **said["agent"]}
    for kind in ("used", "wasGeneratedBy", "wasAssociatedWith", "wasDerivedFrom"):
        for record in said[kind].values():
            for name, value in record.items():
                if name in ("prov:entity", "prov:activity", "prov:agent", "prov:plan", "prov:usedEntity"):
                    assert value in declared, (kind, name, value)
    effects = result.effects[result.effects["status"] == "converted"]
    generated = {record["prov:entity"] for record in said["wasGeneratedBy"].values()}
    assert {f"run:row-{row}-omega_squared" for row in effects["row"]} <= generated | set(said["entity"])
