"""Few atmospheres that stand for all: a basis for what depends on the cloudless column.

Everything that the path integrals take from the column (beam, scattered light, escape of the
reflected ray) varies smoothly with pressure, water vapour, aerosol and ozone. A handful of real
columns, picked by a pivoted QR factorisation of those functions over the whole possible range,
spans them; every other column is a weighted sum of the handful. The weights are a tensor
Chebyshev interpolation in coordinates in which the functions are nearly straight.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import cache

import numpy as np
from numpy.polynomial.chebyshev import chebvander
from numpy.typing import ArrayLike, NDArray
from scipy.linalg import qr

from gridcool.physics import atmosphere, escape
from gridcool.physics.atmosphere import Atmosphere

FloatArray = NDArray[np.floating]

RANK_TOLERANCE = 1e-3
DEFAULT_WATER_SAMPLES = (0.4, 1.5, 4.4)  # cm, the span of the default over latitude


@dataclass(frozen=True)
class Axis:
    """One varying property of the column: its possible range and its straightening coordinate."""

    low: float
    high: float
    nodes: int
    forward: Callable[[FloatArray], FloatArray]
    inverse: Callable[[FloatArray], FloatArray]

    def coordinate(self, values: FloatArray) -> FloatArray:
        """Map values to [-1, 1]."""
        ends = self.forward(np.array([self.low, self.high]))
        low, high = ends.min(), ends.max()
        return np.asarray(2 * (self.forward(values) - low) / (high - low) - 1)

    def node_values(self) -> FloatArray:
        """Chebyshev nodes as values of the property."""
        ends = self.forward(np.array([self.low, self.high]))
        angle = np.pi * (np.arange(self.nodes) + 0.5) / self.nodes
        position = (np.cos(angle) + 1) / 2
        return self.inverse(ends.min() + (ends.max() - ends.min()) * position)


def _same(values: FloatArray) -> FloatArray:
    return values


AXES: Mapping[str, Axis] = {
    "pressure_ratio": Axis(0.33, 1.07, 3, _same, _same),
    "precipitable_water_cm": Axis(
        0.0, 10.0, 5, lambda w: np.log(w + 0.05), lambda u: np.exp(u) - 0.05
    ),
    "aerosol_depth_550": Axis(0.0, 5.0, 8, lambda t: np.exp(-t), lambda u: -np.log(u)),
    "ozone_cm": Axis(0.05, 0.7, 3, _same, _same),
}


@dataclass(frozen=True)
class ColumnBasis:
    """The handful of columns and how to weigh them.

    Attributes
    ----------
    axes : tuple of str
        Names of the properties that vary from cell to cell; the others keep their defaults.
    columns : dict of array, shape (rank,)
        Values of the varying properties in the columns of the handful.
    matrix : array, shape (polynomials, rank)
        Chebyshev coefficients of the weights.
    """

    axes: tuple[str, ...]
    columns: Mapping[str, FloatArray]
    matrix: FloatArray

    @property
    def rank(self) -> int:
        """Number of columns in the handful."""
        return int(self.matrix.shape[1])

    def atmosphere_at(self, latitude: float) -> Atmosphere:
        """The handful as real columns at a latitude (radians); fields have shape (rank,)."""
        return _of_one_shape(column_at(latitude, self.columns), self.rank)

    def weights(self, properties: Mapping[str, FloatArray]) -> FloatArray:
        """Weights of the handful for columns with the given varying properties.

        Parameters
        ----------
        properties : mapping of array, shape (cells,)
            A value for every name in ``axes``.

        Returns
        -------
        array, shape (rank, cells), float32
        """
        design = _design(self.axes, [properties[name] for name in self.axes])
        return np.asarray(self.matrix.T.astype(np.float32) @ design.astype(np.float32).T)


def default_property(name: str, latitude: ArrayLike) -> FloatArray:
    """Value of a property of the column where nothing is known, at latitudes in radians."""
    if name == "precipitable_water_cm":
        return atmosphere.default_precipitable_water(latitude)
    return np.full(np.shape(latitude), _DEFAULTS[name])


_DEFAULTS: Mapping[str, float] = {
    "pressure_ratio": 1.0,
    "aerosol_depth_550": atmosphere.DEFAULT_AEROSOL_DEPTH_550,
    "ozone_cm": atmosphere.DEFAULT_OZONE_CM,
}


def column_at(latitude: ArrayLike, properties: Mapping[str, FloatArray]) -> Atmosphere:
    """Columns with the given properties and the defaults of latitudes (radians) for the rest."""

    def known(name: str) -> FloatArray:
        return np.asarray(properties.get(name, default_property(name, latitude)))

    return Atmosphere(
        pressure_ratio=known("pressure_ratio"),
        precipitable_water_cm=known("precipitable_water_cm"),
        aerosol_depth=atmosphere.broadband_aerosol_depth(known("aerosol_depth_550")),
        ozone_cm=known("ozone_cm"),
    )


@cache
def column_basis(axes: tuple[str, ...]) -> ColumnBasis:
    """The basis for columns in which the named properties vary; without any, the default column."""
    if not axes:
        return ColumnBasis((), {}, np.ones((1, 1)))
    meshes = np.meshgrid(*[AXES[name].node_values() for name in axes], indexing="ij")
    samples = {name: mesh.ravel() for name, mesh in zip(axes, meshes, strict=True)}
    functions = _functions(samples)
    _, triangular, order = qr(functions.T, mode="economic", pivoting=True)
    size = np.abs(np.diag(triangular))
    chosen = order[: int((size > RANK_TOLERANCE * size[0]).sum())]
    coefficients = np.linalg.solve(_design(axes, list(samples.values())), functions)
    matrix = coefficients @ np.linalg.pinv(functions[chosen])
    return ColumnBasis(axes, {name: v[chosen] for name, v in samples.items()}, matrix)


def _design(axes: tuple[str, ...], values: list[FloatArray]) -> FloatArray:
    """Tensor products of Chebyshev polynomials, shape (cells, polynomials)."""
    design = np.ones((len(values[0]) if values else 1, 1))
    for name, value in zip(axes, values, strict=True):
        axis = AXES[name]
        factor = chebvander(axis.coordinate(value), axis.nodes - 1)
        design = (design[:, :, None] * factor[:, None, :]).reshape(len(value), -1)
    return design


def _functions(samples: Mapping[str, FloatArray]) -> FloatArray:
    """What the path integrals take from each sample column, at sample paths: (columns, values).

    Each is weighted by about what it contributes to a day: low suns and low rays carry little.
    """
    count = len(next(iter(samples.values())))
    down = np.exp(np.linspace(0, np.log(38), 12))
    up = np.exp(np.linspace(0, np.log(38), 10))
    parts = []
    waters = (None,) if "precipitable_water_cm" in samples else DEFAULT_WATER_SAMPLES
    for water in waters:
        extra = {} if water is None else {"precipitable_water_cm": np.full(count, water)}
        column = _of_one_shape(column_at(0.0, {**samples, **extra}), count)
        one, two = column.at(np.s_[:, None]), column.at(np.s_[:, None, None])
        beam, scattered = atmosphere.clear_sky(one, down, 1 / down, 1.0)
        escaped, returned = escape.ray_escape(two, down[:, None], up)
        weighted = (beam / down)[:, :, None] / np.sqrt(up) / 3
        parts += [weighted * escaped, weighted * returned, beam / down, scattered]
    return np.concatenate([part.reshape(count, -1) for part in parts], axis=1)


def _of_one_shape(column: Atmosphere, count: int) -> Atmosphere:
    return Atmosphere(*(np.broadcast_to(field, (count,)) for field in vars(column).values()))
