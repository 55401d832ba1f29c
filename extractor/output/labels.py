"""What effects are called in plots."""

from __future__ import annotations

from collections import Counter

import pandas as pd


def short_labels(effects: pd.DataFrame) -> list[str]:
    """Study and effect of each row; with the row's number where several would be called alike, or have no name."""
    named = [
        ", ".join(str(word) for word in words if word)
        for words in zip(effects["study"], effects["effect"], strict=True)
    ]
    alike = Counter(named)
    return [
        f"{name}, row {row}" if name and alike[name] > 1 else name or f"row {row}"
        for name, row in zip(named, effects["row"], strict=True)
    ]
