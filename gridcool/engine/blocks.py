"""The engine on labelled, lazy grids: strips of rows as dask tasks."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import dask.array as da
import numpy as np
import xarray as xr
from dask.delayed import delayed
from numpy.typing import NDArray

from gridcool.engine.clear_sky import COLUMN_INPUTS
from gridcool.engine.columns import column_basis
from gridcool.engine.explain import Explanation, explain_cell
from gridcool.engine.layout import USED, check_range, check_shape, label_layers, strips_of
from gridcool.engine.options import Field, InputError, Panel, Sky
from gridcool.engine.orientations import compass, meridian
from gridcool.engine.plan import Plan
from gridcool.engine.response import Response, path_integrals
from gridcool.engine.strips import layer_bands, solve_strip
from gridcool.variables import engine_layers, layer_variables

FloatArray = NDArray[np.floating]

LATITUDE_STEP = 2.5  # degrees between nodes of the path integrals


def solve(
    dataset: xr.Dataset,
    panel: Panel | None = None,
    sky: Sky | None = None,
    *,
    field: Field | None = None,
    error: InputError | None = None,
    extra_layers: Sequence[str] = (),
) -> xr.Dataset:
    """Best orientation and energy account of every cell, lazily.

    Parameters
    ----------
    dataset : xarray.Dataset
        Inputs under their canonical names and units, see ``variables.toml``; dimensions month,
        latitude and longitude, with an hour dimension for a cloud fraction that has a diurnal
        cycle (bins of local mean solar time, evenly spaced from midnight). Lazy or not; NaN where
        missing. Any latitudes are welcome, evenly spaced or not. Standard errors of the monthly
        means of albedo, cloud_fraction and temperature_range may come as NAME_standard_error.
    panel : Panel
    sky : Sky
    field : Field
    error : InputError
    extra_layers : sequence of str
        Layers beyond the usual ones, marked ``on_request`` in ``variables.toml``.

    Returns
    -------
    xarray.Dataset
        The layers declared in ``variables.toml`` on the same grid, as dask arrays cut into strips
        of rows like the albedo's chunks.

    Raises
    ------
    InputDataError
        At once if dimensions do not fit; on computing if a value is impossible.
    """
    plan = plan_for(dataset, panel, sky, field, error, extra_layers)
    return label_layers(_solve_lazily(dataset, plan), dataset, plan.layers)


def explain(
    dataset: xr.Dataset,
    panel: Panel | None = None,
    sky: Sky | None = None,
    *,
    field: Field | None = None,
    error: InputError | None = None,
) -> Explanation | None:
    """Follow the light of a dataset of one cell; None where nothing is known of it.

    Parameters are those of `solve`.
    """
    plan = plan_for(dataset, panel, sky, field, error, ())
    latitude = float(dataset["latitude"].values[0])
    index, weights = latitude_stencil(latitude)
    nodes = [
        path_integrals(-90 + int(i) * LATITUDE_STEP, plan.basis, plan.orientations, plan.hours)
        for i in index
    ]
    inputs = {
        name: np.asarray(strips_of(dataset, name)[..., 0, :]) for name in USED if name in dataset
    }
    return explain_cell(plan, inputs, latitude, Response.blend(nodes, weights))


def plan_for(
    dataset: xr.Dataset,
    panel: Panel | None = None,
    sky: Sky | None = None,
    field: Field | None = None,
    error: InputError | None = None,
    extra_layers: Sequence[str] = (),
) -> Plan:
    """What all strips of a run over this dataset share; see `solve` for the parameters."""
    check_shape(dataset)
    cloud = dataset.get("cloud_fraction")
    hours = int(cloud.sizes.get("hour", 1)) if cloud is not None else 1
    varying = tuple(prop for name, (prop, _) in COLUMN_INPUTS.items() if name in dataset)
    return Plan(
        panel=panel or Panel(),
        sky=sky or Sky(),
        basis=column_basis(varying),
        orientations=compass() if hours > 1 else meridian(),
        hours=hours,
        field=field or Field(),
        error=error or InputError(),
        layers=tuple(
            name
            for name in engine_layers()
            if not layer_variables()[name].on_request or name in extra_layers
        ),
    )


def _solve_lazily(dataset: xr.Dataset, plan: Plan) -> da.Array:
    names = [name for name in USED if name in dataset]
    arrays = {name: strips_of(dataset, name) for name in names}
    latitudes = np.asarray(dataset["latitude"].values, float)
    columns = dataset.sizes["longitude"]
    bands = list(layer_bands(plan.layers).values())[-1].stop
    integrals = delayed(path_integrals, pure=True)
    plan_once = delayed(plan, traverse=False)
    nodes: dict[int, Any] = {}
    pieces, start = [], 0
    solver = delayed(solve_block, pure=True)
    for index, rows in enumerate(arrays["albedo"].chunks[-2]):
        strip = latitudes[start : start + rows]
        needed = sorted({int(n) for row in strip for n in latitude_stencil(row)[0]})
        for node in needed:
            if node not in nodes:
                nodes[node] = integrals(
                    -90 + node * LATITUDE_STEP, plan.basis, plan.orientations, plan.hours
                )
        block = {name: array.blocks[..., index, 0] for name, array in arrays.items()}
        lazy = solver(plan_once, block, strip, {node: nodes[node] for node in needed})
        pieces.append(da.from_delayed(lazy, (bands, rows, columns), np.float32))
        start += rows
    stack: da.Array = da.concatenate(pieces, axis=1)
    return stack


def latitude_stencil(latitude: float) -> tuple[NDArray[np.intp], FloatArray]:
    """Four nodes around a latitude (degrees) and the weights of cubic interpolation."""
    last = round(180 / LATITUDE_STEP)
    position = (latitude + 90) / LATITUDE_STEP
    first = int(np.clip(np.floor(position) - 1, 0, last - 3))
    nodes = np.arange(first, first + 4)
    weights = [
        np.prod([(position - other) / (node - other) for other in nodes if other != node])
        for node in nodes
    ]
    return nodes, np.asarray(weights)


def solve_block(
    plan: Plan,
    inputs: Mapping[str, FloatArray],
    latitudes: FloatArray,
    nodes: Mapping[int, Response],
) -> FloatArray:
    """All layers of a strip, from the path integrals at the latitude nodes around its rows."""
    for name, values in inputs.items():
        check_range(name, values, latitudes)
    responses = []
    for latitude in latitudes:
        index, weights = latitude_stencil(float(latitude))
        responses.append(Response.blend([nodes[int(i)] for i in index], weights))
    return solve_strip(plan, inputs, latitudes, responses)
