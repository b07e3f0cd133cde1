"""Kill runs at random moments and look at what is left.

    python scripts/fault_study.py [KILLS]

A small invented project is screened, changed, and run again and again; each run is killed at a
random moment (SIGKILL), half of them runs of `screen`, half of `refresh`. After each kill `current`
must be a whole release, the old or the new one, and at the end a run must go on to the very data
that an undisturbed run gives. Then ten runs start at once. Prints how many were tried and survived.
"""

from __future__ import annotations

import random
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numpy as np
import rasterio
import xarray as xr

from gridcool.release.manifest import read_manifest
from gridcool.release.verify import release_problems

SETTINGS = """
[job]
output = "OUT"
[inputs.albedo]
path = "albedo.nc"
[inputs.cloud_fraction]
path = "cloud.nc"
[sky]
snow_albedo = SNOW
[regions]
boxes = 20.0
[maps]
layers = ["tilt"]
coastlines = false
[release]
keep = 2
"""


def make_project(folder: Path) -> None:
    """Two small invented inputs on a 1° grid."""
    latitude, longitude = np.arange(-39.5, 40), np.arange(0.5, 120)
    rng = np.random.default_rng(5)
    for name, low, high in (("albedo", 0.1, 0.4), ("cloud_fraction", 0.05, 0.95)):
        values = rng.uniform(low, high, (12, len(latitude), len(longitude))).astype(np.float32)
        dataset = xr.Dataset(
            {name: (("month", "lat", "lon"), values, {"units": "1"})},
            coords={"month": np.arange(1, 13), "lat": latitude, "lon": longitude},
        )
        dataset.to_netcdf(folder / f"{name.split('_')[0]}.nc")


def settings(folder: Path, output: str, snow: float) -> Path:
    """A settings file that asks for another result with every value of ``snow``."""
    path = folder / f"{output}.toml"
    text = SETTINGS.replace("OUT", output).replace("SNOW", f"{snow:.4f}")
    path.write_text(text, encoding="utf-8")
    return path


def start(command: str, path: Path) -> subprocess.Popen[bytes]:
    """A run in a process of its own."""
    return subprocess.Popen(
        [sys.executable, "-m", "gridcool", command, str(path), "--quiet"],
        stdout=subprocess.DEVNULL,
        stderr=subprocess.DEVNULL,
    )


def cells(release: Path) -> dict[str, bytes]:
    """The data of all layers."""
    found = {}
    for path in sorted((release / "layers").glob("*.tif")):
        with rasterio.open(path) as file:
            found[path.stem] = file.read().tobytes()
    return found


def main() -> None:
    """Kill, look, and count."""
    kills = int(sys.argv[1]) if len(sys.argv) > 1 else 50
    dice = random.Random(7)
    with tempfile.TemporaryDirectory() as scratch:
        folder = Path(scratch)
        make_project(folder)
        began = time.monotonic()
        assert start("screen", settings(folder, "out", 0.5)).wait() == 0
        whole = time.monotonic() - began
        current = folder / "out" / "current"
        sound = moved = 0
        for number in range(kills):
            before = read_manifest(current).release
            path = settings(folder, "out", 0.6 + number / 1000)
            run = start(("screen", "refresh")[number % 2], path)
            time.sleep(dice.uniform(0, 1.1 * whole))
            run.kill()
            run.wait()
            problems = list(release_problems(current))
            after = read_manifest(current).release
            sound += not problems
            moved += after != before
            if problems:
                print(f"kill {number}: {problems}")
        print(
            f"{kills} kills within {1.1 * whole:.1f} s of a run's start: {sound} times current was"
        )
        print(f"whole ({moved} times already the new release, else the old one)")
        last = settings(folder, "out", 0.45)
        assert start("screen", last).wait() == 0
        assert start("screen", settings(folder, "plain", 0.45)).wait() == 0
        same = cells(current) == cells(folder / "plain" / "current")
        print(f"resumed data those of an undisturbed run, byte for byte: {same}")
        left = list((folder / "out" / ".work").glob("staging-*"))
        print(f"staging folders left: {len(left)}")
        runs = [start("screen", settings(folder, "out", 0.47)) for _ in range(10)]
        codes = sorted(run.wait() for run in runs)
        print(f"ten at once: exit codes {codes}; problems {list(release_problems(current))}")


if __name__ == "__main__":
    main()
