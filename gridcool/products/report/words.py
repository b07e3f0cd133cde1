"""Numbers and findings as people say them."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Any

import pandas as pd

from gridcool.products.report.facts import Assumptions

MISSING = "–"
COMPASS = ("north", "north-east", "east", "south-east", "south", "south-west", "west", "north-west")


def number(value: Any, digits: int = 3) -> str:
    """A number with so many significant digits and thin spaces between thousands."""
    if value is None or pd.isna(value):
        return MISSING
    size = abs(float(value))
    if size == 0:
        return "0"
    power = math.floor(math.log10(size))
    if power >= 9:
        exponent = "".join("⁰¹²³⁴⁵⁶⁷⁸⁹"[int(each)] for each in str(power))
        return f"{float(value) / 10**power:.{digits - 1}f} × 10{exponent}"
    if power >= 6:
        return f"{float(f'{float(value) / 1e6:.{digits}g}'):g} million"
    decimals = max(0, digits - 1 - power)
    return f"{round(float(value), decimals):,.{min(decimals, 6)}f}".replace(",", "\u202f")


def percent(share: Any) -> str:
    """A share in percent; what is nearly sure is not said to be sure."""
    if share is None or pd.isna(share):
        return MISSING
    value = 100 * float(share)
    if 0 < value < 1:
        return "under 1 %"
    if 99 < value < 100:
        return "over 99 %"
    return f"{value:.0f} %"


def chance(share: Any) -> str:
    """A chance counted over draws: never said to be quite sure."""
    if share is None or pd.isna(share):
        return MISSING
    return percent(min(max(float(share), 1e-9), 1 - 1e-9))


def unit(text: str) -> str:
    """A unit with its exponents raised."""
    return text.replace("-2", "⁻²").replace("-1", "⁻¹")


def facing(tilt: Any, azimuth: Any) -> str:
    """How a panel stands."""
    if pd.isna(tilt):
        return MISSING
    if pd.isna(azimuth) or float(tilt) < 0.5:
        return "flat"
    return f"{float(tilt):.0f}° {COMPASS[round(float(azimuth) / 45) % 8]}"


def ranks(low: Any, high: Any) -> str:
    """A rank interval."""
    if pd.isna(low) or pd.isna(high):
        return MISSING
    return f"{int(low)}" if int(low) == int(high) else f"{int(low)} to {int(high)}"


def listed(names: Sequence[str]) -> str:
    """Names in a row."""
    if len(names) < 2:
        return "".join(names)
    return ", ".join(names[:-1]) + " and " + names[-1]


def headline(table: pd.DataFrame, given: Assumptions) -> dict[str, Any]:
    """The answer in a few sentences: which come first, how sure, and how much."""
    ranked = table[table["rank"].notna()]
    if ranked.empty:
        return {"first": [], "sure": "No region has an eligible cell.", "much": "", "rivals": ""}
    top = ranked.head(given.top)
    rivals = ranked[(ranked["rank_low"] <= given.top) & (ranked["rank"] > given.top)]
    sure = top[top["chance_top"] >= 0.9]
    best = ranked.iloc[0]
    return {
        "first": [str(name) for name in top["region"]],
        "sure": _sure(top, sure, given.top),
        "rivals": _rivals([str(name) for name in rivals["region"]], given.top),
        "much": (
            f"A square metre of panel in the first region sends "
            f"{number(best['rejected_flux_mean'])} W more out of the atmosphere than the ground "
            f"it stands on, on average over the year (standard uncertainty "
            f"{number(best['flux_uncertainty'], 2)} W)."
        ),
    }


def _sure(top: pd.DataFrame, sure: pd.DataFrame, wanted: int) -> str:
    if top["chance_top"].isna().all():
        return "How sure the order is was not worked out."
    best = "the best" if wanted == 1 else f"the best {wanted}"
    if len(sure) == len(top):
        return f"Each of them is among {best} with a chance of at least nine in ten."
    chances = [chance(each) for each in top["chance_top"]]
    return f"Their chances of really being among {best} are {listed(chances)}, in this order."


def _rivals(names: list[str], wanted: int) -> str:
    if not names:
        return "No other region could reach them within the 90 % interval of its rank."
    shown = listed(names) if len(names) <= 4 else f"{listed(names[:3])} and {len(names) - 3} more"
    verb = "comes" if len(names) == 1 else "come"
    return (
        f"Too close to call: {shown} {verb} later, but could stand among the first {wanted} as "
        "well (90 % interval)."
    )
