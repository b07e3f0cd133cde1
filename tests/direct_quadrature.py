"""The energy account by brute force: separate code that shares nothing with the package.

Written from the published formulas alone, instant by instant and term by term, so that the
engine has something independent to be wrong against. Every third day of the year, ten-minute
steps of solar time, months weighted by their lengths; the cloud distribution within a month is
cut into narrow classes whose probabilities come from the incomplete beta function.

Angles are degrees at the door and radians inside; vectors are (east, north, up); hour bins start
at solar midnight.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np
from direct_sky import (
    Air,
    Array,
    Sky,
    air_mass,
    clear_sky,
    cloud_classes,
    declination_and_distance,
    moment_of_sky,
)
from numpy.typing import NDArray

MONTH_DAYS = np.array([31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31])
DAY_STEP = 3  # days 2, 5, 8, …
STEPS_PER_DAY = 144
CLOUD_CLASSES = 400
SOLAR_CONSTANT = 1361.0


@dataclass(frozen=True)
class Panel:
    """One square metre of reflector: clean reflectance after soiling, mirror share, back face."""

    reflectance: float = 0.92 * 0.97
    specular_share: float = 1.0
    back_reflectance: float = 0.3


@dataclass(frozen=True)
class Cell:
    """One place: twelve albedos, cloud as (12,) or (12, hour bins), and its air (12 or scalar)."""

    latitude: float
    albedo: Array
    cloud: Array
    elevation: float = 0.0
    water_cm: Any = 2.0
    aerosol_550: Any = 0.12
    ozone_cm: Any = 0.30


@dataclass(frozen=True)
class Outcome:
    """Rejected flux by year and month, surface irradiance by month, and the escape fraction."""

    annual: float
    monthly: Array
    irradiance: Array
    escape: float


# --- clouds within the month ---


@dataclass(frozen=True)
class Expectations:
    """Means over the cloud distribution of products of k, s and e.

    k: global transmission, s: beam transmission on the way down, and again on the way up, e: the
    escape E_d of light on the ground.
    """

    k: Array
    s: Array
    ss: Array
    k_e: Array
    s_e: Array
    ss_e: Array


def expectations(cell: Cell, sky: Sky, t_d: Array, r_d: Array) -> Expectations:
    """The needed means for every (month, hour bin)."""
    cloud = np.asarray(cell.cloud, dtype=float).reshape(12, -1)
    means = np.empty((6, *cloud.shape))
    for month, hour in np.ndindex(*cloud.shape):
        weight, n = cloud_classes(float(cloud[month, hour]), sky.concentration, CLOUD_CLASSES)
        ground_and_air = float(cell.albedo[month]), float(t_d[month]), float(r_d[month])
        k, s, e = moment_of_sky(n, *ground_and_air, sky)
        terms = (k, s, s * s, k * e, s * e, s * s * e)
        means[:, month, hour] = [np.sum(weight * term) for term in terms]
    return Expectations(*means)


# --- the scene: everything that does not depend on the orientation ---


@dataclass(frozen=True)
class Scene:
    """All sunlit instants of the sampled year at one cell."""

    sun: Array
    month: NDArray[np.int64]
    weight: Array
    air: Air
    air_mass: Array
    beam: Array
    total: Array
    albedo: Array
    covered: Array
    mean: Expectations
    sky: Sky = field(default_factory=Sky)


def air_of(cell: Cell) -> Air:
    """The cell's twelve monthly columns of air."""
    blue = (380 / 550) ** -1.3
    green = (500 / 550) ** -1.3
    aerosol = np.broadcast_to(np.asarray(cell.aerosol_550, dtype=float), 12)
    return Air(
        pressure=np.full(12, np.exp(-cell.elevation / 8434.5)),
        water=np.broadcast_to(np.asarray(cell.water_cm, dtype=float), 12),
        depth=0.2758 * aerosol * blue + 0.35 * aerosol * green,
        ozone=np.broadcast_to(np.asarray(cell.ozone_cm, dtype=float), 12),
    )


def build_scene(
    cell: Cell, sky: Sky, *, steps_per_day: int = STEPS_PER_DAY, day_step: int = DAY_STEP
) -> Scene:
    """Sun, clear sky and cloud expectations of one cell."""
    days = np.arange((day_step + 1) / 2, 366, day_step)
    steps = (np.arange(steps_per_day) + 0.5) * 24 / steps_per_day
    day, hour = (a.ravel() for a in np.meshgrid(days, steps, indexing="ij"))
    month = np.searchsorted(np.cumsum(MONTH_DAYS), day)
    weight = 1 / np.bincount(month, minlength=12)[month]
    declination, distance = declination_and_distance(day)
    phi, h = np.radians(cell.latitude), np.radians(15 * (hour - 12))
    sun = np.stack(
        [
            -np.cos(declination) * np.sin(h),
            np.cos(phi) * np.sin(declination) - np.sin(phi) * np.cos(declination) * np.cos(h),
            np.sin(phi) * np.sin(declination) + np.cos(phi) * np.cos(declination) * np.cos(h),
        ]
    )
    lit = sun[2] > 0
    sun, month, weight, hour = sun[:, lit], month[lit], weight[lit], hour[lit]
    distance = distance[lit]

    columns = air_of(cell)
    t_d, r_d = columns.diffuse_escape()
    bins = np.asarray(cell.cloud).reshape(12, -1).shape[1]
    hour_bin = np.minimum((hour * bins / 24).astype(int), bins - 1)
    by_month = expectations(cell, sky, t_d, r_d)
    mean = Expectations(*(value[month, hour_bin] for value in vars(by_month).values()))

    air = Air(*(value[month] for value in vars(columns).values()))
    m = air_mass(sun[2])
    beam, scattered = clear_sky(air, m, sun[2], SOLAR_CONSTANT * distance)
    albedo = np.asarray(cell.albedo, dtype=float)[month]
    total = (beam * sun[2] + scattered) / (1 - albedo * air.sky_albedo())
    covered = (albedo >= sky.snow_albedo) & sky.snow_covers_panel
    return Scene(sun, month, weight, air, m, beam, total, albedo, covered, mean, sky)


# --- the account ---


def normal(tilt: float, azimuth: float) -> Array:
    """Unit normal of a panel, tilt and compass azimuth in degrees."""
    beta, gamma = np.radians(tilt), np.radians(azimuth)
    return np.array([np.sin(beta) * np.sin(gamma), np.sin(beta) * np.cos(gamma), np.cos(beta)])


def evaluate(scene: Scene, panel: Panel, tilt: float, azimuth: float) -> Outcome:
    """Rejected flux, irradiance and escape fraction of one orientation."""
    face = normal(tilt, azimuth)
    cos_tilt = face[2]
    faces_sky, faces_ground = (1 + cos_tilt) / 2, (1 - cos_tilt) / 2
    rho, sigma, rho_back = panel.reflectance, panel.specular_share, panel.back_reflectance
    alpha, mean, sky = scene.albedo, scene.mean, scene.sky

    cosine = face @ scene.sun
    front, back = np.maximum(cosine, 0), np.maximum(-cosine, 0)
    upward = 2 * cosine * cos_tilt - scene.sun[2]
    goes_up = upward > 0
    m_up = air_mass(np.where(goes_up, upward, 1.0))
    t_ray, r_ray = scene.air.escape(scene.air_mass, m_up)

    # Beam s B₀ on the front, mirrored up through the same cloud: E[s E_s].
    under_cloud = mean.s - mean.ss
    under_cloud_e = mean.s_e - mean.ss_e
    clear_path = mean.ss * t_ray + mean.ss_e * alpha * r_ray
    cloudy_path = (
        under_cloud * sky.overcast_transmittance * t_ray
        + under_cloud_e * alpha * sky.overcast_reflectance
    )
    mirror = np.where(goes_up, clear_path + cloudy_path, alpha * mean.s_e)
    matt = faces_sky * mean.s_e + faces_ground * alpha * mean.s_e
    beam_escapes = rho * front * scene.beam * (sigma * mirror + (1 - sigma) * matt)
    beam_ground = (front + back * (1 - rho_back)) * scene.beam * alpha * mean.s_e

    # Diffuse D = k G₀ − s B₀ μ from an even sky.
    beam_flat = scene.beam * scene.sun[2]
    diffuse = mean.k * scene.total - mean.s * beam_flat
    diffuse_e = mean.k_e * scene.total - mean.s_e * beam_flat
    mirror = cos_tilt * diffuse_e + faces_ground * alpha * diffuse_e
    matt = faces_sky * (faces_sky * diffuse_e + faces_ground * alpha * diffuse_e)
    sky_escapes = rho * (sigma * mirror + (1 - sigma) * matt)
    sky_ground = alpha * diffuse_e * (faces_sky + (1 - rho_back) * faces_ground)

    # Light from the ground in front that the tilted panel catches instead of the sky.
    from_ground = alpha * mean.k_e * scene.total * faces_ground * (rho - 1)

    flux = beam_escapes - beam_ground + sky_escapes - sky_ground + from_ground
    flux = np.where(scene.covered, 0.0, flux)
    reflected = rho * (mean.s * scene.beam * front + diffuse * faces_sky)
    reflected = np.where(scene.covered, 0.0, reflected)
    leaves = np.where(scene.covered, 0.0, beam_escapes + sky_escapes)

    monthly = monthly_mean(scene, flux)
    return Outcome(
        annual=annual_mean(monthly),
        monthly=monthly,
        irradiance=monthly_mean(scene, mean.k * scene.total),
        escape=annual_mean(monthly_mean(scene, leaves))
        / max(annual_mean(monthly_mean(scene, reflected)), 1e-30),
    )


def monthly_mean(scene: Scene, value: Array) -> Array:
    """Mean over all hours of each month."""
    return np.bincount(scene.month, weights=value * scene.weight, minlength=12).astype(np.float64)


def annual_mean(monthly: Array) -> float:
    """Months weighted by their lengths."""
    return float(np.sum(monthly * MONTH_DAYS) / MONTH_DAYS.sum())
