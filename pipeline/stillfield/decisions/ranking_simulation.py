"""The ranking made again for every draw, and what its ranks say: interval and chance of a seat among the first."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from stillfield.decisions.ranking_score import Columns, Criterion, Floats, shared_ranks, weighted_scores
from stillfield.decisions.ranking_uncertainty import Uncertainty
from stillfield.errors import PlacesError

#: The rank interval runs between these shares of the simulated ranks.
INTERVAL = (0.05, 0.95)

#: Simulated scores that are worked at a time, few enough to stay in the processor's cache.
_SCORES_AT_A_TIME = 100_000


@dataclass(frozen=True)
class Simulated:
    """Ranks in every draw (place, draw), and the mean share of a seat among the first (place,)."""

    rank: NDArray[np.int32]
    top_share: Floats


def number_of_draws(
    places: int, criteria: Sequence[Criterion], draws: Mapping[str, Floats], uncertainty: Uncertainty | None
) -> int:
    """Check the draws and count them; 0 where nothing is varied.

    Raises
    ------
    PlacesError
        If draws have the wrong shape or number, no criterion reads them, or a logarithm would see negative ones.
    """
    counts = set() if uncertainty is None or not (uncertainty.weights or draws) else {uncertainty.draws}
    for column, values in draws.items():
        readers = [criterion for criterion in criteria if criterion.column == column]
        if not readers:
            raise PlacesError("draws are given for a column that no criterion reads", where=column)
        if values.ndim != 2 or values.shape[1] != places or len(values) < 1:
            raise PlacesError("draws have the wrong shape", where=column, got=values.shape,
                              wanted=f"(draw, {places} places)")
        if any(criterion.scale == "log" for criterion in readers) and np.any(values < 0):
            raise PlacesError("a logarithmic criterion has draws below 0", where=column)
        counts.add(len(values))
    if len(counts) > 1:
        raise PlacesError("columns and weights have different numbers of draws", got=sorted(counts),
                          wanted="the same number for all")
    return counts.pop() if counts else 0


def simulate(
    columns: Columns, criteria: Sequence[Criterion], weights: Floats, *, seats: int, tolerance: float
) -> Simulated:
    """Score and rank the places in every draw, by the same rule as the stated values.

    Parameters
    ----------
    columns : mapping of str to ndarray (place,) or (draw, place)
        Fixed or drawn values.
    criteria : sequence of Criterion
        Direction and scale; ends that are not stated are found anew in each draw.
    weights : ndarray (draw, criterion)
        Weights of each draw.
    seats : int
        Number of first places.
    tolerance : float
        Score difference up to which neighbours share a rank.

    Returns
    -------
    Simulated
        Ranks from 1.
    """
    places, draws = columns[criteria[0].column].shape[-1], len(weights)
    rank = np.empty((places, draws), dtype=np.int32)
    top = np.zeros(places)
    step = max(1, _SCORES_AT_A_TIME // max(places, 1))
    for start in range(0, draws, step):
        part = slice(start, start + step)
        values = {name: value[part] if value.ndim == 2 else value for name, value in columns.items()}
        score, _ = weighted_scores(values, criteria, weights[part])
        ranks = shared_ranks(np.broadcast_to(score, (len(weights[part]), places)), tolerance)
        rank[:, part] = ranks.rank.T
        top += ranks.seat_share(seats).sum(axis=0)
    return Simulated(rank, top / draws)


def rank_interval(
    score: Floats, rank: NDArray[np.int64], simulated: Simulated | None, *, level_within: float
) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Return the ranks between which a place stands.

    Parameters
    ----------
    score : ndarray (place,)
        Scores of the stated values.
    rank : ndarray (place,)
        Their ranks.
    simulated : Simulated or None
        Ranks of the draws.
    level_within : float
        Score difference that means nothing.

    Returns
    -------
    low, high : ndarray (place,)
        5th and 95th percentile of the simulated ranks (the least rank that this share of the draws does not pass),
        widened to the ranks a place may take among those whose score differs by no more than `level_within`.

    Examples
    --------
    >>> low, high = rank_interval(np.array([0.9, 0.895, 0.5]), np.array([1, 2, 3]), None, level_within=0.01)
    >>> low.tolist(), high.tolist()
    ([1, 1, 3], [2, 2, 3])
    """
    ascending = np.sort(score)
    low = 1 + len(score) - np.searchsorted(ascending, score + level_within, side="right")
    high = len(score) - np.searchsorted(ascending, score - level_within, side="left")
    low, high = np.minimum(low, rank), np.maximum(high, rank)
    if simulated is not None:
        draws = simulated.rank.shape[1]
        # The share times the draws is a whole number in exact arithmetic where it comes out next to one.
        first, last = (max(int(np.ceil(share * draws - 1e-9)) - 1, 0) for share in INTERVAL)
        ordered = np.partition(simulated.rank, (first, last), axis=1)
        low, high = np.minimum(low, ordered[:, first]), np.maximum(high, ordered[:, last])
    return low.astype(np.int64), high.astype(np.int64)
