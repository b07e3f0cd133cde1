"""Maps: that they show the layer, its unit, its place and what is left out."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Any

import matplotlib.image
import numpy as np
import pytest
import rasterio
import shapely
import xarray as xr
from invented_layers import ATTRIBUTES, invented_layers

from gridcool.grid import Bounds, Grid
from gridcool.products import maps
from gridcool.products.cartography import Surroundings, coastline, projection
from gridcool.products.geotiff import TILE, gdal_environment
from gridcool.products.layers import write_layers
from gridcool.products.maps import draw_maps
from gridcool.products.ramps import MISSING, paler, ramp
from gridcool.variables import Flag, layer_variables

COUNTRY = Grid(100.0, 22.0, 0.1, 0.1, 60, 50)
GLOBE = Grid(-180.0, 90.0, 2.0, 2.0, 90, 180)
LAYERS = {
    "rejected_flux": layer_variables()["rejected_flux"],
    "exclusion": replace(
        layer_variables()["exclusion"],
        flags=(Flag(1, "no_result", "unknown"), Flag(2, "steep", "too steep")),
    ),
}


def product(folder: Path, grid: Grid, given: np.ndarray | None = None) -> Path:
    """Flux that falls from west to east, or as given; the north is steep, a corner unknown."""
    rows, columns = np.indices(grid.shape)
    flux = np.linspace(150, 50, grid.columns)[columns].astype(np.float32)
    flux[-10:, -10:] = np.nan
    if given is not None:
        flux = given
    exclusion = np.where(rows < grid.rows // 3, 2, 0) + np.isnan(flux)
    dataset = xr.Dataset(
        {
            "rejected_flux": (("latitude", "longitude"), flux),
            "exclusion": (("latitude", "longitude"), exclusion.astype(np.uint16)),
        },
        coords={"latitude": grid.latitudes, "longitude": grid.longitudes},
    )
    write_layers(dataset, grid, folder, attributes=ATTRIBUTES, declared=LAYERS)
    return folder


def colours(path: Path) -> np.ndarray:
    return np.round(255 * matplotlib.image.imread(path)[..., :3]).astype(int)


def texts_of(figure: Any) -> list[str]:
    """All that is written on a map but the numbers along its edges."""
    found = [each.get_text() for each in figure.texts]
    for axes in figure.axes:
        found += [axes.get_xlabel(), axes.get_title(loc="left"), axes.get_title()]
        found += [each.get_text() for each in (*axes.texts, *axes.get_xticklabels())]
        legend = axes.get_legend()
        found += [each.get_text() for each in (legend.get_texts() if legend else ())]
    for legend in figure.legends:
        found += [each.get_text() for each in legend.get_texts()]
    return found


@pytest.fixture
def figures(monkeypatch: pytest.MonkeyPatch) -> list[Any]:
    """The figures that are saved."""
    kept: list[Any] = []
    saved = maps.Figure.savefig

    def watch(self: Any, *arguments: Any, **options: Any) -> None:
        saved(self, *arguments, **options)
        kept.append(self)

    monkeypatch.setattr(maps.Figure, "savefig", watch)
    return kept


def share(picture: np.ndarray, colour: tuple[int, int, int]) -> float:
    return float((np.abs(picture - np.array(colour)).max(axis=-1) <= 2).mean())


@pytest.mark.parametrize("grid", [COUNTRY, GLOBE], ids=["country", "globe"])
def test_maps_show_their_layers(tmp_path: Path, grid: Grid) -> None:
    outlines = [shapely.box(101, 17, 103, 19), shapely.Polygon()]
    around = Surroundings(outlines, [("1", 102.0, 18.0)])
    flux, why = draw_maps(product(tmp_path, grid), grid, LAYERS, around)
    assert [each.path.name for each in (flux, why)] == ["rejected_flux.png", "exclusion.png"]
    picture = colours(flux.path)
    ends = ramp("flux").colours(maps.RAMP_STEPS)
    assert share(picture, ends[0]) > 0.0005
    assert share(picture, ends[-1]) > 0.0005
    assert share(picture, MISSING) > 0.0005
    assert "hatched" in flux.caption
    assert "W m⁻²" in flux.caption
    told = colours(why.path)
    assert share(told, (250, 250, 245)) > 0.1  # what is eligible
    assert len(np.unique(told.reshape(-1, 3), axis=0)) > 20


def test_legends_have_units(tmp_path: Path, figures: list[Any]) -> None:
    draw_maps(product(tmp_path, COUNTRY), COUNTRY, LAYERS, Surroundings())
    texts = [text for figure in figures for text in texts_of(figure)]
    assert "rejected flux (W m⁻²)" in texts
    assert "left out by a rule" in texts
    assert "Too steep" in texts
    assert "100 km" in texts  # about a quarter of 530 km
    assert any(text.startswith("Shortwave leaving the atmosphere") for text in texts)


def test_what_a_rule_leaves_out_is_pale_and_sets_no_scale(tmp_path: Path) -> None:
    """The north is out: its colours are pale, and the scale is that of the eligible south."""
    folder = product(tmp_path, COUNTRY)
    flux, _ = draw_maps(folder, COUNTRY, LAYERS, Surroundings())
    palest = paler(ramp("flux").colours(maps.RAMP_STEPS), maps.PALE)[-1]
    picture = colours(flux.path)
    pale = np.abs(picture - np.array(palest)).max(axis=-1) <= 2
    full = np.abs(picture - np.array(ramp("flux").colours(maps.RAMP_STEPS)[-1])).max(axis=-1) <= 2
    assert pale.sum() > 500
    upper, lower = np.nonzero(pale)[0].mean(), np.nonzero(full)[0].mean()
    assert upper < lower
    assert "of the cells that no rule leaves out" in flux.caption

    with rasterio.open(folder / "layers" / "rejected_flux.tif", "r") as file:
        values = file.read(1)
    values[: COUNTRY.rows // 3] *= 10
    shifted = tmp_path / "shifted"
    shifted.mkdir()
    again, _ = draw_maps(product(shifted, COUNTRY, values), COUNTRY, LAYERS, Surroundings())
    assert again.caption == flux.caption


@pytest.mark.parametrize("grid", [COUNTRY, GLOBE], ids=["country", "globe"])
def test_every_band_has_its_panel(tmp_path: Path, grid: Grid, figures: list[Any]) -> None:
    names = ["monthly_rejected_flux", "seasonal_start", "azimuth"]
    layers = {name: layer_variables()[name] for name in names}
    fields = invented_layers(grid)[names]
    write_layers(fields, grid, tmp_path, attributes=ATTRIBUTES)
    draw_maps(tmp_path, grid, layers, Surroundings([shapely.box(101, 17, 103, 19)]))
    by_month, by_season, whole = [texts_of(figure) for figure in figures]
    assert {"January", "July", "December"} <= set(by_month)
    assert {"Season of low sun", "Season of high sun", "Apr", "seasonal start"} <= set(by_season)
    assert [text for text in whole if text in ("N", "E", "S", "W")] == ["N", "E", "S", "W", "N"]


def test_long_legends_stay_on_the_page(tmp_path: Path, figures: list[Any]) -> None:
    layer = layer_variables()["input_quality"]
    values = np.full(COUNTRY.shape, 1, np.uint16)
    for row, value in enumerate((1 + 32, 4 + 16 + 32, 8, 2 + 4 + 16 + 32 + 256 + 512, 64)):
        values[row * 9 : row * 9 + 9] = value
    coordinates = {"latitude": COUNTRY.latitudes, "longitude": COUNTRY.longitudes}
    dataset = xr.Dataset({layer.name: (("latitude", "longitude"), values)}, coordinates)
    write_layers(dataset, COUNTRY, tmp_path, attributes=ATTRIBUTES)
    draw_maps(tmp_path, COUNTRY, {layer.name: layer}, Surroundings())
    (figure,) = figures
    (legend,) = figure.legends
    assert len(legend.get_texts()) == 6
    page, box = figure.bbox, legend.get_window_extent()
    assert page.x0 <= box.x0 < box.x1 <= page.x1
    assert page.y0 <= box.y0 < box.y1 <= page.y1


def test_the_same_picture_every_time(tmp_path: Path) -> None:
    folder = product(tmp_path, COUNTRY)
    first = draw_maps(folder, COUNTRY, LAYERS, Surroundings())[0].path.read_bytes()
    assert draw_maps(folder, COUNTRY, LAYERS, Surroundings())[0].path.read_bytes() == first


def test_projections_suit_the_place() -> None:
    assert type(projection(Bounds(-180, -90, 180, 90))).__name__ == "EqualEarth"
    local = projection(Bounds(170, 10, 190, 20))
    assert type(local).__name__ == "LambertAzimuthalEqualArea"
    assert local.proj4_params["lon_0"] == 180
    assert local.proj4_params["lat_0"] == 15


def test_the_coast_is_at_hand_offline() -> None:
    lines = coastline()
    assert len(lines) > 1000
    # A point on the west coast of Africa, at the equator, from memory: 9.4 to 9.9° E.
    nearest = shapely.distance(shapely.union_all(lines), shapely.Point(9.6, 0.5))
    assert nearest < 0.5
    inland = shapely.distance(shapely.union_all(lines), shapely.Point(22, 5))
    assert inland > 5


def test_no_coast_runs_across_the_map() -> None:
    longest = max(
        np.abs(np.diff(shapely.get_coordinates(line)[:, 0])).max() for line in coastline()
    )
    assert longest < 20


def test_coasts_past_the_antimeridian(tmp_path: Path) -> None:
    across = Grid(170.0, -10.0, 0.5, 0.5, 40, 50)  # to 195° E
    pictures = draw_maps(product(tmp_path, across), across, LAYERS, Surroundings())
    assert pictures[0].path.stat().st_size > 10_000


def test_a_layer_that_is_not_there(tmp_path: Path) -> None:
    folder = product(tmp_path, COUNTRY)
    with pytest.raises(ValueError, match="not among"):
        draw_maps(folder, COUNTRY, {"tilt": layer_variables()["tilt"]}, Surroundings())


def test_the_block_cache_holds_many_tiles() -> None:
    """The option counts bytes, not GDAL's own megabytes; too small, each row unpacks its tile."""
    tile = 4 * TILE**2
    assert 100 * tile < gdal_environment().options["GDAL_CACHEMAX"] < 2**30
