"""Every set of numbers that is offered, tried out: filled with the true values it must do what was promised, and no
proper part of it may.

Run as ``python -m tests.evidence.unlocking`` for a review of 300 rows in five metrics; the tests run a smaller one.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from itertools import combinations

import numpy as np
import pandas as pd

from extractor.api import read
from extractor.asking.batch import groups_of, heading_of, places_of
from extractor.asking.questions import Aim, Asked, Offer, questions
from extractor.routes.conversion import Conversion, convert_evidence
from tests.simulated_review import ASSUMING, Truth, review, written

METRICS = ("cohens_d", "hedges_g", "omega_squared", "eta_squared", "partial_eta_squared")
_LACKS = "no sampling variance or limits without"


def tried(seed: int, rows: int, metric: str) -> pd.DataFrame:
    """One line per offer, or part of an offer, that was filled in: aim, design, asked, filled, full, done."""
    sheet, truths = review(seed, rows)
    conversion = convert_evidence(read(sheet, ASSUMING).evidence, metric)
    tries = list(_tries(conversion, sheet, truths))
    filled = pd.DataFrame([line for *_, line in tries]).fillna("")
    effects = convert_evidence(read(filled, ASSUMING).evidence, metric).effects
    return pd.DataFrame(
        {
            "aim": [offer.aim for _, offer, _, _ in tries],
            "design": [sheet["design"].iloc[position] for position, *_ in tries],
            "asked": [", ".join(sorted(offer.asked)) for _, offer, _, _ in tries],
            "filled": [", ".join(sorted(part)) for _, _, part, _ in tries],
            "full": [part == offer.asked for _, offer, part, _ in tries],
            "done": [
                _done(offer.aim, effect)
                for (_, offer, _, _), effect in zip(tries, effects.to_dict("records"), strict=True)
            ],
        }
    )


def _tries(
    conversion: Conversion, sheet: pd.DataFrame, truths: list[Truth]
) -> Iterator[tuple[int, Offer, frozenset[str], dict[str, str]]]:
    """Offers and their proper parts with the row as it would then stand; numbers without a truth are left out."""
    for some in questions(conversion):
        for position in some.positions.tolist():
            groups = _groups(some, position, truths[position])
            for offer in some.offers:
                sizes = range(len(offer.asked) + 1)
                for part in (frozenset(p) for size in sizes for p in combinations(sorted(offer.asked), size)):
                    line = dict(sheet.iloc[position])
                    table = conversion.evidence.table
                    headings = [
                        heading_of(table, place)
                        for place in places_of(table, some.block, replace(offer, asked=part), groups)
                    ]
                    if all(heading in truths[position] for heading in headings):
                        answers = {h: written(h, truths[position][h]) for h in headings}
                        yield position, offer, part, {**line, **answers}


def _groups(some: Asked, position: int, truth: Truth) -> int:
    """The number of groups as the row says it, else as its authors know it."""
    said = int(groups_of(some.block)[np.searchsorted(some.block.positions, position)])
    known = [
        int(name.rpartition("_")[2])
        for name in truth
        if name.startswith(("n_", "mean_")) and name[-1].isdigit()
    ]
    return said or max(known, default=2)


def _done(aim: Aim, effect: dict[str, object]) -> bool:
    if effect["status"] != "converted":
        return False
    if aim is Aim.FREES:
        return effect["grade"] not in ("assumption", "bound")
    if aim is Aim.COMPLETES:
        return bool(np.isfinite(effect["variance"])) and _LACKS not in str(effect["reason"])
    return True


if __name__ == "__main__":
    for metric in METRICS:
        lines = tried(20, 300, metric)
        broken = lines[lines["full"] != lines["done"]]
        counts = lines[lines["full"]]["aim"].value_counts()
        print(f"{metric}, seed 20, 300 rows: {len(lines)} fillings, {len(broken)} not as promised")
        print("  sets that did what was promised:", {aim.value: int(n) for aim, n in counts.items()})
        if len(broken):
            print(broken.to_string())
