"""Path integrals: what a panel of every orientation meets along the sun's path.

The account is linear in a few numbers of the cell once these are known, see `optimum`. They depend
on latitude, month, hour bin, column and orientation alone.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gridcool.engine.columns import ColumnBasis
from gridcool.engine.glare import low_rays
from gridcool.engine.orientations import Orientations
from gridcool.engine.quadrature import hour_nodes, month_days
from gridcool.physics import atmosphere, escape, panel, sun
from gridcool.physics.atmosphere import Atmosphere

FloatArray = NDArray[np.floating]

TERMS = 5
#: Air masses at which the way out is tabulated, evenly spaced in their logarithm.
_SHORTEST, _LONGEST, _PATH_STEPS = 0.999, 80.0, 3000
_PATHS = np.geomspace(_SHORTEST, _LONGEST, _PATH_STEPS + 1)


@dataclass(frozen=True)
class Response:
    """Path integrals at one latitude, float32, W m-2 as means over all hours of the month.

    Attributes
    ----------
    panel : array, shape (12, hours, rank, 5, orientations)
        ⟨B₀ f T⟩ and ⟨B₀ f R⟩ of rays that leave upward, ⟨B₀ f⟩ upward, ⟨B₀ f⟩ downward, ⟨B₀ b⟩,
        with f and b the cosines of incidence on front and back.
    beam, scattered : array, shape (12, hours, rank)
        ⟨B₀ μ⟩ and ⟨I_as⟩ on the horizontal, before bounces.
    extraterrestrial : array, shape (12,)
        R_a, irradiance of the horizontal above the atmosphere.
    low_rays : array, shape (8, orientations)
        Hours a year in which the mirrored beam leaves low, by compass sector, see `glare`.
    """

    panel: FloatArray
    beam: FloatArray
    scattered: FloatArray
    extraterrestrial: FloatArray
    low_rays: FloatArray

    @staticmethod
    def blend(responses: list[Response], weights: FloatArray) -> Response:
        """Weighted sum of responses, for interpolation in latitude."""

        def total(name: str) -> FloatArray:
            pairs = zip(responses, np.asarray(weights, np.float32), strict=True)
            return np.asarray(sum(getattr(each, name) * weight for each, weight in pairs))

        return Response(
            total("panel"),
            np.maximum(total("beam"), 0),
            np.maximum(total("scattered"), 0),
            np.maximum(total("extraterrestrial"), 0),
            np.maximum(total("low_rays"), 0),
        )


def path_integrals(
    latitude: float, basis: ColumnBasis, orientations: Orientations, hours: int
) -> Response:
    """Integrate over the sun's path at one latitude.

    Parameters
    ----------
    latitude : float
        Degrees.
    basis : ColumnBasis
        The columns to integrate through.
    orientations : Orientations
        On the meridian only when ``hours`` is 1, since then half the day stands for the whole.
    hours : int
        Number of equal bins of local solar time from midnight; 1 for no diurnal cycle.
    """
    phi = float(np.deg2rad(latitude))
    column = basis.atmosphere_at(phi)
    normal = panel.normal_vector(
        tilt=np.deg2rad(orientations.tilt), azimuth=np.deg2rad(orientations.azimuth)
    )
    whole_day = hours > 1 or not orientations.on_meridian
    mirrored = orientations.mirrored if whole_day else None
    ways = _Ways.of(column)
    months = [_month(phi, month, column, ways, normal, hours, mirrored) for month in range(12)]
    parts = [np.stack([m[i] for m in months]).astype(np.float32) for i in range(4)]
    return Response(parts[0], parts[1], parts[2], parts[3], low_rays(latitude, orientations))


def _month(
    phi: float,
    month: int,
    column: Atmosphere,
    ways: _Ways,
    normal: panel.Vector,
    hours: int,
    mirrored: NDArray[np.intp] | None,
) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
    """Integrals of one month: of the whole day with ``mirrored``, else twice the afternoon."""
    days, day_weights = month_days(month)
    delta = sun.declination(days)
    irradiance = sun.TOTAL_SOLAR_IRRADIANCE * sun.distance_factor(days)
    hour_angle, hour_weights = hour_nodes(phi, delta, hours, whole_day=mirrored is not None)
    weight = _by_bin(hour_weights * day_weights[:, None, None])
    # From here on: (hours, days × nodes), so that a sum over the last axis is a bin's integral.
    rays = sun.sun_vector(latitude=phi, declination=delta[:, None, None], hour_angle=hour_angle)
    sun_rays = [_by_bin(ray) for ray in rays]
    extraterrestrial = _by_bin(np.broadcast_to(irradiance[:, None, None], hour_angle.shape))
    sine = np.maximum(sun_rays[2], 1e-6)
    air_mass = sun.air_mass(sine)
    beam, scattered = atmosphere.clear_sky(
        column.at(np.s_[:, None, None]),
        air_mass,
        sine,
        extraterrestrial,
    )
    beam_weight = np.moveaxis(beam * weight, 0, 1)  # (hours, rank, nodes)
    panel_terms = np.zeros((hours, len(beam), TERMS, len(normal[2])))
    for h in range(hours):
        if mirrored is not None and h < hours // 2:  # the morning mirrors the afternoon
            continue
        lit = beam_weight[h].any(axis=0)
        if lit.any():
            ray = [r[h, lit] for r in sun_rays]
            panel_terms[h] = _panel_terms(
                ways, ray, air_mass[h, lit], beam_weight[h][:, lit], normal
            )
    if mirrored is not None:
        half = hours // 2
        panel_terms[:half] = panel_terms[: hours - half - 1 : -1][..., mirrored]
    horizontal = (beam_weight * sine[:, None, :]).sum(axis=-1)
    diffuse = np.moveaxis((scattered * weight).sum(axis=-1), 0, 1)
    top = (extraterrestrial * sine * weight).sum()
    return panel_terms, horizontal, diffuse, np.asarray(top)


@dataclass(frozen=True)
class _Ways:
    """The way out of each column by the air masses of `_PATHS`, shape (rank, paths).

    ``transmitted`` is T_abs of the whole path, ``returned`` the share of what is left that the
    rising ray's own path sends back.
    """

    transmitted: FloatArray
    returned: FloatArray

    @staticmethod
    def of(column: Atmosphere) -> _Ways:
        each = column.at(np.s_[:, None])
        transmitted = atmosphere.absorption_transmittance(each, _PATHS)
        return _Ways(transmitted, escape.backscatter(each, _PATHS))


def _panel_terms(
    ways: _Ways,
    sun_ray: list[FloatArray],
    air_mass: FloatArray,
    beam_weight: FloatArray,
    normal: panel.Vector,
) -> FloatArray:
    """The five integrals of one hour bin, shape (rank, 5, orientations)."""
    cosine = panel.cosine_of_incidence(
        (sun_ray[0][:, None], sun_ray[1][:, None], sun_ray[2][:, None]), normal
    )
    rank = len(beam_weight)
    front, back = np.maximum(cosine, 0), np.maximum(-cosine, 0)
    rising = 2 * cosine * normal[2] - sun_ray[2][:, None]
    upward = (rising > 0) & (cosine > 0)
    front_up = np.where(upward, front, 0.0)
    path_up = sun.air_mass(np.where(upward, rising, 1.0))
    step_both, way_both = _on_paths(air_mass[:, None] + path_up)
    step_up, way_up = _on_paths(path_up)
    step_down, way_down = _on_paths(air_mass)
    terms = np.empty((rank, TERMS, cosine.shape[1]))
    terms[:, 2] = beam_weight @ front_up
    terms[:, 3] = beam_weight @ (front - front_up)
    terms[:, 4] = beam_weight @ back
    for k in range(rank):
        passed = _between(ways.transmitted[k], step_both, way_both)
        passed *= front_up
        sent_back = _between(ways.returned[k], step_up, way_up)
        sent_back *= passed
        weight = beam_weight[k] / _between(ways.transmitted[k], step_down, way_down)
        total = weight @ passed
        terms[k, 1] = weight @ sent_back
        terms[k, 0] = total - terms[k, 1]
    return terms


def _on_paths(air_mass: FloatArray) -> tuple[NDArray[np.intp], FloatArray]:
    """Step of the path table below an air mass, and the way from there to the next."""
    position = np.log(air_mass)
    position -= np.log(_SHORTEST)
    position *= _PATH_STEPS / np.log(_LONGEST / _SHORTEST)
    step = position.astype(np.intp)
    position -= step
    return step, position


def _between(table: FloatArray, step: NDArray[np.intp], way: FloatArray) -> FloatArray:
    """Linear interpolation in a path table."""
    values = np.diff(table, append=table[-1]).take(step)
    values *= way
    values += table.take(step)
    return values


def _by_bin(values: FloatArray) -> FloatArray:
    """(days, hours, nodes) to (hours, days × nodes)."""
    return np.moveaxis(values, 1, 0).reshape(values.shape[1], -1)
