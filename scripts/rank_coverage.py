"""How often the true rank lies inside the 90 % interval, on synthetic regions with known errors.

    python scripts/rank_coverage.py [TRIALS]

Truth is drawn, errors are drawn from the stated model and added, and the interval is made from the
noisy values alone. Noise is told as the standard error over the spread of the truth. "Simple"
counts ranks after adding the noise once more to the noisy values, without the prior.
"""

from __future__ import annotations

import sys
from dataclasses import replace

import numpy as np
from scipy.sparse import csr_array

from gridcool.grid import Grid
from gridcool.planning.confidence import ErrorModel, error_shares, rank_confidence
from gridcool.planning.pieces import Pieces

GRID = Grid(-20.0, 30.0, 1.0, 1.0, 40, 60)
MODEL = ErrorModel(common_share=0.4, correlation_km=500.0, draws=400)


def regions(count: int, rng: np.random.Generator) -> Pieces:
    """Blocks of one to nine cells anywhere."""
    cells, areas, ends = [], [], []
    rows = GRID.row_areas()
    for _ in range(count):
        row, column = rng.integers(0, GRID.rows - 3), rng.integers(0, GRID.columns - 3)
        high, wide = rng.integers(1, 4, 2)
        block = [(row + i) * GRID.columns + column + j for i in range(high) for j in range(wide)]
        cells += block
        areas += [rows[each // GRID.columns] for each in block]
        ends.append(len(cells))
    return Pieces(np.array(cells), np.array(areas), np.array(ends))


def unit_patches(pieces: Pieces) -> csr_array:
    """What neighbours have in common, of variance about one."""
    model = replace(MODEL, common_share=0.0)
    _, shares = error_shares(pieces, np.ones(GRID.shape), GRID, model)
    return shares


def simple_interval(
    values: np.ndarray, everywhere: np.ndarray, by_node: csr_array, rng: np.random.Generator
) -> tuple[np.ndarray, np.ndarray]:
    """Ranks of the values with noise added again."""
    draws = values[:, None] + everywhere[:, None] * rng.standard_normal(MODEL.draws)
    draws = draws + by_node @ rng.standard_normal((by_node.shape[1], MODEL.draws))
    ranks = (-draws).argsort(axis=0).argsort(axis=0) + 1
    low, high = np.quantile(ranks, (0.05, 0.95), axis=1, method="inverted_cdf")
    return low, high


def coverage(
    count: int, noise: float, trials: int, *, smooth: float = 0.5, seed: int = 3
) -> tuple[float, float, float]:
    """Share of true ranks inside our interval and the simple one; mean width over the count.

    ``smooth`` is the share of the truth's variance that neighbours have in common.
    """
    rng = np.random.default_rng(seed)
    inside = inside_simple = width = 0.0
    for trial in range(trials):
        pieces = regions(count, rng)
        spread = rng.uniform(0.5, 1.5, GRID.shape) * noise * 10
        everywhere, by_node = error_shares(pieces, spread, GRID, MODEL)
        own, shared = (
            rng.standard_normal(count),
            unit_patches(pieces) @ rng.standard_normal(by_node.shape[1]),
        )
        truth = 100 + 10 * (np.sqrt(1 - smooth) * own + np.sqrt(smooth) * shared)
        error = everywhere * rng.standard_normal()
        error = error + by_node @ rng.standard_normal(by_node.shape[1])
        seen = truth + error
        rank = (-truth).argsort().argsort() + 1
        model = replace(MODEL, seed=trial)
        found = rank_confidence(seen, pieces, spread, GRID, model, top=3)
        inside += ((found.low <= rank) & (rank <= found.high)).mean()
        width += (found.high - found.low).mean() / count
        low, high = simple_interval(seen, everywhere, by_node, rng)
        inside_simple += ((low <= rank) & (rank <= high)).mean()
    return inside / trials, inside_simple / trials, width / trials


def main() -> None:
    """Print coverage for several numbers of regions and sizes of noise."""
    trials = int(sys.argv[1]) if len(sys.argv) > 1 else 500
    print("regions  noise/spread  smooth  inside the 90 % interval  simple  mean width / regions")
    for count in (5, 12, 30, 100):
        for noise in (0.1, 0.3, 1.0, 2.0):
            for smooth in (0.0, 0.5, 1.0):
                ours, simple, width = coverage(count, noise, trials, smooth=smooth)
                print(
                    f"{count:7d}  {noise:12g}  {smooth:6g}  {ours:24.3f}  {simple:6.3f}  "
                    f"{width:.2f}",
                    flush=True,
                )


if __name__ == "__main__":
    main()
