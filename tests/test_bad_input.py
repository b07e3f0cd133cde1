"""Bad input: one clear sentence, the right exit code, no traceback, the last release untouched."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from gridcool.cli import main

LATITUDE, LONGITUDE = np.arange(38.0, -39, -4), np.arange(-178.0, 180, 4)
SETTINGS = """
[job]
output = "out"
[inputs.albedo]
path = "albedo.nc"
[inputs.cloud_fraction]
path = "cloud.nc"
[inputs.temperature_range]
path = "range.nc"
"""


def write(
    path: Path, name: str, values: np.ndarray, units: str | None, west: float = -178.0
) -> None:
    """One file of monthly fields on the 4° grid."""
    attributes = {} if units is None else {"units": units}
    dims = ("month", "lat", "lon")
    longitude = LONGITUDE[: values.shape[2]] - LONGITUDE[0] + west
    xr.Dataset(
        {name: (dims, values.astype(np.float32), attributes)},
        coords={"month": np.arange(1, len(values) + 1), "lat": LATITUDE, "lon": longitude},
    ).to_netcdf(path)


def field(low: float, high: float, months: int = 12) -> np.ndarray:
    rng = np.random.default_rng(1)
    return rng.uniform(low, high, (months, len(LATITUDE), len(LONGITUDE)))


@pytest.fixture
def project(tmp_path: Path) -> Path:
    """Good inputs and a published release."""
    write(tmp_path / "albedo.nc", "albedo", field(0.1, 0.4), "1")
    write(tmp_path / "cloud.nc", "clt", field(0.05, 0.95), "1")
    write(tmp_path / "range.nc", "dtr", field(3, 16), "K")
    path = tmp_path / "project.toml"
    path.write_text(SETTINGS, encoding="utf-8")
    return path


def missing(folder: Path) -> None:
    (folder / "cloud.nc").unlink()


def wrong_variable(folder: Path) -> None:
    text = SETTINGS.replace('"cloud.nc"', '"cloud.nc"\nvariable = "tcdc"')
    (folder / "project.toml").write_text(text, encoding="utf-8")


def percent(folder: Path) -> None:
    write(folder / "cloud.nc", "clt", field(5, 95), None)


def absolute(folder: Path) -> None:
    write(folder / "range.nc", "dtr", field(280, 300), "K")


def albedo_of_seven(folder: Path) -> None:
    values = field(0.1, 0.4)
    values[6, 3, 5] = 7
    write(folder / "albedo.nc", "albedo", values, "1")


def eleven_months(folder: Path) -> None:
    write(folder / "cloud.nc", "clt", field(0, 1, 11), "1")


def nothing_but_nan(folder: Path) -> None:
    write(folder / "albedo.nc", "albedo", field(0, 1) * np.nan, "1")


def elsewhere(folder: Path) -> None:
    write(folder / "albedo.nc", "albedo", field(0.1, 0.4)[:, :, :10], "1", west=2.0)
    write(folder / "cloud.nc", "clt", field(0, 1)[:, :, :10], "1", west=102.0)


def cut_short(folder: Path) -> None:
    whole = (folder / "cloud.nc").read_bytes()
    (folder / "cloud.nc").write_bytes(whole[: len(whole) // 2])


def data_broken(folder: Path) -> None:
    """A file whose header is whole and whose compressed data are not."""
    path = folder / "cloud.nc"
    with xr.open_dataset(path) as file:
        dataset = file.load()
    dataset["clt"].encoding = {"zlib": True, "complevel": 4}
    dataset.to_netcdf(path)
    whole = bytearray(path.read_bytes())
    middle = len(whole) // 2
    whole[middle : middle + 400] = bytes(400)
    path.write_bytes(whole)


def text_file(folder: Path) -> None:
    (folder / "cloud.nc").write_text("latitude longitude cloud\n1 2 3\n", encoding="utf-8")


def unknown_key(folder: Path) -> None:
    text = SETTINGS + '[sky]\niradiance = "cloud"\n'
    (folder / "project.toml").write_text(text, encoding="utf-8")


def swapped(folder: Path) -> None:
    write(folder / "high.nc", "tasmax", field(5, 9), "degC")
    write(folder / "low.nc", "tasmin", field(15, 19), "degC")
    text = SETTINGS.replace(
        '[inputs.temperature_range]\npath = "range.nc"',
        '[inputs.temperature_maximum]\npath = "high.nc"\n'
        '[inputs.temperature_minimum]\npath = "low.nc"',
    )
    (folder / "project.toml").write_text(text, encoding="utf-8")


CASES: list[tuple[Callable[[Path], None], int, list[str]]] = [
    (missing, 3, ["cloud_fraction", "cloud.nc", "does not exist", "check the path"]),
    (wrong_variable, 3, ["cloud.nc", "no variable tcdc", "clt"]),
    (percent, 3, ["cloud.nc", "clt", "outside the possible 0 to 1", 'units = "percent"']),
    (absolute, 3, ["range.nc", "dtr", "absolute temperatures", "temperature_maximum"]),
    (albedo_of_seven, 3, ["albedo.nc", "1 of 21600", "worst 7", "26.00 N", "July"]),
    (eleven_months, 3, ["cloud.nc", "clt", "11 steps", "twelve months"]),
    (nothing_but_nan, 3, ["albedo.nc", "every value is missing", "fill value"]),
    (elsewhere, 3, ["cloud.nc", "does not overlap the target grid", "correct"]),
    (cut_short, 3, ["cloud.nc", "damaged or incomplete"]),
    (data_broken, 3, ["cloud.nc", "clt", "damaged or incomplete"]),
    (text_file, 3, ["cloud.nc", "plain text, not NetCDF"]),
    (unknown_key, 2, ["project.toml", "sky.iradiance", "did you mean irradiance?"]),
    (swapped, 3, ["temperature_maximum", "swapped"]),
]


@pytest.mark.parametrize(("spoil", "code", "pieces"), CASES, ids=[c[0].__name__ for c in CASES])
def test_bad_input_ends_in_one_sentence(
    spoil: Callable[[Path], None],
    code: int,
    pieces: list[str],
    project: Path,
    capsys: pytest.CaptureFixture[str],
) -> None:
    assert main(["screen", str(project), "--quiet"]) == 0
    out = project.parent / "out"
    before = (out / "current").readlink()
    capsys.readouterr()
    spoil(project.parent)
    assert main(["screen", str(project), "--quiet"]) == code
    said = capsys.readouterr().err
    assert said.startswith("gridcool: ")
    assert "Traceback" not in said
    assert said.count("\n") == 1
    for piece in pieces:
        assert piece in said
    assert (out / "current").readlink() == before
    assert not list((out / ".work").glob("staging-*"))


def test_all_problems_are_told_at_once(project: Path, capsys: pytest.CaptureFixture[str]) -> None:
    missing(project.parent)
    albedo_of_seven(project.parent)
    assert main(["screen", str(project), "--quiet"]) == 3
    said = capsys.readouterr().err
    assert "2 problems" in said
    assert "cloud.nc" in said
    assert "worst 7" in said
