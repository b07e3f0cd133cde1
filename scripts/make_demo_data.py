"""Make the invented climatology and districts of data_demo.

    python scripts/make_demo_data.py data_demo

Nothing in it is real: the continents are smooth noise from a fixed seed, the climate follows a few
rules of thumb (rain belt that follows the sun, clear subtropics, storm tracks, forests, deserts, a
snow line), and the districts bear made-up names.
"""

from __future__ import annotations

import argparse
from pathlib import Path

import geopandas as gpd
import numpy as np
import xarray as xr
from numpy.typing import NDArray
from shapely.geometry import MultiPolygon, Polygon, box
from shapely.ops import unary_union

Array = NDArray[np.float64]

SEED = 15
NOTICE = "Invented for demonstration; no place, climate or district in this file is real."
LATITUDE = np.arange(89.5, -90, -1.0)
LONGITUDE = np.arange(-179.5, 180, 1.0)
PHI, LAM = np.meshgrid(np.deg2rad(LATITUDE), np.deg2rad(LONGITUDE), indexing="ij")
MONTH = np.arange(12)[:, None, None]


def smooth_noise(rng: np.random.Generator, waves: int, roughness: float) -> Array:
    """A smooth field on the sphere, mean 0 and standard deviation 1, without a seam or poles."""
    point = np.stack([np.cos(PHI) * np.cos(LAM), np.cos(PHI) * np.sin(LAM), np.sin(PHI)])
    total = np.zeros_like(PHI)
    for number in range(1, waves + 1):
        for _ in range(6):
            direction = rng.normal(size=3)
            direction *= (0.8 + number) * 1.3 / np.linalg.norm(direction)
            phase = rng.uniform(0, 2 * np.pi)
            total += np.sin(np.tensordot(direction, point, 1) + phase) / number**roughness
    return (total - total.mean()) / total.std()


def bump(latitude: Array | float, centre: Array | float, width: float) -> Array:
    """A bell over latitude, degrees."""
    return np.exp(-(((latitude - centre) / width) ** 2))


def make_fields() -> dict[str, Array]:
    """All fields on the 1° grid: (12, 180, 360) and the elevation (180, 360)."""
    rng = np.random.default_rng(SEED)
    height = smooth_noise(rng, 12, 0.75) - 0.5 + 2.0 * bump(np.rad2deg(PHI), -88, 12)
    land = height > 0
    relief = np.maximum(smooth_noise(rng, 14, 0.6), 0) ** 2
    raised = 120 + 500 * np.maximum(height, 0) + 500 * relief * height
    elevation = np.where(land, 4200 * np.tanh(raised / 4200), 0.0)
    latitude = np.rad2deg(PHI)
    season = np.cos(2 * np.pi * (MONTH - 0.5) / 12)  # one in January
    belt = -9.0 * season  # the rain belt follows the sun
    dryness = smooth_noise(rng, 6, 0.9)

    cloud = 0.50 + 0.20 * bump(latitude, belt, 9) - 0.26 * bump(np.abs(latitude), 22, 11)
    cloud = cloud + 0.24 * bump(np.abs(latitude), 57, 15)
    trade = bump(np.abs(latitude), 20, 9) * np.maximum(smooth_noise(rng, 5, 1.0), 0)
    cloud = cloud + np.where(land, -0.10 * dryness - 0.05, 0.10 * trade + 0.06)
    cloud = np.clip(cloud + 0.05 * smooth_noise(rng, 12, 0.5), 0.06, 0.95)

    dry = np.clip(1.6 - 3.4 * cloud.mean(axis=0) + 0.25 * dryness, 0, 1)
    soil = 0.13 + 0.26 * dry**1.3 + 0.015 * smooth_noise(rng, 12, 0.5)
    cold = 27 - 0.0065 * elevation - 0.0105 * np.abs(latitude) ** 1.95
    temperature = cold - np.sign(latitude) * season * np.minimum(np.abs(latitude), 60) / 60 * 17
    snow = 1 / (1 + np.exp((temperature + 1.5) / 1.6))
    white = 0.52 + 0.22 * np.minimum(3 * dry, 1)  # snow is darker in the forest
    ground = soil + (white - soil) * snow
    water = 0.060 + 0.03 * bump(np.abs(latitude), 75, 25)
    ice = 1 / (1 + np.exp((temperature + 9) / 2.0))
    albedo = np.where(land, ground, water + (0.62 - water) * ice)

    swing = 15.5 - 13.5 * cloud + 4.5 * dry - 3.0 * snow + 0.8 * smooth_noise(rng, 12, 0.5)
    temperature_range = np.where(land, np.clip(swing, 2.5, 21), np.nan)
    return {
        "albedo": np.clip(albedo, 0.05, 0.85),
        "cloud_fraction": cloud,
        "temperature_range": temperature_range,
        "elevation": np.maximum(elevation, 0),
    }


ATTRIBUTES = {
    "albedo": ("surface_albedo", "invented shortwave albedo of the ground", "1"),
    "cloud_fraction": ("cloud_area_fraction", "invented total cloud fraction", "1"),
    "temperature_range": (None, "invented mean diurnal temperature range", "K"),
    "elevation": ("surface_altitude", "invented height above sea level", "m"),
}


def write_field(folder: Path, name: str, values: Array) -> None:
    """One packed and compressed NetCDF file."""
    standard, long, units = ATTRIBUTES[name]
    dims = ("month", "latitude", "longitude") if values.ndim == 3 else ("latitude", "longitude")
    attributes = {"long_name": long, "units": units}
    if standard:
        attributes["standard_name"] = standard
    coordinates = {
        "latitude": ("latitude", LATITUDE, {"standard_name": "latitude", "units": "degrees_north"}),
        "longitude": (
            "longitude",
            LONGITUDE,
            {"standard_name": "longitude", "units": "degrees_east"},
        ),
    }
    if values.ndim == 3:
        coordinates["month"] = ("month", np.arange(1, 13), {"long_name": "month of the year"})
    dataset = xr.Dataset({name: (dims, values, attributes)}, coords=coordinates)
    dataset.attrs = {"Conventions": "CF-1.11", "title": f"Invented {long[9:]}", "comment": NOTICE}
    scale = {"elevation": 1.0, "temperature_range": 0.01}.get(name, 1e-4)
    packed = {"dtype": "int16", "scale_factor": scale, "_FillValue": np.int16(-32768)}
    dataset[name].encoding = {**packed, "zlib": True, "complevel": 9, "shuffle": True}
    dataset.to_netcdf(folder / f"{name}.nc", engine="netcdf4")


# West, south, east, north; east beyond 180 crosses the antimeridian.
DISTRICTS = {
    "Astrelle": (-106, 20, -70, 52),
    "Bovanne": (-82, -12, -20, 20),
    "Carthine": (-16, -6, 30, 26),
    "Dromelund": (30, -18, 62, 6),
    "Elvarre": (15, -40, 75, -19),
    "Fennimar": (75, -34, 125, -12),
    "Gorstane": (80, -66, 135, -35),
    "Hallowmere": (88, -11, 124, 44),
    "Istrane": (125, 8, 168, 45),
    "Jorvale": (169, 20, 215, 60),
    "Kestermark": (150, 61, 200, 82),
}


def outline(land: Array, west: float, south: float, east: float, north: float) -> MultiPolygon:
    """The land cells within bounds, as polygons; ``east`` may pass 180, then it is cut there."""
    cells = []
    for i, j in zip(*np.nonzero(land), strict=True):
        centre = LONGITUDE[j] if LONGITUDE[j] >= west else LONGITUDE[j] + 360
        if west <= centre <= east and south <= LATITUDE[i] <= north:
            cells.append(
                box(LONGITUDE[j] - 0.5, LATITUDE[i] - 0.5, LONGITUDE[j] + 0.5, LATITUDE[i] + 0.5)
            )
    merged = unary_union(cells)
    parts = [merged] if isinstance(merged, Polygon) else list(merged.geoms)
    return MultiPolygon(sorted(parts, key=lambda part: -part.area))


def make_districts(land: Array) -> gpd.GeoDataFrame:
    """The invented districts: boxes cut to the land."""
    rows = [
        {"district": name, "comment": NOTICE, "geometry": outline(land, *bounds)}
        for name, bounds in DISTRICTS.items()
    ]
    return gpd.GeoDataFrame(rows, geometry="geometry", crs="EPSG:4326")


def main() -> None:
    """Write all files into a folder."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("folder", type=Path)
    folder = parser.parse_args().folder
    folder.mkdir(parents=True, exist_ok=True)
    fields = make_fields()
    for name, values in fields.items():
        write_field(folder, name, values)
    districts = make_districts(fields["elevation"] > 0)
    districts.to_file(folder / "districts.geojson", driver="GeoJSON", RFC7946="YES")


if __name__ == "__main__":
    main()
