"""Writing the layers: the same bytes however it is done, and all or nothing."""

from __future__ import annotations

import hashlib
import shutil
from collections.abc import Callable
from pathlib import Path

import dask
import dask.array as da
import netCDF4
import numpy as np
import pytest
import rasterio
import xarray as xr
from invented_layers import ATTRIBUTES, GRIDS, invented_layers

from gridcool.errors import InputDataError, OutputError
from gridcool.grid import Grid
from gridcool.products.layers import write_layers
from gridcool.products.verify import verify_layers
from gridcool.variables import layer_variables

Written = tuple[Grid, Path]
NAMES = tuple(layer_variables())
CLASSES = [name for name, layer in layer_variables().items() if layer.classes]


@pytest.fixture(scope="module")
def region(tmp_path_factory: pytest.TempPathFactory) -> Written:
    grid = GRIDS["region"]
    folder = tmp_path_factory.mktemp("region-alone")
    write_layers(invented_layers(grid), grid, folder, attributes=ATTRIBUTES)
    return grid, folder


def digests(folder: Path) -> dict[str, str]:
    files = sorted(path for path in folder.rglob("*") if path.is_file())
    return {
        str(path.relative_to(folder)): hashlib.sha256(path.read_bytes()).hexdigest()
        for path in files
    }


def test_bytes_do_not_depend_on_strips_or_threads(region: Written, tmp_path: Path) -> None:
    grid, folder = region
    expected = digests(folder)
    # The NetCDF besides, and the names of the classes.
    assert len(expected) == len(NAMES) + 1 + len(CLASSES)
    cuts: dict[str, tuple[int | tuple[int, ...], dict]] = {
        "thin": (7, {"scheduler": "synchronous"}),
        "whole": (grid.rows, {"num_workers": 1}),
        "uneven": ((1, 70, 2, 50, 27), {"num_workers": 3}),
    }
    for name, (rows, options) in cuts.items():
        target = tmp_path / name
        target.mkdir()
        with dask.config.set(**options):
            write_layers(invented_layers(grid, rows), grid, target, attributes=ATTRIBUTES)
        assert digests(target) == expected


def test_layers_in_any_shape_give_the_same_bytes(tmp_path: Path) -> None:
    grid = GRIDS["antimeridian"]
    for name, dataset in (
        ("lazy", invented_layers(grid)),
        ("loaded", invented_layers(grid).compute()),
        ("in tiles", invented_layers(grid).chunk(longitude=7)),
        ("transposed", invented_layers(grid).transpose("longitude", "latitude", "month", "season")),
    ):
        (tmp_path / name).mkdir()
        write_layers(dataset, grid, tmp_path / name, attributes=ATTRIBUTES)
    expected = digests(tmp_path / "lazy")
    for name in ("loaded", "in tiles", "transposed"):
        assert digests(tmp_path / name) == expected


def test_each_strip_is_computed_once_for_all_layers(tmp_path: Path) -> None:
    grid = Grid(0.0, 10.0, 1.0, 1.0, 8, 5)
    calls: list[int] = []

    def solve(block_info: dict) -> np.ndarray:
        location = block_info[None]["array-location"]
        calls.append(location[1][0])
        return np.full((13, location[1][1] - location[1][0], 5), location[1][0], np.float32)

    stack = da.map_blocks(solve, chunks=((13,), (3, 3, 2), (5,)), dtype=np.float32)
    calls.clear()
    dims = ("month", "latitude", "longitude")
    dataset = xr.Dataset(
        {
            "tilt": (dims[1:], stack[0]),
            "rejected_flux": (dims[1:], stack[1] + 1),
            "monthly_rejected_flux": (dims, stack[1:]),
        },
        coords={"month": range(1, 13), "latitude": grid.latitudes, "longitude": grid.longitudes},
    )
    steps: list[tuple[str, int, int]] = []
    write_layers(
        dataset, grid, tmp_path, attributes={}, on_progress=lambda *step: steps.append(step)
    )
    assert sorted(calls) == [0, 3, 6]
    for phase in ("computing", "writing", "verifying"):
        done, total = zip(*[step[1:] for step in steps if step[0] == phase], strict=True)
        assert list(done) == sorted(done)
        assert done[-1] == total[-1] == max(total)


def test_layers_computed_from_a_netcdf_that_is_read_meanwhile(tmp_path: Path) -> None:
    grid = Grid(0.0, 40.0, 0.25, 0.25, 160, 80)
    values = np.random.default_rng(3).random((12, *grid.shape), np.float32)
    coords = {"month": range(1, 13), "latitude": grid.latitudes, "longitude": grid.longitudes}
    source = xr.Dataset({"v": (("month", "latitude", "longitude"), values)}, coords=coords)
    source.to_netcdf(tmp_path / "in.nc")
    for attempt in range(4):
        folder = tmp_path / str(attempt)
        folder.mkdir()
        with (
            dask.config.set(num_workers=4),
            xr.open_dataset(tmp_path / "in.nc", chunks={"latitude": 10}) as opened,
        ):
            layers = xr.Dataset(
                {"monthly_rejected_flux": opened["v"], "rejected_flux": opened["v"].mean("month")}
            )
            write_layers(layers, grid, folder, attributes={})
        with xr.open_dataset(folder / "layers.nc") as result:
            np.testing.assert_array_equal(result["monthly_rejected_flux"], values)


def test_layers_without_any_value_and_constant_layers(tmp_path: Path) -> None:
    grid = GRIDS["region"]
    dims = ("latitude", "longitude")
    dataset = xr.Dataset(
        {
            "tilt": (dims, np.full(grid.shape, np.nan, np.float32)),
            "escape_fraction": (dims, np.full(grid.shape, np.float32(0.1))),
        },
        coords={"latitude": grid.latitudes, "longitude": grid.longitudes},
    )
    write_layers(dataset, grid, tmp_path, attributes={})
    with rasterio.open(tmp_path / "layers" / "tilt.tif") as file:
        assert file.tags(1) == {"STATISTICS_VALID_PERCENT": "0.0"}
    with rasterio.open(tmp_path / "layers" / "escape_fraction.tif") as file:
        assert float(file.tags(1)["STATISTICS_STDDEV"]) == 0.0
    with netCDF4.Dataset(tmp_path / "layers.nc") as file:
        assert "actual_range" not in file["tilt"].ncattrs()


def flipped(dataset: xr.Dataset) -> xr.Dataset:
    return dataset.isel(latitude=slice(None, None, -1))


def shifted(dataset: xr.Dataset) -> xr.Dataset:
    return dataset.assign_coords(longitude=dataset["longitude"] + 1.25)


def cropped(dataset: xr.Dataset) -> xr.Dataset:
    return dataset.isel(longitude=slice(1, None))


def renamed(dataset: xr.Dataset) -> xr.Dataset:
    return dataset.rename(tilt="tylt")


def monthless(dataset: xr.Dataset) -> xr.Dataset:
    return dataset.assign(monthly_rejected_flux=dataset["tilt"])


@pytest.mark.parametrize("spoil", [flipped, shifted, cropped, renamed, monthless])
def test_what_does_not_fit_the_grid_or_the_table_is_refused(
    spoil: Callable[[xr.Dataset], xr.Dataset], tmp_path: Path
) -> None:
    grid = GRIDS["antimeridian"]
    with pytest.raises(ValueError, match=r"the grid|declared layer|dimensions"):
        write_layers(spoil(invented_layers(grid)), grid, tmp_path, attributes={})
    assert not list(tmp_path.iterdir())


def test_a_failure_while_computing_passes_through_and_leaves_nothing(tmp_path: Path) -> None:
    grid = GRIDS["world"]

    def fail(block: np.ndarray, block_info: dict) -> np.ndarray:
        if block_info[0]["array-location"][0][0] > 60:
            raise InputDataError("albedo holds 7")
        return block

    dataset = invented_layers(grid, 20)
    dataset["tilt"] = dataset["tilt"].copy(data=dataset["tilt"].data.map_blocks(fail, dtype="f4"))
    with pytest.raises(InputDataError, match="albedo holds 7"):
        write_layers(dataset, grid, tmp_path, attributes={})
    assert not list(tmp_path.iterdir())


def test_a_folder_that_holds_layers_already_is_left_alone(tmp_path: Path) -> None:
    grid = GRIDS["cell"]
    write_layers(invented_layers(grid), grid, tmp_path, attributes={})
    before = digests(tmp_path)
    with pytest.raises(OutputError, match="File exists"):
        write_layers(invented_layers(grid), grid, tmp_path, attributes={})
    assert digests(tmp_path) == before


def damage_bytes(path: Path) -> None:
    data = bytearray(path.read_bytes())
    middle = len(data) * 2 // 3
    data[middle : middle + 64] = bytes(64)
    path.write_bytes(data)


def damage_truncate(path: Path) -> None:
    path.write_bytes(path.read_bytes()[: path.stat().st_size // 2])


@pytest.mark.parametrize("damage", [damage_bytes, damage_truncate, Path.unlink])
@pytest.mark.parametrize("name", ["layers/monthly_rejected_flux.tif", "layers.nc"])
def test_verification_finds_damage(
    name: str, damage: Callable[[Path], None], region: Written, tmp_path: Path
) -> None:
    copy = shutil.copytree(region[1], tmp_path / "copy")
    verify_layers(copy)
    damage(copy / name)
    with pytest.raises(OutputError):
        verify_layers(copy)


def test_verification_finds_other_cells(region: Written, tmp_path: Path) -> None:
    copy = shutil.copytree(region[1], tmp_path / "copy")
    with netCDF4.Dataset(copy / "layers.nc", "a") as file:
        file["monthly_surface_shortwave"][11, 149, 599] = 1.0
    with pytest.raises(OutputError, match=r"monthly_surface_shortwave.tif .*its cells"):
        verify_layers(copy)
    copy = shutil.copytree(region[1], tmp_path / "second")
    layers = copy / "layers"
    shutil.copy(layers / "rejected_flux.tif", layers / "rejected_flux_flat.tif")
    with pytest.raises(OutputError, match=r"rejected_flux_flat.tif is damaged"):
        verify_layers(copy)
