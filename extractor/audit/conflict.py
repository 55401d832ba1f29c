"""Which printed quantities of a row cannot hold together: a smallest set, found by leaving out one after the other."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from extractor.audit.constraints import Constraints
from extractor.audit.propagation import propagate
from extractor.table import BoolArray


def conflicts(constraints: Constraints, rows: NDArray[np.intp]) -> dict[str, BoolArray]:
    """For each printed quantity, in which of the contradictory ``rows`` it takes part, shape (len(rows),).

    A quantity that can be freed while the row stays contradictory takes no part and stays freed. What is left is
    contradictory, and no longer so without any one of its quantities (a minimal conflict: Reiter 1987).
    """
    some = constraints.take(rows)
    domain = some.domain.copy()
    takes_part: dict[str, BoolArray] = {}
    for name in dict.fromkeys(cell.quantity for cell in some.cells):
        without = domain.copy()
        for cell in some.cells:
            if cell.quantity == name:
                some.put(without, cell, np.full(len(rows), -np.inf), np.full(len(rows), np.inf))
        needless = propagate(some.design, without.copy())
        for ends, freed in ((domain.low, without.low), (domain.high, without.high)):
            where = needless if ends[name].ndim == 1 else needless[:, None]
            ends[name] = np.where(where, freed[name], ends[name])
        takes_part[name] = ~needless
    return takes_part
