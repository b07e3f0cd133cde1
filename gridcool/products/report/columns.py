"""The columns of the report's tables, and how each value is shown and sorted."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import pandas as pd

from gridcool.products.report.facts import ReportFacts
from gridcool.products.report.words import chance, facing, number, percent, ranks

MOST_ROWS = 300


@dataclass(frozen=True)
class Column:
    """A column of the report's tables: heading, unit, what it reads, and how it is shown."""

    name: str
    unit: str
    source: str
    digits: int = 3
    text: bool = False


COLUMNS = (
    Column("Rank", "", "rank"),
    Column("Region", "", "region", text=True),
    Column("Rank from–to", "90 %", "rank_low"),
    Column("Chance", "among the first", "chance_top"),
    Column("Suitability", "0 to 1", "suitability_mean"),
    Column("Flux", "W m⁻²", "rejected_flux_mean"),
    Column("±", "W m⁻²", "flux_uncertainty", 2),
    Column("Panel", "", "tilt", text=True),
    Column("Eligible", "km²", "eligible_km2"),
    Column("of area", "", "eligible_share"),
    Column("Power", "TW", "rejected_power_tw"),
    Column("CO₂ standing", "Mt, once", "co2e_standing_mt"),
    Column("CO₂ over 100 years", "Mt per year", "co2e_100yr_mt_per_year"),
    Column("Energy payback", "days", "energy_payback_days"),
    Column("Cost per tonne", "100-year view", "cost_per_tonne_low", text=True),
    Column("Low rays", "h per year", "low_ray_hours"),
    Column("Most is lost to", "", "main_exclusion", text=True),
)


def columns_of(facts: ReportFacts) -> list[Column]:
    """Columns that say something: no suitability where there are no criteria."""
    tables = [table for table in (facts.regions, facts.zones) if table is not None]
    kept = []
    for column in COLUMNS:
        held = [table[column.source] for table in tables]
        empty = all(values.isna().all() or (values == "").all() for values in held)
        if not empty or column.source in ("rank", "region"):
            kept.append(column)
    return kept


def rows_of(facts: ReportFacts, table: pd.DataFrame | None) -> list[dict[str, Any]]:
    """What stands in each row: whether it is among the first, and its cells."""
    if table is None:
        return []
    columns = columns_of(facts)
    return [
        {
            "first": not pd.isna(row["rank"]) and row["rank"] <= facts.assumptions.top,
            "cells": [
                {"shown": _shown(column, row), "text": column.text, "value": _value(column, row)}
                for column in columns
            ],
        }
        for row in table.head(MOST_ROWS).to_dict("records")
    ]


def _shown(column: Column, row: dict[Any, Any]) -> str:
    value = row[column.source]
    if column.source == "rank_low":
        return ranks(value, row["rank_high"])
    if column.source == "chance_top":
        return chance(value)
    if column.source == "eligible_share":
        return percent(value)
    if column.source == "tilt":
        return facing(value, row["azimuth"])
    if column.source == "cost_per_tonne_low":
        high = row["cost_per_tonne_high"]
        return f"{number(value, 2)} to {number(high, 2)}" if not pd.isna(value) else number(value)
    if column.text:
        return str(value)
    if column.source == "rank":
        return number(None) if pd.isna(value) else str(int(value))
    return number(value, column.digits)


def _value(column: Column, row: dict[Any, Any]) -> str:
    """What the browser sorts by."""
    value = row[column.source]
    return "" if column.text or pd.isna(value) else repr(float(value))
