"""Cells of a region by the rule for places: score and rank of up to millions, simulation on some of them.

Words and draws for every cell would be read by nobody and cost a thousand times the ranking. So the cells get
score and rank alone; `cells_along_rank` picks cells from first to last, which `rank_places` can then simulate on
the scale of the whole region (`CellRanking.criteria`).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from stillfield.decisions.ranking_score import (
    TIE_TOLERANCE,
    Columns,
    Criterion,
    Floats,
    ScaleUsed,
    Screen,
    check_criteria,
    fixed_criteria,
    scales_used,
    shared_ranks,
    weighted_scores,
)
from stillfield.errors import PlacesError


@dataclass(frozen=True)
class CellRanking:
    """Cells ranked.

    Attributes
    ----------
    score : ndarray (cell,)
        0..1; NaN where the cell is left out or nothing is known of it.
    rank : ndarray (cell,)
        From 1; 0 where there is no score.
    first_share : ndarray (cell,)
        Share of the ranked cells that come no later than the cell and those it ties with; NaN without a score. [1]
    scales : tuple of ScaleUsed
        How each criterion was brought to 0..1.
    left_out : tuple of (str, int)
        The words of each screen and how many cells fail it.
    """

    score: Floats
    rank: NDArray[np.int64]
    first_share: Floats
    scales: tuple[ScaleUsed, ...]
    left_out: tuple[tuple[str, int], ...]

    @property
    def criteria(self) -> tuple[Criterion, ...]:
        """The criteria with the ends found in the region as stated limits."""
        return fixed_criteria(self.scales)


def rank_cells(
    columns: Columns,
    criteria: Sequence[Criterion],
    *,
    screens: Sequence[Screen] = (),
    valid: NDArray[np.bool_] | None = None,
    tie_tolerance: float = TIE_TOLERANCE,
) -> CellRanking:
    """Score and rank the cells of a region.

    Parameters
    ----------
    columns : mapping of str to ndarray (cell,)
        One number per cell, NaN where it is not known.
    criteria : sequence of Criterion
        As for places.
    screens : sequence of Screen
        Hard limits; a cell that fails one has no score.
    valid : ndarray of bool (cell,), optional
        Cells to rank, such as land with weather; all without it.
    tie_tolerance : float
        Score difference up to which neighbours share a rank.

    Returns
    -------
    CellRanking
        In the order of the cells; another order gives the same numbers in that order.

    Raises
    ------
    PlacesError
        If weights, columns or screens cannot be used.

    Examples
    --------
    >>> ranked = rank_cells({"litres": np.array([3.0, np.nan, 5.0])}, [Criterion("yield", "litres")])
    >>> ranked.rank.tolist(), ranked.score.tolist()
    ([2, 0, 1], [0.0, nan, 1.0])
    """
    check_criteria(criteria, columns)
    cells = len(columns[criteria[0].column])
    kept = np.ones(cells, dtype=bool) if valid is None else valid.copy()
    left_out = []
    for screen in screens:
        if screen.column not in columns:
            raise PlacesError("a screen reads a column that is not there", where=screen.words, got=screen.column)
        failed = screen.fails(columns[screen.column])
        left_out.append((screen.words, int((failed & (kept if valid is None else valid)).sum())))
        kept &= ~failed
    where = np.flatnonzero(kept)
    inside = {criterion.column: columns[criterion.column][where] for criterion in criteria}
    score, weight = weighted_scores(inside, criteria, np.array([criterion.weight for criterion in criteria]))
    known = (weight > 0) | ~np.any(weight > 0)
    where, score = where[known], score[known]
    ranks = shared_ranks(score, tie_tolerance)
    of_all, rank, share = np.full(cells, np.nan), np.zeros(cells, dtype=np.int64), np.full(cells, np.nan)
    of_all[where], rank[where] = score, ranks.rank
    share[where] = (ranks.rank - 1 + ranks.shared_by) / max(len(where), 1)
    return CellRanking(of_all, rank, share, scales_used(inside, criteria), tuple(left_out))


def cells_along_rank(ranking: CellRanking, tie_break: Sequence[Floats], count: int) -> NDArray[np.int64]:
    """Pick cells evenly from the first to the last rank.

    Parameters
    ----------
    ranking : CellRanking
        Ranked cells.
    tie_break : sequence of ndarray (cell,)
        What orders cells of one rank, such as latitude and longitude, so that the pick does not depend on the
        order of the cells.
    count : int
        How many; all ranked cells where there are no more.

    Returns
    -------
    ndarray of int
        Positions of cells, first to last.
    """
    order = np.lexsort([*reversed(tie_break), ranking.rank])
    order = order[ranking.rank[order] > 0]
    if len(order) <= count:
        return np.asarray(order, dtype=np.int64)
    picked = np.round(np.linspace(0, len(order) - 1, count)).astype(np.int64)
    return np.asarray(order[picked], dtype=np.int64)
