"""Regions and zones as GeoPackage, with the columns of the table as attributes."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import geopandas
import pandas as pd
import pyogrio
import shapely

from gridcool.products.failure import output_errors

CRS = "EPSG:4326"
VERSION = "1.2"  # which older GIS read without a warning
CHANGED = "1970-01-01T00:00:00.000Z"  # the format stamps every file; a fixed time keeps it the same


def write_polygons(
    frame: pd.DataFrame, shapes: Sequence[Any], path: Path, layer: str, description: str
) -> None:
    """Write rows with their polygons.

    Parameters
    ----------
    frame : pandas.DataFrame
        One row a polygon; texts are kept as they are, whatever they hold.
    shapes : sequence of shapely geometries
        Degrees, in the order of the rows; cut at 180° as GeoJSON does.
    path : Path
        ``.gpkg``
    layer, description : str
        Name of the table in the file, and what it holds.

    Raises
    ------
    OutputError
        If the disk is full or refuses; nothing is left at ``path`` then.
    """
    # All of one kind, or a GIS would call the layer a collection.
    whole = [_multi(shape) for shape in shapes]
    data = geopandas.GeoDataFrame(frame, geometry=whole, crs=CRS)
    errors = (OSError, pyogrio.errors.DataSourceError, pyogrio.errors.FeatureError)
    with output_errors(path, errors), _fixed_time():
        try:
            pyogrio.write_dataframe(
                data,
                path,
                layer=layer,
                driver="GPKG",
                geometry_type="MultiPolygon",
                layer_metadata={"DESCRIPTION": description},
                layer_options={"DESCRIPTION": description},
                dataset_options={"VERSION": VERSION},
            )
        except BaseException:
            path.unlink(missing_ok=True)
            raise


@contextmanager
def _fixed_time() -> Iterator[None]:
    """Have GDAL stamp a fixed time of change."""
    name = "OGR_CURRENT_DATE"
    before = pyogrio.get_gdal_config_option(name)
    pyogrio.set_gdal_config_options({name: CHANGED})
    try:
        yield
    finally:
        pyogrio.set_gdal_config_options({name: before})


def _multi(shape: Any) -> Any:
    """The polygons of a geometry as one multi-polygon; what is empty stays empty."""
    if shape.geom_type == "MultiPolygon":
        return shape
    if shape.geom_type == "Polygon":
        return shapely.MultiPolygon([] if shape.is_empty else [shape])
    parts = [part for part in getattr(shape, "geoms", ()) if part.geom_type == "Polygon"]
    return shapely.MultiPolygon(parts)


def in_order(names: Sequence[str], shapes: Sequence[Any], frame: pd.DataFrame) -> list[Any]:
    """The shapes of the frame's regions, in its order."""
    known = dict(zip(names, shapes, strict=True))
    return [known[str(region)] for region in frame["region"]]
