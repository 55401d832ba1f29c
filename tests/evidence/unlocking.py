"""Every set of numbers that is offered, tried out: filled with the true values it must do what was promised, and no
proper part of it may.

Run as ``python -m tests.evidence.unlocking`` for a review of 300 rows in five metrics; the tests run a smaller one.
"""

from __future__ import annotations

from collections.abc import Iterator
from itertools import combinations

import numpy as np
import pandas as pd

from extractor.api import read
from extractor.asking.batch import groups_of, heading_of, places_of
from extractor.asking.questions import Aim, Asked, Offer, questions
from extractor.routes.conversion import Conversion, convert_evidence
from tests.simulated_review import ASSUMING, Truth, review, written

METRICS = ("cohens_d", "hedges_g", "omega_squared", "eta_squared", "partial_eta_squared")
_LACKS = ("no sampling variance or limits without", "no confidence limits without")


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
            for offer in some.offers:
                sizes = range(len(offer.asked) + 1)
                for part in (frozenset(p) for size in sizes for p in combinations(sorted(offer.asked), size)):
                    line = _answered(conversion, sheet, truths, some, position, part)
                    if line is not None:
                        yield position, offer, part, line


def _answered(
    conversion: Conversion,
    sheet: pd.DataFrame,
    truths: list[Truth],
    some: Asked,
    position: int,
    asked: frozenset[str],
) -> dict[str, str] | None:
    """A row with the true values of what was asked for; None where a number has no truth."""
    truth, table = truths[position], conversion.evidence.table
    places = places_of(table, some.block, asked, _groups(some, position, truth))
    headings = [heading_of(table, place) for place in places]
    if not all(heading in truth for heading in headings):
        return None
    return dict(sheet.iloc[position]) | {h: written(h, truth[h]) for h in headings}


def with_precision(seed: int, rows: int, metric: str) -> pd.DataFrame:
    """Effects of rows in which all that a letter asks for was filled in, where that was to bring the variance too."""
    sheet, truths = review(seed, rows)
    conversion = convert_evidence(read(sheet, ASSUMING).evidence, metric)
    lines = [
        _answered(conversion, sheet, truths, some, position, offer.whole)
        for some in questions(conversion)
        for position in some.positions.tolist()
        for offer in some.offers
        if offer.also
    ]
    filled = pd.DataFrame([line for line in lines if line is not None]).fillna("")
    return convert_evidence(read(filled, ASSUMING).evidence, metric).effects


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
        return bool(np.isfinite(effect["variance"])) and not str(effect["reason"]).startswith(_LACKS)
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
        whole = with_precision(20, 300, metric)
        served = int(np.isfinite(whole["variance"]).sum()) if len(whole) else 0
        print(f"  sets completed for their variance: {len(whole)}, with a variance then: {served}")
