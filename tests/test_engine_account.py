"""The account's two roads: coefficients for the search, and the outcome at one orientation."""

from __future__ import annotations

import numpy as np
import pytest

from gridcool.engine.account import Cells, beam_coefficients, diffuse_parts, outcome
from gridcool.engine.options import Panel
from gridcool.engine.skies import Moments
from gridcool.physics.sun import month_weights

MONTHS, HOURS, COUNT = 12, 3, 40
YEAR = month_weights()[:, None]


def invented(seed: int) -> tuple[Cells, np.ndarray, np.ndarray]:
    """Cells, path integrals and cosines of tilt without any pattern that could hide a term."""
    rng = np.random.default_rng(seed)

    def values(*shape: int, high: float = 1.0) -> np.ndarray:
        return rng.uniform(0.05, high, shape).astype(np.float32)

    by_hour = (MONTHS, HOURS, COUNT)
    cells = Cells(
        albedo=values(MONTHS, COUNT, high=0.6),
        escape=values(MONTHS, COUNT),
        moments=Moments(*(values(*by_hour) for _ in range(7))),
        clear=values(*by_hour, high=300.0),
        clear_beam=values(*by_hour, high=200.0),
        counts=(rng.random((MONTHS, COUNT)) > 0.2).astype(np.float32),
        overcast_reflectance=0.68,
    )
    return cells, values(MONTHS, HOURS, 5, COUNT, high=150.0), values(COUNT)


@pytest.mark.parametrize("specular", [1.0, 0.6, 0.0])
@pytest.mark.parametrize("back", [0.0, 0.3])
def test_search_and_outcome_agree_in_every_term(specular: float, back: float) -> None:
    """F by the coefficients of the matrix product is F by following the light, at any numbers."""
    panel = Panel(0.83, specular, back)
    cells, integrals, cosine = invented(4)
    coefficients = beam_coefficients(cells, panel)
    terms = integrals
    if specular < 1:
        front = (integrals[:, :, 2:3] + integrals[:, :, 3:4]) * cosine
        terms = np.concatenate([integrals, front], axis=2)
    assert coefficients.shape == terms.shape
    diffuse = diffuse_parts(cells, panel)
    annual = diffuse.annual(cells.counts * YEAR)
    powers = np.stack([cosine**power for power in range(len(annual))])
    search = (coefficients * terms).sum(axis=(1, 2))
    search = (search * YEAR).sum(axis=0) + (annual * powers).sum(axis=0)
    followed = outcome(cells, panel, integrals, diffuse, cosine)
    np.testing.assert_allclose(search, (followed.rejected * YEAR).sum(axis=0), rtol=2e-5)
    assert (followed.rejected[cells.counts == 0] == 0).all()
    # Each of the five integrals matters.
    for term in range(5):
        changed = integrals.copy()
        changed[:, :, term] *= 1.1
        other = outcome(cells, panel, changed, diffuse, cosine)
        seen = abs(other.rejected - followed.rejected).max() > 1e-3
        assert seen == (term >= 2 or specular > 0)
