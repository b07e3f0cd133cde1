"""One place explained: as text for a terminal and as one figure for a document.

Both take the same plain facts, which are also what JSON shows, see `gridcool.pipeline.cell`.
"""

from __future__ import annotations

import textwrap
from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Any

import numpy as np

from gridcool.errors import OutputError

Facts = Mapping[str, Any]

MONTHS = ("Jan", "Feb", "Mar", "Apr", "May", "Jun", "Jul", "Aug", "Sep", "Oct", "Nov", "Dec")
LEDGER = (
    ("caught", "sun and sky on the face"),
    ("absorbed", "− kept by the panel"),
    ("reflected", "= sent on by the panel"),
    ("lost", "− absorbed by air, cloud and ground"),
    ("direct", "leaves through air and cloud at once"),
    ("returned", "+ comes back, meets the ground, leaves then"),
    ("forgone", "− the bare ground would have sent anyway"),
    ("rejected", "= rejected flux"),
)
# Our own few colours, told apart by people who see red and green alike.
BLUE, AMBER, SLATE, PALE = "#1f5a8c", "#d98a1f", "#55606b", "#c9d6e2"


def cell_lines(facts: Facts) -> Iterator[str]:
    """The facts as short lines."""
    place, layers = facts["place"], facts["layers"]
    yield f"{facts['title']}: {_latitude(place['latitude'])}, {_longitude(place['longitude'])}"
    yield f"cell centre nearest to the place asked for; elevation {place['elevation']}"
    yield ""
    low, high = facts["neighbours"]["rejected_flux"]
    yield (
        f"rejected flux {layers['rejected_flux']:.1f} ± {layers['flux_uncertainty']:.1f} W m-2 of "
        f"panel (neighbours {low:.1f} to {high:.1f})"
    )
    yield f"best panel    {_orientation(layers['tilt'], layers['azimuth'])}"
    yield (
        f"lying flat    {layers['rejected_flux_flat']:.1f} W m-2, so the tilt brings "
        f"{_percent(layers['orientation_gain'])}"
    )
    yield from _seasons(layers)
    yield ""
    yield "Where the light goes, annual means, W m-2 of panel        best panel   lying flat"
    for key, text in LEDGER:
        pair = (facts["account"][which][key] for which in ("best", "flat"))
        yield f"  {text:<50}" + "".join(f"{value:13.2f}" for value in pair)
    yield ""
    yield "month   above the   ground   albedo  rejected  lying  best tilt   flux"
    yield "       atmosphere    W m-2             flux     flat  of month  at it"
    for index, name in enumerate(MONTHS):
        yield f"{name:<6}" + _month(facts["months"], index)
    yield ""
    yield "Standard uncertainty of the flux, W m-2"
    for name, value in facts["uncertainty"].items():
        yield f"  {name:<50}{value:13.2f}"
    yield ""
    yield from _ground(layers.get("daytime_cooling"), facts["ground"])
    yield ""
    yield from _worth(facts["worth"])
    yield ""
    yield f"input quality: {', '.join(facts['quality']) or 'nothing to report'}"
    yield f"low rays: {_low_rays(layers)}"
    yield ""
    yield from textwrap.wrap(facts["caution"], 96)


def _low_rays(layers: Facts) -> str:
    hours, direction = layers["low_ray_hours"], layers["low_ray_direction"]
    if hours is None:
        return "none, the panel is covered"
    most = "" if direction is None else f", most to {direction:.0f}° and its mirror image"
    return f"{hours:.0f} hours of sun a year send the beam below 10° or down{most}"


def _month(months: Facts, index: int) -> str:
    tilt = months["tilt"][index]
    snow = "  snow" if months["snow"][index] else ""
    return (
        f"{months['extraterrestrial'][index]:11.1f}{months['irradiance'][index]:9.1f}"
        f"{months['albedo'][index]:9.3f}{months['rejected'][index]:10.1f}"
        f"{months['rejected_flat'][index]:7.1f}"
        + ("         -" if tilt is None else f"{tilt:10.1f}")
        + f"{months['tilt_flux'][index]:7.1f}{snow}"
    )


def _ground(cooling: float | None, soils: list[Facts]) -> Iterator[str]:
    if cooling is None:
        yield "Daytime cooling: not known without a diurnal temperature range"
        return
    depths = "".join(f"{100 * depth:8.0f} cm" for depth in soils[0]["depths"])
    yield f"Daytime cooling of the air by a field {cooling:.1f} K (an index, not a forecast)"
    yield f"  and of the ground below, K{'diffusivity m2 s-1':>24}  wave reach{depths}"
    for row in soils:
        cooled = "".join(f"{value:11.2f}" for value in row["cooling"])
        reach = f"{100 * row['damping_depth']:9.1f} cm"
        yield f"  {row['soil']:<26}{row['diffusivity']:22.2e}{reach}{cooled}"


def _worth(worth: Facts) -> Iterator[str]:
    yield "Worth per m2 of panel"
    yield f"  carbon dioxide, standing view    {worth['co2e_standing']:.0f} kg while it stands"
    yield f"  carbon dioxide, 100-year view    {worth['co2e_100yr']:.2f} kg for each year it stands"
    yield (
        f"  mass {worth['mass']:g} kg, embodied energy {worth['embodied_energy']:g} MJ, back in "
        f"{_number(worth['energy_payback_days'])} days"
    )
    for view in ("standing", "100-year"):
        low, high = worth["cost_per_tonne"][view]
        yield f"  cost per tonne, {view:<8} view     {_number(low)} to {_number(high)}"


def _orientation(tilt: float | None, azimuth: float | None) -> str:
    if tilt is None:
        return "covered by snow in every month that has sun"
    if azimuth is None:
        return "flat"
    return f"tilted {tilt:.1f} degrees, looking to {azimuth:.0f} degrees from north"


def _seasons(layers: Facts) -> Iterator[str]:
    starts, tilts = layers["seasonal_start"], layers["seasonal_tilt"]
    if tilts[0] is None:
        return
    for start, tilt, side in zip(starts, tilts, layers["seasonal_azimuth"], strict=True):
        yield f"  from {MONTHS[int(start) - 1]}    {_orientation(tilt, side)}"
    yield f"  turning it twice a year brings {_percent(layers['seasonal_gain'])} more"


def _percent(share: float | None) -> str:
    return "nothing" if share is None else f"{100 * share:+.1f} %"


def _number(value: float | None) -> str:
    return "-" if value is None else f"{value:.0f}"


def _latitude(value: float) -> str:
    return f"{abs(value):.3f} {'S' if value < 0 else 'N'}"


def _longitude(value: float) -> str:
    return f"{abs(value):.3f} {'W' if value < 0 else 'E'}"


def draw_cell(facts: Facts, path: Path) -> None:
    """One figure with the months, the orientations, the ledger and the uncertainty.

    Parameters
    ----------
    facts : mapping
    path : Path
        Ending in .png or .svg.

    Raises
    ------
    OutputError
        If the file cannot be written.
    """
    from matplotlib.figure import Figure

    figure = Figure(figsize=(11, 7.6), layout="constrained")
    months, ledger, response, doubt = figure.subplots(2, 2).ravel()
    place, layers = facts["place"], facts["layers"]
    figure.suptitle(
        f"{facts['title']}: {_latitude(place['latitude'])}, {_longitude(place['longitude'])}\n"
        f"Rejected flux {layers['rejected_flux']:.0f} ± {layers['flux_uncertainty']:.0f} "
        f"W m$^{{-2}}$ of panel, {_orientation(layers['tilt'], layers['azimuth'])}",
        fontsize=11,
    )
    _draw_months(months, facts["months"])
    _draw_ledger(ledger, facts["account"]["best"])
    _draw_response(response, facts["response"], layers)
    _draw_uncertainty(doubt, facts["uncertainty"])
    figure.supxlabel(facts["caution"], fontsize=7, wrap=True)
    try:
        figure.savefig(path, dpi=150)
    except (OSError, ValueError) as problem:
        raise OutputError(f"Figure {path} cannot be written: {problem}.") from None


def _draw_months(axes: Any, months: Facts) -> None:
    place = np.arange(12)
    axes.bar(place - 0.2, months["rejected"], 0.4, color=BLUE, label="best fixed panel")
    axes.bar(place + 0.2, months["rejected_flat"], 0.4, color=AMBER, label="lying flat")
    axes.plot(
        place, months["irradiance"], color=SLATE, marker=".", label="irradiance of the ground"
    )
    axes.set_xticks(place, MONTHS)
    axes.set_ylabel("W m$^{-2}$")
    axes.set_title("Rejected flux by month", loc="left", fontsize=10)
    axes.legend(fontsize=8, frameon=False)


def _draw_ledger(axes: Any, account: Facts) -> None:
    rows = [(key, text) for key, text in LEDGER if key != "rejected"] + [LEDGER[-1]]
    values = [account[key] for key, _ in rows]
    colours = [BLUE if key in ("direct", "returned", "rejected") else PALE for key, _ in rows]
    axes.barh(np.arange(len(rows)), values, color=colours)
    axes.set_yticks(np.arange(len(rows)), [text for _, text in rows], fontsize=8)
    axes.invert_yaxis()
    for row, value in enumerate(values):
        axes.text(max(value, 0), row, f" {value:.1f}", va="center", fontsize=8)
    axes.set_xlabel("W m$^{-2}$ of panel, annual mean")
    axes.set_title("Where the light goes", loc="left", fontsize=10)
    axes.margins(x=0.15)


def _draw_response(axes: Any, response: Facts, layers: Facts) -> None:
    east, north, flux = (np.array(response[key]) for key in ("east", "north", "flux"))
    axes.set_title("Flux of every orientation", loc="left", fontsize=10)
    if not east.any():
        axes.plot(-north, flux, color=BLUE)
        sign = -1 if layers["azimuth"] == 0 else 1
        axes.plot(sign * (layers["tilt"] or 0), layers["rejected_flux"], "o", color=AMBER)
        axes.set_xlabel("tilt, degrees (looking south +, north −)")
        axes.set_ylabel("W m$^{-2}$ of panel")
        return
    shown = axes.tricontourf(east, north, flux, levels=14, cmap="cividis")
    axes.figure.colorbar(shown, ax=axes, label="W m$^{-2}$ of panel")
    gamma = np.deg2rad(layers["azimuth"] or 0)
    tilt = layers["tilt"] or 0
    axes.plot(tilt * np.sin(gamma), tilt * np.cos(gamma), "o", color=AMBER)
    axes.set_aspect("equal")
    axes.set_xlabel("tilt to the east, degrees")
    axes.set_ylabel("tilt to the north, degrees")


def _draw_uncertainty(axes: Any, parts: Facts) -> None:
    place = np.arange(len(parts))
    axes.barh(place, list(parts.values()), color=SLATE)
    axes.set_yticks(place, list(parts), fontsize=8)
    axes.invert_yaxis()
    axes.set_xlabel("standard uncertainty, W m$^{-2}$")
    axes.set_title("How sure it is", loc="left", fontsize=10)
