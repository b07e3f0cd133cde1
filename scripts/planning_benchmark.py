"""Time and memory of planning: the region table, zones and losses on large grids.

    python scripts/planning_benchmark.py

Layers are synthetic. Prints seconds and the peak memory of a process for each case, from one run.
"""

from __future__ import annotations

import multiprocessing
import resource
import time
from multiprocessing.connection import Connection

import numpy as np
import shapely

from gridcool.grid import Grid
from gridcool.planning.confidence import ErrorModel
from gridcool.planning.exclusions import NO_RESULT
from gridcool.planning.losses import exclusion_losses
from gridcool.planning.ranking import region_table
from gridcool.planning.regions import Regions, coverage
from gridcool.planning.worth import PanelCosts
from gridcool.planning.zones import find_zones
from gridcool.variables import Flag

CASES = {
    "national, 0.05 degrees": Grid(60.0, 40.0, 0.05, 0.05, 600, 700),
    "global, 0.25 degrees": Grid(-180.0, 90.0, 0.25, 0.25, 720, 1440),
}
FLAGS = (NO_RESULT, Flag(2, "steep", "too steep"))
COSTS = PanelCosts(25, 10, 150, 14, 100)


def boxes(grid: Grid, count: int) -> Regions:
    """About so many boxes over the grid."""
    b = grid.bounds
    wide = max(1, round((count * grid.columns / grid.rows) ** 0.5))
    high = -(-count // wide)
    x, y = np.linspace(b.west, b.east, wide + 1), np.linspace(b.south, b.north, high + 1)
    shapes = [
        shapely.box(x[i], y[j], x[i + 1], y[j + 1]) for j in range(high) for i in range(wide)
    ][:count]
    return Regions(tuple(f"box {n}" for n in range(len(shapes))), tuple(shapes))


def layer(grid: Grid, name: str) -> np.ndarray:
    """A smooth synthetic layer with some noise."""
    rows, columns = np.indices(grid.shape, np.float32)
    rng = np.random.default_rng(list(name.encode()))
    wave = np.sin(rows / 37) * np.cos(columns / 53) + 0.1 * rng.standard_normal(
        grid.shape, np.float32
    )
    if name == "exclusion":
        return np.where(wave < -0.5, 2, 0).astype(np.uint16)
    scale = {"suitability": (0.5, 0.3), "suitability_uncertainty": (0.05, 0.01)}.get(name, (90, 30))
    return (scale[0] + scale[1] * wave).astype(np.float32)


def plan(grid: Grid, count: int, answer: Connection) -> None:
    """Do all of planning and send the seconds of each part and the peak memory."""
    seconds = {}

    def timed(name: str, start: float) -> None:
        seconds[name] = time.perf_counter() - start

    regions = boxes(grid, count)
    before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1e6
    start = time.perf_counter()
    covers = coverage(regions, grid)
    timed("coverage", start)
    start = time.perf_counter()
    region_table(
        lambda name: layer(grid, name),
        covers,
        grid,
        ground_cover=0.3,
        costs=COSTS,
        by="suitability",
        error=ErrorModel(),
        flags=FLAGS,
    )
    timed("table", start)
    start = time.perf_counter()
    exclusion_losses(layer(grid, "exclusion"), covers, FLAGS)
    timed("losses", start)
    start = time.perf_counter()
    suitable = layer(grid, "suitability") > 0.6
    found, _ = find_zones(suitable, grid, minimum_area=50e6)
    timed(f"{len(found.names)} zones", start)
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1e6
    answer.send((seconds, before, peak))


def main() -> None:
    """Each case in a process of its own, for its own peak of memory."""
    context = multiprocessing.get_context("spawn")
    for name, grid in CASES.items():
        for count in (250, 4000):
            here, there = context.Pipe()
            worker = context.Process(target=plan, args=(grid, count, there))
            worker.start()
            seconds, before, peak = here.recv()
            worker.join()
            parts = ", ".join(f"{part} {value:.1f} s" for part, value in seconds.items())
            print(f"{name}, {count} regions: {parts}; peak {peak:.2f} GB (start {before:.2f})")


if __name__ == "__main__":
    main()
