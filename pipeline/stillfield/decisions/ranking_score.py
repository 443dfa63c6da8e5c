"""Screens, criteria, scores and shared ranks: the part of a ranking that holds no chance.

A criterion is brought to 0..1 (1 is visited first) and the score of a place is the weighted mean of what is
known of it. Every function takes one value per place, or draws of it with the places along the last axis, so
that a simulated ranking follows the same rule as the ranking itself.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from math import isfinite
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from stillfield.errors import PlacesError

Floats = NDArray[np.float64]
Columns = Mapping[str, Floats]

#: Comparisons of a screen, as words between the column and the limit.
COMPARISONS = {
    "at least": np.greater_equal, "at most": np.less_equal, "above": np.greater, "below": np.less,
}

#: A criterion whose values differ by less than this share of their size is the same everywhere.
SAME_WITHIN = 1e-9

#: Scores closer than this share a rank.
TIE_TOLERANCE = 1e-6


@dataclass(frozen=True)
class Screen:
    """A hard limit: a place that fails it is not ranked, whatever its other merits.

    Attributes
    ----------
    column : str
        Column that is compared.
    comparison : {'at least', 'at most', 'above', 'below'}
        What the value must be to `limit` for the place to stay.
    limit : float
        In the unit of the column.
    words : str
        Why a place that fails is left out, such as "too few people".
    missing_passes : bool
        Whether a place without the value stays (with a note) or is left out.

    Examples
    --------
    >>> screen = Screen("population", "at least", 50.0, "too few people")
    >>> screen.reason(40.0)
    'too few people (population 40, at least 50 wanted)'
    """

    column: str
    comparison: Literal["at least", "at most", "above", "below"]
    limit: float
    words: str
    missing_passes: bool = True

    def __post_init__(self) -> None:
        if self.comparison not in COMPARISONS or not isfinite(self.limit):
            raise PlacesError(
                "a screen cannot be used", where=self.column, got=f"{self.comparison} {self.limit}",
                wanted=f"{', '.join(COMPARISONS)} and a finite limit",
            )

    def fails(self, values: Floats) -> NDArray[np.bool_]:
        """Tell which places the screen leaves out."""
        known = ~np.isnan(values)
        return np.where(known, ~COMPARISONS[self.comparison](values, self.limit), not self.missing_passes)

    def reason(self, value: float) -> str:
        """Say why a place with this value is left out."""
        if np.isnan(value):
            return f"{self.words} cannot be ruled out ({self.column} is not known)"
        return f"{self.words} ({self.column} {value:.6g}, {self.comparison} {self.limit:.6g} wanted)"


@dataclass(frozen=True)
class Criterion:
    """One criterion of a ranking.

    Attributes
    ----------
    name : str
        Short name that people read, such as "people".
    column : str
        Column that holds its values.
    more_is_first : bool
        True where a greater value is visited first, False where a smaller one is.
    weight : float
        How much it counts; only the proportions of the weights matter and 0 leaves it out.
    scale : {'linear', 'log'}
        How values become 0..1. A zero on a logarithmic scale stands at its lower end.
    limits : (float, float), optional
        Values that stand for the two ends; values beyond them count as the ends. Without limits the ends are
        the least and the greatest finite value of the places that are ranked. A criterion that is the same
        everywhere decides nothing: without limits it is left out, with limits it moves every score alike.
    unit : str
        Unit of the column, for words.
    full_weight_span : float
        Without limits, a criterion whose extremes differ by less than this share of their size counts less, in
        proportion, so that a difference far within the accuracy of the figures is not stretched to the whole
        scale. The default of 0.2 is the ±10 % to which ratios between sites are good. 0 stretches everything.
    """

    name: str
    column: str
    more_is_first: bool = True
    weight: float = 1.0
    scale: Literal["linear", "log"] = "linear"
    limits: tuple[float, float] | None = None
    unit: str = ""
    full_weight_span: float = 0.2

    def __post_init__(self) -> None:
        if not (isfinite(self.weight) and self.weight >= 0):
            raise PlacesError("ranking weights are unusable", where=self.name, got=self.weight, wanted="at least 0")
        if self.scale not in ("linear", "log") or not 0 <= self.full_weight_span < np.inf:
            raise PlacesError(
                "a criterion's scale cannot be used", where=self.name,
                got=f"{self.scale}, full_weight_span {self.full_weight_span}",
                wanted="'linear' or 'log' and a full_weight_span of at least 0",
            )
        if self.limits is not None:
            low, high = self.limits
            if not (isfinite(low) and isfinite(high) and low < high) or (self.scale == "log" and low <= 0):
                raise PlacesError(
                    "the limits of a criterion cannot be used", where=self.name, got=self.limits,
                    wanted="a lower and a greater value, both above 0 on a logarithmic scale",
                )


@dataclass(frozen=True)
class ScaleUsed:
    """The scale a criterion was given: its ends, whether they were found, and the share of its weight it has."""

    criterion: Criterion
    low: float
    high: float
    weight_share: float

    @property
    def words(self) -> str:
        """Say how the criterion counts."""
        criterion = self.criterion
        if criterion.weight == 0:
            return f"{criterion.name}: left out (weight 0)"
        if not isfinite(self.low):
            return f"{criterion.name}: not known for any place, decides nothing"
        unit = f" {criterion.unit}" if criterion.unit else ""
        if self.weight_share == 0:
            return f"{criterion.name}: {self.low:.4g}{unit} everywhere, decides nothing"
        ends = "as stated" if criterion.limits else "the least and the greatest found"
        text = (
            f"{criterion.name} (weight {criterion.weight:g}): {'more' if criterion.more_is_first else 'less'} is "
            f"first, {'logarithmic' if criterion.scale == 'log' else 'linear'} from {self.low:.4g} to "
            f"{self.high:.4g}{unit} ({ends})"
        )
        if self.weight_share < 0.995:
            return f"{text}; counts {self.weight_share:.2g} of its weight, so little do the places differ"
        return text


@dataclass(frozen=True)
class Scaled:
    """A criterion brought to 0..1: `score` and `known` (..., place); ends and share of the weight (...)."""

    score: Floats
    known: NDArray[np.bool_]
    low: Floats
    high: Floats
    weight_share: Floats


def check_criteria(criteria: Sequence[Criterion], columns: Columns) -> None:
    """Refuse criteria that share a name, read no column, all weigh nothing, or want the logarithm below 0.

    Raises
    ------
    PlacesError
        With the criterion at fault.
    """
    names = [criterion.name for criterion in criteria]
    if len(set(names)) < len(names):
        raise PlacesError("two criteria share a name", where="ranking", got=", ".join(names))
    if not any(criterion.weight > 0 for criterion in criteria):
        raise PlacesError(
            "ranking weights are unusable", where="ranking",
            got={criterion.name: criterion.weight for criterion in criteria}, wanted="at least one weight above 0",
        )
    for criterion in criteria:
        if criterion.column not in columns:
            raise PlacesError("a criterion reads a column that is not there", where=criterion.name,
                              got=criterion.column, wanted=", ".join(sorted(columns)))
        if criterion.scale == "log" and np.any(columns[criterion.column] < 0):
            raise PlacesError("a logarithmic criterion has a value below 0", where=criterion.name,
                              got=float(np.nanmin(columns[criterion.column])), wanted="values of at least 0")


def scale_values(values: Floats, criterion: Criterion) -> Scaled:
    """Bring the values of a criterion to 0..1, where 1 is visited first.

    Parameters
    ----------
    values : ndarray (..., place)
        In the unit of the column; NaN is not known, an infinite value stands at the end of the scale.
    criterion : Criterion
        Direction, scale and limits.

    Returns
    -------
    Scaled
        Scores are 0 where nothing is known.

    Notes
    -----
    ``(v - low) / (high - low)``, of the logarithms on a logarithmic scale, cut to 0..1, and 1 minus it where
    less is first. Without stated limits the share of the weight is ``min(1, span / full_weight_span)``, the
    span being ``(high - low) / max(|low|, |high|)``, or ``ln(high / low)`` beside ``ln(1 + full_weight_span)``.

    Examples
    --------
    >>> scale_values(np.array([2.0, 3.0, 4.0]), Criterion("yield", "litres")).score.tolist()
    [0.0, 0.5, 1.0]
    >>> scale_values(np.array([10.0, 100.0, 1000.0]), Criterion("people", "n", scale="log")).score.tolist()
    [0.0, 0.5, 1.0]
    """
    known = ~np.isnan(values)
    low, high, share = _ends(values, criterion)
    on_scale = _on_scale(values, criterion)
    bottom, top = _on_scale(low, criterion), _on_scale(high, criterion)
    usable = share > 0
    width = np.where(usable, np.where(usable, top, 1.0) - np.where(usable, bottom, 0.0), 1.0)
    score = (on_scale - np.where(usable, bottom, 0.0)[..., np.newaxis]) / width[..., np.newaxis]
    score = np.clip(score, 0.0, 1.0)
    score = score if criterion.more_is_first else 1.0 - score
    return Scaled(np.where(known & usable[..., np.newaxis], score, 0.0), known, low, high, share)


def _on_scale(values: Floats, criterion: Criterion) -> Floats:
    if criterion.scale == "linear":
        return values
    with np.errstate(divide="ignore"):
        return np.asarray(np.log10(values))


def _ends(values: Floats, criterion: Criterion) -> tuple[Floats, Floats, Floats]:
    """Ends of the scale and the share of its weight that the criterion has."""
    if criterion.limits is not None:
        any_known = (~np.isnan(values)).any(axis=-1)
        low, high = (np.where(any_known, end, np.nan) for end in criterion.limits)
        return low, high, any_known.astype(float)
    finite = np.isfinite(values) & ((values > 0) if criterion.scale == "log" else True)
    low = np.where(finite, values, np.inf).min(axis=-1, initial=np.inf)
    high = np.where(finite, values, -np.inf).max(axis=-1, initial=-np.inf)
    some = high >= low
    low, high = np.where(some, low, np.nan), np.where(some, high, np.nan)
    # Values without a place on the scale stand at its ends: zeros of a logarithm below, infinite ones either side.
    below = (~np.isnan(values) & ~finite & (values <= 0)).any(axis=-1) & some
    above = np.isposinf(values).any(axis=-1) & some
    size = np.where(some, np.maximum(np.abs(low), np.abs(high)), 1.0)
    relative = np.where(some, high - low, 0.0) / np.where(size > 0, size, 1.0)
    same = relative <= SAME_WITHIN
    # A single finite value is told apart from those: any step away from it makes the scale.
    low = np.where(below & same, low / 10.0 if criterion.scale == "log" else low - 1.0, low)
    high = np.where(above & same, high * 10.0 if criterion.scale == "log" else high + 1.0, high)
    if criterion.full_weight_span == 0:
        share = np.ones_like(relative)
    elif criterion.scale == "log":
        # relative = 1 - low / high, so the logarithm of the ratio is -ln(1 - relative).
        share = -np.log1p(-np.minimum(relative, 0.999)) / np.log1p(criterion.full_weight_span)
    else:
        share = relative / criterion.full_weight_span
    return low, high, np.where(below | above, 1.0, np.where(same, 0.0, np.minimum(share, 1.0)))


def weighted_scores(columns: Columns, criteria: Sequence[Criterion], weights: Floats) -> tuple[Floats, Floats]:
    """Score every place by the weighted mean of the criteria that are known for it.

    Parameters
    ----------
    columns : mapping of str to ndarray (place,) or (draw, place)
        Values by column.
    criteria : sequence of Criterion
        Their own weights are not used here.
    weights : ndarray (criterion,) or (draw, criterion)
        Weights in the order of `criteria`.

    Returns
    -------
    score, weight : ndarray (place,) or (draw, place)
        The score in 0..1, 0.5 where no criterion that counts is known, and the sum of the weights that made it.
    """
    total: Floats | float = 0.0
    weight_sum: Floats | float = 0.0
    for number, criterion in enumerate(criteria):
        if not np.any(weights[..., number] > 0):
            continue
        scaled = scale_values(columns[criterion.column], criterion)
        weight = (weights[..., number] * scaled.weight_share)[..., np.newaxis]
        total = total + weight * scaled.score
        weight_sum = weight_sum + weight * scaled.known
    counted = np.asarray(weight_sum) > 0
    score = np.where(counted, total / np.where(counted, weight_sum, 1.0), 0.5)
    return np.minimum(score, 1.0), np.asarray(weight_sum, dtype=float)


@dataclass(frozen=True)
class Ranks:
    """Shared ranks from 1 (..., place), and how many places share each."""

    rank: NDArray[np.int64]
    shared_by: NDArray[np.int64]

    def seat_share(self, seats: int) -> Floats:
        """Tell which share of a seat among the first `seats` each place has.

        Places that tie across the last seat share what is left, so the shares add up to `seats`.
        """
        before = self.rank - 1
        return np.asarray(np.clip((seats - before) / self.shared_by, 0.0, 1.0))


def shared_ranks(scores: Floats, tolerance: float = TIE_TOLERANCE) -> Ranks:
    """Rank scores, the greatest first; neighbours closer than `tolerance` share the better rank.

    Ties are transitive: where each of a chain of scores is within the tolerance of the next, all share one rank.

    Parameters
    ----------
    scores : ndarray (..., place)
        Without NaN.
    tolerance : float
        Differences up to this are none.

    Returns
    -------
    Ranks
        Independent of the order of the input.

    Examples
    --------
    >>> shared_ranks(np.array([0.2, 0.9, 0.9, 0.5])).rank.tolist()
    [4, 1, 1, 3]
    """
    count = scores.shape[-1]
    order = np.argsort(-scores, axis=-1, kind="stable")
    ordered = np.take_along_axis(scores, order, axis=-1)
    position = np.arange(count)
    starts = np.ones(scores.shape, dtype=bool)
    starts[..., 1:] = ordered[..., :-1] - ordered[..., 1:] > tolerance
    first = np.maximum.accumulate(np.where(starts, position, 0), axis=-1)
    ends = np.ones(scores.shape, dtype=bool)
    ends[..., :-1] = starts[..., 1:]
    after = np.minimum.accumulate(np.where(ends, position + 1, count)[..., ::-1], axis=-1)[..., ::-1]
    rank, shared = np.empty(scores.shape, dtype=np.int64), np.empty(scores.shape, dtype=np.int64)
    np.put_along_axis(rank, order, first + 1, axis=-1)
    np.put_along_axis(shared, order, after - first, axis=-1)
    return Ranks(rank, shared)


def scales_used(columns: Columns, criteria: Sequence[Criterion]) -> tuple[ScaleUsed, ...]:
    """State the scale of each criterion for these values (one value per place)."""
    used = []
    for criterion in criteria:
        low, high, share = _ends(columns[criterion.column], criterion)
        used.append(ScaleUsed(criterion, float(low), float(high), float(share)))
    return tuple(used)


def fixed_criteria(scales: Sequence[ScaleUsed]) -> tuple[Criterion, ...]:
    """Return the criteria with the ends that were found as stated limits, to rank a part on the scale of the whole.

    Criteria that decide nothing get the weight 0.
    """
    return tuple(
        replace(
            used.criterion, limits=(used.low, used.high), weight=used.criterion.weight * used.weight_share
        ) if used.weight_share > 0 else replace(used.criterion, weight=0.0)
        for used in scales
    )
