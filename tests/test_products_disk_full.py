"""A full disk, for real: one clear error, nothing left behind, at whatever file it strikes."""

from __future__ import annotations

import os
import shutil
import subprocess
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import pytest

from gridcool.grid import Grid
from gridcool.release.publish import needed_bytes

# 12 bands of 360 x 720 cells of noise: 12.4 MB staged, then the copies.
WRITE = """
import os, resource, sys
from pathlib import Path
import numpy as np
import xarray as xr
from gridcool.errors import OutputError
from gridcool.grid import Grid
from gridcool.products.layers import write_layers

folder, limit = Path(sys.argv[1]), int(sys.argv[2])
if limit:
    resource.setrlimit(resource.RLIMIT_FSIZE, (limit, limit))
grid = Grid(-180.0, 90.0, 0.5, 0.5, 360, 720)
values = np.random.default_rng(0).normal(100, 5, (12, 360, 720)).astype("f4")
dataset = xr.Dataset(
    {
        "monthly_rejected_flux": (("month", "latitude", "longitude"), values),
        "tilt": (("latitude", "longitude"), values[0]),
    },
    coords={"month": range(1, 13), "latitude": grid.latitudes, "longitude": grid.longitudes},
).chunk(latitude=32)
try:
    write_layers(dataset, grid, folder, attributes={})
    print("written")
except OutputError as error:
    print(error)
print(sorted(os.listdir(folder)))
"""
GRID = Grid(-180.0, 90.0, 0.5, 0.5, 360, 720)
LAYERS = ["monthly_rejected_flux", "tilt"]


def write(folder: Path, limit: int = 0) -> list[str]:
    command = [sys.executable, "-c", WRITE, str(folder), str(limit)]
    told = subprocess.run(command, capture_output=True, text=True, check=False)
    assert told.returncode == 0, told.stderr
    return told.stdout.splitlines()


@contextmanager
def small_disk(folder: Path, megabytes: int) -> Iterator[Path]:
    folder.mkdir()
    mount = ["mount", "-t", "tmpfs", "-o", f"size={megabytes}m", "tmpfs", str(folder)]
    if os.name != "posix" or os.geteuid() != 0 or shutil.which("mount") is None:
        pytest.skip("mounting a small disk needs root")
    if subprocess.run(mount, capture_output=True, check=False).returncode:
        pytest.skip("this system does not let a small disk be mounted")
    try:
        yield folder
    finally:
        subprocess.run(["umount", str(folder)], check=True)


@pytest.mark.parametrize("megabytes", [3, 12, 14, 20, 30])
def test_a_full_disk_is_told_and_cleared(megabytes: int, tmp_path: Path) -> None:
    with small_disk(tmp_path / "disk", megabytes) as disk:
        sentence, left = write(disk)
        assert "could not be written" in sentence
        assert "(now 0.0 MB)" in sentence
        assert left == "[]"
        assert shutil.disk_usage(disk).used < 100_000


def test_the_room_asked_for_is_enough(tmp_path: Path) -> None:
    megabytes = -(-needed_bytes(GRID, LAYERS) // 2**20)
    with small_disk(tmp_path / "disk", megabytes) as disk:
        assert write(disk) == ["written", "['layers', 'layers.nc']"]


@pytest.mark.parametrize("limit", [500_000, 5_000_000, 9_000_000, 12_000_000])
def test_a_file_that_may_not_grow_is_told_and_cleared(limit: int, tmp_path: Path) -> None:
    """The same for users without root: the system limits the size of each file."""
    sentence, left = write(tmp_path, limit)
    assert "could not be written" in sentence
    assert left == "[]"
