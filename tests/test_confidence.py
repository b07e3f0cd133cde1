"""Rank intervals: the error model by hand, and how often the truth lies inside."""

from __future__ import annotations

import importlib.util
from dataclasses import replace
from pathlib import Path
from types import ModuleType
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.sparse import csr_array

from gridcool.grid import Grid
from gridcool.planning.confidence import (
    ErrorModel,
    Nodes,
    error_shares,
    rank_confidence,
    shrinkage,
)
from gridcool.planning.pieces import Pieces

STRIP = Grid(0.0, 1.0, 1.0, 1.0, 1, 40)  # along the equator, 111 km a cell


def pieces(*regions: list[int]) -> Pieces:
    """Regions of whole cells of equal area."""
    cells = np.array([cell for region in regions for cell in region])
    return Pieces(cells, np.ones(len(cells)), np.cumsum([len(region) for region in regions]))


def study() -> ModuleType:
    path = Path(__file__).parents[1] / "scripts" / "rank_coverage.py"
    spec = importlib.util.spec_from_file_location("rank_coverage", path)
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


def test_nodes_are_about_evenly_spaced_over_the_globe() -> None:
    nodes = Nodes.spaced(500.0)
    sphere = 4 * np.pi * 6371.0**2
    assert np.sqrt(sphere / nodes.count) == pytest.approx(500, rel=0.05)


@given(latitude=st.floats(-90, 90), longitude=st.floats(-180, 540))
def test_the_local_error_has_the_same_size_everywhere(latitude: float, longitude: float) -> None:
    nodes = Nodes.spaced(700.0)
    found = nodes.around(np.array([latitude]), np.array([longitude]))
    assert sum(float(weight[0]) ** 2 for _, weight in found) == pytest.approx(1)
    assert all(0 <= int(node[0]) < nodes.count for node, _ in found)
    # A little to the east it is nearly the same error, across the antimeridian too.
    near = nodes.around(np.array([latitude]), np.array([longitude + 0.01]))
    assert correlation(nodes, found, near) > 0.995


def correlation(nodes: Nodes, a: list[Any], b: list[Any]) -> float:
    fields = np.zeros((2, nodes.count))
    for row, each in zip(fields, (a, b), strict=True):
        for node, weight in each:
            row[int(node[0])] += weight[0]
    return float(fields[0] @ fields[1])


def test_errors_part_over_the_correlation_length() -> None:
    nodes = Nodes.spaced(500.0)
    here = nodes.around(np.array([2.0]), np.array([20.0]))
    seen = []
    for kilometres in (50, 250, 500, 1000, 2000):
        there = nodes.around(np.array([2.0]), np.array([20.0 + kilometres / 111.2]))
        seen.append(correlation(nodes, here, there))
    assert seen[0] > 0.9
    assert seen == sorted(seen, reverse=True)
    assert seen[2] < 0.8
    assert abs(seen[-1]) < 0.05


def test_common_errors_add_up_and_local_ones_average() -> None:
    spread = np.full(40, 6.0)
    near, wide = [0, 1], list(range(40))
    regions = pieces(near, wide)
    common = ErrorModel(common_share=1.0)
    everywhere, by_node = error_shares(regions, spread, STRIP, common)
    assert everywhere.tolist() == pytest.approx([6, 6])
    assert by_node.toarray().sum() == 0
    local = ErrorModel(common_share=0.0, correlation_km=500.0)
    everywhere, by_node = error_shares(regions, spread, STRIP, local)
    total = np.sqrt((by_node.toarray() ** 2).sum(axis=1))
    assert total[0] == pytest.approx(6, rel=0.02)  # near each other nothing averages
    assert total[1] == pytest.approx(6 / 3, rel=0.25)  # nine times 500 km
    half = ErrorModel(common_share=0.5)
    everywhere, by_node = error_shares(regions, spread, STRIP, half)
    assert np.hypot(everywhere[0], np.linalg.norm(by_node.toarray()[0])) == pytest.approx(
        6, rel=0.02
    )


def test_neighbours_share_their_errors() -> None:
    spread = np.full(40, 6.0)
    model = ErrorModel(common_share=0.0, correlation_km=1000.0)
    _, by_node = error_shares(pieces([0], [1], [30]), spread, STRIP, model)
    covariance = (by_node @ by_node.T).toarray()
    assert covariance[0, 1] == pytest.approx(36, rel=0.05)
    assert covariance[0, 2] == 0


def test_shared_errors_leave_ranks_alone() -> None:
    """All regions err alike: the order is sure, whatever the size of the error."""
    regions, values = pieces([0], [12], [24]), np.array([30.0, 20.0, 10.0])
    spread = np.full(40, 50.0)
    alike = rank_confidence(values, regions, spread, STRIP, ErrorModel(common_share=1.0), top=1)
    assert alike.low.tolist() == alike.high.tolist() == [1, 2, 3]
    assert alike.top.tolist() == [1, 0, 0]
    apart = rank_confidence(values, regions, spread, STRIP, ErrorModel(common_share=0.0), top=1)
    assert (apart.high - apart.low).min() >= 1
    assert apart.spread == pytest.approx([50, 50, 50])
    assert 0.3 < apart.top[0] < 0.9


def test_the_same_seed_gives_the_same_and_another_nearly() -> None:
    regions, values = pieces(*[[n] for n in range(0, 40, 4)]), np.linspace(10, 0, 10)
    spread = np.full(40, 3.0)
    model = ErrorModel(draws=2000)
    first = rank_confidence(values, regions, spread, STRIP, model, top=3)
    again = rank_confidence(values, regions, spread, STRIP, model, top=3)
    assert first.top.tolist() == again.top.tolist()
    other = rank_confidence(values, regions, spread, STRIP, replace(model, seed=2), top=3)
    assert first.top.tolist() != other.top.tolist()
    np.testing.assert_allclose(first.top, other.top, atol=0.06)
    assert first.top.sum() == pytest.approx(3)


def test_no_error_no_doubt_and_one_region() -> None:
    regions, values = pieces([0], [8], [16]), np.array([3.0, 2.0, 1.0])
    sure = rank_confidence(values, regions, np.zeros(40), STRIP, ErrorModel(), top=2)
    assert sure.low.tolist() == sure.high.tolist() == [1, 2, 3]
    assert sure.top.tolist() == [1, 1, 0]
    alone = rank_confidence(values[:1], pieces([0]), np.ones(40), STRIP, ErrorModel(), top=3)
    assert alone.low.tolist() == alone.high.tolist() == [1]


def test_equal_values_without_error_keep_their_order() -> None:
    regions = pieces([0], [8], [16])
    found = rank_confidence(np.ones(3), regions, np.zeros(40), STRIP, ErrorModel(), top=1)
    assert found.low.tolist() == [1, 2, 3]


def test_the_noise_is_taken_out_of_the_spread() -> None:
    values = np.array([0.0, 10.0, 20.0, 30.0, 40.0])
    seen, none = values.var(ddof=1), csr_array((5, 5))
    own = csr_array(10 * np.eye(5))
    assert shrinkage(values, np.zeros(5), own) == pytest.approx(1 - 100 / seen)
    # An error that all share spreads nothing.
    assert shrinkage(values, np.full(5, 10.0), none) == pytest.approx(1)
    assert shrinkage(values, np.zeros(5), csr_array(100 * np.eye(5))) == pytest.approx(1 / 6)
    assert shrinkage(np.ones(3), np.zeros(3), csr_array((3, 3))) == 1
    assert shrinkage(np.ones(1), np.ones(1), csr_array((1, 1))) == 1


def test_the_first_has_the_best_chance_of_being_first() -> None:
    """Neighbours err together and a gradient runs over the map: order and chances agree."""
    regions = pieces(*[[n] for n in range(40)])
    values = np.linspace(1.0, 0.6, 40)
    spread = np.full(40, 0.3)
    found = rank_confidence(values, regions, spread, STRIP, ErrorModel(), top=3)
    assert found.top[0] > 0.1
    assert found.top[:3].min() > found.top[-10:].max()
    assert (found.low <= np.arange(1, 41)).mean() > 0.9
    assert found.low[0] == 1
    assert (found.low <= np.arange(1, 41)).all()
    assert (found.high >= np.arange(1, 41)).all()


@pytest.mark.parametrize(("count", "noise"), [(30, 0.3), (30, 1.0), (100, 1.0)])
def test_the_truth_lies_inside_nine_times_in_ten(count: int, noise: float) -> None:
    """scripts/rank_coverage.py, with fewer trials; the noise is told over the truth's spread."""
    ours, simple, width = study().coverage(count, noise, trials=40)
    assert 0.86 < ours < 0.97
    assert 0.1 < width < 0.7  # not by saying that everything is possible
    if noise >= 1:
        assert simple < ours - 0.02  # noise added to noisy values: too narrow, too far apart
