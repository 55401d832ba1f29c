"""Blocks of one design narrowed together: what each block knows takes part in its own rows only.

A sheet of many ways of reporting has many small blocks, and running every relation over each of them takes longer than
the arithmetic. No row depends on the rows beside it, so that blocks may share one pass.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from extractor.audit.constraints import Constraints
from extractor.audit.propagation import Domain, propagate
from extractor.quantities import VOCABULARY
from extractor.table import BoolArray, FloatArray

_Shape = tuple[str, tuple[int, ...]]


def contradictory(blocks: Sequence[Constraints]) -> list[BoolArray]:
    """For each block the rows whose printed numbers cannot hold together, shape (rows,)."""
    found = [np.zeros(block.rows, dtype=bool) for block in blocks]
    alike: dict[_Shape, list[int]] = {}
    for at, block in enumerate(blocks):
        if block.cells:
            alike.setdefault(_shape(block), []).append(at)
    for members in alike.values():
        some = [blocks[at] for at in members]
        domain, unknown = _joined([block.domain for block in some])
        ends = np.cumsum([block.rows for block in some])[:-1]
        parts = np.split(propagate(some[0].design, domain, unknown), ends)
        for at, part in zip(members, parts, strict=True):
            found[at] = part
    return found


def _shape(block: Constraints) -> _Shape:
    """The design and the numbers of groups in its intervals; blocks that agree in both fit into one domain."""
    return block.design, tuple(sorted({ends.shape[1] for ends in block.domain.low.values() if ends.ndim > 1}))


def _joined(domains: Sequence[Domain]) -> tuple[Domain, dict[str, BoolArray]]:
    rows = [len(next(iter(domain.low.values()))) for domain in domains]
    joined, unknown = Domain({}, {}), dict[str, BoolArray]()
    for quantity in dict.fromkeys(q for domain in domains for q in domain.low):
        support = VOCABULARY[quantity]
        width = next(d.low[quantity].shape[1:] for d in domains if quantity in d.low)
        known = [quantity in domain.low for domain in domains]
        for into, side, end in ((joined.low, "low", support.low), (joined.high, "high", support.high)):
            parts: list[FloatArray] = [
                getattr(domain, side)[quantity] if there else np.full((count, *width), end, order="F")
                for domain, there, count in zip(domains, known, rows, strict=True)
            ]
            into[quantity] = np.concatenate(parts)
        if not all(known):
            unknown[quantity] = np.repeat(~np.array(known), rows)
    return joined, unknown
