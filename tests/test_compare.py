"""What changed between two releases, by hand on small ones."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
import xarray as xr
from invented_layers import ATTRIBUTES

from gridcool.comparing import changed_parts
from gridcool.grid import Grid
from gridcool.planning.ranking import COLUMNS
from gridcool.products.comparison import comparison_facts, comparison_lines, draw_comparison
from gridcool.products.layers import write_layers
from gridcool.release.compare import compare_releases, rank_moves
from gridcool.release.manifest import Manifest, checksums, write_manifest

GRID = Grid(10.0, 50.0, 1.0, 1.0, 4, 5)


def release(folder: Path, flux: np.ndarray, grid: Grid = GRID, **changes: Any) -> Path:
    folder.mkdir()
    dataset = xr.Dataset(
        {
            "rejected_flux": (("latitude", "longitude"), flux.astype(np.float32)),
            "tilt": (("latitude", "longitude"), np.full(grid.shape, 20, np.float32)),
        },
        coords={"latitude": grid.latitudes, "longitude": grid.longitudes},
    )
    write_layers(dataset, grid, folder, attributes=ATTRIBUTES)
    given = {"reflectance": 0.9, "sha": "a" * 64, **changes}
    write_manifest(
        folder,
        Manifest(
            release=folder.name,
            created="2026-01-01T00:00:00Z",
            version="0",
            code="c",
            settings={
                "job": {"output": str(folder)},
                "panel": {"reflectance": given["reflectance"]},
                "exclude": [{"layer": "slope", "above": 15}],
            },
            inputs=[{"name": "albedo", "sha256": given["sha"]}],
            files=checksums(folder),
            packages={},
        ),
    )
    return folder


def flux() -> np.ndarray:
    return np.arange(20, dtype=float).reshape(4, 5) + 100


def table(ranks: list[Any], fluxes: list[float], names: str = "abcd") -> pd.DataFrame:
    frame = pd.DataFrame({column: np.ones(len(ranks)) for column in COLUMNS})
    frame["region"] = list(names)
    frame["rank"] = pd.array(ranks, "Int64")
    frame["rank_low"] = frame["rank_high"] = pd.array(ranks, "Int64")
    frame["rejected_flux_mean"] = fluxes
    return frame.sort_values("rank").reset_index(drop=True)


def test_layers_settings_and_inputs(tmp_path: Path) -> None:
    other = flux()
    other[1, 3] += 4
    other[2, 2] -= 1
    other[0, 0] = np.nan
    a = release(tmp_path / "a", flux())
    b = release(tmp_path / "b", other, reflectance=0.8, sha="b" * 64)
    found = compare_releases(a, b)
    assert found.settings == (("panel.reflectance", 0.9, 0.8),)
    assert found.inputs == ("albedo has other contents",)
    row = found.layers.set_index("layer").loc["rejected_flux"]
    assert row["changed_share"] == pytest.approx(2 / 19)
    assert row["mean"] == pytest.approx(3 / 19)
    assert row["rms"] == pytest.approx((17 / 19) ** 0.5)
    assert row["largest"] == 4
    assert (row["latitude"], row["longitude"]) == (48.5, 13.5)
    assert (row["gained"], row["lost"]) == (0, 1)
    assert found.layers.set_index("layer").loc["tilt", "changed_share"] == 0
    same = compare_releases(a, a)
    assert same.settings == same.inputs == ()
    assert (same.layers["changed_share"] == 0).all()


def test_other_grids_are_said_and_not_compared(tmp_path: Path) -> None:
    a = release(tmp_path / "a", flux())
    shifted = Grid(11.0, 50.0, 1.0, 1.0, 4, 5)
    b = release(tmp_path / "b", flux(), shifted)
    found = compare_releases(a, b)
    assert found.layers.empty
    assert "another grid" in found.notes[0]


def test_who_moved_and_why() -> None:
    before = table([1, 2, 3, 4], [130, 120, 110, 100])
    after = table([2, 1, 3, 4], [115, 120, 110, 100])
    found = rank_moves(before, after)
    assert found["region"].tolist() == ["b", "a", "c", "d"]
    assert found["moved"].tolist() == [1, -1, 0, 0]
    assert found["why"].tolist() == [
        "others changed",
        "flux -15.00 W m-2",
        "unchanged",
        "unchanged",
    ]
    assert found["beyond_doubt"].tolist() == [True, True, False, False]
    wide = before.assign(rank_low=1, rank_high=4)
    assert not rank_moves(wide, after)["beyond_doubt"].any()


def test_regions_that_came_and_went() -> None:
    before, after = table([1, 2], [2, 1], "ab"), table([1, 2], [3, 2], "bc")
    found = rank_moves(before, after).set_index("region")
    assert found.loc["a", "why"] == "not in the second release"
    assert found.loc["c", "why"] == "new in the second release"
    assert found.loc["b", "moved"] == 1


def test_text_json_and_map(tmp_path: Path) -> None:
    a = release(tmp_path / "a", flux())
    b = release(tmp_path / "b", flux() + 1, reflectance=0.8)
    tables = (table([1, 2], [2, 1], "ab"), table([2, 1], [1, 2], "ab"))
    found = compare_releases(a, b, tables)
    causes = {"panel.reflectance": rank_moves(*tables)}
    lines = "\n".join(comparison_lines(found, causes))
    assert "panel.reflectance: 0.9 -> 0.8" in lines
    assert "rejected_flux" in lines
    assert "mean +1" in lines
    assert "2 of 2 regions moved" in lines
    assert "By itself, panel.reflectance moves 2 regions" in lines
    facts = json.loads(json.dumps(comparison_facts(found, causes)))
    assert facts["moves"][0]["moved"] == 1
    assert facts["layers"][0]["layer"] == "rejected_flux"
    path = tmp_path / "change.png"
    draw_comparison(a, b, GRID, path, layer="rejected_flux", unit="W m-2", coast=False)
    assert path.read_bytes().startswith(b"\x89PNG")


def test_changes_one_at_a_time() -> None:
    a = {
        "job": {"output": "x"},
        "panel": {"reflectance": 0.9, "soiling": 0.0},
        "sky": {"cloud_weight": 0.7},
        "exclude": [],
        "zones": None,
    }
    b = {
        "job": {"output": "y"},
        "panel": {"reflectance": 0.8, "soiling": 0.1},
        "sky": {"cloud_weight": 0.7},
        "exclude": [{"layer": "slope"}],
        "zones": {"suitability": 0.5},
    }
    found = dict(changed_parts(a, b))
    assert list(found) == ["exclude", "panel.reflectance", "panel.soiling", "zones"]
    assert found["panel.soiling"]["panel"] == {"reflectance": 0.9, "soiling": 0.1}
    assert found["exclude"]["panel"] == a["panel"]
    assert "zones" not in found["exclude"]  # what is not given stays not given
