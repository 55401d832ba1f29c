"""Simulation: do the 95 % intervals cover, are the exact variances exact, do plug-in weights stay bounded?

    python tests/evidence/coverage.py [--draws N] [--seed S]

F and t are drawn by their definitions, from normal and chi square variables. The script prints per cell

* the share of 95 % intervals that cover the true effect, from limits computed for up to 100,000 draws. At a
  true zero the variance-explained family covers 97.5 %, for its lower limit is cut at 0;
* the exact variance at the true effect over the variance of all draws;
* the mean over the true variance, and the smallest over the variance at a true zero, of the variances that a
  reader would compute from each draw by itself: by the exact formula with its non-centrality estimated, and
  by the large-sample formula. Pooling weights by the inverse: where the smallest variance nears 0, the weight
  of a single study has no bound.

Exit status 1, with the cells named, if a coverage leaves its target by more than 1 percentage point or a
variance ratio leaves 1 by more than 2 %. Below 500,000 draws chance alone can do that: the kurtosis of eta
squared at a true zero is about 15.
"""

import argparse
import sys
import time
from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from extractor.sampling.moments import (
    cohens_d_moments,
    cohens_f_moments,
    epsilon_squared_moments,
    eta_squared_moments,
    hedges_g_variance,
    large_sample_eta_variance,
    omega_squared_moments,
    plug_in_noncentrality,
    small_sample_factor,
)
from extractor.sampling.noncentral import f_noncentrality_limits, t_noncentrality_limits

GROUPS = (2, 3, 5)
GROUP_SIZES = (10, 20, 50)
EFFECTS_F = (0.0, 0.1, 0.25, 0.4)
EFFECTS_D = (0.0, 0.2, 0.5, 0.8)
LEVEL = 0.95
COVERAGE_BAND = 0.01
VARIANCE_BAND = 0.02
DEFAULT_DRAWS = 1_000_000
DEFAULT_SEED = 20_240_229
LIMIT_DRAWS = 100_000  # of them get their limits and plug-in variances computed

Floats = NDArray[np.float64]


@dataclass
class Cell:
    """One line of a table: its text, and what failed in it."""

    name: str
    values: list[float]
    failures: list[str] = field(default_factory=list)

    def check(self, what: str, value: float, target: float, band: float) -> None:
        if not abs(value - target) <= band:  # also catches NaN
            self.failures.append(f"{self.name}: {what} {value:.4f}, wanted {target:g} ± {band:g}")


def variance_explained_cell(
    k: int, n: int, effect: float, draws: int, random: np.random.Generator
) -> tuple[Cell, list[float]]:
    """Coverage and variance ratios for eta², omega², epsilon² and f; and the line of the second table."""
    v1, v2, total = float(k - 1), float(k * (n - 1)), float(k * n)
    lam = total * effect**2
    x = (random.standard_normal(draws) + np.sqrt(lam)) ** 2
    if k > 2:
        x += random.chisquare(v1 - 1.0, draws)
    y = random.chisquare(v2, draws)
    f = (x / v1) / (y / v2)

    low, high = f_noncentrality_limits(f[:LIMIT_DRAWS], v1, v2, LEVEL)
    coverage = float(np.mean((low <= lam) & (lam <= high)))
    estimates = {
        "eta²": v1 * f / (v1 * f + v2),
        "omega²": v1 * (f - 1.0) / (v1 * (f - 1.0) + total),
        "epsilon²": v1 * (f - 1.0) / (v1 * f + v2),
        "f": np.sqrt(v1 * f / v2),
    }
    exact = exact_variances(lam, v1, v2, total)
    ratios = {metric: float(exact[metric] / estimates[metric].var(ddof=1)) for metric in estimates}

    cell = Cell(f"k = {k}, n = {n}, f = {effect:g}", [100.0 * coverage, *ratios.values()])
    cell.check("coverage", coverage, LEVEL if effect > 0 else 0.5 + LEVEL / 2.0, COVERAGE_BAND)
    for metric, ratio in ratios.items():
        cell.check(f"variance ratio of {metric}", ratio, 1.0, VARIANCE_BAND)

    null = exact_variances(0.0, v1, v2, total)
    f_read = f[:LIMIT_DRAWS]
    plug_in = exact_variances(plug_in_noncentrality(f_read, v1, v2), v1, v2, total)
    large = large_sample_eta_variance(estimates["eta²"][:LIMIT_DRAWS], v1, total)
    second = [float(plug_in[metric].mean() / exact[metric]) for metric in plug_in]
    second += [
        float(large.mean() / exact["eta²"]),
        float(plug_in["eta²"].min() / null["eta²"]),
        float(large.min() / null["eta²"]),
    ]
    return cell, second


def exact_variances(lam: float | Floats, v1: float, v2: float, total: float) -> dict[str, Floats]:
    return {
        "eta²": eta_squared_moments(lam, v1, v2)[1],
        "omega²": omega_squared_moments(lam, v1, v2, total)[1],
        "epsilon²": epsilon_squared_moments(lam, v1, v2)[1],
        "f": cohens_f_moments(lam, v1, v2)[1],
    }


def difference_cell(n: int, delta: float, draws: int, random: np.random.Generator) -> Cell:
    """Coverage and variance ratios for d and g of two groups of n."""
    v, inverse_n = 2.0 * n - 2.0, 2.0 / n
    z = random.standard_normal(draws) + delta / np.sqrt(inverse_n)
    t = z / np.sqrt(random.chisquare(v, draws) / v)
    d = t * np.sqrt(inverse_n)
    g = small_sample_factor(v) * d

    low, high = (limit * np.sqrt(inverse_n) for limit in t_noncentrality_limits(t[:LIMIT_DRAWS], v, LEVEL))
    coverage = float(np.mean((low <= delta) & (delta <= high)))
    exact_d = cohens_d_moments(delta, inverse_n, v)[1]
    exact_g = hedges_g_variance(delta, inverse_n, v)
    ratio_d = float(exact_d / d.var(ddof=1))
    ratio_g = float(exact_g / g.var(ddof=1))

    read_d, read_g = d[:LIMIT_DRAWS], g[:LIMIT_DRAWS]
    null = cohens_d_moments(0.0, inverse_n, v)[1]
    plug_in = cohens_d_moments(read_g, inverse_n, v)[1]
    large = inverse_n + read_d**2 / (4.0 * n)
    cell = Cell(
        f"n = {n}, d = {delta:g}",
        [
            100.0 * coverage,
            ratio_d,
            ratio_g,
            float(plug_in.mean() / exact_d),
            float(large.mean() / exact_d),
            float(plug_in.min() / null),
            float(large.min() / null),
        ],
    )
    cell.check("coverage", coverage, LEVEL, COVERAGE_BAND)
    cell.check("variance ratio of d", ratio_d, 1.0, VARIANCE_BAND)
    cell.check("variance ratio of g", ratio_g, 1.0, VARIANCE_BAND)
    return cell


def print_table(
    title: str, headings: Sequence[str], cells: Sequence[Cell], rows: Sequence[list[float]]
) -> None:
    print(f"\n{title}\n")
    print(f"{'cell':>4}  {'design':<24}" + "".join(f"{heading:>11}" for heading in headings))
    for number, (cell, row) in enumerate(zip(cells, rows, strict=True)):
        print(f"{number:>4}  {cell.name:<24}" + "".join(f"{value:>11.3f}" for value in row))


def main(argv: Sequence[str] | None = None) -> int:
    parser = argparse.ArgumentParser(
        description="Coverage of intervals and exactness of variances, simulated."
    )
    parser.add_argument(
        "--draws", type=int, default=DEFAULT_DRAWS, help="draws per cell (default %(default)s)"
    )
    parser.add_argument("--seed", type=int, default=DEFAULT_SEED, help="default %(default)s")
    options = parser.parse_args(argv)
    if options.draws < 2:
        parser.error("--draws must be at least 2")
    started = time.perf_counter()

    designs = [(k, n, effect) for k in GROUPS for n in GROUP_SIZES for effect in EFFECTS_F]
    pairs = [(n, delta) for n in GROUP_SIZES for delta in EFFECTS_D]
    seeds = np.random.SeedSequence(options.seed).spawn(len(designs) + len(pairs))
    with_limits = min(options.draws, LIMIT_DRAWS)
    print(f"Seed {options.seed}, draws per cell {options.draws}, limits for {with_limits} of them.")
    print(f"Cell i of the first two tables draws from SeedSequence({options.seed}).spawn({len(seeds)})[i],")
    print(f"cell i of the third from [{len(designs)} + i].")

    cells, weights = [], []
    for (k, n, effect), seed in zip(designs, seeds[: len(designs)], strict=True):
        cell, second = variance_explained_cell(k, n, effect, options.draws, np.random.default_rng(seed))
        cells.append(cell)
        weights.append(second)
    differences = [
        difference_cell(n, delta, options.draws, np.random.default_rng(seed))
        for (n, delta), seed in zip(pairs, seeds[len(designs) :], strict=True)
    ]

    print_table(
        "1. Coverage in percent (97.5 expected at f = 0, else 95); exact over simulated variance",
        ["cover", "eta²", "omega²", "epsilon²", "f"],
        cells,
        [cell.values for cell in cells],
    )
    print_table(
        "2. Estimated variances. First four: mean of the exact formula with estimated non-centrality, over\n"
        "   the true variance; large: the same for the large-sample formula of eta². min: the smallest\n"
        "   estimated variance of eta² over that at f = 0. Near 0 means an almost unbounded weight.",
        ["eta²", "omega²", "epsilon²", "f", "large", "min exact", "min large"],
        cells,
        weights,
    )
    print_table(
        "3. Two groups: coverage in percent; exact over simulated variance of d and g; estimated variances\n"
        "   of d as in table 2, by the exact formula (delta estimated by g) and the large-sample formula",
        ["cover", "d", "g", "exact", "large", "min exact", "min large"],
        differences,
        [cell.values for cell in differences],
    )
    failures = [failure for cell in [*cells, *differences] for failure in cell.failures]
    print(f"\n{len(cells) + len(differences)} cells in {time.perf_counter() - started:.0f} s.")
    for failure in failures:
        print(f"FAILED {failure}")
    if not failures:
        print("All coverages within 1 percentage point, all variance ratios within 2 %.")
    return 1 if failures else 0


if __name__ == "__main__":
    sys.exit(main())
