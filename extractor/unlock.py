"""What a blocked row lacks: the cheapest sets of quantities that would open a route."""

from __future__ import annotations

from dataclasses import replace

from extractor.planner import Start, search
from extractor.quantities import VOCABULARY, Shape

ASKABLE = frozenset(
    {
        "n",
        "mean",
        "sd",
        "n_total",
        "k_groups",
        "f_value",
        "df_effect",
        "df_error",
        "t_value",
        "p_value",
        "ms_error",
        "ss_effect",
        "ss_error",
        "mean_difference",
        "se_difference",
        "direction",
        "correlation",
        "covariate_r",
        "ss_total",
        "ss_subjects",
    }
)
"""Quantities that an article or its authors can be asked for."""


def unlocking_sets(start: Start, design: str, metric: str, most: int = 3) -> list[frozenset[str]]:
    """Sets of missing quantities, each of which opens a route to ``metric``; the smallest first."""
    askable = ASKABLE | ({"contrast_weight"} if design != "one-way-partial" else set())
    routes = search(replace(start, askable=askable), design).get(metric, ())
    # the contrast needs no asking: it is there as soon as groups are coded
    sets = [route.missing - {"contrast_weight"} for route in routes]
    distinct = list(dict.fromkeys(s for s in sets if s))
    return [s for s in distinct if not any(other < s for other in distinct)][:most]


def in_words(sets: list[frozenset[str]]) -> str:
    """The sets as a clause: "mean and n of each group; or t_value"."""
    return "; or ".join(_listed(sorted(s)) for s in sets)


def _listed(names: list[str]) -> str:
    words = [f"{n} of each group" if VOCABULARY[n].shape is Shape.GROUP else n for n in names]
    return " and ".join(words) if len(words) < 3 else ", ".join(words[:-1]) + " and " + words[-1]
