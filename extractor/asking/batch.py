"""The questions about a sheet as tables: what to ask about each row and where it goes, and which one does most."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from extractor.asking.questions import Aim, Asked, Offer, burden, questions
from extractor.asking.situation import GROUPED
from extractor.codebook import MOST_GROUPS
from extractor.evidence import Block
from extractor.quantities import FACTS, VOCABULARY, group_heading
from extractor.routes.conversion import Conversion
from extractor.routes.sensitivity import TOGETHER, sensitivity
from extractor.routes.unlock import EASE
from extractor.table import FloatArray, ObjectArray, ReportedTable, Variable
from extractor.words import listed

ROW_COLUMNS = [
    *("row", "study", "outcome", "effect", "status", "does", "choice", "question", "cells", "to_be_had"),
    *("assumption_left", "rounding_left", "now_low", "now_high", "gain", "also", "reason"),
]
BATCH_COLUMNS = [
    *("question", "to_be_had", "opens", "tightens", "frees", "completes", "rows", "studies", "row_numbers"),
]
NEW = "new column"
_COUNTED = {Aim.OPENS: "opens", Aim.TIGHTENS: "tightens", Aim.FREES: "frees", Aim.COMPLETES: "completes"}
_WRITTEN_AS: dict[str, Variable] = {"sd_difference": ("sd_change", 1)}
"""Quantities that a sheet writes in another column."""


@dataclass(frozen=True)
class Unlocking:
    """What would make rows usable.

    rows : one line per row and offer, the best offer of a row first; rows for which nothing can be asked have one
    line without a question. batch : one line per question, the one that opens most rows first.
    """

    rows: pd.DataFrame
    batch: pd.DataFrame


def unlocking(
    conversion: Conversion,
    *,
    method: str | None = None,
    level: float = 0.95,
    standardizer: str = "",
    most: int = 3,
) -> Unlocking:
    """What to ask so that rows are opened, tightened, freed from assumptions or given their variance.

    Parameters
    ----------
    method, level, standardizer : as the conversion was made with.
    most : offers shown per row; the batch view knows further ones.
    """
    asked = questions(conversion, method=method, standardizer=standardizer)
    reach = _reach(conversion, method, level)
    parts = [part for some in asked for part in _lines(conversion, some, reach, most)]
    parts += [_unread(conversion)]
    rows = pd.concat(parts, ignore_index=True)[ROW_COLUMNS]
    rows = rows.sort_values(["row", "choice"], kind="stable", ignore_index=True)
    return Unlocking(rows, _batch(conversion, asked))


def places_of(table: ReportedTable, block: Block, asked: frozenset[str], groups: int) -> list[Variable | str]:
    """Where numbers that are asked for go: variables, or the names of facts; known groups are left out.

    Parameters
    ----------
    groups : number of groups of the row; 0 where it is not known, and then two stand for all.
    """
    found: list[Variable | str] = []
    for name in _in_order(asked):
        if name in FACTS:
            found.append(name)
        elif name in _WRITTEN_AS:
            found.append(_WRITTEN_AS[name])
        elif name not in GROUPED:
            found.append((name, None))
        else:
            members: list[Variable] = [(name, group) for group in range(1, (groups or 2) + 1)]
            found += [m for m in members if not _known(table, block, m)]
    return found


def groups_of(block: Block) -> NDArray[np.int64]:
    """Number of groups of each row of a block, 0 where nothing says it or no sheet has so many; shape (rows,)."""
    size = len(block.positions)
    if block.groups >= 2 or block.design == "one-way-partial":
        return np.full(size, max(block.groups, 2))
    if block.design in ("two-group", "paired", "pre-post-control"):
        return np.full(size, 2)
    for name, more in (("k_groups", 0), ("df_effect", 1)):
        if name in block.leaves:
            value = block.leaves[name].value
            return np.asarray(np.where(value + more <= MOST_GROUPS, value + more, 0), dtype=np.int64)
    return np.zeros(size, dtype=np.int64)


def heading_of(table: ReportedTable, place: Variable | str) -> str:
    """The sheet's own heading of a place, else its canonical one."""
    if isinstance(place, str):
        return place
    name, group = place
    if place in table.numbers and table.numbers[place].place.column:
        return table.numbers[place].place.heading
    return name if group is None else group_heading(name, group)


def _in_order(asked: frozenset[str]) -> list[str]:
    order = list(VOCABULARY)
    return sorted(asked, key=lambda q: (q in GROUPED, EASE[q], order.index(q)))


def _known(table: ReportedTable, block: Block, member: Variable) -> bool:
    numbers = table.numbers.get(member)
    first = block.positions[0]
    return numbers is not None and bool(np.isfinite(numbers.value[first]))


def question_of(table: ReportedTable, block: Block, offer: Offer, groups: int) -> str:
    """An offer in words: "t; M of groups 1 and 2; SD of group 2"."""
    said: dict[str, list[int]] = {}
    for place in places_of(table, block, offer.asked, groups):
        name, group = (place, None) if isinstance(place, str) else place
        said.setdefault(name, []).extend([] if group is None else [group])
    words = []
    for name, members in said.items():
        if name == "sd_change" and block.design == "paired":
            words.append("SD of the difference scores")
        elif not members:
            words.append(_WORDS.get(name) or VOCABULARY[name].symbol)
        elif groups == 0:
            words.append(f"{VOCABULARY[name].symbol} of each group")
        else:
            several = "groups" if len(members) > 1 else "group"
            words.append(f"{VOCABULARY[name].symbol} of {several} {listed([str(m) for m in members])}")
    return "; ".join(words)


_WORDS = {
    "direction": "direction of the difference",
    "tails": "whether p is one- or two-tailed",
    "confidence_level": "confidence level of the limits",
    "significance_level": "significance level of the printed difference",
    "k_groups": "number of groups",
}


def _lines(
    conversion: Conversion, asked: Asked, reach: dict[str, FloatArray], most: int
) -> Iterator[pd.DataFrame]:
    """The lines of rows that can be asked the same; rows of a block may differ in their number of groups."""
    table, block = conversion.evidence.table, asked.block
    count = groups_of(block)[np.searchsorted(block.positions, asked.positions)]
    if not asked.offers:
        yield _about(
            conversion, asked.positions, does=asked.aim.value, choice=1, reason=_nothing(conversion, asked)
        )
    for groups in np.unique(count).tolist():
        at = asked.positions[count == groups]
        now = reach if asked.aim in (Aim.TIGHTENS, Aim.FREES) else {}
        for choice, offer in enumerate(asked.offers[:most], 1):
            places = places_of(table, block, offer.asked, groups)
            low, high = (now[end][at] if now else np.full(len(at), np.nan) for end in ("low", "high"))
            yield _about(
                conversion,
                at,
                does=asked.aim.value,
                choice=choice,
                question=question_of(table, block, offer, groups),
                cells=_addresses(table, places, at, more=groups == 0),
                to_be_had=offer.ease.words,
                assumption_left=offer.assuming,
                rounding_left=offer.rounding,
                now_low=low,
                now_high=high,
                gain=high - low,
                also="; ".join(_WORDS.get(q) or VOCABULARY[q].symbol for q in _in_order(offer.also)),
            )


def _nothing(conversion: Conversion, asked: Asked) -> ObjectArray:
    reason = conversion.effects["reason"].to_numpy(dtype=object)[asked.positions]
    said = "no set of up to four numbers would do it"
    return np.where(reason == "", said, reason + f"; {said}")


def _about(conversion: Conversion, positions: NDArray[np.intp], **columns: object) -> pd.DataFrame:
    effects = conversion.effects.iloc[positions]
    known = {name: effects[name].to_numpy() for name in ("row", "study", "outcome", "effect", "status")}
    blank: dict[str, object] = {
        **dict.fromkeys(("question", "cells", "to_be_had", "also", "reason"), ""),
        **dict.fromkeys(("rounding_left", "now_low", "now_high", "gain"), np.nan),
        "assumption_left": False,
    }
    return pd.DataFrame({**known, **blank, **columns})


def _addresses(
    table: ReportedTable, places: list[Variable | str], positions: NDArray[np.intp], *, more: bool
) -> ObjectArray:
    """Headings with the addresses of the cells, per row; a place without a column says so."""
    rows = table.row_numbers[positions].astype(str).astype(object)
    texts: ObjectArray = np.full(len(positions), "", dtype=object)
    for place in places:
        numbers = None if isinstance(place, str) else table.numbers.get(place)
        column = numbers.place.column if numbers is not None else ""
        known = numbers is not None or place in table.facts
        spot = f" [{column}" + rows + "]" if column else " [row " + rows + "]" if known else f" [{NEW}]"
        texts = texts + np.where(texts == "", "", "; ") + heading_of(table, place) + spot
    return texts + "; and so on for every group" if more and any(map(_grouped, places)) else texts


def _grouped(place: Variable | str) -> bool:
    return not isinstance(place, str) and place[1] is not None


def _reach(conversion: Conversion, method: str | None, level: float) -> dict[str, FloatArray]:
    """Per row the interval in which the effect lies now: over the ranges of its assumptions, or as bounded."""
    effects = conversion.effects
    bounded = (effects["status"] == "bounded").to_numpy()
    ends = {
        end: np.where(bounded, effects[f"estimate_{end}"].to_numpy(dtype=float), np.nan)
        for end in ("low", "high")
    }
    moved = sensitivity(conversion, method=method, level=level).effects
    # the interval over all assumptions together stands behind those of the single ones
    moved = moved.sort_values("assumption", key=lambda c: c == TOGETHER, kind="stable")
    at = np.searchsorted(conversion.evidence.table.row_numbers, moved["row"].to_numpy(dtype=np.int64))
    for end, values in ends.items():
        values[at] = moved[f"estimate_{end}"]
    return ends


def _unread(conversion: Conversion) -> pd.DataFrame:
    """Rows that cannot be used as they are coded: no question to the authors helps there."""
    blocked = conversion.evidence.blocked
    at = np.flatnonzero(blocked != "")
    return _about(conversion, at, does="", choice=1, reason=blocked[at])


def _batch(conversion: Conversion, asked: list[Asked]) -> pd.DataFrame:
    """For each set of quantities the rows for which it, or a part of it, is an offer."""
    table = conversion.evidence.table
    sets = sorted({o.asked for some in asked for o in some.offers}, key=sorted)
    lines: list[dict[str, object]] = []
    for one in sets:
        served = [(some, o) for some in asked for o in some.offers if o.asked <= one]
        by_aim = {
            word: np.unique(np.concatenate([s.positions for s, o in served if o.aim is aim] or [_NO_ROWS]))
            for aim, word in _COUNTED.items()
        }
        rows = np.unique(np.concatenate(list(by_aim.values())))
        lines.append(
            {
                "question": "; ".join(_general(name) for name in _in_order(one)),
                "to_be_had": max(EASE[name] for name in one).words,
                **{word: len(found) for word, found in by_aim.items()},
                "rows": len(rows),
                "studies": len(set(table.fact("study")[rows].tolist())),
                "row_numbers": table.row_numbers[rows].tolist(),
                "cost": (burden(one, _USUAL_GROUPS), max(EASE[name] for name in one)),
            }
        )
    lines.sort(key=lambda line: (*(-int(str(line[w])) for w in (*_COUNTED.values(), "rows")), _cost(line)))
    kept: list[dict[str, object]] = []
    for line in lines:
        # lines that do as much at the same cost are one choice, of which the first is named
        if not any(_covers(other, line) for other in [*kept, *(o for o in lines if _cost(o) < _cost(line))]):
            kept.append(line)
    return pd.DataFrame(kept, columns=BATCH_COLUMNS)


_NO_ROWS = np.empty(0, dtype=np.intp)
_USUAL_GROUPS = 2


def _cost(line: dict[str, object]) -> tuple[int, ...]:
    """What the question costs the authors, then how readily the hardest of its numbers is to be had."""
    found = line["cost"]
    return found if isinstance(found, tuple) else ()


def _covers(other: dict[str, object], line: dict[str, object]) -> bool:
    """Whether another question does all that this one does and costs no more."""
    does = all(int(str(other[w])) >= int(str(line[w])) for w in _COUNTED.values())
    return does and _cost(other) <= _cost(line) and _rows(other) >= _rows(line)


def _rows(line: dict[str, object]) -> set[int]:
    found = line["row_numbers"]
    return set(found) if isinstance(found, list) else set()


def _general(name: str) -> str:
    word = _WORDS.get(name) or VOCABULARY[name].symbol
    return f"{word} of each group" if name in GROUPED else word
