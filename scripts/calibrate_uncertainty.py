"""Compare monthly irradiance with hourly station files, leave-one-station-out.

    python scripts/calibrate_uncertainty.py FOLDER

FOLDER holds stations/*.epw.gz (hourly files in the EPW format). Prints bias and rms of the three
estimates by station and in all, the error model's constants, and how many of the errors of stations
left out of the fit lie inside one and two standard uncertainties.
"""

from __future__ import annotations

import gzip
import sys
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gridcool.engine.blocks import solve
from gridcool.engine.options import Sky

Array = NDArray[np.float64]

SOURCES = ("cloud", "temperature-range", "blend")
MONTH, TEMPERATURE, GLOBAL, SKY_COVER, WATER, AEROSOL, ALBEDO = 1, 6, 13, 22, 28, 29, 32


@dataclass(frozen=True)
class Station:
    """Monthly means of one station, shape (12,)."""

    name: str
    latitude: float
    elevation: float
    irradiance: Array
    cloud: Array
    temperature_range: Array
    water: Array
    aerosol: Array
    albedo: Array


def read_station(path: Path) -> Station:
    """Monthly means of an hourly file."""
    with gzip.open(path, "rt", encoding="latin-1") as file:
        lines = file.read().splitlines()
    place = lines[0].split(",")
    rows = np.array([[_number(cell) for cell in line.split(",")[:35]] for line in lines[8:]])
    month = rows[:, MONTH].astype(int)

    def means(column: int) -> Array:
        return np.array([rows[month == m, column].mean() for m in range(1, 13)])

    days = [rows[month == m, TEMPERATURE].reshape(-1, 24) for m in range(1, 13)]
    return Station(
        name=place[1],
        latitude=float(place[6]),
        elevation=float(place[9]),
        irradiance=means(GLOBAL),
        cloud=means(SKY_COVER) / 10,
        temperature_range=np.array([np.ptp(day, axis=1).mean() for day in days]),
        water=means(WATER) / 10,  # the files count tenths of a millimetre
        aerosol=means(AEROSOL),
        albedo=means(ALBEDO),
    )


def _number(cell: str) -> float:
    try:
        return float(cell)
    except ValueError:
        return np.nan


def estimate(station: Station, sky: Sky, *, own_air: bool, clear: bool = False) -> Array:
    """What the engine says of the station's twelve months, W m-2."""
    dims = ("month", "latitude", "longitude")

    def field(values: Array) -> tuple[tuple[str, ...], Array]:
        return dims, np.broadcast_to(values, (12,))[:, None, None]

    data = {
        "albedo": field(station.albedo if own_air else np.array(0.2)),
        "cloud_fraction": field(np.array(0.0) if clear else station.cloud),
        "temperature_range": field(station.temperature_range),
        "elevation": (dims[1:], np.array([[station.elevation]])),
    }
    if own_air:
        data["precipitable_water"] = field(station.water)
        data["aerosol_optical_depth"] = field(station.aerosol)
    dataset = xr.Dataset(
        data,
        coords={"month": np.arange(1, 13), "latitude": [station.latitude], "longitude": [0.0]},
    )
    answer = solve(dataset, sky=sky)["monthly_surface_shortwave"]
    return np.asarray(answer.values[:, 0, 0], float)


def figures(error: Array) -> str:
    """Bias and rms of errors."""
    return f"bias {error.mean():+6.1f} rms {np.sqrt((error**2).mean()):5.1f}"


def coverage(error: Array, scale: Array) -> tuple[float, float]:
    """Share of errors of each left-out station inside one and two standard uncertainties.

    ``error`` and ``scale``: (stations, 12); the uncertainty is a constant times the scale, and the
    constant is fitted on the other stations.
    """
    inside = []
    for left_out in range(len(error)):
        rest = np.delete(error / scale, left_out, axis=0)
        constant = np.sqrt((rest**2).mean())
        inside.append(np.abs(error[left_out]) / (constant * scale[left_out]))
    ratio = np.array(inside)
    return float((ratio <= 1).mean()), float((ratio <= 2).mean())


def months_share(error: Array, scale: Array) -> float:
    """Correlation between the errors of two months of a station."""
    relative = error / scale
    pairs = [np.outer(row, row)[~np.eye(12, dtype=bool)].mean() for row in relative]
    return float(np.mean(pairs) / (relative**2).mean())


def report(stations: list[Station], *, own_air: bool) -> None:
    """All figures with the default air, or with the files' own water, aerosol and albedo."""
    print("own water, aerosol and albedo" if own_air else "default air, albedo 0.2")
    truth = np.array([s.irradiance for s in stations])
    ceiling = np.array(
        [estimate(s, Sky(irradiance="cloud"), own_air=own_air, clear=True) for s in stations]
    )
    for source in SOURCES:
        sky = Sky(irradiance=source)
        found = np.array([estimate(s, sky, own_air=own_air) for s in stations])
        error = found - truth
        for station, row in zip(stations, error, strict=True):
            print(f"  {source:<18}{station.name:<36}{figures(row)}")
        one, two = coverage(error, ceiling)
        even = [f"{100 * part:.0f} %" for part in coverage(error, np.ones_like(error))]
        share = np.sqrt(((error / ceiling) ** 2).mean())
        print(f"  {source:<18}{'all':<36}{figures(error)}")
        print(
            f"  {'':<18}share of clear sky {share:.3f}, correlation of months "
            f"{months_share(error, ceiling):.2f}; left-out coverage {100 * one:.0f} % and "
            f"{100 * two:.0f} % (a constant in W m-2: {' and '.join(even)})"
        )


def main() -> None:
    """Print the report."""
    paths = sorted(Path(sys.argv[1]).glob("stations/*.epw.gz"))
    stations = [read_station(path) for path in paths]
    report(stations, own_air=False)
    report(stations, own_air=True)


if __name__ == "__main__":
    main()
