"""Nothing leaks across designs: what a design refuses is not opened by a relation of another."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

import extractor
from extractor.catalogue.relation import catalogue
from extractor.evidence import gather
from extractor.quantities import DESIGNS, METRICS
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
