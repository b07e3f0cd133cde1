"""Blocks that are computed once: the same layers bit for bit, and only changed strips again."""

from __future__ import annotations

from typing import Any

import dask
import numpy as np
import pytest
import xarray as xr
from engine_cells import dataset_of
from invented_cells import random_cells

from gridcool.engine.blocks import plan_for, solve
from gridcool.engine.options import Panel, Sky
from gridcool.engine.remembered import Done, remembered_blocks, remembered_layers


class InMemory:
    """A memory that is a dict and counts what it is asked to keep."""

    def __init__(self) -> None:
        self.blocks: dict[str, np.ndarray] = {}

    def holds(self, key: str) -> bool:
        return key in self.blocks

    def keep(self, key: str, values: np.ndarray) -> None:
        assert key not in self.blocks, "computed twice"
        self.blocks[key] = values

    def read(self, key: str) -> np.ndarray:
        return self.blocks[key]


def grid(rows: int = 2) -> xr.Dataset:
    return dataset_of(random_cells(4, 16)[:12]).chunk(latitude=rows)


def done(dataset: xr.Dataset, memory: InMemory, code: str = "1", **options: Any) -> list[Done]:
    look = options.pop("only_look", False)
    plan = plan_for(dataset, *settings(**options), None, None, ())
    tasks = remembered_blocks(dataset, plan, memory, code, only_look=look)
    return list(dask.compute(*tasks, scheduler="threads"))


def settings(reflectance: float = 0.9, snow: float = 0.5) -> tuple[Panel, Sky]:
    return Panel(reflectance, 1.0, 0.3), Sky(snow_albedo=snow)


def computed(found: list[Done]) -> list[bool]:
    return [each.computed for each in found]


def test_layers_from_memory_are_those_of_a_plain_run() -> None:
    dataset, memory = grid(), InMemory()
    keys = [each.key for each in done(dataset, memory)]
    panel, sky = settings()
    plan = plan_for(dataset, panel, sky, None, None, ())
    found = remembered_layers(keys, dataset, plan, memory).compute()
    expected = solve(dataset, panel, sky).compute()
    xr.testing.assert_identical(found, expected)
    assert found["input_quality"].dtype == np.uint16


def test_nothing_is_computed_twice() -> None:
    dataset, memory = grid(), InMemory()
    first = done(dataset, memory)
    assert all(computed(first))
    assert len({each.key for each in first}) == len(first) > 3
    again = done(dataset, memory)
    assert not any(computed(again))
    assert [each.key for each in again] == [each.key for each in first]


def test_only_the_changed_strip_is_computed() -> None:
    dataset, memory = grid(), InMemory()
    done(dataset, memory)
    changed = dataset.copy(deep=True).load()
    changed["albedo"][3, 5, 0] += np.float32(1e-6)
    found = computed(done(changed.chunk(latitude=2), memory))
    assert found == [index == 5 // 2 for index in range(len(found))]


@pytest.mark.parametrize(
    "change",
    [{"code": "2"}, {"reflectance": 0.91}, {"snow": 0.6}],
    ids=["code", "panel", "sky"],
)
def test_another_version_or_setting_computes_all(change: dict[str, Any]) -> None:
    dataset, memory = grid(), InMemory()
    done(dataset, memory)
    assert all(computed(done(dataset, memory, **change)))


def test_looking_computes_nothing() -> None:
    dataset, memory = grid(), InMemory()
    assert all(computed(done(dataset, memory, only_look=True)))
    assert not memory.blocks
    done(dataset, memory)
    assert not any(computed(done(dataset, memory, only_look=True)))


def test_latitudes_are_part_of_the_key() -> None:
    dataset, memory = grid(), InMemory()
    done(dataset, memory)
    moved = dataset.assign_coords(latitude=dataset["latitude"] + 0.01)
    assert all(computed(done(moved, memory)))
