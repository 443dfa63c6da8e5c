"""Why a place stands where it stands: what drives its score, which weight would move it, whom it equals."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from stillfield.decisions.ranking_score import (
    Columns,
    Criterion,
    Floats,
    scale_values,
    shared_ranks,
    weighted_scores,
)

#: Changes of one weight that are tried, in the order in which equal moves are told.
WEIGHT_CHANGES = (("doubling", 2.0), ("halving", 0.5), ("leaving out", 0.0))

#: A place is ahead of another when it is so in this share of the draws, the share a 5th to 95th interval holds.
SURELY_AHEAD = 0.9

#: How many neighbours in the order, before and behind, a place is compared with one by one.
NEIGHBOURS = 100

#: Score points of a criterion that are worth a word.
WORTH_TELLING = 0.005


@dataclass(frozen=True)
class Driver:
    """What one criterion adds to a place's score beside the average place, in score points (-1..1)."""

    criterion: str
    difference: float


@dataclass(frozen=True)
class Move:
    """The change of a single weight that moves a place farthest, and the rank it would then have."""

    criterion: str
    change: str
    rank: int

    @property
    def words(self) -> str:
        """Say what would move the place, as a sentence."""
        what = self.criterion if self.change == "leaving out" else f"the weight of {self.criterion}"
        return f"{self.change.capitalize()} {what} moves it to rank {self.rank}."


def drivers(columns: Columns, criteria: Sequence[Criterion], weights: Floats) -> tuple[tuple[Driver, ...], ...]:
    """Tell what each criterion adds to each place's score beside the average of the places where it is known.

    Parameters
    ----------
    columns : mapping of str to ndarray (place,)
        Values by column.
    criteria : sequence of Criterion
        Direction and scale.
    weights : ndarray (criterion,)
        In the order of `criteria`.

    Returns
    -------
    tuple of tuple of Driver
        Per place, the greatest difference first. Where everything is known of every place the differences of a
        place add up to its score less the mean score. A criterion that is not known for a place adds nothing.

    Examples
    --------
    >>> columns = {"n": np.array([100.0, 300.0]), "km": np.array([3.0, 1.0])}
    >>> criteria = [Criterion("people", "n"), Criterion("distance", "km")]
    >>> drivers(columns, criteria, np.array([3.0, 1.0]))[1]
    (Driver(criterion='people', difference=0.375), Driver(criterion='distance', difference=-0.125))
    """
    scaled = [scale_values(columns[criterion.column], criterion) for criterion in criteria]
    effective = np.stack([
        weight * each.weight_share * each.known for weight, each in zip(weights, scaled, strict=True)
    ])
    total = effective.sum(axis=0)
    share = np.where(total > 0, effective / np.where(total > 0, total, 1.0), 0.0)
    difference = np.stack([each.score - _mean_known(each.score, each.known) for each in scaled]) * share
    return tuple(
        tuple(
            Driver(criteria[number].name, float(difference[number, place]))
            for number in np.argsort(-np.abs(difference[:, place]), kind="stable")
            if difference[number, place] != 0
        )
        for place in range(difference.shape[1])
    )


def _mean_known(score: Floats, known: NDArray[np.bool_]) -> float:
    return float(score[known].mean()) if known.any() else 0.0


def drivers_words(found: Sequence[Driver]) -> str:
    """Say in a sentence which criteria lift a place and which hold it back.

    Examples
    --------
    >>> drivers_words([Driver("people", 0.25), Driver("yield", -0.1), Driver("distance", 0.05)])
    'Lifted by people (+0.25) and distance (+0.05), held back by yield (-0.10).'
    """
    lifts = [each for each in found if each.difference >= WORTH_TELLING][:2]
    holds = [each for each in found if each.difference <= -WORTH_TELLING][:2]
    parts = [
        f"{verb} {' and '.join(f'{each.criterion} ({each.difference:+.2f})' for each in told)}"
        for verb, told in (("lifted by", lifts), ("held back by", holds)) if told
    ]
    text = ", ".join(parts) or "as the average place in every criterion"
    return f"{text[0].upper()}{text[1:]}."


def greatest_moves(columns: Columns, criteria: Sequence[Criterion], tolerance: float) -> tuple[Move | None, ...]:
    """Find for each place the change of one weight (doubled, halved or left out) that moves its rank farthest.

    Parameters
    ----------
    columns : mapping of str to ndarray (place,)
        Values by column.
    criteria : sequence of Criterion
        With their stated weights.
    tolerance : float
        Score difference up to which places tie.

    Returns
    -------
    tuple of Move or None
        Doubling and halving go before leaving out; None where none of them moves the place.
    """
    stated = np.array([criterion.weight for criterion in criteria])
    rank = shared_ranks(weighted_scores(columns, criteria, stated)[0], tolerance).rank
    best: list[Move | None] = [None] * len(rank)
    farthest = np.zeros(len(rank), dtype=np.int64)
    for change, factor in WEIGHT_CHANGES:
        if change == "leaving out":
            farthest = np.where(farthest > 0, np.iinfo(np.int64).max, 0)
        for number, criterion in enumerate(criteria):
            changed = stated.copy()
            changed[number] *= factor
            if criterion.weight == 0 or not changed.any():
                continue
            moved = shared_ranks(weighted_scores(columns, criteria, changed)[0], tolerance).rank
            for place in np.flatnonzero(np.abs(moved - rank) > farthest):
                best[place] = Move(criterion.name, change, int(moved[place]))
            farthest = np.maximum(farthest, np.abs(moved - rank))
    return tuple(best)


def equals(
    order: NDArray[np.int64], score: Floats, drawn_rank: NDArray[np.int32] | None, *, level_within: float
) -> tuple[tuple[int, ...], ...]:
    """Find for each place the others it cannot be told apart from.

    Two places cannot be told apart when the one that stands first is ahead in less than 90 of 100 draws (a tie is
    half of one), or when their scores differ by no more than `level_within`.

    Parameters
    ----------
    order : ndarray (place,)
        Places from first to last.
    score : ndarray (place,)
        Score of the stated values.
    drawn_rank : ndarray (place, draw) or None
        Simulated ranks.
    level_within : float
        Score difference that means nothing.

    Returns
    -------
    tuple of tuple of int
        Per place, the nearest in the order first; at most `NEIGHBOURS` before and behind are compared.
    """
    found: list[list[int]] = [[] for _ in order]
    ordered_score = score[order]
    ordered_rank = None if drawn_rank is None else drawn_rank[order]
    for apart in range(1, min(len(order), NEIGHBOURS + 1)):
        alike = ordered_score[:-apart] - ordered_score[apart:] <= level_within
        if ordered_rank is not None:
            before, behind = ordered_rank[:-apart], ordered_rank[apart:]
            wins = (before < behind).sum(axis=1) + (before <= behind).sum(axis=1)
            alike |= wins < 2.0 * SURELY_AHEAD * before.shape[1]
        for position in np.flatnonzero(alike):
            first, second = int(order[position]), int(order[position + apart])
            found[first].append(second)
            found[second].append(first)
    return tuple(tuple(each) for each in found)
