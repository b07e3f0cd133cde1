"""How ranks move with weights and limits, on regions of one cell each."""

from __future__ import annotations

import numpy as np
import pytest

from gridcool.planning.exclusions import ExclusionRule
from gridcool.planning.regions import Cover
from gridcool.planning.sensitivity import SENSITIVITY_COLUMNS, cases, ranking_sensitivity
from gridcool.planning.suitability import peaked, straight

FIELDS = {
    "rejected_flux": np.array([[100.0, 90.0, 80.0, np.nan]]),
    "slope": np.array([[14.0, 4.0, 0.0, 0.0]]),
    "monthly_mean": np.array([[1.0, 1.0, 1.0, 1.0]]),
}
COVERS = [
    Cover(name, 1e6, np.array([cell]), np.array([1e6]))
    for cell, name in enumerate(["bright", "middle", "level", "void"])
]
FLUX = straight("rejected_flux", 60, 110, 1.0)
SLOPE = straight("slope", 20, 0, 1.0)
STEEP = ExclusionRule("slope", "too steep", above=15)


def test_weights_and_limits_by_hand() -> None:
    """Worths of flux 0.8, 0.6, 0.4 and slope 0.3, 0.8, 1: together 0.55, 0.7, 0.7."""
    frame = ranking_sensitivity(FIELDS.__getitem__, COVERS, [FLUX, SLOPE], [STEEP], top=1)
    assert tuple(frame.columns) == SENSITIVITY_COLUMNS
    found = frame.set_index("change")
    # As it is: level and middle tie at 0.7 and stand by name, bright has 0.55.
    doubled = found.loc["weight of rejected_flux doubled"]  # 0.633, 0.667, 0.6
    assert doubled["largest_move"] == -2
    assert doubled["region_moved"] == "level"
    assert doubled["top_changes"] == 1
    assert doubled["rank_correlation"] == pytest.approx(-0.5)
    halved = found.loc["weight of rejected_flux halved"]
    assert halved["largest_move"] == 0
    assert halved["region_moved"] == ""
    assert halved["rank_correlation"] == 1
    stricter = found.loc["slope excluded above 13.5 instead of 15"]
    assert stricter["top_changes"] == 0
    assert stricter["rank_correlation"] == 1
    looser = found.loc["slope excluded above 16.5 instead of 15"]
    assert looser["largest_move"] == 0


def test_every_weight_and_limit_moves_both_ways() -> None:
    changes = [case.change for case in cases([FLUX, peaked("slope", 0, 5, 20)], [STEEP])]
    assert len(changes) == len(set(changes)) == 2 * 2 + 2 * 2 + 3 * 2 + 2
    assert "slope worth 1 at 7 instead of 5" in changes
    alone = [case.change for case in cases([FLUX], [])]
    assert len(alone) == 4  # a single weight changes nothing


def test_nothing_eligible() -> None:
    frame = ranking_sensitivity(FIELDS.__getitem__, [COVERS[3]], [FLUX], [])
    assert frame["rank_correlation"].isna().all()
    assert (frame["top_changes"] == 0).all()
