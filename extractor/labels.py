"""Labels of studies, outcomes and analyses as they are compared, however they were spelled."""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from extractor.distinct import distinct
from extractor.printed.reading import tidy
from extractor.table import ObjectArray

_APART = "\x1f"
_BETWEEN_DIGITS = re.compile(r"(?<=\d)(?:[^\w\n]|_)+(?=\d)")
_LETTER = re.compile(r"[^\W_]")
_NEITHER = re.compile(rf"[^a-z0-9{_APART}\n]+")
"""In plain ASCII, neither letter nor digit nor what keeps numbers or lines apart."""


def plain_label(text: str) -> str:
    """A label as labels are compared: letters and digits alone, in lower case; signs where there is nothing else.

    Numbers stay apart: 1.2 is not 12.
    """
    folded = unicodedata.normalize("NFKC", tidy(text)).casefold()
    if _LETTER.search(folded) is None:
        return folded
    return "".join(c for c in _BETWEEN_DIGITS.sub(_APART, folded) if c.isalnum() or c == _APART)


def _plain_labels(texts: list[str]) -> list[str]:
    """Many labels as they are compared: those in plain ASCII all at once, a line each."""
    lines = "\n".join(texts)
    if not lines.isascii() or lines.count("\n") >= len(texts):
        return [plain_label(text) for text in texts]
    spaced = lines.lower().replace(_APART, " ")
    found = _NEITHER.sub("", _BETWEEN_DIGITS.sub(_APART, spaced)).split("\n")
    return [plain or plain_label(text) for plain, text in zip(found, texts, strict=True)]


def compared(words: ObjectArray, plain: Callable[[str], str]) -> NDArray[np.str_]:
    """Words as they are compared; each distinct one is worked out once."""
    found, codes = distinct(words)
    return np.array([plain(str(word)) for word in found], dtype=np.str_)[codes]


def label_codes(labels: ObjectArray) -> NDArray[np.int64]:
    """A number for every row, the same for labels that are compared as equal; 0 where the label is blank."""
    found, codes = distinct(labels)
    known = {"": 0}
    plain = _plain_labels(list(map(str, found)))
    numbers = [known.setdefault(label, len(known)) for label in plain]
    return np.array(numbers, dtype=np.int64)[codes]
