"""How the day's heat goes into the ground, and what shade and reflection take from it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

FloatArray = NDArray[np.floating]

DAY = 86400.0  # s


@dataclass(frozen=True)
class Soil:
    """One kind of ground.

    Attributes
    ----------
    name : str
    heat_capacity : float
        Per volume, MJ m-3 K-1.
    conductivity : float
        W m-1 K-1.
    """

    name: str
    heat_capacity: float
    conductivity: float

    @property
    def diffusivity(self) -> float:
        """κ, thermal diffusivity, m2 s-1."""
        return self.conductivity / self.heat_capacity * 1e-6


#: Usual soils at three water contents (De Vries 1963; Moene & van Dam 2014, Transport in the
#: Atmosphere–Vegetation–Soil Continuum, table 2.2). Moist is about half, wet all of the pores.
SOILS: tuple[Soil, ...] = (
    Soil("sand, dry", 1.28, 0.24),
    Soil("sand, moist", 2.12, 2.1),
    Soil("sand, wet", 2.96, 2.5),
    Soil("clay, dry", 1.43, 0.15),
    Soil("clay, moist", 2.27, 0.9),
    Soil("clay, wet", 3.10, 1.4),
    Soil("peat, dry", 0.25, 0.04),
    Soil("peat, moist", 2.13, 0.27),
    Soil("peat, wet", 4.01, 0.50),
    Soil("rock", 2.03, 2.9),
)


def damping_depth(diffusivity: ArrayLike, period: float = DAY) -> FloatArray:
    """Depth at which a temperature wave has shrunk to 1/e, √(κP/π), metres.

    Carslaw & Jaeger (1959), Conduction of Heat in Solids, 2.6.

    Parameters
    ----------
    diffusivity : array
        κ, m2 s-1.
    period : float
        P, seconds.
    """
    return np.asarray(np.sqrt(np.asarray(diffusivity) * period / np.pi))


def amplitude_at_depth(
    surface_amplitude: ArrayLike, depth: ArrayLike, diffusivity: ArrayLike, period: float = DAY
) -> FloatArray:
    """Amplitude of the wave at a depth in metres, in the unit of the surface's: A e^(−z/d)."""
    shrunk = np.exp(-np.asarray(depth) / damping_depth(diffusivity, period))
    return np.asarray(np.asarray(surface_amplitude) * shrunk)


def daytime_cooling(
    temperature_range: ArrayLike, ground_cover: ArrayLike, absorbed_cut: ArrayLike
) -> FloatArray:
    """Index of daytime cooling of the air by a panel field, K.

    DTR × the field's fractional cut in absorbed shortwave, that is the ground cover times the cut
    under one panel; for flat panels the cut is (ρ−α)/(1−α). It scales the observed diurnal range
    and does not model the weather.
    """
    return np.asarray(
        np.asarray(temperature_range) * np.asarray(ground_cover) * np.asarray(absorbed_cut)
    )
