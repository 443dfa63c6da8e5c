"""Draws for a ranking: other years, the error of the model, the condition of the still, other weights.

Every stream of random numbers is keyed by what it is for: the seed, the source and the id of the site or the name
of the criterion. So a place has the same draws wherever it stands in the table and whichever others stand beside
it, and a longer simulation starts with the draws of a shorter one.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from hashlib import blake2b
from itertools import product
from math import isfinite

import numpy as np
from numpy.typing import NDArray

from stillfield.decisions.need import DAYS_OF_MONTHS
from stillfield.decisions.ranking_score import Criterion
from stillfield.errors import PlacesError

Floats = NDArray[np.float64]

#: Below this many years of record their spread is uncertain itself (common practice, no source).
FEW_YEARS = 10

#: Drawn yields that are worked at a time, few enough to stay in the processor's cache.
_YIELDS_AT_A_TIME = 50_000


@dataclass(frozen=True)
class Uncertainty:
    """What is varied, by how much, and how often.

    Attributes
    ----------
    draws : int
        Number of simulated rankings.
    seed : int
        Another seed gives other draws of the same chances.
    years, model, condition, weights : bool
        Switches of the four sources.
    common_spread : float
        The model's error that all places share: one standard deviation of the logarithm is ln(1 + this). It moves
        litres, hardly the order. The default of 0.3 is the ±30 % to which litres of a specified still are good.
    site_spread : float
        The error of each site by itself, in the same measure. Two sites of 0.1 each give a ratio good to 14 %,
        as ratios between sites are good to ±10-15 %.
    condition_shared : bool
        Whether all stills age alike (one draw for all places) or each place has its own.
    weight_concentration : float
        Concentration of the Dirichlet distribution around the stated weights. A share ``w`` of the weights has a
        standard deviation of ``sqrt(w (1 - w) / (concentration + 1))``: 0.3 ± 0.07 with the default of 40.
    """

    draws: int = 1000
    seed: int = 0
    years: bool = True
    model: bool = True
    condition: bool = True
    weights: bool = True
    common_spread: float = 0.3
    site_spread: float = 0.1
    condition_shared: bool = True
    weight_concentration: float = 40.0

    def __post_init__(self) -> None:
        spreads = (self.common_spread, self.site_spread)
        if self.draws < 1 or not all(isfinite(s) and s >= 0 for s in spreads):
            raise PlacesError("the uncertainty of a ranking cannot be used", where="rank.uncertainty",
                              got=f"draws {self.draws}, spreads {spreads}", wanted="at least 1 draw, spreads from 0")
        if not (isfinite(self.weight_concentration) and self.weight_concentration > 0):
            raise PlacesError("the concentration of the weights cannot be used", where="rank.uncertainty",
                              got=self.weight_concentration, wanted="above 0")

    def generator(self, *purpose: str) -> np.random.Generator:
        """Return the stream of random numbers for a purpose, the same whatever else was drawn.

        Examples
        --------
        >>> first = Uncertainty(seed=7).generator("site", "v1").standard_normal(3)
        >>> bool((first == Uncertainty(seed=7).generator("site", "v1").standard_normal(3)).all())
        True
        """
        # Lengths stand before the parts, so that ("ab", "c") is another purpose than ("a", "bc").
        text = "".join(f"{len(part)}:{part}" for part in (str(self.seed), *purpose))
        key = int.from_bytes(blake2b(text.encode("utf-8", "surrogatepass"), digest_size=16).digest(), "little")
        return np.random.Generator(np.random.Philox(key=key))


def year_shares(years: int, uncertainty: Uncertainty) -> Floats:
    """Resample the years of record with replacement, the same years for all places, for they share the weather.

    Parameters
    ----------
    years : int
        Years of record.
    uncertainty : Uncertainty
        Number of draws, seed, and whether years are varied.

    Returns
    -------
    ndarray (draw, year)
        Share of the draw that each year makes up; all ``1 / years`` where years are not varied. [1]
    """
    count = uncertainty.draws
    if not uncertainty.years or years == 1:
        return np.full((count, years), 1.0 / years)
    drawn = uncertainty.generator("years", str(years)).integers(0, years, size=(count, years))
    flat = (np.arange(count)[:, np.newaxis] * years + drawn).ravel()
    return np.bincount(flat, minlength=count * years).reshape(count, years) / years


def model_factors(site_ids: Sequence[str], uncertainty: Uncertainty) -> Floats:
    """Draw the model's error: a factor all share times a factor of the site, both lognormal with median 1.

    Parameters
    ----------
    site_ids : sequence of str
        One per place; places with the same id (such as that of their cell) share the factor.
    uncertainty : Uncertainty
        Spreads and seed.

    Returns
    -------
    ndarray (draw, place)
        [1]
    """
    shape = (uncertainty.draws, len(site_ids))
    if not uncertainty.model:
        return np.ones(shape)
    common = uncertainty.generator("model").standard_normal(uncertainty.draws) * np.log1p(uncertainty.common_spread)
    own = _by_id(site_ids, uncertainty, "site", normal=True) * np.log1p(uncertainty.site_spread)
    return np.asarray(np.exp(common[:, np.newaxis] + own))


def band_positions(ids: Sequence[str], uncertainty: Uncertainty) -> Floats:
    """Draw where in its condition band a still is: 0 the low end, 0.5 the central value, 1 the high end.

    Parameters
    ----------
    ids : sequence of str
        One per place.
    uncertainty : Uncertainty
        Whether all places share the condition.

    Returns
    -------
    ndarray (draw, place)
        Uniform in 0..1; 0.5 where the condition is not varied. [1]
    """
    shape = (uncertainty.draws, len(ids))
    if not uncertainty.condition:
        return np.full(shape, 0.5)
    if uncertainty.condition_shared:
        shared = uncertainty.generator("condition").random(uncertainty.draws)
        return np.ascontiguousarray(np.broadcast_to(shared[:, np.newaxis], shape))
    return _by_id(ids, uncertainty, "condition", normal=False)


def _by_id(ids: Sequence[str], uncertainty: Uncertainty, purpose: str, *, normal: bool) -> Floats:
    """Draws (draw, place) that depend on the id alone."""
    drawn: dict[str, Floats] = {}
    for each in set(ids):
        stream = uncertainty.generator(purpose, each)
        count = uncertainty.draws
        drawn[each] = stream.standard_normal(count) if normal else stream.random(count)
    return np.stack([drawn[each] for each in ids], axis=1) if ids else np.empty((uncertainty.draws, 0))


def weight_draws(criteria: Sequence[Criterion], uncertainty: Uncertainty) -> Floats:
    """Draw weights around the stated ones.

    Parameters
    ----------
    criteria : sequence of Criterion
        With their stated weights; 0 stays 0.
    uncertainty : Uncertainty
        Concentration and seed.

    Returns
    -------
    ndarray (draw, criterion)
        Adding up to 1; the stated shares in every draw where weights are not varied.

    Notes
    -----
    A Dirichlet distribution is gamma variables of shape ``concentration * share``, divided by their sum.

    Examples
    --------
    >>> drawn = weight_draws([Criterion("a", "x", weight=3.0), Criterion("b", "y")], Uncertainty(draws=20000))
    >>> drawn.mean(axis=0).round(2).tolist()
    [0.75, 0.25]
    """
    stated = np.array([criterion.weight for criterion in criteria])
    shares = stated / stated.sum()
    if not uncertainty.weights:
        return np.tile(shares, (uncertainty.draws, 1))
    drawn = np.zeros((uncertainty.draws, len(criteria)))
    for number, criterion in enumerate(criteria):
        if shares[number] > 0:
            stream = uncertainty.generator("weight", criterion.name)
            shape = uncertainty.weight_concentration * shares[number]
            # The smallest normal number keeps a share of a tiny shape from a sum of 0.
            drawn[:, number] = np.maximum(stream.standard_gamma(shape, uncertainty.draws), np.finfo(float).tiny)
    return np.asarray(drawn / drawn.sum(axis=1, keepdims=True))


@dataclass(frozen=True)
class YieldDraws:
    """Litres of the sizing month, central and drawn.

    Attributes
    ----------
    central : ndarray (place,)
        Yield of the sizing month for the mean need of the year: the least over the months of the yield of a day
        divided by the month's need relative to the mean. With the same need all year it is the yield of the worst
        month. NaN where a month is not known. [L m-2 day-1]
    drawn : ndarray (draw, place)
        The same in every draw; each draw has its own sizing month. [L m-2 day-1]
    sizing_month : ndarray (place,)
        Month 1..12 in which the central yield is least beside the need; 0 where it is not known.
    notes : tuple of str
        What could not be varied, in words.
    """

    central: Floats
    drawn: Floats
    sizing_month: NDArray[np.int64]
    notes: tuple[str, ...] = ()


@dataclass(frozen=True)
class MonthlyYields:
    """Monthly yields of places, by year and at the ends of the condition band.

    Attributes
    ----------
    by_year : ndarray (year, 12, place)
        One year for a typical year. NaN where a month of a year is not known. [L m-2 month-1]
    low, high : ndarray (12, place), optional
        The ends of the band of the month; without them the condition cannot be varied. [L m-2 month-1]
    need : ndarray (12,) or (12, place), optional
        Need of the months in any unit; only its course over the year counts. The same all year without it.
    days_in_month : sequence of 12 float
        [d]
    """

    by_year: Floats
    low: Floats | None = None
    high: Floats | None = None
    need: Floats | None = None
    days_in_month: Sequence[float] = DAYS_OF_MONTHS

    def __post_init__(self) -> None:
        shape = self.by_year.shape
        if len(shape) != 3 or shape[1] != 12 or shape[0] < 1:
            raise PlacesError("yields by year have the wrong shape", got=shape, wanted="(year, 12, place)")
        for name, band in (("low", self.low), ("high", self.high)):
            if band is not None and band.shape != shape[1:]:
                raise PlacesError("the condition band has the wrong shape", where=name, got=band.shape,
                                  wanted=shape[1:])
        if (self.low is None) != (self.high is None):
            raise PlacesError("the condition band has only one end", wanted="both low and high")
        if self.need is not None and not (np.all(self.need >= 0) and np.all(np.sum(self.need, axis=0) > 0)):
            raise PlacesError("the need of the months cannot be used", wanted="at least 0, not 0 all year")

    @property
    def relative_need(self) -> Floats:
        """Need of each month beside the mean of the year (12, place or 1)."""
        need = np.ones(12) if self.need is None else np.asarray(self.need, dtype=float)
        need = need[:, np.newaxis] if need.ndim == 1 else need
        return np.asarray(need / need.mean(axis=0))


def yield_draws(
    ids: Sequence[str], yields: MonthlyYields, uncertainty: Uncertainty, *, site_ids: Sequence[str] | None = None
) -> YieldDraws:
    """Draw the yield of the sizing month of every place from years, model error and condition.

    Parameters
    ----------
    ids : sequence of str
        Ids of the places, all different.
    yields : MonthlyYields
        In the order of `ids`.
    uncertainty : Uncertainty
        Sources, spreads, number of draws and seed.
    site_ids : sequence of str, optional
        What shares a model error, such as the cell of each place; each place for itself without it.

    Returns
    -------
    YieldDraws
        In the order of `ids`; another order gives the same numbers in that order.

    Examples
    --------
    Three years of a steady place, nothing but the years varied, and years that are all alike:

    >>> months = np.array(DAYS_OF_MONTHS)[:, np.newaxis] * 4.0
    >>> only_years = Uncertainty(draws=5, model=False, condition=False)
    >>> drawn = yield_draws(["a"], MonthlyYields(np.stack([months] * 3)), only_years)
    >>> drawn.drawn.round(9).ravel().tolist()
    [4.0, 4.0, 4.0, 4.0, 4.0]
    """
    if len(ids) != yields.by_year.shape[2] or len(set(ids)) < len(ids):
        raise PlacesError("ids do not fit the yields", got=len(ids), wanted=f"{yields.by_year.shape[2]} different ids")
    # Work in the order of the ids leaves no trace of the order of the input, not in the last digit either.
    canonical = np.array(sorted(range(len(ids)), key=lambda place: ids[place]), dtype=np.int64)
    back = np.argsort(canonical)
    ordered = _in_order(yields, canonical)
    sites = ids if site_ids is None else site_ids
    central, month = _sizing(ordered)
    drawn = _drawn_sizing(ordered, [ids[place] for place in canonical], uncertainty)
    drawn = drawn * model_factors([sites[place] for place in canonical], uncertainty)
    drawn = np.where(np.isnan(central), np.nan, drawn)
    return YieldDraws(central[back], drawn[:, back], month[back], _notes(yields, uncertainty))


def _in_order(yields: MonthlyYields, order: NDArray[np.int64]) -> MonthlyYields:
    def picked(values: Floats | None) -> Floats | None:
        return None if values is None else values[:, order] if values.ndim == 2 else values

    return replace(yields, by_year=yields.by_year[:, :, order], low=picked(yields.low), high=picked(yields.high),
                   need=picked(yields.need))


def _for_need(litres: Floats, need: Floats, days: float | Floats) -> Floats:
    """Litres of a day beside the relative need; infinite where nothing is needed."""
    needed = need > 0
    return np.where(needed, litres / days / np.where(needed, need, 1.0), np.inf)


def _sizing(yields: MonthlyYields) -> tuple[Floats, NDArray[np.int64]]:
    """Central yield for the need, and the month it is found in."""
    mean = _mean_over_years(yields.by_year)
    days = np.asarray(yields.days_in_month, dtype=float)[:, np.newaxis]
    for_need = _for_need(mean, yields.relative_need, days)
    unknown = np.isnan(for_need).any(axis=0)
    month = np.where(unknown, 0, np.argmin(for_need, axis=0) + 1)
    return np.where(unknown, np.nan, for_need.min(axis=0)), month


def _drawn_sizing(yields: MonthlyYields, ids: Sequence[str], uncertainty: Uncertainty) -> Floats:
    """Yield for the need (draw, place) in the sizing month of each draw, before the error of the model."""
    mean = _mean_over_years(yields.by_year)
    need = np.broadcast_to(yields.relative_need, mean.shape)
    shares = year_shares(len(yields.by_year), uncertainty)
    positions = band_positions(ids, uncertainty)
    drawn = np.full((uncertainty.draws, len(ids)), np.inf)
    step = max(1, _YIELDS_AT_A_TIME // max(len(ids), 1))
    for start, month in product(range(0, uncertainty.draws, step), range(12)):
        part = slice(start, start + step)
        litres = _resampled(yields.by_year[:, month], shares[part], mean[month])
        if yields.low is not None and yields.high is not None and uncertainty.condition:
            ends = (_ratio(band[month], mean[month]) for band in (yields.low, yields.high))
            litres = litres * _within_band(positions[part], *ends)
        for_need = _for_need(litres, need[month], yields.days_in_month[month])
        np.minimum(drawn[part], for_need, out=drawn[part])
    return drawn


def _notes(yields: MonthlyYields, uncertainty: Uncertainty) -> tuple[str, ...]:
    notes = []
    count = len(yields.by_year)
    if uncertainty.years and count == 1:
        notes.append("only one year of weather is known, so the years add nothing to the uncertainty")
    elif uncertainty.years and count < FEW_YEARS:
        notes.append(f"only {count} years of weather are known; their spread is uncertain itself")
    if uncertainty.condition and yields.low is None:
        notes.append("no band of the still's condition is known, so the condition adds nothing to the uncertainty")
    return tuple(notes)


def _mean_over_years(by_year: Floats) -> Floats:
    known = ~np.isnan(by_year)
    count = known.sum(axis=0)
    total = np.where(known, by_year, 0.0).sum(axis=0)
    return np.where(count > 0, total / np.maximum(count, 1), np.nan)


def _resampled(by_year: Floats, shares: Floats, mean: Floats) -> Floats:
    """Mean (draw, place) over resampled years; the mean of all where a draw holds no year with the month."""
    known = ~np.isnan(by_year)
    total = _over_years(shares, np.where(known, by_year, 0.0))
    if known.all():
        return total
    weight = _over_years(shares, known.astype(float))
    return np.where(weight > 0, total / np.where(weight > 0, weight, 1.0), mean)


def _over_years(shares: Floats, by_year: Floats) -> Floats:
    """Product of matrices without threads, whose number could change the last digit and slows such small ones."""
    return np.asarray(np.einsum("dy,yp->dp", shares, by_year, optimize=False))


def _ratio(end: Floats, mean: Floats) -> Floats:
    """Factor of an end of the band; 1 where there is nothing to compare."""
    usable = (mean > 0) & ~np.isnan(end)
    return np.where(usable, np.where(usable, end, 1.0) / np.where(usable, mean, 1.0), 1.0)


def _within_band(position: Floats, low: Floats, high: Floats) -> Floats:
    """Factor on the central value: straight from the low end to 1 in the middle and on to the high end."""
    below = low + (1.0 - low) * np.minimum(position * 2.0, 1.0)
    return np.asarray(below + (high - 1.0) * np.maximum(position * 2.0 - 1.0, 0.0))


def inversely(central: Floats, yields: YieldDraws) -> Floats:
    """Draw a figure that is inversely proportional to the yield, such as the cost per litre.

    Parameters
    ----------
    central : ndarray (place,)
        The figure at the central yield, in any unit.
    yields : YieldDraws
        Central and drawn yields of the same places.

    Returns
    -------
    ndarray (draw, place)
        ``central * yields.central / yields.drawn``; infinite where a draw yields nothing.
    """
    none = yields.drawn <= 0
    # A place that never yields has an infinite cost already, which times its yield of 0 would be nothing known.
    product = np.where(yields.central > 0, central, 0.0) * yields.central
    return np.where(none, np.inf, product / np.where(none, 1.0, yields.drawn))
