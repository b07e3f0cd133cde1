"""Invented cells over the whole range of sun, air, ground and cloud, from a seed."""

from __future__ import annotations

import numpy as np
from direct_quadrature import Cell


def random_cells(seed: int, count: int) -> list[Cell]:
    """Invented cells, 75°S to 75°N, over the whole range of air, ground and cloud.

    The last quarter has a diurnal cloud cycle, in 24 or 8 bins of the solar day.
    """
    rng = np.random.default_rng(seed)
    return [_random_cell(rng, hourly=i >= count - count // 4) for i in range(count)]


def _random_cell(rng: np.random.Generator, *, hourly: bool) -> Cell:
    months = np.arange(12)
    latitude = rng.uniform(-75, 75)
    winter = np.cos(2 * np.pi * (months - (0 if latitude > 0 else 6)) / 12)

    albedo = rng.uniform(0.06, 0.42) + rng.uniform(0, 0.05) * winter
    if abs(latitude) > 35 and rng.random() < 0.6:
        albedo = np.where(winter > rng.uniform(-0.6, 0.95), rng.uniform(0.5, 0.85), albedo)
    if rng.random() < 0.1:
        albedo = np.clip(albedo + 0.25, 0, 0.49)

    cloud = rng.uniform(0.02, 0.95) + rng.uniform(-0.25, 0.25) * winter
    cloud = np.clip(cloud + rng.normal(0, 0.04, 12), 0.0, 1.0)
    if hourly:
        bins = int(rng.choice([8, 24]))
        hour = (np.arange(bins) + 0.5) * 24 / bins
        cycle = np.cos(2 * np.pi * (hour - rng.uniform(0, 24)) / 24)
        cloud = np.clip(cloud[:, None] + rng.uniform(0.05, 0.3) * cycle, 0.0, 1.0)

    aerosol = np.exp(rng.uniform(np.log(0.01), np.log(1.2)))
    water = np.exp(rng.uniform(np.log(0.1), np.log(6.5)))
    return Cell(
        latitude=float(latitude),
        albedo=np.clip(albedo, 0.03, 0.9),
        cloud=cloud,
        elevation=float(rng.choice([0.0, rng.uniform(0, 5000)])),
        water_cm=np.clip(water * (1 - 0.3 * rng.random() * winter), 0.1, 6.5),
        aerosol_550=np.clip(aerosol * (1 + rng.uniform(-0.4, 0.4, 12)), 0.01, 1.2),
        ozone_cm=np.clip(rng.uniform(0.2, 0.5) + rng.normal(0, 0.02, 12), 0.2, 0.5),
    )
