"""The energy account of a row of cells: linear in the path integrals, quadratic in cos β.

Symbols as in the design: α ground albedo, ρ panel reflectance, σ its specular share, ρ_b its back,
E_d = T_d g the escape of the ground's diffuse light, D and G diffuse and global irradiance, B₀ the
clear-sky beam, T and R the escape and return of the mirrored ray in the clear sky, t_c and R_c the
same of overcast. Arrays are float32; months that do not count are zeroed by `Cells.counts`.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from gridcool.engine.options import Panel
from gridcool.engine.skies import Moments

FloatArray = NDArray[np.floating]


@dataclass(frozen=True)
class Cells:
    """All that the account needs of a row of cells besides the panel's path integrals.

    Attributes
    ----------
    albedo : array, shape (12, cells)
        α.
    escape : array, shape (12, cells) or (12, 1)
        T_d.
    moments : Moments of arrays, shape (12, hours, cells)
    clear : array, shape (12, hours, cells)
        G₀ of each hour bin with ground bounces.
    clear_beam : array, shape (12, hours, cells)
        ⟨B₀μ⟩ of each hour bin.
    counts : array, shape (12, cells)
        One, or zero in months in which snow covers the panel.
    overcast_reflectance : float
        R_c.
    """

    albedo: FloatArray
    escape: FloatArray
    moments: Moments
    clear: FloatArray
    clear_beam: FloatArray
    counts: FloatArray
    overcast_reflectance: float

    @cached_property
    def irradiance(self) -> FloatArray:
        """E[G], all-sky irradiance of the ground, shape (12, cells)."""
        return np.asarray((self.moments.whole * self.clear).sum(axis=1))

    @cached_property
    def diffuse(self) -> FloatArray:
        """E[D], shape (12, cells)."""
        return np.asarray(self.irradiance - (self.moments.beam * self.clear_beam).sum(axis=1))

    @cached_property
    def global_escape(self) -> FloatArray:
        """E[G E_d], shape (12, cells)."""
        return np.asarray(self.escape * (self.moments.ground_whole * self.clear).sum(axis=1))

    @cached_property
    def diffuse_escape(self) -> FloatArray:
        """E[D E_d], shape (12, cells)."""
        beam = self.escape * (self.moments.ground_beam * self.clear_beam).sum(axis=1)
        return np.asarray(self.global_escape - beam)


@dataclass(frozen=True)
class Outcome:
    """Monthly means at one orientation of each cell, W m-2 of panel, shape (12, cells).

    Attributes
    ----------
    escaping : what the panel reflects and leaves the atmosphere
    forgone : what the bare ground would have sent out of the atmosphere more than it does now
    reflected : what the panel reflects in all
    """

    escaping: FloatArray
    forgone: FloatArray
    reflected: FloatArray

    @property
    def rejected(self) -> FloatArray:
        """F of each month."""
        return self.escaping - self.forgone


def beam_coefficients(cells: Cells, panel: Panel) -> FloatArray:
    """Coefficients of the path integrals in F, shape (12, hours, terms, cells).

    The terms are those of `Response.panel`; a panel that is not wholly specular has a sixth,
    cos β times front in all.
    """
    m = cells.moments
    counts = cells.counts[:, None]
    albedo = (cells.albedo * cells.counts)[:, None]
    escape = cells.escape[:, None]
    mirrored = np.float32(panel.reflectance * panel.specular_share)
    matte = np.float32(panel.matte)
    ground = albedo * escape  # α T_d
    lost = ground * m.ground_beam
    spread = matte / 2 * escape * counts * m.ground_beam
    cloud = np.float32(cells.overcast_reflectance)
    terms = [
        mirrored * counts * m.beam_out,
        mirrored * ground * m.ground_beam_clear,
        mirrored * cloud * ground * m.ground_beam_cloud - lost + spread * (1 + albedo),
        (mirrored - 1) * lost + spread * (1 + albedo),
        np.float32(panel.back_reflectance - 1) * lost,
    ]
    if matte > 0:
        terms.append(spread * (1 - albedo))
    return np.stack(terms, axis=2)


@dataclass(frozen=True)
class DiffuseParts:
    """The sky's own light as coefficients of 1, cos β and cos² β, each of shape (12, cells).

    ``escaping``, ``forgone`` and ``reflected`` as in `Outcome`, before `Cells.counts`.
    """

    escaping: tuple[FloatArray, ...]
    forgone: tuple[FloatArray, ...]
    reflected: tuple[FloatArray, ...]

    def annual(self, month_weights: FloatArray) -> FloatArray:
        """Coefficients of F, weighted by month and cell, shape (3, cells)."""
        parts = [(parts * month_weights).sum(axis=0) for parts in self.escaping]
        for power, part in enumerate(self.forgone):
            parts[power] = parts[power] - (part * month_weights).sum(axis=0)
        return np.stack(parts)


def outcome(
    cells: Cells,
    panel: Panel,
    integrals: FloatArray,
    diffuse: DiffuseParts,
    cosine_of_tilt: FloatArray,
) -> Outcome:
    """Follow the light at one orientation of each cell.

    Parameters
    ----------
    cells : Cells
    panel : Panel
    integrals : array, shape (12, hours, 5, cells)
        Path integrals at the cell's orientation, as in `Response.panel`.
    diffuse : DiffuseParts
    cosine_of_tilt : array, shape (cells,)
        cos β.
    """
    m = cells.moments
    out, back, up, down, behind = (integrals[:, :, term] for term in range(5))
    front = up + down
    albedo, escape = cells.albedo[:, None], cells.escape[:, None]
    ground = albedo * escape
    specular = (
        m.beam_out * out
        + ground * m.ground_beam_clear * back
        + ground * np.float32(cells.overcast_reflectance) * m.ground_beam_cloud * up
        + ground * m.ground_beam * down
    )
    high, low = (1 + cosine_of_tilt) / 2, (1 - cosine_of_tilt) / 2
    matte = escape * m.ground_beam * front * (high + low * albedo)
    sigma, rho = np.float32(panel.specular_share), np.float32(panel.reflectance)
    beam_escaping = rho * (sigma * specular + (1 - sigma) * matte).sum(axis=1)
    kept = front + np.float32(1 - panel.back_reflectance) * behind
    beam_forgone = (ground * m.ground_beam * kept).sum(axis=1)
    beam_reflected = rho * (m.beam * front).sum(axis=1)
    return Outcome(
        escaping=(beam_escaping + _in_powers(diffuse.escaping, cosine_of_tilt)) * cells.counts,
        forgone=(beam_forgone + _in_powers(diffuse.forgone, cosine_of_tilt)) * cells.counts,
        reflected=(beam_reflected + _in_powers(diffuse.reflected, cosine_of_tilt)) * cells.counts,
    )


def diffuse_parts(cells: Cells, panel: Panel) -> DiffuseParts:
    """What of the sky's light escapes by the panel, is forgone by the ground, is reflected."""
    albedo = cells.albedo
    sky, whole = cells.diffuse_escape, cells.global_escape
    rho, back = np.float32(panel.reflectance), np.float32(panel.back_reflectance)
    mirrored = rho * np.float32(panel.specular_share)
    matte = np.float32(panel.matte)
    ground = sky * albedo
    escaping: tuple[FloatArray, ...] = (
        mirrored / 2 * ground + matte / 4 * (sky + ground),
        mirrored * (sky - ground / 2) + matte / 2 * sky,
    )
    if matte > 0:
        escaping = (*escaping, matte / 4 * (sky - ground))
    # The face also catches light on its way from the ground: α G (1 − cos β)/2 (1 − ρ) E_d is lost.
    caught = (1 - rho) / 2 * albedo * whole
    forgone = (ground * (1 - back / 2) + caught, back / 2 * ground - caught)
    seen = rho / 2 * cells.diffuse
    return DiffuseParts(escaping, forgone, (seen, seen))


def local_cut(
    cells: Cells,
    panel: Panel,
    integrals: FloatArray,
    tilt: FloatArray,
    month_weights: FloatArray,
) -> FloatArray:
    """Share by which a panel cuts the sunlight that its place absorbs, over the year.

    The same account with nothing between the panel and the sky: every ray that leaves upward is
    gone, every ray that goes down meets the ground once. A flat panel gives (ρ−α)/(1−α).

    Parameters
    ----------
    cells, panel, integrals
        As for `outcome`.
    tilt : array, shape (cells,)
        Degrees.
    month_weights : array, shape (12, 1)

    Returns
    -------
    array, shape (cells,)
    """
    m = cells.moments
    nothing = np.zeros_like(m.beam)
    bare = replace(
        m,
        beam_out=m.beam,
        ground_beam=m.beam,
        ground_beam_clear=nothing,
        ground_beam_cloud=nothing,
        ground_whole=m.whole,
    )
    open_sky = replace(cells, moments=bare, escape=np.ones_like(cells.escape))
    # The first term holds B f T of rays that leave upward; without air T is one.
    clear = np.concatenate([integrals[:, :, 2:3], integrals[:, :, 1:]], axis=2)
    cosine = np.cos(np.deg2rad(tilt))
    result = outcome(open_sky, panel, clear, diffuse_parts(open_sky, panel), cosine)
    absorbed = ((1 - cells.albedo) * cells.irradiance * month_weights).sum(axis=0)
    sent_up = (result.rejected * month_weights).sum(axis=0)
    return np.asarray(sent_up / np.where(absorbed > 0, absorbed, np.nan))


def _in_powers(parts: tuple[FloatArray, ...], cosine: FloatArray) -> FloatArray:
    """Sum of parts times rising powers of cos β, by Horner's rule."""
    total = parts[-1]
    for part in parts[-2::-1]:
        total = total * cosine + part
    return total
