"""Rank: which villages to visit first, how sure the order is, and what drives it; cells of the region as well."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd
import xarray as xr

from stillfield.decisions.ranking import PlaceTable, Ranking
from stillfield.decisions.ranking import rank_places as ranked
from stillfield.decisions.ranking_cells import rank_cells
from stillfield.decisions.ranking_reasons import drivers_words
from stillfield.decisions.ranking_score import Criterion, Screen
from stillfield.decisions.ranking_uncertainty import MonthlyYields, Uncertainty, YieldDraws, inversely, yield_draws
from stillfield.decisions.reliability import reached_yields
from stillfield.errors import PlacesError

#: Criteria by their name in the run file. Salty sources and long walks to water come first: that is where a still
#: changes most.
CRITERIA: dict[str, Criterion] = {
    "yield": Criterion("yield", "yield_for_need_l_m2_day", True, unit="L m-2 d-1"),
    "reliability": Criterion("reliability", "reliability", True, unit="1"),
    "cost": Criterion("cost", "cost_per_litre", False, unit="money per L"),
    "people": Criterion("people", "population", True, scale="log", unit="people"),
    "salinity": Criterion("salinity", "feed_salinity_g_kg", True, unit="g kg-1"),
    "distance": Criterion("distance", "distance_to_feed_km", True, unit="km"),
}
USUAL_WEIGHTS = {"yield": 0.3, "people": 0.3, "salinity": 0.2, "distance": 0.2}
#: What is known of cells, by the weight it takes. With one still the litre is cheapest where a year gives most.
CELL_CRITERIA: dict[str, Criterion] = {
    "yield": Criterion("litres a day in the worst month", "worst_month_yield", True, unit="L m-2 d-1"),
    "reliability": Criterion("poor year over usual year in that month", "reliability", True, unit="1"),
    "cost": Criterion("litres of a year", "annual_yield", True, unit="L m-2 year-1"),
}
#: Litres are rounded before cells are compared: what looks equal in the table has an equal rank. [decimals]
_CELL_DECIMALS = 2
#: Score difference up to which cells share a rank. A million scores lie so close that the tolerance for places would
#: chain all of them into one.
_CELL_TIE = 1e-9
_FIRST = ("rank", "name", "id", "score", "rank_low", "rank_high", "top_probability")


@dataclass(frozen=True)
class Order:
    """Places in the order to visit them.

    Attributes
    ----------
    places : pandas.DataFrame
        First to visit first, every place kept.
    ranking : Ranking
        Scales, screens and the summary in words.
    notes : tuple of str
        How many are ranked, by what on which scale, and which weights counted nothing.
    """

    places: pd.DataFrame
    ranking: Ranking
    notes: tuple[str, ...]


def rank_places(
    table: pd.DataFrame, yields: MonthlyYields, *, weights: Mapping[str, float] | None = None,
    screens: Sequence[Screen] = (), uncertainty: Uncertainty | None = None, top: int = 10,
) -> Order:
    """Order places, with the chance of the order.

    Parameters
    ----------
    table : pandas.DataFrame
        One row per place with ``id``, ``name``, ``reason`` and the columns of `CRITERIA` as far as they are known.
    yields : MonthlyYields
        Litres by year and the ends of the band, in the order of the table.
    weights : mapping of str to float, optional
        By name of the criterion; missing ones count 0.
    screens : sequence of Screen
        Hard limits.
    uncertainty : Uncertainty, optional
        What is varied, how often and from which seed; only the order is told without it.
    top : int
        Places to be visited in the first round.

    Returns
    -------
    Order

    Raises
    ------
    PlacesError
        If weights or screens cannot be used.
    """
    known = table.assign(yield_for_need_l_m2_day=_for_need(table, yields))
    used, unused = _criteria(weights, known)
    reached = table["reason"].to_numpy() == ""
    wanted = ["sizing_yield_l_m2_day", *(one.column for one in used), *(screen.column for screen in screens)]
    columns = {name: np.where(reached, known[name].to_numpy(dtype=float), np.nan)
               for name in dict.fromkeys(wanted) if name in known}
    sites = [f"{lat:.4f} {lon:.4f}" for lat, lon in zip(table["cell_latitude_deg"], table["cell_longitude_deg"],
                                                        strict=True)]
    ids = tuple(table["id"].astype(str))
    draws = None
    if uncertainty is not None and reached.any():
        drawn = yield_draws(ids, yields, uncertainty, site_ids=sites)
        draws = _drawn_columns(drawn, columns)
    found = ranked(
        PlaceTable(ids, tuple(table["name"].astype(str)), columns), used,
        screens=[Screen("sizing_yield_l_m2_day", "above", 0.0, "no litres", missing_passes=False), *screens],
        draws=draws, uncertainty=uncertainty, top=top,
    )
    scales = "; ".join(scale.words for scale in found.scales)
    nothing = (f"Weights that count nothing, since no column or price is there for them: {', '.join(unused)}.",)
    return Order(_ordered(table, found), found, (found.summary, f"Criteria of the places: {scales}.",
                                                 *(nothing if unused else ())))


def _for_need(table: pd.DataFrame, yields: MonthlyYields) -> np.ndarray:
    """Litres of a day in the sizing month for the mean need of the year, so that places with other months compare."""
    month = table["sizing_month"].to_numpy(dtype=float)
    need = np.broadcast_to(yields.relative_need, (12, len(table)))
    row = np.nan_to_num(month - 1.0, nan=0.0).astype(int)
    relative = np.take_along_axis(need, row[None], axis=0)[0]
    litres = table["sizing_yield_l_m2_day"].to_numpy(dtype=float)
    return np.where(relative > 0, litres / np.where(relative > 0, relative, 1.0), np.nan)


def refuse_blind(
    places: pd.DataFrame, weights: Mapping[str, float], screens: Sequence[Screen], *, priced: bool
) -> None:
    """Find out before any litre is computed whether weights and screens have something to go by.

    Parameters
    ----------
    places : pandas.DataFrame
        As `sources.places.read_places` gives it.
    weights : mapping of str to float
        By name of the criterion.
    screens : sequence of Screen
        Hard limits.
    priced : bool
        Whether the still file has prices.

    Raises
    ------
    PlacesError
        If a screen reads, or all weights go to, what neither the table nor the still file has.
    """
    absent = {name for name in ("population", "feed_salinity_g_kg", "distance_to_feed_km", "elevation_m")
              if name not in places}
    absent |= set() if priced else {"cost_per_litre"}
    for screen in screens:
        if screen.column in absent:
            raise PlacesError(
                "a screen reads what is not there", where="rank.screens", got=screen.column,
                wanted="prices in the still file" if screen.column == "cost_per_litre" else "a column of the places",
            )
    if all(CRITERIA[name].column in absent for name, weight in weights.items() if weight > 0):
        raise _nothing_known([name for name, weight in weights.items() if weight > 0])


def _nothing_known(names: Sequence[str]) -> PlacesError:
    return PlacesError(
        "nothing is known of the criteria that have a weight", where="rank.weights", got=", ".join(names),
        wanted="a criterion whose column the table of places or the still file has",
        cure="Give weight to another criterion, or add the column.",
    )


def rank_region(monthly: xr.Dataset, weights: Mapping[str, float] | None = None) -> xr.Dataset:
    """Score and rank the cells or sites of a region, by what of the weights can be known of a cell.

    Parameters
    ----------
    monthly : xarray.Dataset
        As `aggregate` gives it.
    weights : mapping of str to float, optional
        As for places; a weight without a criterion in `CELL_CRITERIA` counts nothing, and where no other is left the
        litres of the worst month decide.

    Returns
    -------
    xarray.Dataset
        ``cell_score`` (0 to 1) and ``cell_rank`` (from 1) on space, NaN where a month is missing; attribute ``note``
        says in words what was weighed.
    """
    stated = dict(USUAL_WEIGHTS if weights is None else weights)
    used = [replace(one, weight=stated.get(name, 0.0)) for name, one in CELL_CRITERIA.items()
            if stated.get(name, 0.0) > 0 and (name != "reliability" or monthly.attrs.get("record") != "typical-year")]
    used = used or [CELL_CRITERIA["yield"]]
    space = [dim for dim in ("latitude", "longitude", "site") if dim in monthly.dims]
    worst = monthly["worst_month"].transpose(*space).to_numpy()
    known = np.isfinite(worst).ravel()
    columns = {one.column: _of_cells(monthly, one.column, space, worst) for one in used}
    score, rank = np.full(known.size, np.nan), np.full(known.size, np.nan)
    if known.any():
        found = rank_cells(columns, used, valid=known, tie_tolerance=_CELL_TIE)
        score, rank = found.score, np.where(found.rank > 0, found.rank, np.nan)
    told = ", ".join(f"{one.name} (weight {one.weight:g})" for one in used)
    return xr.Dataset(
        {"cell_score": (space, score.reshape(worst.shape)), "cell_rank": (space, rank.reshape(worst.shape))},
        coords={name: coord for name, coord in monthly.coords.items() if set(coord.dims) <= set(space)},
        attrs={"note": f"Cells are ranked by {told}; other weights, and limits for places, say nothing of cells."},
    )


def _of_cells(monthly: xr.Dataset, column: str, space: Sequence[str], worst: np.ndarray) -> np.ndarray:
    """Values of a criterion, one per cell."""
    if column != "reliability":
        litres = monthly[column].transpose(*space).to_numpy().astype(np.float64)
        return np.round(litres, _CELL_DECIMALS).ravel()
    by_year = monthly["monthly_yield_by_year"].transpose("year", "month", *space).to_numpy()
    month = np.nan_to_num(worst - 1.0, nan=0.0).astype(np.int64)[None, None]
    reached = reached_yields(np.take_along_axis(by_year, month, axis=1)[:, 0])
    share = reached.p90 / np.where(reached.p50 > 0, reached.p50, np.nan)
    return np.asarray(np.round(share, _CELL_DECIMALS)).ravel()


def _criteria(weights: Mapping[str, float] | None, table: pd.DataFrame) -> tuple[list[Criterion], list[str]]:
    """Criteria with a weight, and names of those that have a weight and no column."""
    stated = dict(USUAL_WEIGHTS if weights is None else weights)
    unknown = sorted(set(stated) - set(CRITERIA))
    if unknown or not any(value > 0 for value in stated.values()) or any(value < 0 for value in stated.values()):
        raise PlacesError(
            "ranking weights are unusable", where="rank.weights", got=stated,
            wanted=f"weights of at least 0, not all 0, for {', '.join(CRITERIA)}",
        )
    used = [replace(CRITERIA[name], weight=weight) for name, weight in stated.items()
            if weight > 0 and CRITERIA[name].column in table]
    if not used:
        raise _nothing_known([name for name, weight in stated.items() if weight > 0])
    return used, [name for name, weight in stated.items() if weight > 0 and CRITERIA[name].column not in table]


def _drawn_columns(drawn: YieldDraws, columns: Mapping[str, np.ndarray]) -> dict[str, np.ndarray]:
    made = {}
    if "yield_for_need_l_m2_day" in columns:
        made["yield_for_need_l_m2_day"] = drawn.drawn
    if "cost_per_litre" in columns:
        made["cost_per_litre"] = inversely(columns["cost_per_litre"], drawn)
    return made


def _ordered(table: pd.DataFrame, found: Ranking) -> pd.DataFrame:
    told = found.places
    # Where a place has no litres, that says all: the screen that asks for litres would only say it again.
    reasons = ["; ".join(filter(None, [mine, *(place.reasons if not mine else place.reasons[1:])]))
               for mine, place in zip(table["reason"], told, strict=True)]
    result = table.assign(
        rank=pd.array([place.rank for place in told], dtype="Int64"),
        score=[np.nan if place.score is None else place.score for place in told],
        rank_low=pd.array([place.rank_low for place in told], dtype="Int64"),
        rank_high=pd.array([place.rank_high for place in told], dtype="Int64"),
        top_probability=[np.nan if place.top_probability is None else place.top_probability for place in told],
        drivers=[drivers_words(place.drivers) for place in told], reason=reasons,
        remark=[f"Left out: {why}." if why else place.words for why, place in zip(reasons, told, strict=True)],
    )
    result = result.iloc[list(found.order)].reset_index(drop=True)
    return result[[*_FIRST, *[column for column in result.columns if column not in _FIRST]]]
