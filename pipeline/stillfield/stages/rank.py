"""Rank: places to their cell, litres to square metres, criteria to an ordered table."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from math import inf

import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import NDArray

from stillfield.decisions.nearest import great_circle_km, nearest_cells
from stillfield.errors import PlacesError

__all__ = ["great_circle_km", "rank_places"]

MONTH_NAMES = ("jan", "feb", "mar", "apr", "may", "jun", "jul", "aug", "sep", "oct", "nov", "dec")

DEFAULT_WEIGHTS = {"yield": 0.3, "people": 0.3, "salinity": 0.2, "distance": 0.2}


@dataclass(frozen=True)
class Criterion:
    """One criterion of the ranking: the column it reads and which way is better to visit first."""

    name: str
    column: str
    more_is_first: bool
    logarithmic: bool = False


#: Salty sources and long walks to water come first: that is where a still changes most.
CRITERIA = (
    Criterion("yield", "worst_month_yield_l_m2_day", True),
    Criterion("people", "population", True, logarithmic=True),
    Criterion("salinity", "feed_salinity_g_kg", True),
    Criterion("distance", "distance_to_feed_km", True),
)


def rank_places(
    monthly: xr.Dataset,
    places: pd.DataFrame,
    *,
    litres_per_person_day: float = 3.0,
    max_cell_distance_km: float = 25.0,
    weights: Mapping[str, float] | None = None,
) -> pd.DataFrame:
    """Give every place its cell's litres, the basin area it needs and its rank.

    Parameters
    ----------
    monthly : xarray.Dataset
        Monthly yields as `aggregate` gives them.
    places : pandas.DataFrame
        Columns ``name``, ``id``, ``latitude``, ``longitude`` and optionally ``population``,
        ``feed_salinity_g_kg``, ``distance_to_feed_km``, ``elevation_m``.
    litres_per_person_day : float
        Drinking water to be supplied. The Sphere Handbook (2018) gives 2.5 to 3 L for survival (drinking
        and food), 7.5 to 15 L with cooking and basic hygiene; quoted from memory. [L]
    max_cell_distance_km : float
        A place farther than this from every valid cell stays in the table without litres. [km]
    weights : mapping of str to float, optional
        Weight of ``yield``, ``people``, ``salinity`` and ``distance``; missing ones count 0.

    Returns
    -------
    pandas.DataFrame
        Ranked, first to visit first, every place kept; `stillfield.products.place_columns` explains the columns.

    Raises
    ------
    PlacesError
        If the weights are unusable.

    Notes
    -----
    Each criterion is scaled to 0..1 between the least and the greatest of the places that have litres
    (people by the logarithm); the score is the weighted mean over the criteria known for the place. Ties share
    a rank and stand in the order of name and id, so the order of the input does not matter.
    """
    used = _checked_weights(weights)
    cells, valid = _flat_cells(monthly)
    found = nearest_cells(
        places["latitude"].to_numpy(), places["longitude"].to_numpy(), cells["latitude"].to_numpy(),
        cells["longitude"].to_numpy(), valid, max_distance_km=max_cell_distance_km,
    )
    reached = found.reached
    table = _with_yields(places, cells, found.cell, found.distance_km, reached, found.substituted)
    table = _with_area(table, litres_per_person_day)
    table["score"] = _score(table, reached, used)
    table["reason"] = np.where(
        reached, "", [f"no valid cell within {max_cell_distance_km:g} km" for _ in range(len(table))]
    )
    return _ordered(table)


def _checked_weights(weights: Mapping[str, float] | None) -> dict[str, float]:
    used = dict(DEFAULT_WEIGHTS if weights is None else weights)
    known = [criterion.name for criterion in CRITERIA]
    unknown = sorted(set(used) - set(known))
    if unknown or not any(value > 0 for value in used.values()) or any(value < 0 for value in used.values()):
        raise PlacesError(
            "ranking weights are unusable", where="rank.weights", got=used,
            wanted=f"weights of at least 0, not all 0, for {', '.join(known)}",
        )
    return used


def _flat_cells(monthly: xr.Dataset) -> tuple[xr.Dataset, NDArray[np.bool_]]:
    """One dimension ``cell`` for cells or sites, and which of them know their every month."""
    known = monthly["worst_month"].notnull()
    space = list(known.dims)
    flat = monthly.stack(cell=space) if len(space) > 1 else monthly.rename({space[0]: "cell"})
    flat = flat.reset_index("cell") if len(space) > 1 else flat
    valid = flat["worst_month"].notnull().to_numpy()
    if not valid.any():
        raise PlacesError(
            "no cell has litres for all twelve months, so no place can be sized on its worst month",
            where="weather",
            cure="Give weather for every month of a year, lower missing.min_valid_days_share, or leave places out.",
        )
    return flat, valid


def _with_yields(
    places: pd.DataFrame, cells: xr.Dataset, nearest: NDArray[np.int64],
    distance: NDArray[np.float64], reached: NDArray[np.bool_], substituted: NDArray[np.bool_],
) -> pd.DataFrame:
    table = places.reset_index(drop=True).rename(
        columns={"latitude": "latitude_deg", "longitude": "longitude_deg"}
    )
    table["cell_latitude_deg"] = cells["latitude"].to_numpy()[nearest]
    # A grid across the antimeridian runs on beyond 180; tables stay within -180..180.
    east = cells["longitude"].to_numpy()
    table["cell_longitude_deg"] = np.where(east > 180.0, east - 360.0, east)[nearest]
    table["cell_distance_km"] = distance
    table["nearest_cell_missing"] = substituted
    if "elevation" in cells and "elevation_m" in table:
        table["cell_height_difference_m"] = cells["elevation"].to_numpy()[nearest] - table["elevation_m"]

    def take(name: str) -> NDArray[np.float64]:
        values = cells[name].transpose(..., "cell").to_numpy()[..., nearest]
        return np.where(reached, values, np.nan)

    months = take("monthly_yield")
    for number, month in enumerate(MONTH_NAMES):
        table[f"yield_{month}_l_m2_month"] = months[number]
    for column, name in (
        ("annual_yield_l_m2_year", "annual_yield"), ("annual_yield_low_l_m2_year", "annual_yield_low"),
        ("annual_yield_high_l_m2_year", "annual_yield_high"), ("worst_month", "worst_month"),
        ("worst_month_yield_l_m2_day", "worst_month_yield"),
    ):
        table[column] = take(name)
    table["annual_yield_rule_l_m2_year"] = take("monthly_yield_rule").sum(axis=0)
    low, high = _band_of_worst_month(cells, nearest, table["worst_month"].to_numpy())
    table["worst_month_yield_low_l_m2_day"], table["worst_month_yield_high_l_m2_day"] = low, high
    table["days_used_min"] = take("days_used").min(axis=0)
    return table


def _band_of_worst_month(
    cells: xr.Dataset, nearest: NDArray[np.int64], worst: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Low and high daily litres of the sizing month, scaled from the central value of that month."""
    month = np.where(np.isfinite(worst), worst, 1).astype(int) - 1
    pick = (month, nearest)

    def of(name: str) -> NDArray[np.float64]:
        return np.asarray(cells[name].transpose("month", "cell").to_numpy()[pick])

    central = cells["worst_month_yield"].to_numpy()[nearest]
    per_day = central / np.where(of("monthly_yield") > 0, of("monthly_yield"), np.nan)
    missing = ~np.isfinite(worst)
    return tuple(  # type: ignore[return-value]
        np.where(missing, np.nan, of(name) * per_day) for name in ("monthly_yield_low", "monthly_yield_high")
    )


def _with_area(table: pd.DataFrame, litres_per_person_day: float) -> pd.DataFrame:
    """Basin area sized on the worst month: central, and the range the condition band gives."""
    table["litres_per_person_day_l"] = litres_per_person_day
    for end, column in (
        ("", "worst_month_yield_l_m2_day"), ("at_low_yield_", "worst_month_yield_low_l_m2_day"),
        ("at_high_yield_", "worst_month_yield_high_l_m2_day"),
    ):
        litres = table[column].where(table[column] > 0)
        table[f"area_per_person_{end}m2"] = litres_per_person_day / litres
    if "population" in table:
        table["area_village_m2"] = table["area_per_person_m2"] * table["population"]
        table["need_l_day"] = litres_per_person_day * table["population"]
    return table


def _score(table: pd.DataFrame, reached: NDArray[np.bool_], weights: Mapping[str, float]) -> NDArray[np.float64]:
    total = np.zeros(len(table))
    weight_sum = np.zeros(len(table))
    for criterion in CRITERIA:
        weight = weights.get(criterion.name, 0.0)
        if weight <= 0 or criterion.column not in table:
            continue
        values = table[criterion.column].to_numpy(dtype=float)
        values = np.log10(np.maximum(values, 1.0)) if criterion.logarithmic else values
        known = np.isfinite(values) & reached
        low, high = (values[known].min(), values[known].max()) if known.any() else (inf, inf)
        if not high > low:
            continue  # a criterion that is the same everywhere decides nothing
        scaled = (values - low) / (high - low)
        scaled = scaled if criterion.more_is_first else 1.0 - scaled
        total = total + np.where(known, weight * scaled, 0.0)
        weight_sum = weight_sum + np.where(known, weight, 0.0)
    score = np.where(weight_sum > 0, total / np.maximum(weight_sum, 1e-300), 0.0)
    return np.where(reached, score, np.nan)


def _ordered(table: pd.DataFrame) -> pd.DataFrame:
    rounded = table["score"].round(9)
    table = table.assign(rank=rounded.rank(method="min", ascending=False), _score=rounded)
    table = table.sort_values(["_score", "name", "id"], ascending=[False, True, True], kind="stable")
    table = table.drop(columns="_score").reset_index(drop=True)
    table["rank"] = table["rank"].astype("Int64")
    front = ["rank", "name", "id", "score", "latitude_deg", "longitude_deg"]
    return table[[*front, *[column for column in table.columns if column not in front]]]
