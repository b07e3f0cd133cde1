"""A wanted rejected power: which regions in rank order reach it, and with how much panel."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd

from gridcool.planning.worth import PanelCosts

PETAJOULE = 1e9  # MJ
MEGATONNE = 1e9  # kg
TARGET_COLUMNS = (
    *("rank", "region", "panel_km2", "rejected_power_tw", "cumulative_power_tw", "share_used"),
)


@dataclass(frozen=True, eq=False)
class Target:
    """How far the regions reach towards a wanted rejected power.

    Attributes
    ----------
    wanted_tw, reached_tw : float
        Rejected power, TW.
    regions : pandas.DataFrame
        The regions used, best first, columns as `TARGET_COLUMNS`; the last one may be used in part.
    panel_km2, mass_mt, energy_pj : float
        Panel area, its mass in Mt and the energy that making it takes in PJ.
    cost_low, cost_high : float
        Money, in the unit of the settings.
    years : float or None
        How long building takes at the stated pace.
    """

    wanted_tw: float
    reached_tw: float
    regions: pd.DataFrame
    panel_km2: float
    mass_mt: float
    energy_pj: float
    cost_low: float
    cost_high: float
    years: float | None

    @property
    def reached(self) -> bool:
        """Whether the regions are enough."""
        return self.reached_tw >= self.wanted_tw * (1 - 1e-9)


def reach_target(
    table: pd.DataFrame,
    *,
    rejected_power_tw: float,
    panel_km2_per_year: float | None,
    costs: PanelCosts,
) -> Target:
    """Fill the regions in rank order until the power is reached.

    Regions whose panels reject nothing are passed over.

    Parameters
    ----------
    table : pandas.DataFrame
        From `region_table`.
    rejected_power_tw : float
        TW, above 0.
    panel_km2_per_year : float or None
    costs : PanelCosts
    """
    used = table[table["rank"].notna() & (table["rejected_power_tw"] > 0)].copy()
    before = used["rejected_power_tw"].cumsum() - used["rejected_power_tw"]
    missing = (rejected_power_tw - before).clip(lower=0)
    used["share_used"] = (missing / used["rejected_power_tw"]).clip(upper=1.0)
    used = used[used["share_used"] > 0]
    for column in ("panel_km2", "rejected_power_tw"):
        used[column] = used[column] * used["share_used"]
    used["cumulative_power_tw"] = used["rejected_power_tw"].cumsum()
    panel = float(used["panel_km2"].sum())
    square_metres = panel * 1e6
    return Target(
        wanted_tw=rejected_power_tw,
        reached_tw=float(np.sum(used["rejected_power_tw"])),
        regions=used[list(TARGET_COLUMNS)].reset_index(drop=True),
        panel_km2=panel,
        mass_mt=square_metres * costs.mass / MEGATONNE,
        energy_pj=square_metres * costs.embodied_energy / PETAJOULE,
        cost_low=square_metres * costs.cost_low,
        cost_high=square_metres * costs.cost_high,
        years=None if panel_km2_per_year is None else panel / panel_km2_per_year,
    )
