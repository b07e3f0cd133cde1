"""Classic NetCDF files that break off: the library would read zeros, so they are refused."""

from __future__ import annotations

from pathlib import Path

import netCDF4
import numpy as np
import pytest

from gridcool.cli import main
from gridcool.errors import InputDataError
from gridcool.inputs.load import describe
from gridcool.inputs.opening import open_file
from gridcool.inputs.spec import InputSpec

FORMATS = ("NETCDF3_CLASSIC", "NETCDF3_64BIT_OFFSET", "NETCDF3_64BIT_DATA")
DATA = Path(__file__).parents[2] / "shared" / "data"
LATITUDE, LONGITUDE = np.arange(72.0, -73, -36), np.arange(-160.0, 180, 40)


def write(path: Path, kind: str, layout: str, dtype: str = "f4") -> int:
    """A whole file of monthly albedo; returns where its last value ends.

    ``layout``: "fixed", "records" (one variable that grows), or "mixed" (two that grow, of which
    the second needs filling up, and a fixed one before them).
    """
    with netCDF4.Dataset(path, "w", format=kind) as file:
        file.title = "invented numbers for a test"
        file.createDimension("month", 12 if layout == "fixed" else None)
        file.createDimension("lat", len(LATITUDE))
        file.createDimension("lon", len(LONGITUDE))
        file.createVariable("lat", "f8", ("lat",))[:] = LATITUDE
        file.createVariable("lon", "f4", ("lon",))[:] = LONGITUDE
        albedo = file.createVariable("albedo", dtype, ("month", "lat", "lon"))
        albedo.units = "1"
        albedo.scale_factor = np.float32(0.01)
        albedo.set_auto_maskandscale(False)
        albedo[:] = np.full((12, len(LATITUDE), len(LONGITUDE)), 30)
        if layout == "mixed":
            file.createVariable("flag", "i1", ("month",))[:] = np.arange(12)
    return path.stat().st_size


@pytest.mark.parametrize("layout", ["fixed", "records", "mixed"])
@pytest.mark.parametrize("kind", FORMATS)
def test_a_file_cut_anywhere_is_refused(tmp_path: Path, kind: str, layout: str) -> None:
    path = tmp_path / "albedo.nc"
    size = write(path, kind, layout)
    whole = path.read_bytes()
    assert not describe(InputSpec("albedo", path)).errors
    for length in (4, 9, 100, size // 3, size // 2, size - 1000, size - 8):
        path.write_bytes(whole[:length])
        errors = describe(InputSpec("albedo", path)).errors
        assert len(errors) == 1, length
        assert "albedo.nc" in errors[0]
        assert "cut off" in errors[0] or "within its header" in errors[0]
        assert errors[0].endswith("fetch or write it again.")


@pytest.mark.parametrize("kind", FORMATS)
@pytest.mark.parametrize("dtype", ["i1", "i2", "f4", "f8"])
def test_the_length_is_known_to_the_byte(tmp_path: Path, kind: str, dtype: str) -> None:
    """One growing variable is not filled up between records; its last value may end the file."""
    path = tmp_path / "albedo.nc"
    size = write(path, kind, "records", dtype)
    open_file(path)
    with path.open("r+b") as file:
        file.truncate(size - 1)
    with pytest.raises(InputDataError, match=f"at least {size} bytes, but there are {size - 1};"):
        open_file(path)


@pytest.mark.parametrize("kind", FORMATS)
def test_filling_up_at_the_end_may_be_left_out(tmp_path: Path, kind: str) -> None:
    """Not every program fills the last variable up to four bytes; its values are all there."""
    path = tmp_path / "albedo.nc"
    size = write(path, kind, "mixed")
    with path.open("r+b") as file:
        file.truncate(size - 3)
    open_file(path)
    with path.open("r+b") as file:
        file.truncate(size - 4)
    with pytest.raises(InputDataError, match="cut off"):
        open_file(path)


def test_the_library_would_have_read_zeros(tmp_path: Path) -> None:
    """Why the length is checked; should the library refuse one day, the check may go."""
    path = tmp_path / "albedo.nc"
    size = write(path, "NETCDF3_CLASSIC", "fixed")
    with path.open("r+b") as file:
        file.truncate(size // 2)
    with netCDF4.Dataset(path) as file:
        file["albedo"].set_auto_maskandscale(False)
        assert file["albedo"][-1, -1, -1] == 0


def test_records_of_a_stream_are_counted_by_the_file(tmp_path: Path) -> None:
    path = tmp_path / "albedo.nc"
    write(path, "NETCDF3_CLASSIC", "records")
    whole = bytearray(path.read_bytes())
    whole[4:8] = b"\xff" * 4
    path.write_bytes(whole)
    open_file(path)


@pytest.mark.skipif(not DATA.is_dir(), reason="the real data are not beside this checkout")
def test_whole_real_files_are_not_refused() -> None:
    seen = 0
    for path in sorted([*DATA.rglob("*.nc"), *DATA.rglob("*.cdf")]):
        with path.open("rb") as file:
            seen += file.read(3) == b"CDF"
        open_file(path)
    assert seen > 5


def test_the_program_ends_with_the_code_of_bad_input(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = tmp_path / "albedo.nc"
    size = write(path, "NETCDF3_64BIT_OFFSET", "records")
    with path.open("r+b") as file:
        file.truncate(size // 2)
    settings = tmp_path / "project.toml"
    names = ("albedo", "cloud_fraction", "temperature_range")
    inputs = "".join(f'[inputs.{name}]\npath = "albedo.nc"\n' for name in names)
    settings.write_text(f'[job]\noutput = "out"\n{inputs}', encoding="utf-8")
    assert main(["check", str(settings)]) == 3
    said = capsys.readouterr().err
    assert "albedo.nc" in said
    assert "cut off" in said
