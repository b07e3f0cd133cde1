"""One place explained: it adds up, agrees with the layers, and survives odd places."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from gridcool.cli import main

LATITUDE, LONGITUDE = np.arange(68.0, -69, -8), np.arange(-176.0, 180, 8)
SETTINGS = """
[job]
name = "Invented"
output = "out"
[inputs.albedo]
path = "inputs.nc"
[inputs.cloud_fraction]
path = "inputs.nc"
[inputs.temperature_range]
path = "inputs.nc"
variable = "dtr"
"""


@pytest.fixture(scope="module")
def project(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("cell")
    rng = np.random.default_rng(8)
    shape = (12, len(LATITUDE), len(LONGITUDE))
    albedo = rng.uniform(0.1, 0.4, shape)
    albedo[:, 0] = 0.7  # snow all year in the north
    albedo[:, -1, :4] = np.nan
    dims = ("month", "lat", "lon")
    xr.Dataset(
        {
            "albedo": (dims, albedo.astype(np.float32), {"units": "1"}),
            "clt": (dims, rng.uniform(0, 1, shape).astype(np.float32), {"units": "1"}),
            "dtr": (dims, rng.uniform(4, 16, shape).astype(np.float32), {"units": "K"}),
        },
        coords={"month": np.arange(1, 13), "lat": LATITUDE, "lon": LONGITUDE},
    ).to_netcdf(folder / "inputs.nc")
    path = folder / "project.toml"
    path.write_text(SETTINGS, encoding="utf-8")
    assert main(["screen", str(path), "--quiet"]) == 0
    return path


def facts(project: Path, place: tuple[float, float], capsys: pytest.CaptureFixture[str]) -> dict:
    capsys.readouterr()
    assert main(["cell", str(project), *map(str, place), "--json"]) == 0

    def refuse(constant: str) -> float:
        raise AssertionError(f"{constant} is no JSON")

    return json.loads(capsys.readouterr().out, parse_constant=refuse)


PLACES = [(20.0, 16.0), (-44.0, -120.0), (4.0, 176.0), (60.0, -176.0)]


@pytest.mark.parametrize("place", PLACES)
def test_the_account_adds_up(
    project: Path, place: tuple[float, float], capsys: pytest.CaptureFixture[str]
) -> None:
    told = facts(project, place, capsys)
    for which in ("best", "flat"):
        a = told["account"][which]
        assert min(a.values()) >= 0
        assert a["caught"] == pytest.approx(a["absorbed"] + a["reflected"], rel=1e-5)
        assert a["reflected"] == pytest.approx(a["direct"] + a["returned"] + a["lost"], rel=1e-5)
        net = a["direct"] + a["returned"] - a["forgone"]
        assert a["rejected"] == pytest.approx(net, rel=1e-4)
        assert a["caught"] <= 2 * np.mean(told["months"]["irradiance"])
    assert told["account"]["best"]["rejected"] >= told["account"]["flat"]["rejected"] - 1e-3
    share = (told["account"]["best"]["direct"] + told["account"]["best"]["returned"]) / told[
        "account"
    ]["best"]["reflected"]
    assert share == pytest.approx(told["layers"]["escape_fraction"], rel=1e-4)
    parts = list(told["uncertainty"].values())
    assert parts[-1] == pytest.approx(np.sqrt(np.sum(np.square(parts[:-1]))), rel=1e-5)


@pytest.mark.parametrize("place", PLACES)
def test_it_agrees_with_the_layers(
    project: Path, place: tuple[float, float], capsys: pytest.CaptureFixture[str]
) -> None:
    told = facts(project, place, capsys)
    with xr.open_dataset(project.parent / "out/current/layers.nc") as file:
        here = file.sel(latitude=place[0], longitude=place[1]).load()
    for name in ("rejected_flux", "tilt", "flux_uncertainty", "seasonal_gain", "low_ray_hours"):
        assert told["layers"][name] == pytest.approx(float(here[name]), rel=2e-4, abs=1e-4)
    best = told["account"]["best"]["rejected"]
    assert best == pytest.approx(float(here["rejected_flux"]), rel=1e-4)
    flat = told["account"]["flat"]["rejected"]
    assert flat == pytest.approx(float(here["rejected_flux_flat"]), rel=1e-4)
    np.testing.assert_allclose(told["months"]["rejected"], here["monthly_rejected_flux"], rtol=1e-3)
    low, high = told["neighbours"]["rejected_flux"]
    assert low <= told["layers"]["rejected_flux"] <= high


def test_text_and_figures(
    project: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    for ending in ("png", "svg"):
        figure = tmp_path / f"place.{ending}"
        command = ["cell", str(project), "20", "16", "--figure", str(figure)]
        assert main(command) == 0
        assert figure.stat().st_size > 10_000
    shown = capsys.readouterr().out
    for piece in ("rejected flux", "Where the light goes", "100-year view", "standing view", "Dec"):
        assert piece in shown
    assert max(len(line) for line in shown.splitlines()) <= 110
    bad = tmp_path / "no" / "place.png"
    assert main(["cell", str(project), "20", "16", "--figure", str(bad)]) == 5


def test_snow_all_year(project: Path, capsys: pytest.CaptureFixture[str]) -> None:
    told = facts(project, (68.0, 8.0), capsys)
    assert told["layers"]["rejected_flux"] == 0
    assert told["layers"]["tilt"] is None
    assert main(["cell", str(project), "68", "8"]) == 0
    assert "covered by snow" in capsys.readouterr().out


@pytest.mark.parametrize(
    ("place", "piece"), [(("80", "0"), "lies outside"), (("-68", "-170"), "Nothing is known")]
)
def test_places_without_an_answer(
    project: Path, place: tuple[str, str], piece: str, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["cell", str(project), *place]) == 3
    said = capsys.readouterr().err
    assert piece in said
    assert said.count("\n") == 1
