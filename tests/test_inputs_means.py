"""Monthly means from files of every storage: the same values, each piece unpacked once."""

from __future__ import annotations

import pickle
from collections import Counter
from pathlib import Path

import netCDF4
import numpy as np
import pytest
import xarray as xr
from numpy.typing import NDArray

from gridcool.errors import OutputError
from gridcool.inputs import means, scratch, stored
from gridcool.inputs.field import Field, open_field
from gridcool.inputs.load import load_inputs, target_grid
from gridcool.inputs.spec import InputSpec

LATITUDE, LONGITUDE = np.arange(-77.5, 80, 5), np.arange(177.5, -180, -5)
SHAPE = (len(LATITUDE), len(LONGITUDE))


def write(
    path: Path,
    steps: NDArray[np.integer],
    unit: str,
    values: NDArray[np.floating],
    chunks: tuple[int, ...] | None,
) -> InputSpec:
    """An albedo file, south first and east first, in the pieces asked for."""
    with netCDF4.Dataset(path, "w") as file:
        for name, labels in (("time", steps), ("lat", LATITUDE), ("lon", LONGITUDE)):
            file.createDimension(name, len(labels))
            file.createVariable(name, "f8", (name,))[:] = labels
        file["time"].units = unit
        storage = {"contiguous": True} if chunks is None else {"chunksizes": chunks, "zlib": True}
        albedo = file.createVariable("albedo", "f4", ("time", "lat", "lon"), **storage)
        albedo[:] = values
    return InputSpec("albedo", path)


def drawn(steps: int) -> NDArray[np.float64]:
    """Values with gaps, as the file has them."""
    rng = np.random.default_rng(steps)
    values = rng.uniform(0.1, 0.9, (steps, *SHAPE))
    values[rng.random(values.shape) < 0.1] = np.nan
    return values


def monthly(folder: Path, chunks: tuple[int, ...] | None) -> tuple[InputSpec, NDArray[np.floating]]:
    values = drawn(36)
    spec = write(folder / "m.nc", np.arange(36), "months since 2001-01-01", values, chunks)
    return spec, values.reshape(3, 12, *SHAPE)[..., ::-1, ::-1]


class Loads:
    """Counts how often each stored number is read."""

    def __init__(self, monkeypatch: pytest.MonkeyPatch) -> None:
        self.seen: Counter[tuple[int, int, int]] = Counter()
        original = stored.Stored.load

        def load(this: stored.Stored, steps: slice, rows: slice, columns: slice) -> NDArray:
            for step in range(steps.start, steps.stop):
                self.seen[step, rows.start // 8, columns.start // 16] += 1
            return original(this, steps, rows, columns)

        monkeypatch.setattr(stored.Stored, "load", load)


def whole(field: Field, rows: int = 5) -> NDArray[np.float32]:
    """Everything, by strips."""
    count = len(field.latitude)
    strips = [slice(n, min(n + rows, count)) for n in range(0, count, rows)]
    return np.concatenate([field.read(strip) for strip in strips], axis=-2)


@pytest.mark.parametrize("working", [1, 10**9])
@pytest.mark.parametrize("in_memory", [0, 10**9])
@pytest.mark.parametrize("chunks", [None, (1, *SHAPE), (36, 8, 16), (5, 32, 16), (1, 2, 72)])
def test_storage_changes_no_value(
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
    chunks: tuple[int, ...] | None,
    in_memory: int,
    working: int,
) -> None:
    """Any pieces, in memory or on disk, in few tiles or many."""
    monkeypatch.setattr(scratch, "IN_MEMORY", in_memory)
    monkeypatch.setattr(means, "WORKING_BYTES", working)
    monkeypatch.setattr(means, "PASSING_CELLS", 5 * SHAPE[1])
    spec, values = monthly(tmp_path, chunks)
    field = open_field(spec)
    known = np.isfinite(values)
    total = np.where(known, values, 0).sum(axis=0)
    expected = np.where(known.any(axis=0), total / np.maximum(known.sum(axis=0), 1), np.nan)
    np.testing.assert_allclose(whole(field), expected, rtol=1e-6)
    several = known.sum(axis=0) > 1
    spread = field.read_standard_error(slice(0, SHAPE[0]))
    assert np.isnan(spread[~several]).all()
    deviation = np.where(known, values - expected, 0)
    count = np.where(several, known.sum(axis=0), 2)
    error = np.sqrt((deviation**2).sum(axis=0) / (count - 1) / count)
    np.testing.assert_allclose(spread[several], error[several], rtol=1e-4, atol=1e-7)


@pytest.mark.parametrize("chunks", [(1, *SHAPE), (12, 8, 16), (3, 8, 72)])
def test_each_piece_is_unpacked_once(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, chunks: tuple[int, ...]
) -> None:
    """By the check and by all strips together, and whole pieces at a time."""
    loads = Loads(monkeypatch)
    values = drawn(12)
    months = np.arange(12)
    spec = write(tmp_path / "a.nc", months, "months since 2001-01-01", values, chunks)
    grid = target_grid([spec], "albedo", None, None)
    loaded = load_inputs([spec], grid, 3).dataset["albedo"].compute()
    np.testing.assert_allclose(loaded, values[:, ::-1, ::-1], rtol=1e-6)
    assert set(loads.seen.values()) == {1}
    assert {step for step, _, _ in loads.seen} == set(range(12))


def test_what_lies_in_one_piece_and_order_is_read_from_the_file(tmp_path: Path) -> None:
    months = np.arange(12)
    spec = write(tmp_path / "a.nc", months, "months since 2001-01-01", drawn(12), None)
    field = open_field(spec)
    whole(field)
    assert field.means._kept is None


def test_another_process_reads_the_file_itself(tmp_path: Path) -> None:
    spec, _ = monthly(tmp_path, (1, *SHAPE))
    field = open_field(spec)
    before = whole(field)
    copied: Field = pickle.loads(pickle.dumps(field))
    assert copied.means._kept is None
    np.testing.assert_array_equal(whole(copied), before)


@pytest.mark.parametrize("chunks", [None, (400, 8, 16), (1, *SHAPE)])
def test_days_of_a_year_are_not_years(tmp_path: Path, chunks: tuple[int, ...] | None) -> None:
    """The standard error comes from three yearly means, not from ninety days."""
    days = np.arange(3 * 365)
    day = xr.date_range("2001-01-01", periods=len(days), calendar="noleap", use_cftime=True)
    year, month = np.array([d.year for d in day]), np.array([d.month for d in day])
    rng = np.random.default_rng(0)
    level = 0.4 + 0.1 * rng.standard_normal((3, *SHAPE))  # what a whole year has in common
    weather = 0.02 * rng.standard_normal((len(days), *SHAPE))
    values = (level[year - 2001] + weather).clip(0.01, 0.99).astype(np.float32)
    path = tmp_path / "days.nc"
    spec = write(path, days, "days since 2001-01-01", values, chunks)
    with netCDF4.Dataset(path, "a") as file:
        file["time"].calendar = "noleap"
    field = open_field(spec)
    found = field.read_standard_error(slice(0, SHAPE[0]))
    yearly = np.stack(
        [
            [values[(year == y) & (month == m)].mean(axis=0) for m in range(1, 13)]
            for y in (2001, 2002, 2003)
        ]
    )
    expected = yearly.std(axis=0, ddof=1)[:, ::-1, ::-1] / np.sqrt(3)
    np.testing.assert_allclose(found, expected, rtol=1e-3, atol=1e-6)
    january = values[month == 1]
    as_years = january.std(axis=0, ddof=1)[::-1, ::-1] / np.sqrt(len(january))
    assert as_years.mean() < 0.3 * found[0].mean()


def test_years_in_disorder_are_still_years(tmp_path: Path) -> None:
    spec, values = monthly(tmp_path, (36, 8, 16))
    mixed = np.random.default_rng(1).permutation(36)
    shuffled = values[..., ::-1, ::-1].reshape(36, *SHAPE)[mixed]
    other = write(tmp_path / "x.nc", mixed, "months since 2001-01-01", shuffled, (36, 8, 16))
    rows = slice(0, SHAPE[0])
    one, two = open_field(spec), open_field(other)
    np.testing.assert_allclose(one.read(rows), two.read(rows), rtol=1e-6)
    expected = one.read_standard_error(rows)
    np.testing.assert_allclose(expected, two.read_standard_error(rows), rtol=1e-5, atol=1e-9)


@pytest.mark.parametrize("in_memory", [0, 10**9])
def test_months_of_one_year_tell_no_spread(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, in_memory: int
) -> None:
    """Eighteen steps: two years of the first six months, one of the others."""
    monkeypatch.setattr(scratch, "IN_MEMORY", in_memory)
    values = drawn(18)
    steps = np.arange(18)
    spec = write(tmp_path / "a.nc", steps, "months since 2001-01-01", values, (1, *SHAPE))
    field = open_field(spec)
    found = field.read_standard_error(slice(0, SHAPE[0]))
    assert np.isnan(found[6:]).all()
    assert np.isfinite(found[:6]).mean() > 0.7
    later = field.read(slice(0, SHAPE[0]))[6:]
    np.testing.assert_allclose(later, values[6:12, ::-1, ::-1], rtol=1e-6)


def test_no_room_for_temporary_data_is_said(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def full(_file: int, _offset: int, _size: int) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(scratch.os, "posix_fallocate", full)
    monkeypatch.setattr(scratch, "IN_MEMORY", 0)
    spec, _ = monthly(tmp_path, (1, *SHAPE))
    with pytest.raises(OutputError, match=r"no room for 0.0 GB of temporary data.*TMPDIR"):
        open_field(spec).read(slice(0, 4))
