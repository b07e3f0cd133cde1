"""What the engine needs to know about panel and sky, as plain frozen numbers."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from gridcool.physics import clouds
from gridcool.physics.irradiance import HARGREAVES_INTERIOR

Irradiance = Literal["cloud", "temperature-range", "blend", "measured"]


@dataclass(frozen=True)
class Panel:
    """The reflector.

    Attributes
    ----------
    reflectance : float
        ρ, effective reflectance of the front: clean reflectance times one minus soiling.
    specular_share : float
        σ, share of the reflected light that leaves as by a mirror; the rest is Lambertian.
    back_reflectance : float
        ρ_b of the back face.
    """

    reflectance: float = 0.92 * 0.97
    specular_share: float = 1.0
    back_reflectance: float = 0.3

    @property
    def matte(self) -> float:
        """Reflectance of the Lambertian part, ρ (1 − σ)."""
        return self.reflectance * (1 - self.specular_share)


@dataclass(frozen=True)
class Sky:
    """How irradiance is estimated, and what clouds and snow do.

    Attributes
    ----------
    irradiance : str
        Source of the surface irradiance.
    cloud_concentration : float
        ν of the beta distribution of cloud fraction within a month.
    cloud_weight : float
        Weight of the cloud estimate in the blend; the rest is the temperature range's.
    hargreaves_coefficient : float
        k_RS, K^-1/2.
    overcast_transmittance, overcast_reflectance : float
        t_c and R_c of an overcast deck.
    snow_albedo : float
        Months with at least this albedo count as snow-covered.
    snow_covers_panel : bool
        Whether the panel rejects nothing in those months.
    """

    irradiance: Irradiance = "blend"
    cloud_concentration: float = 1.0
    cloud_weight: float = 0.7
    hargreaves_coefficient: float = HARGREAVES_INTERIOR
    overcast_transmittance: float = clouds.OVERCAST_TRANSMITTANCE
    overcast_reflectance: float = clouds.OVERCAST_REFLECTANCE
    snow_albedo: float = 0.5
    snow_covers_panel: bool = True


@dataclass(frozen=True)
class Field:
    """The field of panels and the air it stands in.

    Attributes
    ----------
    ground_cover : float
        Panel area over field area.
    carbon_dioxide_ppm : float
        Today's carbon dioxide, for the standing equivalent.
    """

    ground_cover: float = 0.3
    carbon_dioxide_ppm: float = 425.0


@dataclass(frozen=True)
class InputError:
    """Stated standard errors of inputs.

    Attributes
    ----------
    albedo : float
        Of the ground's albedo, the same in all months.
    concentration_factor : float
        Factor on the cloud concentration that stands for one standard error.
    """

    albedo: float = 0.02
    concentration_factor: float = 0.6
