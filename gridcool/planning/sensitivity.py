"""How the ranking of regions moves when a weight or a limit moves."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from scipy.stats import spearmanr

from gridcool.planning.exclusions import ExclusionRule
from gridcool.planning.pieces import Pieces
from gridcool.planning.regions import Cover
from gridcool.planning.suitability import Criterion, Mean, weigh

FloatArray = NDArray[np.floating]
Field = Callable[[str], FloatArray]

WEIGHT_FACTORS = (0.5, 2.0)
LIMIT_SHARE = 0.1  # limits move by a tenth of their criterion's span, or of their own size
SENSITIVITY_COLUMNS = (
    *("change", "rank_correlation", "largest_move", "region_moved", "top_changes"),
)


@dataclass(frozen=True)
class Case:
    """Criteria and rules with one of them changed, and a phrase that says which."""

    change: str
    criteria: tuple[Criterion, ...]
    rules: tuple[ExclusionRule, ...]


def cases(criteria: Sequence[Criterion], rules: Sequence[ExclusionRule]) -> Iterator[Case]:
    """Every weight halved and doubled, every limit moved down and up by a tenth."""
    whole, kept = tuple(criteria), tuple(rules)
    for index, criterion in enumerate(whole):

        def swapped(other: Criterion, index: int = index) -> tuple[Criterion, ...]:
            return (*whole[:index], other, *whole[index + 1 :])

        name = criterion.layer
        if len(whole) > 1:
            for factor, word in zip(WEIGHT_FACTORS, ("halved", "doubled"), strict=True):
                moved = replace(criterion, weight=criterion.weight * factor)
                yield Case(f"weight of {name} {word}", swapped(moved), kept)
        span = criterion.points[-1][0] - criterion.points[0][0]
        for number, (at, worth) in enumerate(criterion.points):
            for sign in (-1, 1):
                place = at + sign * LIMIT_SHARE * span
                points = (
                    *criterion.points[:number],
                    (place, worth),
                    *criterion.points[number + 1 :],
                )
                yield Case(
                    f"{name} worth {worth:g} at {place:g} instead of {at:g}",
                    swapped(replace(criterion, points=points)),
                    kept,
                )
    for index, rule in enumerate(kept):
        for side in ("above", "below"):
            limit = getattr(rule, side)
            if limit is None:
                continue
            for sign in (-1, 1):
                place = limit + sign * LIMIT_SHARE * (abs(limit) or 1.0)
                other = replace(rule, **{side: place})
                yield Case(
                    f"{rule.layer} excluded {side} {place:g} instead of {limit:g}",
                    whole,
                    (*kept[:index], other, *kept[index + 1 :]),
                )


def ranking_sensitivity(
    field: Field,
    covers: Sequence[Cover],
    criteria: Sequence[Criterion],
    rules: Sequence[ExclusionRule],
    *,
    mean: Mean = "arithmetic",
    top: int = 3,
) -> pd.DataFrame:
    """The ranking by suitability under every `cases`, compared with the ranking as it is.

    Parameters
    ----------
    field : callable
        Gives a layer or input as one field (rows, columns) by its name.
    covers : sequence of Cover
    criteria, rules
    mean : {"arithmetic", "geometric"}
    top : int

    Returns
    -------
    pandas.DataFrame
        Columns as `SENSITIVITY_COLUMNS`: what was changed; Spearman's correlation of the regions'
        ranks with the unchanged ones; by how many places the most moved region moved (up is
        positive) and which; how many of the best ``top`` are others.

    Notes
    -----
    Only cells that some region covers are held, one value a layer.
    """
    named = {each.layer for each in criteria} | {each.layer for each in rules}
    names = sorted(named | {"rejected_flux"})
    usable = np.isfinite(field("rejected_flux"))
    pieces = Pieces.of(covers, usable)
    values = {name: field(name).ravel()[pieces.cells] for name in names}
    regions = [cover.name for cover in covers]

    def ranks(some: Sequence[Criterion], limits: Sequence[ExclusionRule]) -> FloatArray:
        return _ranks(pieces, values, some, limits, mean, regions)

    before = ranks(criteria, rules)
    rows = [
        (case.change, *_moved(before, ranks(case.criteria, case.rules), regions, top))
        for case in cases(criteria, rules)
    ]
    return pd.DataFrame(rows, columns=list(SENSITIVITY_COLUMNS))


def _ranks(
    pieces: Pieces,
    values: dict[str, FloatArray],
    criteria: Sequence[Criterion],
    rules: Sequence[ExclusionRule],
    mean: Mean,
    regions: Sequence[str],
) -> FloatArray:
    """Rank of each region by mean suitability, 1 the best; NaN where nothing is eligible."""
    out = np.zeros(len(pieces.cells), bool)
    for rule in rules:
        out |= _excluded(values[rule.layer], rule)
    worths = [each.worth(values[each.layer]) for each in criteria]
    suitable = weigh(worths, [each.weight for each in criteria], mean)
    known = ~out & np.isfinite(suitable)
    weight = pieces.sums(np.where(known, pieces.areas, 0.0))
    total = pieces.sums(np.where(known, suitable, 0.0) * pieces.areas)
    score = np.divide(total, weight, out=np.full(len(weight), np.nan), where=weight > 0)
    order = sorted(
        (index for index in range(len(score)) if np.isfinite(score[index])),
        key=lambda index: (-round(float(score[index]), 6), regions[index]),
    )
    ranks = np.full(len(score), np.nan)
    ranks[order] = np.arange(1, len(order) + 1)
    return ranks


def _excluded(values: FloatArray, rule: ExclusionRule) -> NDArray[np.bool_]:
    out = np.isnan(values) & (rule.missing == "out")
    if rule.above is not None:
        out |= values > rule.above
    if rule.below is not None:
        out |= values < rule.below
    if rule.equals is not None:
        out |= np.isin(values, rule.equals)
    return np.asarray(out)


def _moved(
    before: FloatArray, after: FloatArray, regions: Sequence[str], top: int
) -> tuple[float, int, str, int]:
    both = np.isfinite(before) & np.isfinite(after)
    if not both.any():
        return np.nan, 0, "", 0
    moves = np.where(both, before - after, 0)
    most = int(np.abs(moves).argmax())
    alike = not moves.any() or both.sum() < 2
    correlation = 1.0 if alike else float(spearmanr(before[both], after[both]).statistic)
    left = ((before <= top) & ~(after <= top)).sum()
    return correlation, int(moves[most]), regions[most] if moves[most] else "", int(left)
