"""Layers whose flags and classes the settings name: in the files as other software reads them."""

from __future__ import annotations

import json
import shutil
import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
import rasterio
import xarray as xr
from invented_layers import ATTRIBUTES
from rasterio.enums import ColorInterp
from rio_cogeo.cogeo import cog_validate

from gridcool.config import Settings
from gridcool.grid import Grid
from gridcool.planned import declarations
from gridcool.products.layers import write_layers
from gridcool.products.ramps import MISSING, class_colours
from gridcool.variables import Flag, layer_variables

GRID = Grid(10.0, 50.0, 0.05, 0.05, 700, 600)
DECLARED = {
    "suitability_class": replace(
        layer_variables()["suitability_class"],
        classes=(
            Flag(0, "none", "excluded, or below every class"),
            Flag(1, "fair", "suitability of at least 0.4"),
            Flag(2, "good", "suitability of at least 0.7"),
        ),
    ),
    "exclusion": replace(
        layer_variables()["exclusion"],
        flags=(
            Flag(1, "no_result", "nothing is known of the flux here"),
            Flag(2, "too_steep", "too steep <15°, “really”"),
            Flag(4, "open_water", "open water"),
        ),
    ),
}


def values(name: str) -> np.ndarray:
    rows, columns = np.indices(GRID.shape)
    if name == "suitability_class":
        return ((rows // 100 + columns // 100) % 3).astype(np.uint8)
    return np.where(rows < 300, 6, columns % 2).astype(np.uint16)


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    dataset = xr.Dataset(
        {name: (("latitude", "longitude"), values(name)) for name in DECLARED},
        coords={"latitude": GRID.latitudes, "longitude": GRID.longitudes},
    ).chunk(latitude=128)
    made = tmp_path_factory.mktemp("classes")
    write_layers(dataset, GRID, made, attributes=ATTRIBUTES, declared=DECLARED)
    return made


def test_classes_have_colours_and_names(folder: Path) -> None:
    path = folder / "layers" / "suitability_class.tif"
    with rasterio.open(path) as file:
        assert file.dtypes == ("uint8",)
        assert file.colorinterp == (ColorInterp.palette,)
        table = file.colormap(1)
        assert table[0][:3] == MISSING
        assert [table[1][:3], table[2][:3]] == class_colours(2)
        tags = file.tags()
        assert tags["class_2"] == "good: suitability of at least 0.7"
        np.testing.assert_array_equal(file.read(1), values("suitability_class"))
        # An overview shows classes that are there, never a mean of two.
        assert file.overviews(1)
    with rasterio.open(path, overview_level=0) as small:
        assert set(np.unique(small.read(1))) <= {0, 1, 2}
    valid, errors, _ = cog_validate(path, strict=True)
    assert valid, errors


@pytest.mark.skipif(shutil.which("gdalinfo") is None, reason="no gdalinfo on this machine")
def test_another_build_of_gdal_finds_colours_and_names(folder: Path) -> None:
    """The legend of a GIS comes from here."""
    command = ["gdalinfo", "-json", str(folder / "layers" / "suitability_class.tif")]
    told = json.loads(subprocess.run(command, check=True, capture_output=True, text=True).stdout)
    (band,) = told["bands"]
    assert band["colorInterpretation"] == "Palette"
    assert [tuple(each[:3]) for each in band["colorTable"]["entries"][:3]] == [
        MISSING,
        *class_colours(2),
    ]
    as_text = subprocess.run(
        [command[0], command[2]], check=True, capture_output=True, text=True
    ).stdout
    for each in DECLARED["suitability_class"].classes:
        assert f"{each.value}: {each.description}" in as_text


def test_only_classes_have_names_beside_them(folder: Path) -> None:
    assert [path.name for path in (folder / "layers").glob("*.xml")] == [
        "suitability_class.tif.aux.xml"
    ]


def test_flags_of_the_settings(folder: Path) -> None:
    with rasterio.open(folder / "layers" / "exclusion.tif") as file:
        tags = file.tags()
        assert tags["flag_2"] == "too_steep: too steep <15°, “really”"
        assert file.nodata is None
        np.testing.assert_array_equal(file.read(1), values("exclusion"))


def test_netcdf_says_the_same(folder: Path) -> None:
    with xr.open_dataset(folder / "layers.nc", mask_and_scale=False) as dataset:
        classes, flags = dataset["suitability_class"], dataset["exclusion"]
        assert classes.attrs["flag_values"].tolist() == [0, 1, 2]
        assert classes.attrs["flag_values"].dtype == classes.dtype == np.uint8
        assert classes.attrs["flag_meanings"] == "none fair good"
        assert flags.attrs["flag_masks"].tolist() == [1, 2, 4]
        assert flags.attrs["flag_meanings"] == "no_result too_steep open_water"
        np.testing.assert_array_equal(classes.values, values("suitability_class"))
    checked = subprocess.run(
        [
            Path(sys.executable).with_name("compliance-checker"),
            "-t",
            "cf:1.11",
            str(folder / "layers.nc"),
        ],
        capture_output=True,
        text=True,
        check=False,
    )
    assert "All tests passed!" in checked.stdout, checked.stdout


@pytest.mark.parametrize(("name", "value"), [("suitability_class", 3), ("exclusion", 8)])
def test_a_value_without_a_meaning_is_refused(name: str, value: int, tmp_path: Path) -> None:
    cells = values(name)
    cells[-1, -1] = value
    dataset = xr.Dataset(
        {name: (("latitude", "longitude"), cells)},
        coords={"latitude": GRID.latitudes, "longitude": GRID.longitudes},
    )
    with pytest.raises(ValueError, match=rf"{name} holds values beyond [27],"):
        write_layers(dataset, GRID, tmp_path, attributes=ATTRIBUTES, declared=DECLARED)
    assert not list(tmp_path.iterdir())


def test_a_layer_that_is_not_declared_is_refused(tmp_path: Path) -> None:
    dataset = xr.Dataset(
        {"unheard_of": (("latitude", "longitude"), values("exclusion"))},
        coords={"latitude": GRID.latitudes, "longitude": GRID.longitudes},
    )
    with pytest.raises(ValueError, match="not a declared layer"):
        write_layers(dataset, GRID, tmp_path, attributes=ATTRIBUTES, declared=DECLARED)


def test_classes_of_the_settings_have_words_that_cf_allows() -> None:
    names = ["Good", "good!", "Très bien", "最好", "none"]
    settings = Settings.model_validate(
        {
            "job": {"name": "Invented", "output": "out"},
            "inputs": {"albedo": {"path": "a.nc"}, "cloud_fraction": {"path": "c.nc"}},
            "grid": {"like": "albedo"},
            "sky": {"irradiance": "cloud"},
            "criterion": [{"layer": "rejected_flux", "worst": 40, "best": 160, "weight": 1.0}],
            "suitability_class": [
                {"name": name, "above": number / 10} for number, name in enumerate(names)
            ],
        }
    )
    classes = declarations(settings)["suitability_class"].classes
    assert [each.meaning for each in classes] == [
        *("none", "good", "good_2", "tr_s_bien", "class_4", "none_5")
    ]
    assert classes[4].description == "最好: suitability of at least 0.3"
