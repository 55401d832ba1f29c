"""Nothing leaks across designs: what a design refuses is not opened by a relation of another."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

import extractor
from extractor.catalogue.relation import catalogue
from extractor.evidence import gather
from extractor.quantities import DESIGNS, METRICS
from extractor.routes.conversion import convert_evidence
from extractor.routes.planner import search
from tests.evidence.honest import honest_sheet
from tests.evidence.honest_designs import honest_design_sheet
from tests.evidence.printing import table


@pytest.mark.parametrize("seed", range(12))
def test_every_step_of_every_route_holds_in_the_design(seed: int) -> None:
    """Changing only the design word: whatever then converts, converts through relations of that design."""
    rng = np.random.default_rng(seed)
    sheet = honest_design_sheet(rng, 2) if seed % 2 else honest_sheet(rng, 2)
    for design in DESIGNS:
        sheet.facts["design"] = design
        for block in gather(table(sheet)).blocks:
            for routes in search(block.start, block.design).values():
                for route in routes:
                    used = [catalogue()[name] for name in route.steps.values()]
                    assert all(block.design in relation.designs for relation in used)


INDICES = (
    *("eta_squared", "partial_eta_squared", "generalized_eta_squared"),
    *("omega_squared", "partial_omega_squared", "cohens_f"),
)


def test_what_an_identity_gives_is_what_the_scores_give() -> None:
    """An index printed by a study of raw scores, blanked and converted to: no relation of another design lies between.

    A step that holds in one design only, say eta squared from F, would miss the index of the others by far.
    """
    met = dict.fromkeys(INDICES, 0)
    for seed in range(150):
        sheet = honest_design_sheet(np.random.default_rng(seed), 4)
        for metric in [name for name in INDICES if (name, None) in sheet.columns]:
            whole = table(sheet).numbers[metric, None]
            blanked = replace(sheet, columns={v: c for v, c in sheet.columns.items() if v != (metric, None)})
            effects = convert_evidence(gather(table(blanked)), metric).effects
            exact = ((effects["status"] == "converted") & (effects["grade"] == "identity")).to_numpy()
            low, high = effects["estimate_low"].to_numpy(), effects["estimate_high"].to_numpy()
            apart = exact & ((low > whole.high + 1e-9) | (high < whole.low - 1e-9))
            assert not apart.any(), (seed, metric, sheet.facts)
            met[metric] += int(exact.sum())
    assert min(met[name] for name in INDICES if name != "generalized_eta_squared") > 10, met


@pytest.mark.parametrize(
    ("design", "refused"),
    [
        ("factorial", ("eta_squared", "omega_squared", "epsilon_squared", "cohens_d", "hedges_g", "r")),
        (
            "within",
            ("eta_squared", "omega_squared", "epsilon_squared", "cohens_d", "generalized_eta_squared"),
        ),
        ("mixed", ("eta_squared", "omega_squared", "epsilon_squared", "cohens_d", "generalized_eta_squared")),
        ("ancova", ("eta_squared", "omega_squared", "epsilon_squared", "cohens_d", "hedges_g")),
        ("one-way", ("cohens_d", "hedges_g", "r", "fisher_z", "log_odds_ratio", "mean_difference")),
    ],
)
def test_f_with_two_dfs_gives_only_what_it_says(design: str, refused: tuple[str, ...]) -> None:
    """NEEDS of the trade: a factorial, within or adjusted F is not a one-way F (Olejnik & Algina 2003)."""
    row = pd.DataFrame(
        [{"design": design, "f_value": "4.31", "df_effect": "2", "df_error": "57", "n_total": "60"}]
    )
    for metric in METRICS:
        status = extractor.convert(row, to=metric).effects["status"][0]
        assert (status == "blocked") == (metric in refused or _signed_or_whole(metric, design)), metric


def _signed_or_whole(metric: str, design: str) -> bool:
    """Refused everywhere but in two groups, or for want of sums of squares."""
    if metric in ("r", "fisher_z", "log_odds_ratio", "mean_difference", "cohens_d", "hedges_g"):
        return True
    needs_whole = metric == "generalized_eta_squared" and design in ("factorial", "ancova")
    return needs_whole or (metric == "partial_omega_squared" and design == "mixed")
