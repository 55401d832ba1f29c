"""How well the order of disputes is that of what each slip really does, in simulated double coding with known slips.

Run as ``python -m tests.evidence.double_coding`` for ten reviews of 300 effects; the tests run some of them.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import stats

import extractor
from extractor.coders.reconcile import reconcile
from tests.double_coding import TO, changed, random_sheet, slip

EFFECTS, REVIEWS = 300, 10


@dataclass(frozen=True)
class Measured:
    """One review.

    slips, disputes : how many slips were made, and how many disputes found.
    ranks : rank correlation (Spearman) of the slips' true displacement with their place in the list of disputes.
    touching : the same among slips that move an effect at all. top : of the ten slips that move an effect most, how
    many stand among the first twenty disputes.
    """

    slips: int
    disputes: int
    ranks: float
    touching: float
    top: int


def measured(seed: int, effects: int = EFFECTS) -> Measured:
    """Effects coded twice with known slips, up to two in a row and each with either coder, rows in another order.

    The true displacement of a slip is that of the effect of the truth when only this slip is made.
    """
    rng = np.random.default_rng(seed)
    truth = random_sheet(rng, effects)
    coders = [truth.copy(), truth.copy()]
    slips: list[tuple[int, str, str]] = []
    for i in range(len(truth)):
        filled = [n for n in truth.columns if truth.loc[i, n] and n not in ("study", "outcome", "design")]
        for name in rng.choice(filled, rng.choice([0, 1, 2], p=[0.65, 0.25, 0.1]), replace=False):
            slips.append((i, str(name), slip(rng, truth.loc[i], str(name))))
            coders[rng.integers(2)].loc[i, name] = slips[-1][2]
    slipped = [i for i, _, _ in slips]
    alone = truth.loc[slipped].reset_index(drop=True)
    alone = changed(alone, *((at, name, text) for at, (_, name, text) in enumerate(slips)))
    before = extractor.convert(truth, TO).effects["estimate"].to_numpy()[slipped]
    after = extractor.convert(alone, TO).effects["estimate"].to_numpy()
    # a slip such as a negative SD leaves no effect at all, which is further than any distance
    displacement = np.where(np.isnan(after), np.inf, np.abs(after - before))

    shuffled = coders[1].sample(frac=1, random_state=seed).reset_index(drop=True)
    lines = reconcile([coders[0], shuffled], TO).disputes
    keys = zip(lines["study"], lines["outcome"], lines["variable"], strict=True)
    order = {key: at for at, key in enumerate(keys)}
    at = np.array([order[truth.loc[i, "study"], truth.loc[i, "outcome"], name] for i, name, _ in slips])
    touching = displacement > 0
    return Measured(
        len(slips),
        len(lines),
        float(stats.spearmanr(displacement, -at).statistic),
        float(stats.spearmanr(displacement[touching], -at[touching]).statistic),
        int((at[np.argsort(-displacement, kind="stable")[:10]] < 20).sum()),
    )


if __name__ == "__main__":
    found = [measured(seed) for seed in range(REVIEWS)]
    for seed, one in enumerate(found):
        print(
            f"seed {seed}: {one.slips} slips, {one.disputes} disputes; rank correlation {one.ranks:.3f}, among slips "
            f"that move an effect {one.touching:.3f}; of the ten largest {one.top} among the first twenty"
        )
    print(
        f"{REVIEWS} reviews of {EFFECTS} effects: mean rank correlation {np.mean([o.ranks for o in found]):.3f} "
        f"(lowest {min(o.ranks for o in found):.3f}), among slips that move an effect "
        f"{np.mean([o.touching for o in found]):.3f} (lowest {min(o.touching for o in found):.3f})"
    )
