"""The list of families. A new module of relations is added here, and nowhere else."""

from __future__ import annotations

from functools import cache
from importlib import import_module

FAMILIES = (
    "counts",
    "source_table",
    "groups",
    "solving_for_groups",
    "variance_explained",
    "p_values",
    "contrasts",
    "correlations",
    "odds",
    "homogeneity",
    "standardizers",
    "terms",
    "within",
    "paired",
    "pre_post",
    "adjusted",
    "cells",
    "ranks",
    "proportions",
    "medians",
    "multiple_comparisons",
)


@cache
def load() -> None:
    """Import every family, which enters its relations into the catalogue; once."""
    for family in FAMILIES:
        import_module(f"extractor.catalogue.{family}")
