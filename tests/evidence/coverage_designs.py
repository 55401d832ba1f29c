"""Coverage and variance of effects whose sampling distribution is approximated: pairs, pretest-posttest, restored SDs.

    python -m tests.evidence.coverage_designs [--draws N] [--seed S]

Raw scores are drawn from normal populations. ``coverage`` is of the 95 % limits, in per cent; ``at truth`` is the
variance formula at the true values over the Monte Carlo variance; ``plug-in`` is its mean over draws at the estimates
over the same. Large-sample formulas are shown for what they are: nothing is gated but the rows marked exact.
"""

from __future__ import annotations

import argparse
import sys
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from extractor.catalogue.pre_post import morris_factor
from extractor.sampling import difference_precision as difference
from extractor.sampling import variance_explained_precision as explained
from extractor.sampling.moments import small_sample_factor

Array = np.ndarray


@dataclass(frozen=True)
class Line:
    """One line of the table."""

    effect: str
    case: str
    coverage: float
    at_truth: float
    plug_in: float
    exact: bool = False


def _line(
    effect: str,
    case: str,
    truth: float,
    estimate: Array,
    variance: Array,
    limits: tuple[Array, Array],
    at_truth: float,
    exact: bool = False,
) -> Line:
    spread = estimate.var(ddof=1)
    covered = np.mean((limits[0] <= truth) & (truth <= limits[1]))
    return Line(effect, case, 100 * float(covered), at_truth / spread, float(variance.mean()) / spread, exact)


def _pairs(rng: np.random.Generator, draws: int, n: int, r: float, delta: float) -> tuple[Array, ...]:
    """Means and covariances of pairs, drawn from their own distributions: means normal, covariances Wishart."""
    first = rng.normal(size=(draws, n))
    second = r * first + np.sqrt(1 - r**2) * rng.normal(size=(draws, n))
    first = first + delta
    v1, v2 = first.var(axis=1, ddof=1), second.var(axis=1, ddof=1)
    gap = first - second
    covariance = (v1 + v2 - gap.var(axis=1, ddof=1)) / 2
    return gap.mean(axis=1), v1, v2, covariance


def pairs(rng: np.random.Generator, draws: int) -> Iterator[Line]:
    """d over the average SD, over the SD implied by r, over the SD of differences."""
    for n in (10, 20, 50):
        for r in (0.3, 0.7):
            for delta in (0.0, 0.5):
                gap, v1, v2, covariance = _pairs(rng, draws, n, r, delta)
                size = np.full(draws, float(n))
                sample_r = covariance / np.sqrt(v1 * v2)
                case = f"n = {n}, r = {r}, δ = {delta}"
                d_av = gap / np.sqrt((v1 + v2) / 2)
                yield _line(
                    "d_av", case, delta, d_av, difference.average_large(d_av, size, sample_r),
                    difference.average_limits(d_av, size, sample_r, 0.95),
                    float(difference.average_large(np.array(delta), np.array(n), np.array(r))),
                )  # fmt: skip
                d_z = gap / np.sqrt(v1 + v2 - 2 * covariance)
                d_rm = d_z * np.sqrt(2 * (1 - sample_r))
                yield _line(
                    "d_rm", case, delta, d_rm, difference.matched_large(d_rm, size, sample_r),
                    difference.matched_limits(d_rm, size, sample_r, 0.95),
                    float(difference.matched_large(np.array(delta), np.array(n), np.array(r))),
                )  # fmt: skip
                true_z = delta / np.sqrt(2 * (1 - r))
                # exact moments take delta as g estimates it, so the truth enters uncorrected
                at_truth = difference.difference_exact(
                    np.array(true_z) / small_sample_factor(n - 1), np.array(n)
                )
                yield _line(
                    "d_z", case, true_z, d_z, difference.difference_exact(d_z, size),
                    difference.difference_limits(d_z, size, 0.95), float(at_truth), exact=True,
                )  # fmt: skip


def pre_post(rng: np.random.Generator, draws: int) -> Iterator[Line]:
    """d_ppc2 with the correlation known, as Morris (2008) has it."""
    for n_t, n_c in ((15, 15), (30, 20)):
        for r in (0.4, 0.7):
            for delta in (0.0, 0.5):
                gains, squares = [], 0.0
                for n, shift in ((n_t, delta), (n_c, 0.0)):
                    before = rng.normal(size=(draws, n))
                    after = r * before + np.sqrt(1 - r**2) * rng.normal(size=(draws, n)) + shift
                    gains.append((after - before).mean(axis=1))
                    squares = squares + (n - 1) * before.var(axis=1, ddof=1)
                total = np.full(draws, float(n_t + n_c))
                weight = np.full(draws, 1 / n_t + 1 / n_c)
                d = morris_factor(total) * (gains[0] - gains[1]) / np.sqrt(squares / (total - 2))
                known = np.full(draws, r)
                variance = difference.morris_g(d, weight, total, known)
                half = 1.959963984540054 * np.sqrt(variance)
                truth = difference.morris_g(np.array(delta), weight[0], total[0], np.array(r))
                case = f"n = {n_t}, {n_c}, r = {r}, δ = {delta}"
                yield _line("d_ppc2", case, delta, d, variance, (d - half, d + half), float(truth))


def factorial(rng: np.random.Generator, draws: int) -> Iterator[Line]:
    """A 2 x 2 design with n per cell: restored d, partial eta and omega squared, generalized eta squared."""
    for n in (5, 15):
        for a, b in ((0.0, 0.5), (0.5, 0.5)):
            effects = np.array([[a / 2 + b / 2, a / 2 - b / 2], [-a / 2 + b / 2, -a / 2 - b / 2]])
            scores = rng.normal(size=(draws, 2, 2, n)) + effects[None, :, :, None]
            cell = scores.mean(axis=3)
            error = ((scores - cell[..., None]) ** 2).sum(axis=(1, 2, 3))
            grand = cell.mean(axis=(1, 2))
            ss_a = 2 * n * ((cell.mean(axis=2) - grand[:, None]) ** 2).sum(axis=1)
            ss_b = 2 * n * ((cell.mean(axis=1) - grand[:, None]) ** 2).sum(axis=1)
            ss_ab = n * ((cell - grand[:, None, None]) ** 2).sum(axis=(1, 2)) - ss_a - ss_b
            v2, total = 4 * n - 4.0, 4 * n
            ones, many = np.ones(draws), np.full(draws, float(total))
            case = f"n = {n} a cell, effects {a} and {b}"
            s2 = (error + ss_b + ss_ab) / (v2 + 2)
            d = (cell.mean(axis=2)[:, 0] - cell.mean(axis=2)[:, 1]) / np.sqrt(s2)
            share, weight = error / v2 / s2, np.full(draws, 1 / n)
            true_sd = np.sqrt(1 + b**2 / 4)
            at_truth = difference.restored_large(
                np.array(a / true_sd), weight[0], np.array(float(total)), np.array(1 / true_sd**2)
            )
            yield _line(
                "d, restored SD", case, a / true_sd, d, difference.restored_large(d, weight, many, share),
                difference.restored_limits(d, weight, many, share, 0.95), float(at_truth),
            )  # fmt: skip
            f = ss_a / (error / v2)
            lam = total * a**2 / 4
            population = lam / (lam + total)
            partial = ss_a / (ss_a + error)
            df2 = np.full(draws, v2)
            truth = explained.moments.eta_squared_moments(lam, 1.0, v2)[1]
            yield _line(
                "partial η²", case, population, partial, explained.eta_exact(partial, ones, df2),
                explained.eta_limits(partial, ones, df2, many, 0.95), float(truth), exact=True,
            )  # fmt: skip
            omega = (f - 1) / (f - 1 + total)
            truth = explained.moments.omega_squared_moments(lam, 1.0, v2, float(total))[1]
            yield _line(
                "partial ω²", case, population, omega, explained.omega_exact(omega, ones, df2, many),
                explained.omega_limits(omega, ones, df2, many, 0.95), float(truth), exact=True,
            )  # fmt: skip
            general = ss_a / (ss_a + ss_b + ss_ab + error)
            lam_b = total * b**2 / 4
            whole = lam / (lam + lam_b + total)
            limits = explained.whole_limits(general, partial, ones, df2, many, 0.95)
            yield _line(
                "generalized η², B measured", case, whole, general,
                explained.whole_exact(general, partial, ones, df2), limits, np.nan,
            )  # fmt: skip


def main(argv: list[str] | None = None) -> int:
    """Print the table; 1 when an exact variance is off by more than 2 % or an exact coverage by more than 1 %."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--draws", type=int, default=200_000)
    parser.add_argument("--seed", type=int, default=20261201)
    options = parser.parse_args(argv)
    print(f"seed {options.seed}, {options.draws:,} draws a case")
    print(f"{'effect':<27}{'case':<38}{'coverage':>9}{'at truth':>10}{'plug-in':>9}")
    failed = 0
    for part in (pairs, pre_post, factorial):
        rng = np.random.default_rng(options.seed)
        for line in part(rng, options.draws):
            mark = ""
            if line.exact:
                centre = 97.5 if "0.0 and" in line.case and "η²" in line.effect + "η²" else 95.0
                off = abs(line.at_truth - 1) > 0.02 or abs(line.coverage - centre) > 1.0
                mark = "  OFF" if off else "  exact"
                failed += off
            print(
                f"{line.effect:<27}{line.case:<38}{line.coverage:>9.2f}"
                f"{line.at_truth:>10.3f}{line.plug_in:>9.3f}{mark}"
            )
    return 1 if failed else 0


if __name__ == "__main__":
    sys.exit(main())
