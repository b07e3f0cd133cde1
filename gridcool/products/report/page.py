"""The report as one self-contained HTML file."""

from __future__ import annotations

import base64
import hashlib
import json
from collections.abc import Sequence
from importlib.resources import files
from pathlib import Path
from typing import Any

import jinja2
import numpy as np
import pandas as pd
from markupsafe import Markup

from gridcool.products.failure import output_errors
from gridcool.products.ramps import MISSING, ramp
from gridcool.products.report.columns import COLUMNS, MOST_ROWS, columns_of, rows_of
from gridcool.products.report.facts import ReportFacts
from gridcool.products.report.shapes import drawing
from gridcool.products.report.words import (
    headline,
    listed,
    number,
    percent,
    ranks,
    unit,
)

RANKED_BY = {
    "suitability": "suitability, the weighted mean of the criteria",
    "rejected_flux": "the mean flux that a square metre of panel rejects",
}


#: What the picture of the regions can be coloured by, with its unit.
SHADES = {
    "suitability_mean": "",
    "rejected_flux_mean": "W m⁻²",
    "chance_top": "",
    "eligible_share": "",
    "tilt": "°",
}


def write_report(facts: ReportFacts, path: Path) -> None:
    """Write the report.

    Parameters
    ----------
    facts : ReportFacts
    path : Path

    Raises
    ------
    OutputError
        If the file cannot be written.
    """
    with output_errors(path):
        path.write_text(render(facts), encoding="utf-8")


def render(facts: ReportFacts) -> str:
    """The report as HTML. Every text is escaped; nothing outside the file is asked for."""
    environment = jinja2.Environment(
        autoescape=True, trim_blocks=True, lstrip_blocks=True, undefined=jinja2.StrictUndefined
    )
    script = _asset("report.js")
    digest = base64.b64encode(hashlib.sha256(script.encode()).digest()).decode()
    context: dict[str, Any] = {
        "facts": facts,
        "css": Markup(_asset("report.css")),  # our own file, not a user's text
        "script": Markup(script),
        "script_hash": f"sha256-{digest}",
        "ranked_by": RANKED_BY[facts.assumptions.ranked_by],
        "common_percent": percent(facts.assumptions.common_share),
        "cover_percent": percent(facts.assumptions.ground_cover),
        "reflect_percent": percent(facts.assumptions.reflectance),
        "answer": None if facts.regions is None else headline(facts.regions, facts.assumptions),
        "heads": columns_of(facts),
        "region_rows": rows_of(facts, facts.regions),
        "zone_rows": rows_of(facts, facts.zones),
        "pictures": [_picture(each) for each in facts.pictures],
        "layer_rows": [
            (
                *(each.name, each.long_name),
                *map(number, (each.minimum, each.mean, each.maximum)),
                unit(each.units),
            )
            for each in facts.layers
        ],
        **_losses(facts),
        **_sensitivity(facts),
        **_target(facts),
        **_picture_of_regions(facts),
    }
    context["contents"] = _contents(context)
    return environment.from_string(_asset("report.html.j2")).render(context)


def _asset(name: str) -> str:
    folder = files("gridcool") / "products" / "report"
    return (folder / name).read_text(encoding="utf-8")


def _picture(picture: Any) -> dict[str, str]:
    data = base64.b64encode(picture.path.read_bytes()).decode()
    return {"title": picture.title, "caption": picture.caption, "data": data}


def _losses(facts: ReportFacts) -> dict[str, Any]:
    if facts.losses is None:
        return {"loss_rows": [], "more_losses": 0}
    rows = [
        (row["region"], row["reason"], number(row["area_km2"]), number(row["only_km2"]))
        for row in facts.losses.head(MOST_ROWS).to_dict("records")
    ]
    return {"loss_rows": rows, "more_losses": max(0, len(facts.losses) - MOST_ROWS)}


def _sensitivity(facts: ReportFacts) -> dict[str, Any]:
    if facts.sensitivity is None or facts.sensitivity.empty:
        return {"sensitivity_rows": []}
    ordered = facts.sensitivity.sort_values("rank_correlation", kind="stable").head(20)
    rows = []
    for row in ordered.to_dict("records"):
        move = f"{int(row['largest_move']):+d} places" if row["largest_move"] else "none"
        correlation = number(row["rank_correlation"], 2)
        rows.append((row["change"], correlation, move, row["region_moved"], row["top_changes"]))
    return {"sensitivity_rows": rows}


def _target(facts: ReportFacts) -> dict[str, Any]:
    found = facts.target
    if found is None:
        return {"target_rows": [], "target": None, "target_sentence": ""}
    names = [str(name) for name in found.regions["region"]]
    shown = listed(names) if len(names) <= 5 else f"{listed(names[:4])} and {len(names) - 4} more"
    if found.reached:
        sentence = (
            f"A rejected power of {number(found.wanted_tw)} TW is reached with "
            f"{number(found.panel_km2)} km² of panel in {shown}."
        )
    else:
        sentence = (
            f"The regions are not enough for {number(found.wanted_tw)} TW: all of them together "
            f"reject {number(found.reached_tw)} TW with {number(found.panel_km2)} km² of panel."
        )
    rows = [
        (
            int(row["rank"]),
            row["region"],
            number(row["panel_km2"]),
            number(row["rejected_power_tw"]),
            number(row["cumulative_power_tw"]),
            percent(row["share_used"]),
        )
        for row in found.regions.head(MOST_ROWS).to_dict("records")
    ]
    told = {
        "panel": number(found.panel_km2),
        "mass": number(found.mass_mt),
        "energy": number(found.energy_pj),
        "low": number(found.cost_low),
        "high": number(found.cost_high),
        "years": None if found.years is None else number(found.years),
    }
    return {"target_rows": rows, "target": told, "target_sentence": sentence}


def _picture_of_regions(facts: ReportFacts) -> dict[str, Any]:
    """The regions as an SVG picture, with what the page's script needs to colour it anew."""
    table = facts.regions
    drawn = None if table is None else drawing(facts.region_shapes)
    if table is None or drawn is None:
        return {"drawing": None}
    known = {column.source: column for column in COLUMNS}
    columns: list[dict[str, Any]] = []
    for source in SHADES:
        if table[source].isna().all():
            continue
        values = [None if pd.isna(each) else float(each) for each in table[source]]
        name = "Tilt" if source == "tilt" else known[source].name
        columns.append({"name": name, "unit": SHADES[source], "values": values})
    if not columns:
        return {"drawing": None}
    colours = [_hex(colour) for colour in ramp("suitability").colours(9)]
    fills, span = _fills(columns[0]["values"], colours)
    names = [str(name) for name in table["region"]]
    data = {
        "columns": columns,
        "names": names,
        "colours": colours,
        "missing": _hex(MISSING),
    }
    return {
        "drawing": drawn,
        "columns": columns,
        "shown_column": 0,
        "colours": colours,
        "fills": fills,
        "labels": [_label(row) for row in table.to_dict("records")],
        "shown_span": f"{span} {columns[0]['unit']}".rstrip(),
        # Inside a script element only "</" could end it early, and "<!--" begin a comment.
        "shapes_json": Markup(json.dumps(data, ensure_ascii=False).replace("<", "\\u003c")),
    }


def _fills(values: Sequence[float | None], colours: list[str]) -> tuple[list[str], str]:
    known = np.array([each for each in values if each is not None])
    low, high = known.min(), known.max()
    fills = []
    for each in values:
        if each is None:
            fills.append(_hex(MISSING))
            continue
        share = (each - low) / (high - low) if high > low else 0.5
        fills.append(colours[min(len(colours) - 1, int(share * len(colours)))])
    return fills, f"{number(low, 4)} to {number(high, 4)}"


def _label(row: dict[Any, Any]) -> str:
    if pd.isna(row["rank"]):
        return f"{row['region']}: not ranked, {row['main_exclusion'] or 'nothing eligible'}"
    return (
        f"{row['region']}: rank {int(row['rank'])} (from {ranks(row['rank_low'], row['rank_high'])}"
        f"), {number(row['rejected_flux_mean'])} W m⁻²"
    )


def _contents(context: dict[str, Any]) -> list[tuple[str, str]]:
    parts = [
        ("shapes", "Regions", bool(context["drawing"])),
        ("maps", "Maps", bool(context["pictures"])),
        ("regions", "Ranking", bool(context["region_rows"])),
        ("zones", "Zones", bool(context["zone_rows"])),
        ("target", "Target", bool(context["target_rows"])),
        ("excluded", "Left out", True),
        ("sensitivity", "What if", bool(context["sensitivity_rows"])),
        ("method", "Method", True),
        ("doubts", "Uncertainty", True),
        ("cautions", "Cautions", True),
        ("data", "Data", True),
    ]
    return [(name, text) for name, text, there in parts if there]


def _hex(colour: tuple[int, int, int]) -> str:
    return "#{:02x}{:02x}{:02x}".format(*colour)
