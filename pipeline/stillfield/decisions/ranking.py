"""Places and cells in the order in which to visit them, with how sure that order is and why.

A place is screened, scored and ranked by `stillfield.decisions.ranking_score`; the same rule then ranks every draw
of the uncertain figures and weights (`stillfield.decisions.ranking_uncertainty`). What comes out for a place does
not depend on the order of the input: all work is done in the order of the ids.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from math import inf

import numpy as np
from numpy.typing import NDArray

from stillfield.decisions.ranking_reasons import Driver, Move, drivers, drivers_words, equals, greatest_moves
from stillfield.decisions.ranking_score import (
    TIE_TOLERANCE,
    Columns,
    Criterion,
    Floats,
    ScaleUsed,
    Screen,
    check_criteria,
    scales_used,
    shared_ranks,
    weighted_scores,
)
from stillfield.decisions.ranking_simulation import Simulated, number_of_draws, rank_interval, simulate
from stillfield.decisions.ranking_uncertainty import Uncertainty, weight_draws
from stillfield.errors import PlacesError
from stillfield.vocabulary import WATER_CAUTION

#: Why a place is left out of which no deciding figure is known.
NOTHING_KNOWN = "nothing is known of it that tells the places apart"

#: A difference of one hundredth of the whole scale between two places is none.
LEVEL_WITHIN = 0.01


@dataclass(frozen=True)
class PlaceTable:
    """Places to rank: ids (all different), names, and columns of one number per place with NaN for not known."""

    ids: tuple[str, ...]
    names: tuple[str, ...]
    columns: Columns

    def __post_init__(self) -> None:
        twice = sorted(each for each, count in Counter(self.ids).items() if count > 1)
        if twice:
            raise PlacesError("places share an id", where="id", got=", ".join(twice[:5]), wanted="ids all different")
        lengths = {"name": len(self.names)} | {name: len(values) for name, values in self.columns.items()}
        for name, length in lengths.items():
            if length != len(self.ids):
                raise PlacesError("a column has another length than the ids", where=name, got=length,
                                  wanted=len(self.ids))

    def taken(self, places: NDArray[np.int64]) -> PlaceTable:
        """Return some of the places, in the order asked for."""
        return PlaceTable(
            tuple(self.ids[place] for place in places), tuple(self.names[place] for place in places),
            {name: np.asarray(values, dtype=float)[places] for name, values in self.columns.items()},
        )


@dataclass(frozen=True)
class PlaceRank:
    """What the ranking says of one place.

    Attributes
    ----------
    id, name : str
        As given.
    score : float or None
        0..1, 1 where the place comes first in every criterion; None for a place that is left out.
    rank, rank_low, rank_high : int or None
        Rank from 1, and the 5th and 95th percentile of the simulated ranks, widened to the ranks of places whose
        scores differ by next to nothing.
    top_probability : float or None
        Share of the draws in which it is among the first `Ranking.top`; places that tie for the last seat share it.
    drivers : tuple of Driver
        What each criterion adds to the score beside the average place, the greatest first.
    move : Move or None
        The single change of a weight that moves its rank farthest; None where none does.
    equals : tuple of str
        Ids of the places it cannot be told apart from, the nearest in the order first.
    missing : tuple of str
        Criteria that are not known for it; their weight goes to the others.
    reasons : tuple of str
        Why it is left out; empty for a ranked place.
    words : str
        All of this in sentences.
    """

    id: str
    name: str
    score: float | None = None
    rank: int | None = None
    rank_low: int | None = None
    rank_high: int | None = None
    top_probability: float | None = None
    drivers: tuple[Driver, ...] = ()
    move: Move | None = None
    equals: tuple[str, ...] = ()
    missing: tuple[str, ...] = ()
    reasons: tuple[str, ...] = ()
    words: str = ""


@dataclass(frozen=True)
class Ranking:
    """A ranking.

    Attributes
    ----------
    places : tuple of PlaceRank
        In the order of the input.
    order : tuple of int
        Positions in `places`, first to visit first, then those left out; ties in the order of name and id.
    scales : tuple of ScaleUsed
        How each criterion was brought to 0..1.
    draws : int
        Number of simulated rankings; 0 where nothing was varied.
    top : int
        Number of first places the probabilities are about.
    summary : str
        How many places are ranked and how many are left out for what.
    """

    places: tuple[PlaceRank, ...]
    order: tuple[int, ...]
    scales: tuple[ScaleUsed, ...]
    draws: int
    top: int
    summary: str

    def text(self) -> str:
        """Return the ranking as readable lines: how it was made, place by place, and the caution about the water."""
        lines = [self.summary, *(used.words for used in self.scales)]
        lines += [f"{self.places[place].name}: {self.places[place].words}" for place in self.order]
        return "\n".join([*lines, WATER_CAUTION])


def rank_places(
    table: PlaceTable,
    criteria: Sequence[Criterion],
    *,
    screens: Sequence[Screen] = (),
    draws: Mapping[str, Floats] | None = None,
    uncertainty: Uncertainty | None = None,
    top: int = 10,
    level_within: float = LEVEL_WITHIN,
    tie_tolerance: float = TIE_TOLERANCE,
) -> Ranking:
    """Screen, score and rank places, and simulate how sure their order is.

    Parameters
    ----------
    table : PlaceTable
        Places with the stated (central) values.
    criteria : sequence of Criterion
        Column, direction, scale and weight of each.
    screens : sequence of Screen
        Hard limits; a place that fails one is kept in the result with its reasons and has no rank.
    draws : mapping of str to ndarray (draw, place), optional
        Draws of columns that are uncertain, in the order of the places; other columns keep their values.
    uncertainty : Uncertainty, optional
        Number of draws and seed, and whether and how far the weights are varied. Without it the weights are not.
    top : int
        Number of first places whose probability is told.
    level_within : float
        Score difference that means nothing: such places cannot be told apart. It is measured where every criterion
        counts in full, so it is greater where the places hardly differ in anything.
    tie_tolerance : float
        Score difference up to which neighbours share a rank.

    Returns
    -------
    Ranking
        Of the same length and order as the table.

    Raises
    ------
    PlacesError
        If the weights, columns, screens or draws cannot be used.

    Examples
    --------
    >>> table = PlaceTable(("a", "b"), ("Ambo", "Belu"), {"people": np.array([90.0, 300.0])})
    >>> ranking = rank_places(table, [Criterion("people", "people")])
    >>> [place.rank for place in ranking.places]
    [2, 1]
    >>> ranking.places[1].words
    'Rank 1 of 2. Lifted by people (+0.50).'
    """
    check_criteria(criteria, table.columns)
    _check_screens(screens, table.columns)
    count = number_of_draws(len(table.ids), criteria, draws or {}, uncertainty)
    by_id = np.array(sorted(range(len(table.ids)), key=lambda place: table.ids[place]), dtype=np.int64)
    ordered = table.taken(by_id)
    reasons = _reasons_out(ordered, criteria, screens)
    kept = np.array([place for place, found in enumerate(reasons) if not found], dtype=np.int64)
    ranked = ordered.taken(kept)
    simulated = None
    if count and len(kept):
        drawn = {name: np.asarray(values, dtype=float)[:, by_id[kept]] for name, values in (draws or {}).items()}
        weights = _drawn_weights(criteria, uncertainty, count)
        simulated = simulate({**ranked.columns, **drawn}, criteria, weights, seats=top, tolerance=tie_tolerance)
    told = _told(ranked, criteria, simulated, top=top, level_within=level_within, tolerance=tie_tolerance)
    places = _in_input_order(table, ordered, told, reasons)
    return Ranking(
        places, tuple(sorted(range(len(places)), key=lambda at: _first_first(places[at]))),
        scales_used(ranked.columns, criteria), count if simulated else 0, top, _summary(reasons, ordered, screens),
    )


def _check_screens(screens: Sequence[Screen], columns: Columns) -> None:
    for screen in screens:
        if screen.column not in columns:
            raise PlacesError("a screen reads a column that is not there", where=screen.words, got=screen.column,
                              wanted=", ".join(sorted(columns)))


def _drawn_weights(criteria: Sequence[Criterion], uncertainty: Uncertainty | None, count: int) -> Floats:
    if uncertainty is None:
        return np.tile([criterion.weight for criterion in criteria], (count, 1))
    return weight_draws(criteria, uncertainty)


def _reasons_out(
    table: PlaceTable, criteria: Sequence[Criterion], screens: Sequence[Screen]
) -> tuple[tuple[str, ...], ...]:
    """Why each place is left out; empty for those that stay."""
    reasons: list[list[str]] = [[] for _ in table.ids]
    for screen in screens:
        values = table.columns[screen.column]
        for place in np.flatnonzero(screen.fails(values)):
            reasons[place].append(screen.reason(float(values[place])))
    # Of a place that knows nothing of what tells the others apart there is nothing to say.
    kept = np.array([place for place, found in enumerate(reasons) if not found], dtype=np.int64)
    stated = np.array([criterion.weight for criterion in criteria])
    weight = weighted_scores(table.taken(kept).columns, criteria, stated)[1]
    for place in kept[weight <= 0] if np.any(weight > 0) else ():
        reasons[place].append(NOTHING_KNOWN)
    return tuple(tuple(found) for found in reasons)


def _told(
    table: PlaceTable, criteria: Sequence[Criterion], simulated: Simulated | None, *,
    top: int, level_within: float, tolerance: float,
) -> tuple[PlaceRank, ...]:
    """Everything about the ranked places, which stand in the order of their ids."""
    if not table.ids:
        return ()
    stated = np.array([criterion.weight for criterion in criteria])
    score, weight = weighted_scores(table.columns, criteria, stated)
    ranks = shared_ranks(score, tolerance)
    strength = float(weight.max() / stated.sum())
    level = max(level_within / strength if strength > 0 else 1.0, tolerance)
    low, high = rank_interval(score, ranks.rank, simulated, level_within=level)
    share = ranks.seat_share(top) if simulated is None else simulated.top_share
    order = np.array(sorted(range(len(score)), key=lambda at: (ranks.rank[at], table.names[at], table.ids[at])))
    alike = equals(order, score, None if simulated is None else simulated.rank, level_within=level)
    labels, missing = _labels(table), _missing(table.columns, criteria)
    driven, moves = drivers(table.columns, criteria, stated), greatest_moves(table.columns, criteria, tolerance)
    told = []
    for at in range(len(score)):
        place = PlaceRank(
            table.ids[at], table.names[at], float(score[at]), int(ranks.rank[at]), int(low[at]), int(high[at]),
            float(share[at]), driven[at], moves[at], tuple(table.ids[other] for other in alike[at]), missing[at],
        )
        others = [labels[other] for other in alike[at]]
        told.append(replace(place, words=_words(place, len(score), others, simulated, top)))
    return tuple(told)


def _labels(table: PlaceTable) -> list[str]:
    """Names, with the id where several places share one."""
    count = Counter(table.names)
    return [name if count[name] == 1 else f"{name} ({each})" for name, each in zip(table.names, table.ids, strict=True)]


def _missing(columns: Columns, criteria: Sequence[Criterion]) -> tuple[tuple[str, ...], ...]:
    counted = [used.criterion for used in scales_used(columns, criteria) if used.weight_share * used.criterion.weight]
    unknown = {criterion.name: np.isnan(columns[criterion.column]) for criterion in counted}
    places = len(columns[criteria[0].column])
    return tuple(tuple(name for name, where in unknown.items() if where[at]) for at in range(places))


def _words(place: PlaceRank, ranked: int, others: Sequence[str], simulated: Simulated | None, top: int) -> str:
    rank = f"Rank {place.rank} of {ranked}"
    if place.rank_low != place.rank_high:
        rank += f" ({place.rank_low} to {place.rank_high})"
    if simulated is not None and place.top_probability is not None and top < ranked:
        seats = "first" if top == 1 else f"among the first {top}"
        rank += f", {seats} in {100 * place.top_probability:.0f} of 100 draws"
    sentences = [f"{rank}."]
    if others:
        sentences.append(f"Cannot be told apart from {_listed(others)}.")
    sentences.append(drivers_words(place.drivers))
    if place.move is not None:
        sentences.append(place.move.words)
    if place.missing:
        named = _listed(place.missing, most=len(place.missing))
        verb = "is" if len(place.missing) == 1 else "are"
        sentences.append(f"{named[0].upper()}{named[1:]} {verb} not known; the weight went to the other criteria.")
    return " ".join(sentences)


def _listed(names: Sequence[str], most: int = 3) -> str:
    told, more = list(names[:most]), len(names) - most
    if more == 1:
        told, more = list(names), 0
    if more > 0:
        told.append(f"{more} others")
    return told[0] if len(told) == 1 else f"{', '.join(told[:-1])} and {told[-1]}"


def _in_input_order(
    table: PlaceTable, ordered: PlaceTable, told: Sequence[PlaceRank], reasons: Sequence[tuple[str, ...]]
) -> tuple[PlaceRank, ...]:
    placed = {place.id: place for place in told}
    for each, name, found in zip(ordered.ids, ordered.names, reasons, strict=True):
        if found:
            placed[each] = PlaceRank(each, name, reasons=found, words=f"Left out: {'; '.join(found)}.")
    return tuple(placed[each] for each in table.ids)


def _first_first(place: PlaceRank) -> tuple[float, str, str]:
    return (inf if place.rank is None else place.rank, place.name, place.id)


def _summary(reasons: Sequence[tuple[str, ...]], table: PlaceTable, screens: Sequence[Screen]) -> str:
    total, left = len(reasons), sum(1 for found in reasons if found)
    counts = [(screen.words, int(screen.fails(table.columns[screen.column]).sum())) for screen in screens]
    counts.append((NOTHING_KNOWN, sum(1 for found in reasons if NOTHING_KNOWN in found)))
    why = ", ".join(f"{words}: {count}" for words, count in counts if count)
    if total == 0:
        return "There is no place to rank."
    if left == total:
        return f"No place is left to rank: all {total} are left out ({why})."
    ranked = f"{total - left} place{'s are' if total - left > 1 else ' is'} ranked"
    return f"{ranked}, {left} left out ({why})." if left else f"{ranked}."
