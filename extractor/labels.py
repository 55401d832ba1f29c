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

_BETWEEN_DIGITS = re.compile(r"(?<=\d)[\W_]+(?=\d)")
_APART = "\x1f"
_LETTER = re.compile(r"[^\W_]")


def plain_label(text: str) -> str:
    """A label as labels are compared: letters and digits alone, in lower case; signs where there is nothing else.

    Numbers stay apart: 1.2 is not 12.
    """
    folded = unicodedata.normalize("NFKC", tidy(text)).casefold()
    if _LETTER.search(folded) is None:
        return folded
    return "".join(c for c in _BETWEEN_DIGITS.sub(_APART, folded) if c.isalnum() or c == _APART)


def compared(words: ObjectArray, plain: Callable[[str], str]) -> NDArray[np.str_]:
    """Words as they are compared; each distinct one is worked out once."""
    found, codes = distinct(words)
    return np.array([plain(str(word)) for word in found], dtype=np.str_)[codes]
