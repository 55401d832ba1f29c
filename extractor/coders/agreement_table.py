"""How well coders agree on every variable, as a table: raw, corrected for chance, and for numbers as a correlation."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from itertools import combinations

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from extractor.codebook import RESPONSES
from extractor.coders.agreement import (
    MISSING,
    Codes,
    cohens_kappa,
    counts_of,
    fleiss_kappa,
    gwets_ac1,
    icc_agreement,
    krippendorffs_alpha,
    raw_agreement,
)
from extractor.coders.comparison import LABEL, Column
from extractor.coders.matching import ABSENT, Printed, alike
from extractor.quantities import DESIGNS, STANDARDIZERS
from extractor.table import BoolArray, FloatArray

FRACTIONS = (
    "raw_agreement",
    *("kappa", "kappa_low", "kappa_high"),
    *("ac1", "ac1_low", "ac1_high"),
    *("icc", "icc_low", "icc_high"),
    "alpha",
)
"""Columns of shares and coefficients."""
COLUMNS = ["variable", "kind", "rows", "all_agree", "one_blank", *FRACTIONS, "marginals"]
_CHOICES = {
    "design": len(DESIGNS),
    "direction": 2,
    "orientation": 2,
    "standardizer": len(STANDARDIZERS),
    "responses": len(RESPONSES),
}
"""How many words a coder can choose from."""
_MOST_MARGINALS = 8


def agreement_table(
    columns: Sequence[Column], rows: NDArray[np.intp], level: float, tolerance: float
) -> pd.DataFrame:
    """One line per variable, see COLUMNS; labels that rows were matched by have none.

    rows : effects with at least one filled cell and two coders. raw_agreement : share of agreeing pairs of coders.
    one_blank : effects that some coders left blank and others did not. kappa : Cohen's for two coders, Fleiss' for
    more. icc and the interval alpha concern effects with a number from every coder, and from two, respectively.
    """
    lines = [
        line
        for column in columns
        if column.kind != LABEL
        for line in _agreement(column, rows, level, tolerance)
    ]
    return pd.DataFrame(lines, columns=COLUMNS)


def _agreement(
    column: Column, rows: NDArray[np.intp], level: float, tolerance: float
) -> Iterator[dict[str, object]]:
    present = rows != ABSENT
    kept = (present.sum(axis=1) >= 2) & (present & ~column.blank).any(axis=1)
    if not kept.any():
        return
    present, blank = present[kept], column.blank[kept]
    line: dict[str, object] = {
        "variable": column.name,
        "kind": column.kind,
        "rows": int(kept.sum()),
        "one_blank": int((present & blank).any(axis=1).sum()),
    }
    if column.numbers is not None:
        yield line | _of_numbers(column.numbers.at(np.flatnonzero(kept)), present, level, tolerance)
    elif column.codes is not None:
        yield line | _of_words(column, column.codes[kept], level)


def _of_numbers(said: Printed, present: BoolArray, level: float, tolerance: float) -> dict[str, object]:
    agree, pairs = np.zeros(len(present)), np.zeros(len(present))
    for i, j in combinations(range(present.shape[1]), 2):
        one, other = (
            Printed(said.kind[:, c], said.value[:, c], said.low[:, c], said.high[:, c]) for c in (i, j)
        )
        both = present[:, i] & present[:, j]
        pairs += both
        agree += both & alike(one, other, tolerance)
    points: FloatArray = np.where(said.kind == 1, said.value, np.nan)
    icc = icc_agreement(points, level)
    return {
        "all_agree": int((agree == pairs).sum()),
        "raw_agreement": float((agree / pairs).mean()),
        "icc": icc.value,
        "icc_low": icc.low,
        "icc_high": icc.high,
        "alpha": krippendorffs_alpha(points, "interval"),
    }


def _of_words(column: Column, codes: Codes, level: float) -> dict[str, object]:
    used = np.unique(codes[codes != MISSING])
    dense = np.where(codes == MISSING, MISSING, np.searchsorted(used, codes))
    counts = counts_of(dense, len(used))
    kappa = cohens_kappa(dense, level) if codes.shape[1] == 2 else fleiss_kappa(counts, level)
    choices = _CHOICES.get(column.name, 0)
    # a blank is a choice of its own, where somebody made it
    choices += bool(choices) and any(column.words[code] == "" for code in used)
    ac1 = gwets_ac1(counts, choices, level)
    agreeing = (counts.max(axis=1) == counts.sum(axis=1)).sum()
    return {
        "all_agree": int(agreeing),
        "raw_agreement": raw_agreement(counts),
        "kappa": kappa.value,
        "kappa_low": kappa.low,
        "kappa_high": kappa.high,
        "ac1": ac1.value,
        "ac1_low": ac1.low,
        "ac1_high": ac1.high,
        "alpha": krippendorffs_alpha(np.where(dense == MISSING, np.nan, dense.astype(float)), "nominal"),
        "marginals": _marginals(column, codes, used),
    }


def _marginals(column: Column, codes: Codes, used: Codes) -> str:
    """How often each coder used each word: ``one-way 12 | 11; two-group 8 | 9``."""
    counts = [[int((codes[:, coder] == code).sum()) for coder in range(codes.shape[1])] for code in used]
    ranked = sorted(zip(used.tolist(), counts, strict=True), key=lambda pair: (-sum(pair[1]), pair[0]))
    said = [
        f"{column.words[code] or 'blank'} {' | '.join(map(str, numbers))}"
        for code, numbers in ranked[:_MOST_MARGINALS]
    ]
    more = len(ranked) - _MOST_MARGINALS
    return "; ".join([*said, f"{more} more"] if more > 0 else said)
