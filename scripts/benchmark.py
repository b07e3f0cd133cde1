"""Measure the main job on synthetic inputs of a chosen resolution.

    python scripts/benchmark.py 0.25 [FOLDER]

Prints, from one run on one machine: seconds to check the inputs, to read and regrid them, to
compute on top of that, and to do the whole job; ratios; and the peak memory of the whole job. The
inputs are noise on smooth fields, three compressed NetCDF files, and say so.
"""

from __future__ import annotations

import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

import dask
import dask.array as da
import numpy as np
import xarray as xr
from threadpoolctl import threadpool_limits

from gridcool.config import load_settings
from gridcool.inputs.load import load_inputs
from gridcool.parts import grid_of, screen_dataset, specs_of, strip_rows

SETTINGS = """
[job]
output = "out"
[inputs.albedo]
path = "albedo.nc"
[inputs.cloud_fraction]
path = "cloud_fraction.nc"
[inputs.temperature_range]
path = "temperature_range.nc"
[regions]
boxes = 10.0
"""
FIELDS = {
    "albedo": ("1", lambda x, noise: 0.08 + 0.3 * x**2 + 0.05 * noise),
    "cloud_fraction": ("1", lambda x, noise: 0.1 + 0.7 * x + 0.15 * noise),
    "temperature_range": ("K", lambda x, noise: 14 - 9 * x + noise),
}
WHOLE_JOB = """
import resource, sys
from gridcool.cli import main
code = main(["screen", sys.argv[1], "--quiet"])
print("peak", resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1e6)
sys.exit(code)
"""


class Sink:
    """Takes blocks and forgets them."""

    def __setitem__(self, region: object, block: object) -> None:
        """Forget the block."""


def make_inputs(folder: Path, resolution: float) -> None:
    """Three compressed files of twelve months on a global grid."""
    rows, columns = round(180 / resolution), round(360 / resolution)
    latitude = 90 - resolution * (np.arange(rows) + 0.5)
    longitude = -180 + resolution * (np.arange(columns) + 0.5)
    rng = np.random.default_rng(1)
    wave = np.cos(np.deg2rad(3 * latitude))[:, None] * np.cos(np.deg2rad(2 * longitude))
    for name, (units, shape) in FIELDS.items():
        months = [shape((wave + 1) / 2, rng.random((rows, columns), np.float32)) for _ in range(12)]
        values = np.stack(months).astype(np.float32)
        dataset = xr.Dataset(
            {name: (("month", "latitude", "longitude"), values, {"units": units})},
            coords={"month": np.arange(1, 13), "latitude": latitude, "longitude": longitude},
            attrs={"comment": "synthetic, for measuring speed only"},
        )
        chunks = (12, min(rows, 64), columns)
        encoding = {name: {"zlib": True, "complevel": 1, "shuffle": True, "chunksizes": chunks}}
        dataset.to_netcdf(folder / f"{name}.nc", encoding=encoding)


def seconds(action: Callable[[], object]) -> float:
    """How long an action takes."""
    start = time.perf_counter()
    action()
    return time.perf_counter() - start


def drain(dataset: xr.Dataset) -> None:
    """Compute everything once and keep nothing."""
    arrays = [variable.data for variable in dataset.data_vars.values()]
    with dask.config.set(scheduler="threads"), threadpool_limits(1, "blas"):
        da.store(arrays, [Sink() for _ in arrays], lock=False)


def measure(folder: Path, resolution: float) -> None:
    """Print all figures."""
    make_inputs(folder, resolution)
    path = folder / "settings.toml"
    path.write_text(SETTINGS, encoding="utf-8")
    settings = load_settings(path)
    specs = specs_of(settings)
    grid = grid_of(settings, specs)
    rows = strip_rows(grid, settings)
    inputs = load_inputs(specs, grid, rows)
    checking = seconds(lambda: load_inputs(specs, grid, rows))
    reading = seconds(lambda: drain(inputs.dataset))
    both = seconds(lambda: drain(screen_dataset(inputs.dataset, settings)))
    start = time.perf_counter()
    command = [sys.executable, "-c", WHOLE_JOB, str(path)]
    whole = subprocess.run(command, check=True, capture_output=True, text=True)
    total = time.perf_counter() - start
    peak = float(whole.stdout.split("peak")[1])
    million = grid.rows * grid.columns / 1e6
    print(f"{resolution} degrees: {grid.rows} x {grid.columns} cells, strips of {rows} rows")
    print(f"check inputs    {checking:8.1f} s")
    print(f"read inputs     {reading:8.1f} s")
    print(
        f"compute         {both - reading:8.1f} s beyond reading ({both / reading:.1f} x reading)"
    )
    print(f"whole job       {total:8.1f} s, {total / million:.1f} s per million cells")
    print(f"write and rest  {total - checking - both:8.1f} s (layers, regions, start-up)")
    print(f"peak memory     {peak:8.2f} GB")


def main() -> None:
    """Measure at the resolution of the command line."""
    resolution = float(sys.argv[1])
    with tempfile.TemporaryDirectory() as scratch:
        measure(Path(sys.argv[2] if len(sys.argv) > 2 else scratch), resolution)


if __name__ == "__main__":
    main()
