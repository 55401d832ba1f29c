"""Which standard deviation a d was divided by, where a design offers several.

Between groups the default is the pooled SD, and ``cohens_d`` is that one. Elsewhere each d has its own quantity, and
the steps below turn it into the metric while saying so; the default of the design is preferred.
"""

from __future__ import annotations

from extractor.catalogue.relation import (
    FACTORIAL,
    PAIRED,
    PRE_POST,
    WITHIN,
    FloatArray,
    Grade,
    relation,
)

DEFAULT = {"paired": "average", "within": "average", "pre-post-control": "pre"}
"""The default standardizer of d by design; "pooled" in every other."""

_NAMED = "naming of the standardizer"
_REPEATED = PAIRED | WITHIN
_ALL = frozenset(
    {
        "one-way",
        "two-group",
        "one-way-partial",
        "factorial",
        "within",
        "paired",
        "mixed",
        "pre-post-control",
        "ancova",
    }
)


@relation(gives="cohens_d", rising=["d_average"], designs=_REPEATED, standardizer="average", source=_NAMED)
def d_over_average(d_average: FloatArray) -> FloatArray:
    """d = d_av."""
    return d_average


@relation(gives="cohens_d", rising=["d_within"], designs=_REPEATED, standardizer="within", source=_NAMED)
def d_over_within(d_within: FloatArray) -> FloatArray:
    """d = d_rm."""
    return d_within


@relation(
    gives="cohens_d",
    rising=["d_difference"],
    designs=PAIRED | PRE_POST | {"mixed"},
    standardizer="difference",
    source=_NAMED,
)
def d_over_difference(d_difference: FloatArray) -> FloatArray:
    """d = d_z, in the metric of difference or change scores."""
    return d_difference


@relation(gives="cohens_d", rising=["d_pre"], designs=PRE_POST, standardizer="pre", source=_NAMED)
def d_over_pre(d_pre: FloatArray) -> FloatArray:
    """d = d_ppc2 before its small-sample factor."""
    return d_pre


@relation(gives="cohens_d", rising=["d_residual"], designs=FACTORIAL, standardizer="residual", source=_NAMED)
def d_over_residual(d_residual: FloatArray) -> FloatArray:
    """d = d over the residual SD."""
    return d_residual


@relation(gives="cohens_d", rising=["d_restored"], designs=FACTORIAL, source=_NAMED)
def d_over_restored(d_restored: FloatArray) -> FloatArray:
    """d = d over the SD with the other factors put back."""
    return d_restored


@relation(gives="cohens_d", rising=["d_control"], designs=_ALL, standardizer="control", source=_NAMED)
def d_over_control(d_control: FloatArray) -> FloatArray:
    """d = Glass's Δ, over the control group's SD."""
    return d_control


@relation(
    gives="cohens_d",
    rising=["d_unstated"],
    designs=_ALL,
    standardizer="unstated",
    grade=Grade.APPROXIMATION,
    assumes="the printed d is taken as it stands; its standardizer is not stated",
    source=_NAMED,
)
def d_over_unstated(d_unstated: FloatArray) -> FloatArray:
    """d = printed d of unstated standardizer."""
    return d_unstated
