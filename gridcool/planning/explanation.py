"""One place explained: plain facts from the engine's answers, ready for text, JSON and a figure."""

from __future__ import annotations

from typing import Any

import numpy as np
import xarray as xr

from gridcool.engine.explain import Explanation, Ledger, year_mean
from gridcool.physics.soil import SOILS, amplitude_at_depth, damping_depth
from gridcool.planning.worth import (
    PanelCosts,
    cost_per_tonne_100yr,
    cost_per_tonne_standing,
    energy_payback_days,
)
from gridcool.variables import layer_variables

PARTS = {
    "uncertainty_irradiance": "of the irradiance estimate",
    "uncertainty_albedo": "of the albedo",
    "uncertainty_cloud_distribution": "of the cloud within the month",
    "uncertainty_years": "of means over few years",
    "flux_uncertainty": "together",
}
#: Depths at which the cooling of the ground is told, m.
DEPTHS = (0.05, 0.1, 0.2)
EXTRA_LAYERS = (*list(PARTS)[:-1], "monthly_tilt", "monthly_tilt_flux")


def cell_facts(
    layers: xr.Dataset, row: int, column: int, found: Explanation, costs: PanelCosts
) -> dict[str, Any]:
    """Everything that is told of one cell.

    Parameters
    ----------
    layers : xarray.Dataset
        Computed layers of the cell and its neighbours, with those of `EXTRA_LAYERS`.
    row, column : int
        Where the cell stands among them.
    found : Explanation
    costs : PanelCosts

    Returns
    -------
    dict
        Numbers, text, lists and dicts only; missing numbers are None.
    """
    here = layers.isel(latitude=row, longitude=column)
    values = {str(name): _plain(variable.values) for name, variable in here.items()}
    flags = layer_variables()["input_quality"].flags
    quality = int(here["input_quality"])
    return {
        "place": {
            "latitude": float(here["latitude"]),
            "longitude": float((here["longitude"] + 180) % 360 - 180),
        },
        "layers": values,
        "neighbours": {
            name: [float(layers[name].min()), float(layers[name].max())]
            for name in ("rejected_flux", "tilt", "surface_shortwave")
        },
        "quality": [flag.meaning for flag in flags if quality & flag.value],
        "account": {"best": _annual(found.best), "flat": _annual(found.flat)},
        "months": {
            "extraterrestrial": _plain(found.extraterrestrial),
            "irradiance": _plain(found.irradiance),
            "beam": _plain(found.beam),
            "albedo": _plain(found.albedo),
            "rejected": _plain(found.best.rejected),
            "rejected_flat": _plain(found.flat.rejected),
            "tilt": values["monthly_tilt"],
            "tilt_flux": values["monthly_tilt_flux"],
            "snow": [bool(snow) for snow in found.snow],
        },
        "response": {
            "east": _plain(found.east),
            "north": _plain(found.north),
            "flux": _plain(found.response),
        },
        "uncertainty": {text: values[name] for name, text in PARTS.items()},
        "ground": _ground(values.get("daytime_cooling")),
        "worth": _worth(values, costs),
    }


def _annual(ledger: Ledger) -> dict[str, float]:
    return {name: year_mean(months) for name, months in vars(ledger).items()}


def _ground(cooling: float | None) -> list[dict[str, Any]]:
    """How deep the daytime cooling goes in each usual soil."""
    rows = []
    for soil in SOILS:
        shares = amplitude_at_depth(1.0, np.array(DEPTHS), soil.diffusivity)
        rows.append(
            {
                "soil": soil.name,
                "diffusivity": soil.diffusivity,
                "damping_depth": float(damping_depth(soil.diffusivity)),
                "depths": list(DEPTHS),
                "cooling": None if cooling is None else [cooling * float(s) for s in shares],
            }
        )
    return rows


def _worth(values: dict[str, Any], costs: PanelCosts) -> dict[str, Any]:
    flux, standing = values["rejected_flux"], values["co2e_standing"]
    yearly = values["co2e_100yr"]
    money = (costs.cost_low, costs.cost_high)
    return {
        "co2e_standing": standing,
        "co2e_100yr": yearly,
        "mass": costs.mass,
        "embodied_energy": costs.embodied_energy,
        "energy_payback_days": energy_payback_days(flux, costs),
        "cost_per_tonne": {
            "standing": [cost_per_tonne_standing(standing, each) for each in money],
            "100-year": [cost_per_tonne_100yr(yearly, each, costs) for each in money],
        },
    }


def _plain(values: Any) -> Any:
    """Numbers and lists of numbers, with None for what is missing."""
    array = np.asarray(values)
    if array.ndim:
        return [_plain(value) for value in array]
    number = float(array)
    return number if np.isfinite(number) else None
