"""Blocks that are computed once: strips whose results a memory keeps under what went into them.

A strip's key is a digest of the plan, the code and the strip's own inputs, so that a block is found
again after a killed run, and only changed strips are computed when an input is renewed. The memory
may be a folder that several machines share: tasks then pass keys around, not arrays.
"""

from __future__ import annotations

import hashlib
import threading
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Protocol

import dask.array as da
import numpy as np
import xarray as xr
from dask.delayed import Delayed, delayed
from numpy.typing import NDArray

from gridcool.engine.blocks import LATITUDE_STEP, latitude_stencil, solve_block
from gridcool.engine.layout import USED, label_layers, strips_of
from gridcool.engine.plan import Plan
from gridcool.engine.response import Response, path_integrals
from gridcool.engine.strips import layer_bands

FloatArray = NDArray[np.floating]


class Memory(Protocol):
    """Where blocks are kept. Pickles well if the scheduler is a cluster."""

    def holds(self, key: str) -> bool:
        """Whether a whole and undamaged block is kept under this key."""

    def keep(self, key: str, values: FloatArray) -> None:
        """Keep a block, all of it or nothing."""

    def read(self, key: str) -> FloatArray:
        """A block that is held."""


class _Place:
    """Path integrals at a latitude node, and who is working them out."""

    def __init__(self) -> None:
        self.lock = threading.Lock()
        self.response: Response | None = None


#: What this process has worked out, by plan and node: small, and the same for all its runs.
_known: dict[tuple[str, int], _Place] = {}
_lock = threading.Lock()


@dataclass(frozen=True)
class Done:
    """A strip that the memory holds: its key, and whether it had to be computed."""

    key: str
    computed: bool


def remembered_blocks(
    dataset: xr.Dataset, plan: Plan, memory: Memory, code: str, *, only_look: bool = False
) -> list[Delayed]:
    """Tasks, one a strip, each of which makes sure that the memory holds the strip.

    Parameters
    ----------
    dataset : xarray.Dataset
        As for `gridcool.engine.blocks.solve`.
    plan : Plan
        From `gridcool.engine.blocks.plan_for` for the same dataset.
    memory : Memory
    code : str
        What stands for the version of the code.
    only_look : bool
        Compute nothing: tell what would be.

    Returns
    -------
    list of dask Delayed
        Each gives a `Done`.
    """
    arrays = {name: strips_of(dataset, name) for name in USED if name in dataset}
    latitudes = np.asarray(dataset["latitude"].values, float)
    shared = delayed((plan, _plan_digest(plan, code), memory, only_look), traverse=False)
    task = delayed(_remember, pure=False)
    tasks, start = [], 0
    for index, rows in enumerate(arrays["albedo"].chunks[-2]):
        block = {name: array.blocks[..., index, 0] for name, array in arrays.items()}
        tasks.append(task(shared, block, latitudes[start : start + rows]))
        start += rows
    return tasks


def remembered_layers(
    keys: Sequence[str], dataset: xr.Dataset, plan: Plan, memory: Memory
) -> xr.Dataset:
    """The layers of strips that the memory holds, lazily, labelled as `solve` labels them.

    Parameters
    ----------
    keys : sequence of str
        In the order of `remembered_blocks`.
    """
    rows = strips_of(dataset, "albedo").chunks[-2]
    bands = list(layer_bands(plan.layers).values())[-1].stop
    columns = dataset.sizes["longitude"]
    read = delayed(memory.read, pure=True)
    pieces = [
        da.from_delayed(read(key), (bands, height, columns), np.float32)
        for key, height in zip(keys, rows, strict=True)
    ]
    return label_layers(da.concatenate(pieces, axis=1), dataset, plan.layers)


def _remember(
    shared: tuple[Plan, str, Memory, bool], inputs: Mapping[str, FloatArray], latitudes: FloatArray
) -> Done:
    plan, plan_digest, memory, only_look = shared
    key = _block_key(plan_digest, inputs, latitudes)
    if memory.holds(key):
        return Done(key, computed=False)
    if not only_look:
        needed = sorted({int(n) for each in latitudes for n in latitude_stencil(each)[0]})
        nodes = {node: _node(plan, plan_digest, node) for node in needed}
        memory.keep(key, solve_block(plan, inputs, latitudes, nodes))
    return Done(key, computed=True)


def _plan_digest(plan: Plan, code: str) -> str:
    """A digest of all that strips share. Frozen dataclasses of numbers print all they hold."""
    parts = (
        *(code, plan.panel, plan.sky, plan.field, plan.error, plan.layers, plan.hours),
        *(plan.basis.axes, plan.orientations.on_meridian),
    )
    return hashlib.sha256(repr(parts).encode()).hexdigest()


def _block_key(plan_digest: str, inputs: Mapping[str, FloatArray], latitudes: FloatArray) -> str:
    digest = hashlib.sha256(plan_digest.encode())
    digest.update(np.ascontiguousarray(latitudes, np.float64).tobytes())
    for name in sorted(inputs):
        values = np.ascontiguousarray(inputs[name], np.float32)
        digest.update(f"{name}{values.shape}".encode())
        digest.update(values.data)
    return digest.hexdigest()


def _node(plan: Plan, plan_digest: str, node: int) -> Response:
    """Path integrals at a latitude node, once a process; a second thread waits for the first."""
    with _lock:
        place = _known.setdefault((plan_digest, node), _Place())
    with place.lock:
        if place.response is None:
            latitude = -90 + node * LATITUDE_STEP
            place.response = path_integrals(latitude, plan.basis, plan.orientations, plan.hours)
        return place.response
