"""A STAC 1.0.0 Item that describes a release and every file in it."""

from __future__ import annotations

import json
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from gridcool.grid import Bounds, Grid
from gridcool.products.failure import output_errors

CATALOG_FOLDER = "catalog"
VERSION = "1.0.0"
EXTENSIONS = (
    "https://stac-extensions.github.io/file/v2.1.0/schema.json",
    "https://stac-extensions.github.io/projection/v1.1.0/schema.json",
)
#: Media type and role by how a file's name ends.
KINDS = {
    ".tif": ("image/tiff; application=geotiff; profile=cloud-optimized", "data"),
    ".nc": ("application/x-netcdf", "data"),
    ".csv": ("text/csv", "data"),
    ".gpkg": ("application/geopackage+sqlite3", "data"),
    ".sld": ("application/vnd.ogc.sld+xml", "metadata"),
    ".xml": ("application/xml", "metadata"),
    ".png": ("image/png", "overview"),
    ".html": ("text/html", "overview"),
    ".json": ("application/json", "metadata"),
    ".txt": ("text/plain", "metadata"),
}
SHA256_MULTIHASH = "1220"  # the function's number and the digest's length, as multihash has it


def write_catalog(
    product: Path,
    grid: Grid,
    *,
    identifier: str,
    title: str,
    created: str,
    description: str,
    files: Mapping[str, tuple[int, str]],
    titles: Mapping[str, str],
) -> Path:
    """Write ``catalog/item.json``.

    Parameters
    ----------
    product : Path
    grid : Grid
    identifier : str
        Name of the release.
    title, description : str
    created : str
        RFC 3339, UTC.
    files : mapping of (bytes, SHA-256)
        By path relative to the product.
    titles : mapping of str
        What files hold, by the same paths, as far as there is something to say.
    """
    bounds = grid.bounds
    item = {
        "type": "Feature",
        "stac_version": VERSION,
        "stac_extensions": list(EXTENSIONS),
        "id": identifier,
        "geometry": _geometry(bounds),
        "bbox": _box(bounds),
        "properties": {
            "title": title,
            "description": description,
            "datetime": created,
            "created": created,
            "proj:epsg": 4326,
            "proj:shape": list(grid.shape),
            "proj:transform": [*(float(each) for each in grid.affine), 0.0, 0.0, 1.0],
        },
        "links": [],
        "assets": {
            name: _asset(name, size, digest, titles.get(name, ""))
            for name, (size, digest) in sorted(files.items())
        },
    }
    folder = product / CATALOG_FOLDER
    path = folder / "item.json"
    with output_errors(path):
        folder.mkdir(exist_ok=True)
        path.write_text(json.dumps(item, indent=2, ensure_ascii=False) + "\n", encoding="utf-8")
    return path


def _asset(name: str, size: int, digest: str, title: str) -> dict[str, Any]:
    media, role = KINDS.get(Path(name).suffix, ("application/octet-stream", "data"))
    asset = {
        "href": f"../{name}",
        "type": media,
        "roles": [role],
        "file:size": size,
        "file:checksum": SHA256_MULTIHASH + digest,
    }
    return {**asset, "title": title} if title else asset


def _box(bounds: Bounds) -> list[float]:
    """West, south, east, north; the west end is greater where the antimeridian is crossed."""
    east = bounds.east if bounds.east <= 180 else bounds.east - 360
    return [bounds.west, bounds.south, east, bounds.north]


def _geometry(bounds: Bounds) -> dict[str, Any]:
    """The outline, cut at 180° (RFC 7946, section 3.1.9)."""
    if bounds.east <= 180:
        return {"type": "Polygon", "coordinates": [_ring(bounds.west, bounds.east, bounds)]}
    parts = [
        [_ring(bounds.west, 180.0, bounds)],
        [_ring(-180.0, bounds.east - 360, bounds)],
    ]
    return {"type": "MultiPolygon", "coordinates": parts}


def _ring(west: float, east: float, bounds: Bounds) -> list[list[float]]:
    south, north = bounds.south, bounds.north
    return [[west, south], [east, south], [east, north], [west, north], [west, south]]
