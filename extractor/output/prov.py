"""Provenance in PROV-JSON (W3C member submission of 2013): cells are entities, applied relations are activities.

One bundle per run: the sheet and the tool, every cell an effect rests on, every value derived from them, the relation
that gave it as the plan of its activity, and the effect it ends in.
"""

from __future__ import annotations

from pathlib import Path

from extractor import __version__
from extractor.api import Result
from extractor.catalogue.relation import catalogue
from extractor.output.tables import as_json

_PREFIX = {
    "prov": "http://www.w3.org/ns/prov#",
    "xt": "urn:anova-extractor:",
    "run": "urn:anova-extractor:run:",
}
_TOOL = "xt:extractor"

Records = dict[str, dict[str, dict[str, object]]]


def write_prov(result: Result, sheet: str, path: Path) -> None:
    """Write the provenance of every converted or bounded effect of a run."""
    records: Records = {
        kind: {}
        for kind in (
            "entity",
            "activity",
            "agent",
            "used",
            "wasGeneratedBy",
            "wasAssociatedWith",
            "wasDerivedFrom",
        )
    }
    records["agent"][_TOOL] = {"prov:type": "prov:SoftwareAgent", "xt:version": __version__}
    records["entity"]["run:sheet"] = {"prov:label": sheet}
    metric = result.conversion.metric
    for row, steps in result.derivations.groupby("row", sort=True):
        _row(records, int(str(row)), metric, steps.to_dict("records"))
    path.write_text(as_json({"prefix": _PREFIX, **records}) + "\n", encoding="utf-8", newline="\n")


def _row(records: Records, row: int, metric: str, steps: list[dict[object, object]]) -> None:
    relations = catalogue()
    known = {str(step["quantity"]) for step in steps}
    for step in steps:
        quantity = str(step["quantity"])
        value = f"run:row-{row}-{quantity}"
        group = f"-{step['group']}" if step["group"] else ""
        entity = {"prov:label": quantity, "prov:value": _number(step["value"])}
        relation = str(step["relation"])
        if not relation:
            records["entity"][f"{value}{group}"] = entity | {
                "xt:cell": str(step["cell"]),
                "xt:role": str(step["role"]),
            }
            source = f"run:quoted-{row}-{quantity}{group}"
            records["wasDerivedFrom"][source] = {
                "prov:generatedEntity": f"{value}{group}",
                "prov:usedEntity": "run:sheet",
                "prov:type": "prov:Quotation" if step["role"] == "reported" else "prov:PrimarySource",
            }
            continue
        name = "effect" if quantity == metric else quantity
        records["entity"][value] = entity | {"prov:label": name}
        activity = f"run:row-{row}-{relation}"
        records["activity"][activity] = {"prov:label": str(step["equation"])}
        plan = f"xt:{relation}"
        records["entity"][plan] = {
            "prov:type": "prov:Plan",
            "prov:label": str(step["equation"]),
            "xt:source": str(step["source"]),
        }
        records["wasGeneratedBy"][f"run:g-{row}-{quantity}"] = {
            "prov:entity": value,
            "prov:activity": activity,
        }
        records["wasAssociatedWith"][f"run:a-{row}-{relation}"] = {
            "prov:activity": activity,
            "prov:agent": _TOOL,
            "prov:plan": plan,
        }
        for need in relations[relation].needs:
            if need in known:
                for one in _members(row, need, steps):
                    records["used"][f"run:u-{row}-{relation}-{one}"] = {
                        "prov:activity": activity,
                        "prov:entity": one,
                    }


def _members(row: int, quantity: str, steps: list[dict[object, object]]) -> list[str]:
    """The entities of a quantity: one per group where its cells are the sheet's own."""
    mine = [step for step in steps if step["quantity"] == quantity]
    if mine and mine[0]["relation"]:
        return [f"run:row-{row}-{quantity}"]
    return [f"run:row-{row}-{quantity}" + (f"-{step['group']}" if step["group"] else "") for step in mine]


def _number(value: object) -> object:
    number = float(str(value))
    return number if number == number else None
