"""Distinct values of a column and which of them each row has: what is worked out once is spread over the rows."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray


def distinct(values: Sequence[Any] | NDArray[Any]) -> tuple[list[Any], NDArray[np.int64]]:
    """The distinct values in the order in which they come first, and their number in every row, shape (rows,).

    Equal values of different types count as one, as in a dictionary.
    """
    listed: list[Any] = values.tolist() if isinstance(values, np.ndarray) else list(values)
    known = {value: at for at, value in enumerate(dict.fromkeys(listed))}
    codes = np.fromiter(map(known.__getitem__, listed), dtype=np.int64, count=len(listed))
    return list(known), codes


def repeated(keys: Sequence[NDArray[Any]]) -> tuple[NDArray[np.int64], NDArray[np.bool_]]:
    """A number for each combination of some columns' values, and where it occurs again; both of shape (rows,)."""
    codes = np.zeros(len(keys[0]), dtype=np.int64)
    for key in keys:
        values, own = np.unique(key, return_inverse=True)
        codes = np.unique(codes * len(values) + own, return_inverse=True)[1]
    return codes, np.bincount(codes, minlength=1)[codes] > 1


def together(rows: NDArray[np.intp], codes: NDArray[np.int64]) -> Iterator[NDArray[np.intp]]:
    """The rows of each code, codes ascending, rows in their order."""
    if len(rows):
        order = np.argsort(codes, kind="stable")
        yield from np.split(rows[order], np.flatnonzero(np.diff(codes[order])) + 1)


def spread(values: Iterable[object], codes: NDArray[np.int64] | NDArray[np.int32]) -> NDArray[np.object_]:
    """Objects worked out for the distinct values, on every row; shape (rows,)."""
    made = list(values)
    return np.fromiter(made, dtype=object, count=len(made))[codes]
