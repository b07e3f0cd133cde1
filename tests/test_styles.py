"""Styles: valid descriptors with the layer's own range, unit and colours."""

from __future__ import annotations

import shutil
import subprocess
from dataclasses import replace
from pathlib import Path
from xml.etree import ElementTree as ET

import numpy as np
import pytest
import rasterio
from invented_layers import ATTRIBUTES, GRIDS, invented_layers

from gridcool.products.layers import write_layers
from gridcool.products.ramps import ramp
from gridcool.products.styles import OGC, SLD, write_polygon_style, write_styles
from gridcool.variables import layer_variables

NAMES = {"s": SLD, "o": OGC}


@pytest.fixture(scope="module")
def product(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("styles")
    write_layers(
        invented_layers(GRIDS["antimeridian"]), GRIDS["antimeridian"], folder, attributes=ATTRIBUTES
    )
    return folder


def entries(path: Path) -> list[dict[str, str]]:
    root = ET.parse(path).getroot()
    assert root.tag == f"{{{SLD}}}StyledLayerDescriptor"
    assert root.get("version") == "1.0.0"
    return [dict(each.attrib) for each in root.iterfind(".//s:ColorMapEntry", NAMES)]


def test_every_layer_has_a_style(product: Path) -> None:
    written = write_styles(product, layer_variables())
    assert [path.stem for path in written[::2]] == list(layer_variables())
    for path in written[::2]:
        found = entries(path)
        quantities = [float(each["quantity"]) for each in found]
        assert quantities == sorted(quantities)
        assert len(found) == len({each["label"] for each in found}) or len(found) > 8


def test_ramps_span_the_values_with_their_unit(product: Path) -> None:
    write_styles(product, layer_variables())
    found = entries(product / "styles" / "rejected_flux.sld")
    assert len(found) == 9
    assert found[0]["label"].endswith(" W m-2")
    first, last = ramp("flux").colours(9)[0], ramp("flux").colours(9)[-1]
    assert found[0]["color"] == "#{:02x}{:02x}{:02x}".format(*first)
    assert found[-1]["color"] == "#{:02x}{:02x}{:02x}".format(*last)
    assert 30 < float(found[0]["quantity"]) < 100 < float(found[-1]["quantity"]) < 170
    compass = entries(product / "styles" / "azimuth.sld")
    assert (float(compass[0]["quantity"]), float(compass[-1]["quantity"])) == (0.0, 360.0)
    assert compass[0]["color"] == compass[-1]["color"]


@pytest.mark.skipif(shutil.which("gdaldem") is None, reason="no gdaldem on this machine")
def test_gdal_paints_with_the_colour_tables(product: Path, tmp_path: Path) -> None:
    write_styles(product, layer_variables())
    painted = tmp_path / "painted.tif"
    layer = product / "layers" / "rejected_flux.tif"
    table = product / "styles" / "rejected_flux.txt"
    command = ["gdaldem", "color-relief", "-alpha", str(layer), str(table), str(painted)]
    subprocess.run(command, check=True, capture_output=True)
    with rasterio.open(layer) as source, rasterio.open(painted) as file:
        values, colours = source.read(1), file.read()
    assert (colours[3][np.isnan(values)] == 0).all()
    highest = np.unravel_index(np.nanargmax(values), values.shape)
    assert tuple(colours[:3, highest[0], highest[1]]) == ramp("flux").colours(9)[-1]


def test_values_that_occur_have_names(product: Path) -> None:
    """A cell may have several bits; a GIS that looks for single ones would leave it clear."""
    write_styles(product, layer_variables())
    with rasterio.open(product / "layers" / "input_quality.tif") as file:
        present = np.unique(file.read(1))
    found = entries(product / "styles" / "input_quality.sld")
    assert [float(each["quantity"]) for each in found] == present.tolist()
    declared = {flag.value: flag.description for flag in layer_variables()["input_quality"].flags}
    for each in found:
        value = int(float(each["quantity"]))
        named = [text for bit, text in declared.items() if value & bit]
        assert each["label"].lower() == ("; ".join(named) or "nothing to report").lower()
    assert any(int(value).bit_count() > 1 for value in present)


def test_tables_have_six_columns(product: Path) -> None:
    """As GDAL and those that read its tables want them, whatever stands in a label."""
    layers = dict(layer_variables())
    flags = tuple(
        replace(flag, description='near "town", or\nroad') for flag in layers["input_quality"].flags
    )
    layers["input_quality"] = replace(layers["input_quality"], flags=flags)
    written = write_styles(product, layers)
    for path in written[1::2]:
        *lines, last = path.read_text(encoding="utf-8").splitlines()
        assert last == "nan,0,0,0,0,missing"
        for line in lines:
            value, *colour, label = line.split(",")
            assert np.isfinite(float(value))
            assert all(0 <= int(each) <= 255 for each in colour)
            assert len(colour) == 4
            assert label
    labels = (product / "styles" / "input_quality.txt").read_text(encoding="utf-8")
    assert 'Near "town"; or road' in labels


def test_polygons_by_an_attribute(product: Path) -> None:
    values = np.array([0.0, 10.0, np.nan, 4.0])
    path = write_polygon_style(product, "regions", "rejected_flux_mean", "W m-2", values, "flux")
    root = ET.parse(path).getroot()
    rules = root.findall(".//s:Rule", NAMES)
    assert [rule.find("s:Name", NAMES).text for rule in rules] == [  # type: ignore[union-attr]
        *("0 to 2 W m-2", "2 to 4 W m-2", "4 to 6 W m-2", "6 to 8 W m-2", "8 to 10 W m-2"),
        "nothing eligible",
    ]
    names = {each.text for each in root.iterfind(".//o:PropertyName", NAMES)}
    assert names == {"rejected_flux_mean"}
    assert root.find(".//o:PropertyIsNull", NAMES) is not None
    nothing = write_polygon_style(product, "zones", "x", "", np.array([np.nan]), "flux")
    assert nothing.exists()
