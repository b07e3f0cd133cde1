"""The STAC item: valid, complete, and right across the antimeridian."""

from __future__ import annotations

import hashlib
import json
from pathlib import Path
from typing import Any

import pystac
import pytest

from gridcool.errors import OutputError
from gridcool.grid import Grid
from gridcool.products.catalog import write_catalog

LOCAL = Grid(10.0, 50.0, 0.5, 0.25, 40, 20)
ACROSS = Grid(170.0, 10.0, 1.0, 1.0, 20, 30)
CONTENT = b"not really a layer"


def item(folder: Path, grid: Grid = LOCAL) -> dict[str, Any]:
    digest = hashlib.sha256(CONTENT).hexdigest()
    path = write_catalog(
        folder,
        grid,
        identifier="20260101T000000.000000Z",
        title="Invented",
        created="2026-01-01T00:00:00Z",
        description="For a test.",
        files={
            "layers/rejected_flux.tif": (len(CONTENT), digest),
            "report.html": (3, "0" * 64),
            "odd.xyz": (0, "1" * 64),
        },
        titles={"layers/rejected_flux.tif": "rejected flux"},
    )
    found: dict[str, Any] = json.loads(path.read_text(encoding="utf-8"))
    return found


def test_the_item_is_valid(tmp_path: Path) -> None:
    found = item(tmp_path)
    core = {**found, "stac_extensions": []}  # schemas of extensions would have to be fetched
    read = pystac.Item.from_dict(core, preserve_dict=True)
    read.validate()
    broken = {**core, "geometry": {"type": "Polygon"}}
    with pytest.raises(pystac.STACValidationError):
        pystac.Item.from_dict(broken).validate()


def test_assets_have_kinds_sizes_and_checksums(tmp_path: Path) -> None:
    assets = item(tmp_path)["assets"]
    layer = assets["layers/rejected_flux.tif"]
    assert layer["href"] == "../layers/rejected_flux.tif"
    assert layer["type"].endswith("profile=cloud-optimized")
    assert layer["roles"] == ["data"]
    assert layer["title"] == "rejected flux"
    assert layer["file:size"] == len(CONTENT)
    # Multihash: 0x12 is SHA2-256, 0x20 its 32 bytes.
    assert bytes.fromhex(layer["file:checksum"]) == b"\x12\x20" + hashlib.sha256(CONTENT).digest()
    assert assets["report.html"]["roles"] == ["overview"]
    assert assets["odd.xyz"]["type"] == "application/octet-stream"


def test_place_and_grid(tmp_path: Path) -> None:
    found = item(tmp_path)
    assert found["bbox"] == [10, 40, 20, 50]
    assert found["properties"]["proj:shape"] == [40, 20]
    assert found["properties"]["proj:transform"][:6] == [0.5, 0, 10, 0, -0.25, 50]


def test_across_the_antimeridian(tmp_path: Path) -> None:
    found = item(tmp_path, ACROSS)
    assert found["bbox"] == [170, -10, -160, 10]
    parts = found["geometry"]["coordinates"]
    assert found["geometry"]["type"] == "MultiPolygon"
    longitudes = [[point[0] for point in part[0]] for part in parts]
    assert (min(longitudes[0]), max(longitudes[0])) == (170, 180)
    assert (min(longitudes[1]), max(longitudes[1])) == (-180, -160)


def test_a_folder_that_is_not_there(tmp_path: Path) -> None:
    with pytest.raises(OutputError):
        item(tmp_path / "missing")
