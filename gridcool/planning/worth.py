"""What a panel's flux is worth: carbon-dioxide equivalents, energy payback, cost per tonne.

The two carbon-dioxide views answer different questions and never share a figure: *standing* credits
the panel once with the carbon dioxide whose forcing it offsets while it stands; *over 100 years*
credits every year of its life with an emission.
"""

from __future__ import annotations

from dataclasses import dataclass

DAY = 86400.0  # s
TONNE = 1000.0  # kg


@dataclass(frozen=True)
class PanelCosts:
    """One square metre of panel.

    Attributes
    ----------
    lifetime_years : float
    mass : float
        kg m-2; 4 mm of glass at 2500 kg m-3 is 10.
    embodied_energy : float
        MJ m-2; 15 MJ per kg of glass (Hammond & Jones, Inventory of Carbon and Energy).
    cost_low, cost_high : float
        Money per m2: a reflector film or sheet on its own, and a framed one with foundations.
    """

    lifetime_years: float
    mass: float
    embodied_energy: float
    cost_low: float
    cost_high: float


def energy_payback_days(flux: float, costs: PanelCosts) -> float | None:
    """Days after which the panel has rejected the energy that making it took; None without flux."""
    return costs.embodied_energy * 1e6 / (flux * DAY) if flux > 0 else None


def cost_per_tonne_standing(standing: float, cost: float) -> float | None:
    """Money per tonne of standing equivalent; ``standing`` in kg per m2."""
    return cost / (standing / TONNE) if standing > 0 else None


def cost_per_tonne_100yr(yearly: float, cost: float, costs: PanelCosts) -> float | None:
    """Money per tonne offset over 100 years, all years of the panel's life together.

    ``yearly`` in kg per m2 and year.
    """
    tonnes = yearly * costs.lifetime_years / TONNE
    return cost / tonnes if tonnes > 0 else None
