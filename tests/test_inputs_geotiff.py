"""GeoTIFFs whose bands differ, or have a mask beside them."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
import rasterio
from rasterio.enums import ColorInterp

from gridcool.inputs.field import open_field
from gridcool.inputs.load import describe
from gridcool.inputs.spec import InputSpec

ROWS, COLUMNS = 6, 8


def stored(bands: int = 12) -> np.ndarray:
    return np.random.default_rng(0).integers(10, 90, (bands, ROWS, COLUMNS)).astype(np.int16)


def write(path: Path, values: np.ndarray, **profile: Any) -> rasterio.io.DatasetWriter:
    bands, rows, columns = values.shape
    file = rasterio.open(
        path, "w", driver="GTiff", count=bands, height=rows, width=columns, dtype=values.dtype,
        crs="EPSG:4326", transform=rasterio.Affine(1, 0, 10, 0, -1, 20), **profile,
    )  # fmt: skip
    file.write(values)
    return file


def read(path: Path, name: str = "albedo", **more: Any) -> np.ndarray:
    return open_field(InputSpec(name, path, **more)).read(slice(0, ROWS))


def test_each_band_has_its_own_scale_and_offset(tmp_path: Path) -> None:
    values, scales = stored(), [0.01] * 11 + [0.005]
    offsets = [0.0] * 6 + [0.05] * 6
    with write(tmp_path / "a.tif", values, nodata=-1) as file:
        file.scales, file.offsets = scales, offsets
    expected = values * np.array(scales)[:, None, None] + np.array(offsets)[:, None, None]
    np.testing.assert_allclose(read(tmp_path / "a.tif"), expected, rtol=1e-6)


def test_one_scale_for_all_stays_packed(tmp_path: Path) -> None:
    values = stored()
    values[3, 2, 2] = -1
    with write(tmp_path / "a.tif", values, nodata=-1) as file:
        file.scales = [0.01] * 12
    found = read(tmp_path / "a.tif")
    assert np.isnan(found[3, 2, 2])
    assert np.isnan(found).sum() == 1
    np.testing.assert_allclose(found[0], values[0] * 0.01, rtol=1e-6)


@pytest.mark.parametrize("internal", [True, False])
@pytest.mark.parametrize("nodata", [None, -1])
def test_a_mask_beside_the_data_is_heeded(
    tmp_path: Path, internal: bool, nodata: int | None
) -> None:
    values = stored()
    mask = np.full((ROWS, COLUMNS), 255, np.uint8)
    mask[2:4, 5] = 0
    with (
        rasterio.Env(GDAL_TIFF_INTERNAL_MASK=internal),
        write(tmp_path / "a.tif", values, nodata=nodata) as file,
    ):
        file.scales = [0.01] * 12
        file.write_mask(mask)
    found = read(tmp_path / "a.tif")
    np.testing.assert_array_equal(np.isnan(found), np.broadcast_to(mask == 0, found.shape))
    np.testing.assert_allclose(found[:, 0], values[:, 0] * 0.01, rtol=1e-6)


def test_transparency_is_a_mask_and_no_month(tmp_path: Path) -> None:
    values = np.concatenate([stored(12), np.full((1, ROWS, COLUMNS), 255, np.int16)])
    values[12, 1, 1] = 0
    path = tmp_path / "a.tif"
    with write(path, values.astype(np.uint8), photometric="minisblack") as file:
        file.scales = [0.01] * 13
    with rasterio.open(path, "r+") as file:
        file.colorinterp = [ColorInterp.gray, *[ColorInterp.undefined] * 11, ColorInterp.alpha]
    with rasterio.open(path) as file:
        assert file.colorinterp[12] == ColorInterp.alpha
    found = read(path)
    assert found.shape == (12, ROWS, COLUMNS)
    assert np.isnan(found[:, 1, 1]).all()
    assert np.isfinite(found).sum() == found.size - 12


def test_bands_of_several_units_are_refused(tmp_path: Path) -> None:
    with write(tmp_path / "a.tif", stored()) as file:
        file.units = ["%"] * 11 + ["1"]
    errors = describe(InputSpec("albedo", tmp_path / "a.tif")).errors
    assert len(errors) == 1
    assert "several units (%, 1)" in errors[0]


@pytest.mark.parametrize("interleave", ["pixel", "band"])
def test_tiles_and_interleaving_change_no_value(tmp_path: Path, interleave: str) -> None:
    values = np.random.default_rng(0).integers(0, 100, (12, 40, 50)).astype(np.uint8)
    layout = {"tiled": True, "blockxsize": 16, "blockysize": 16, "compress": "deflate"}
    with write(tmp_path / "a.tif", values, interleave=interleave, **layout) as file:
        file.units = ["%"] * 12
    field = open_field(InputSpec("albedo", tmp_path / "a.tif"))
    assert field.means._stored.in_pieces
    assert field.means._stored.steps_together == (12 if interleave == "pixel" else 1)
    found = np.concatenate([field.read(slice(n, n + 10)) for n in range(0, 40, 10)], axis=1)
    np.testing.assert_allclose(found, values / 100, rtol=1e-6)
