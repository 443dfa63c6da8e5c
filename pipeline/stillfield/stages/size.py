"""Size: litres at a place to basin area, tank, stills, money, feed and brine.

Everything is sized on the month in which the need is largest beside the yield, in the low, central and high condition
of the still, and held against every single day of the record.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import NDArray

from stillfield.decisions.blend import TASTE_LIMITS, blend_under, salinity_mg_l
from stillfield.decisions.cost import StillCost, annual_cost, cost_per_litre_band
from stillfield.decisions.feed import brine_warnings, draw_off_factor, feed_and_brine
from stillfield.decisions.nearest import NearestCells, cell_centres
from stillfield.decisions.need import DAYS_OF_MONTHS, Need, daily_need, need_of_days
from stillfield.decisions.provision import provide
from stillfield.decisions.reliability import (
    reached_yields,
    sizing_month,
    spell_below_need,
    year_totals,
    years_warning,
)
from stillfield.decisions.storage import day_series
from stillfield.decisions.trade_off import TradeOff, cheapest_point, knee_point, smallest_areas
from stillfield.decisions.trial import FieldFactor
from stillfield.physics.still import Still
from stillfield.products.netcdf import MONTH_NAMES

Array = NDArray[np.float64]
MONTHS = 12
_NO_CELL = "no litres: no cell knows all twelve months"
_NO_YIELD = "no litres: a month with need gives nothing"


@dataclass(frozen=True)
class Wishes:
    """What the people need and how sure of it they want to be.

    Attributes
    ----------
    need : Need
        Litres per person and day, its course over the year, the share to be met.
    share_of_days : float
        Share of days on which the whole need is to be met, for the tank. [1]
    tank_days : tuple of float
        Tanks that are compared, in days of the mean need. [d]
    poor_share : float
        A day that gives less than this share of the need is poor. [1]
    tank_price_per_litre : float or None
        Price of a tank, for the cheapest pair of area and tank. [currency L-1]
    flushing : {'continuous', 'batch'}
        How brine is drawn off.
    taste_limit : str
        A key of `decisions.blend.TASTE_LIMITS`.
    field_factor : FieldFactor or None
        What a trial of this very still found.
    """

    need: Need
    share_of_days: float = 0.95
    tank_days: tuple[float, ...] = (0.0, 1.0, 2.0, 3.0, 5.0, 7.0, 14.0)
    poor_share: float = 0.5
    tank_price_per_litre: float | None = None
    flushing: str = "continuous"
    taste_limit: str = "dissolved-solids-good"
    field_factor: FieldFactor | None = None


@dataclass(frozen=True)
class DailyLitres:
    """Litres of every day of the record at some places.

    Attributes
    ----------
    litres : ndarray, shape (day, place)
        Central condition, before any field factor. [L m-2]
    month : ndarray of int, shape (day,)
        1 to 12.
    dates : sequence of str
        Of the days.
    """

    litres: NDArray[np.floating[Any]]
    month: NDArray[np.int64]
    dates: Sequence[str]


@dataclass(frozen=True)
class Sized:
    """Places with what they need.

    Attributes
    ----------
    places : pandas.DataFrame
        One row per place, in the order of the input; `stillfield.products.place_columns` explains the columns.
    months : pandas.DataFrame
        One row per place and month.
    storage : pandas.DataFrame
        One row per place and tank; empty without daily litres.
    by_year : ndarray, shape (year, 12, place)
        Central litres of every month, the field factor in them. [L m-2 month-1]
    low, high : ndarray, shape (12, place)
        Ends of the band, means of the years. [L m-2 month-1]
    days_in_month : ndarray, shape (12,)
        Mean over the years. [d]
    notes : tuple of str
        What was assumed, and what the figures cannot tell.
    """

    places: pd.DataFrame
    months: pd.DataFrame
    storage: pd.DataFrame
    by_year: Array
    low: Array
    high: Array
    days_in_month: Array
    notes: tuple[str, ...]


def size_places(
    places: pd.DataFrame, reach: NearestCells, monthly: xr.Dataset, *, still: Still, cost: StillCost | None,
    wishes: Wishes, days: DailyLitres | None = None,
) -> Sized:
    """Give every place its litres and what follows from them.

    Parameters
    ----------
    places : pandas.DataFrame
        As `sources.places.read_places` gives it.
    reach : NearestCells
        Cell of every place.
    monthly : xarray.Dataset
        As `aggregate` gives it.
    still : Still
        The design.
    cost : StillCost or None
        Its prices.
    wishes : Wishes
        What is to be met.
    days : DailyLitres, optional
        Central litres of every day; without them no tank is sized.

    Returns
    -------
    Sized
    """
    typical = monthly.attrs.get("record") == "typical-year"
    yields = _with_factor(monthly, reach, wishes.field_factor)
    central = "monthly_yield_by_year"
    per_person = daily_need(wishes.need, 1.0)
    lengths = _lengths(monthly)
    days_in_month = lengths.mean(axis=0)
    sizing = _sizing(yields, days_in_month, per_person, 1.0 if cost is None else cost.availability)
    table = _with_cells(places, monthly, reach).assign(
        **_yield_columns(yields, monthly, reach), **sizing,
        **_reached_columns(yields, lengths, sizing, typical=typical))
    storage = pd.DataFrame()
    if days is not None:
        columns, storage = _over_days(table, days, wishes, cost)
        table = table.assign(**columns)
    table = table.assign(**_of_people(table, wishes, cost, yields), reason=_reasons(reach, sizing))
    feed, said = _with_feed(table, yields, still, wishes)
    months = _month_table(table, yields, still, wishes, days_in_month=days_in_month, typical=typical)
    notes = (*_notes(wishes, typical=typical, years=len(yields[central])), *said)
    return Sized(table.assign(**feed), months, storage, yields[central], yields["monthly_yield_low"],
                 yields["monthly_yield_high"], days_in_month, notes)


def _lengths(monthly: xr.Dataset) -> Array:
    """Days of the months of each year in the calendar of the record, (year, 12); of a mean year where not told."""
    if "days_in_month" in monthly.coords:
        return np.asarray(monthly["days_in_month"].transpose("year", "month").to_numpy(), dtype=np.float64)
    return np.tile(DAYS_OF_MONTHS, (monthly.sizes["year"], 1))


def _with_factor(monthly: xr.Dataset, reach: NearestCells, factor: FieldFactor | None) -> dict[str, Array]:
    """Litres of the places: of the condition band, or where a trial has pinned the still down, of its factor."""
    names = {end: f"monthly_yield{end}" for end in ("", "_low", "_high", "_by_year")}
    if factor is None:
        return {name: values_at_places(monthly, name, reach) for name in names.values()}
    central = values_at_places(monthly, names[""], reach)
    return {
        names[""]: central * factor.value, names["_low"]: central * factor.low, names["_high"]: central * factor.high,
        names["_by_year"]: values_at_places(monthly, names["_by_year"], reach) * factor.value,
    }


def values_at_places(monthly: xr.Dataset, name: str, reach: NearestCells) -> Array:
    """Values of the cell of every place.

    Parameters
    ----------
    monthly : xarray.Dataset
        As `aggregate` gives it.
    name : str
        Variable.
    reach : NearestCells
        Cell of every place.

    Returns
    -------
    ndarray, shape (..., place)
        NaN where no cell is near enough.
    """
    space = [dim for dim in ("latitude", "longitude", "site") if dim in monthly.dims]
    values = monthly[name].transpose(..., *space).to_numpy()
    flat = values.reshape(*values.shape[: values.ndim - len(space)], -1)
    return np.where(reach.reached, flat[..., np.maximum(reach.cell, 0)], np.nan).astype(np.float64)


def _with_cells(places: pd.DataFrame, monthly: xr.Dataset, reach: NearestCells) -> pd.DataFrame:
    table = places.reset_index(drop=True).rename(columns={"latitude": "latitude_deg", "longitude": "longitude_deg"})
    latitude, longitude = (monthly[name].to_numpy().astype(np.float64) for name in ("latitude", "longitude"))
    if "site" not in monthly.dims:
        latitude, longitude = cell_centres(latitude, longitude)
    cell = np.maximum(reach.cell, 0)
    table["cell_latitude_deg"] = np.where(reach.cell >= 0, latitude[cell], np.nan)
    # A grid across the antimeridian runs on beyond 180; tables stay within -180..180.
    east = np.where(longitude > 180.0, longitude - 360.0, longitude)
    table["cell_longitude_deg"] = np.where(reach.cell >= 0, east[cell], np.nan)
    table["cell_distance_km"] = reach.distance_km
    table["nearest_cell_missing"] = reach.substituted
    if np.isfinite(reach.height_difference_m).any():
        table["cell_height_difference_m"] = -reach.height_difference_m
    return table


def _yield_columns(yields: Mapping[str, Array], monthly: xr.Dataset, reach: NearestCells) -> dict[str, Array]:
    months = yields["monthly_yield"]
    columns = {f"yield_{month[:3].lower()}_l_m2_month": months[number] for number, month in enumerate(MONTH_NAMES)}
    for end in ("", "_low", "_high"):
        columns[f"annual_yield{end}_l_m2_year"] = yields[f"monthly_yield{end}"].sum(axis=0)
    columns["annual_yield_rule_l_m2_year"] = values_at_places(monthly, "monthly_yield_rule", reach).sum(axis=0)
    columns["days_used_min"] = values_at_places(monthly, "days_used", reach).min(axis=0)
    return columns


def _sizing(
    yields: Mapping[str, Array], days_in_month: Array, per_person: Array, availability: float
) -> dict[str, Any]:
    """Sizing month, its yields, and the basin area of a person: central, and what the ends of the band give."""
    per_day = {end: yields[f"monthly_yield{end}"] / days_in_month[:, None] for end in ("", "_low", "_high")}
    found = sizing_month(np.broadcast_to(per_person[:, None], per_day[""].shape), per_day[""])
    month = np.maximum(found.month - 1, 0)
    known = found.month > 0
    litres = {end: np.where(known, np.take_along_axis(values, month[None], axis=0)[0], np.nan)
              for end, values in per_day.items()}
    need = np.where(known, per_person[month], np.nan)
    area = {end: np.where(values > 0, need / np.where(values > 0, values, 1.0) / availability, np.nan)
            for end, values in litres.items()}
    least = found.least_yield_month
    return {
        "sizing_month": np.where(known, found.month, np.nan), "least_yield_month": np.where(least > 0, least, np.nan),
        "sizing_yield_l_m2_day": litres[""], "sizing_yield_low_l_m2_day": litres["_low"],
        "sizing_yield_high_l_m2_day": litres["_high"], "need_l_person_day": need,
        "area_per_person_m2": area[""], "area_per_person_at_low_yield_m2": area["_low"],
        "area_per_person_at_high_yield_m2": area["_high"],
    }


def _reasons(reach: NearestCells, sizing: Mapping[str, Any]) -> NDArray[np.str_]:
    """Why a place has no litres; empty where it has."""
    beyond = [f"no litres: the nearest cell with twelve known months is {km:.0f} km away, beyond "
              "places.max_cell_distance_km" for km in reach.distance_km]
    told = np.where(reach.cell < 0, _NO_CELL, np.where(reach.reached, _NO_YIELD, beyond))
    return np.asarray(np.where(np.isfinite(sizing["area_per_person_m2"]), "", told), dtype=np.str_)


def _reached_columns(
    yields: Mapping[str, Array], lengths: Array, sizing: Mapping[str, Any], *, typical: bool
) -> dict[str, Any]:
    """What is reached in half, three quarters and nine tenths of the years."""
    by_year = yields["monthly_yield_by_year"]
    if typical:
        return {"years_of_record": np.zeros(by_year.shape[2], dtype=np.int64)}
    month = np.nan_to_num(np.asarray(sizing["sizing_month"]) - 1, nan=0.0).astype(int)
    of_month = reached_yields(np.take_along_axis(by_year, month[None, None], axis=1)[:, 0] / lengths[:, month])
    of_year = reached_yields(year_totals(by_year))
    columns: dict[str, Any] = {"years_of_record": of_month.years}
    for share in ("p50", "p75", "p90"):
        columns[f"sizing_yield_{share}_l_m2_day"] = getattr(of_month, share)
        columns[f"annual_yield_{share}_l_m2_year"] = getattr(of_year, share)
    columns["reliability"] = of_month.p90 / np.where(of_month.p50 > 0, of_month.p50, np.nan)
    return columns


def _over_days(
    table: pd.DataFrame, days: DailyLitres, wishes: Wishes, cost: StillCost | None
) -> tuple[dict[str, Any], pd.DataFrame]:
    """Longest poor spell, and basin area against tank, of one person, on the days of the record."""
    factor = 1.0 if wishes.field_factor is None else wishes.field_factor.value
    litres = days.litres * factor * (1.0 if cost is None else cost.availability)
    need = need_of_days(wishes.need, 1.0, days.month)
    area = table["area_per_person_m2"].to_numpy(dtype=float)
    spell = spell_below_need(litres, need[:, None], area_m2=area, share=wishes.poor_share)
    series = day_series(litres, need[:, None])
    tanks = np.broadcast_to(np.asarray(wishes.tank_days) * need.mean(), (len(table), len(wishes.tank_days)))
    curve = smallest_areas(series, tank_l=tanks, share_of_days=wishes.share_of_days)
    chosen = _chosen(curve, wishes, cost)
    known = np.isfinite(area)
    started = [days.dates[start] if fits and length else ""
               for start, length, fits in zip(spell.start, spell.days, known, strict=True)]
    columns = {
        "longest_poor_spell_days": np.where(known, spell.days, np.nan), "longest_poor_spell_start": started,
        "tank_per_person_l": chosen.tank_l, "area_with_tank_per_person_m2": chosen.area_m2,
    }
    return columns, _storage_table(table, curve, wishes)


def _chosen(curve: TradeOff, wishes: Wishes, cost: StillCost | None) -> Any:
    if cost is None or wishes.tank_price_per_litre is None:
        return knee_point(curve)
    capital = annual_cost(cost).capital
    return cheapest_point(curve, cost_per_m2=capital, cost_per_litre=wishes.tank_price_per_litre)


def _storage_table(table: pd.DataFrame, curve: TradeOff, wishes: Wishes) -> pd.DataFrame:
    places, tanks = curve.area_m2.shape
    rows = pd.DataFrame({
        "name": np.repeat(table["name"].to_numpy(), tanks), "id": np.repeat(table["id"].to_numpy(), tanks),
        "tank_days": np.tile(wishes.tank_days, places), "tank_per_person_l": curve.tank_l.ravel(),
        "area_per_person_m2": curve.area_m2.ravel(), "share_of_days_served": curve.share_of_days.ravel(),
        "share_of_water_served": curve.share_of_volume.ravel(),
        "share_of_days_served_carried_over": curve.share_of_days_carried_over.ravel(), "reason": curve.reason.ravel(),
    })
    return rows


def _of_people(
    table: pd.DataFrame, wishes: Wishes, cost: StillCost | None, yields: Mapping[str, Array]
) -> dict[str, Any]:
    """Need, area, stills and money of everyone; without a population of one person."""
    columns: dict[str, Any] = {}
    area = table["area_per_person_m2"].to_numpy(dtype=float)
    household = wishes.need.people_per_household
    columns["area_per_household_m2"] = area * household
    people = table["population"].to_numpy(dtype=float) if "population" in table else None
    if people is not None:
        columns["need_l_day"] = table["need_l_person_day"] * people
        columns["area_village_m2"] = area * people
    if cost is None:
        return columns
    made = provide(cost, area, 1.0 if people is None else people, household)
    annual = [yields[f"monthly_yield{end}"].sum(axis=0) for end in ("_low", "", "_high")]
    litre = cost_per_litre_band(cost, *annual)
    if people is not None:
        columns["stills_village"] = made.stills
        columns["capital_village"] = made.capital.central
    columns["annual_cost_per_person"] = made.annual_cost_per_person.central
    for end in ("low", "central", "high"):
        suffix = "" if end == "central" else f"_{end}"
        columns[f"cost_per_litre{suffix}"] = getattr(litre, end)
    columns["currency"] = cost.currency
    return columns


def _draw_off(still: Still, wishes: Wishes) -> float | None:
    """Salinity of the brine that leaves over that of the feed; None where the still file counts no salt."""
    if still.concentration_factor <= 1.0:
        return None
    return float(draw_off_factor(still.concentration_factor, wishes.flushing))  # type: ignore[arg-type]


def _with_feed(
    table: pd.DataFrame, yields: Mapping[str, Array], still: Still, wishes: Wishes
) -> tuple[dict[str, Any], tuple[str, ...]]:
    """Feed and brine of one square metre in the sizing month, salt of its year, and what blending would allow."""
    salinity = table["feed_salinity_g_kg"].to_numpy(dtype=float) if "feed_salinity_g_kg" in table else None
    factor = _draw_off(still, wishes)
    if factor is None:
        return {}, ("The still file's concentration_factor of 1 means that no salt is left: no feed or brine is told.",)
    day = feed_and_brine(table["sizing_yield_l_m2_day"].to_numpy(dtype=float), factor, salinity)
    year = feed_and_brine(table["annual_yield_l_m2_year"].to_numpy(dtype=float), factor, salinity)
    columns: dict[str, Any] = {"feed_l_m2_day": day.feed_litres, "brine_l_m2_day": day.brine_litres}
    if salinity is None or year.salt_kg is None:
        return columns, ()
    columns["salt_kg_m2_year"] = year.salt_kg
    limit = TASTE_LIMITS[wishes.taste_limit].limit_mg_l
    columns["blend_l_per_l_distillate"] = blend_under(limit, salinity_mg_l(salinity)).litres_per_litre
    usual = float(np.nanmedian(salinity)) if np.isfinite(salinity).any() else None
    said = brine_warnings(usual, factor, basin_salinity_g_kg=still.basin_salinity_g_kg,
                          flushing=wishes.flushing) if usual is not None else ()  # type: ignore[arg-type]
    return columns, (*said, blend_under(limit, 0.0).caution)


def _month_table(
    table: pd.DataFrame, yields: Mapping[str, Array], still: Still, wishes: Wishes, *, days_in_month: Array,
    typical: bool,
) -> pd.DataFrame:
    """One row per place and month: litres, their reach over the years, need, feed and brine."""
    count = len(table)
    columns: dict[str, Any] = {
        "name": np.repeat(table["name"].to_numpy(), MONTHS), "id": np.repeat(table["id"].to_numpy(), MONTHS),
        "month": np.tile(np.arange(1, MONTHS + 1), count),
    }
    for end in ("", "_low", "_high"):
        columns[f"yield{end}_l_m2_month"] = yields[f"monthly_yield{end}"].T.ravel()
    if not typical:
        reached = reached_yields(yields["monthly_yield_by_year"])
        for share in ("p50", "p75", "p90"):
            columns[f"yield_{share}_l_m2_month"] = getattr(reached, share).T.ravel()
        columns["years_of_record"] = reached.years.T.ravel()
    columns["need_l_person_day"] = np.tile(daily_need(wishes.need, 1.0), count)
    days = np.tile(days_in_month, count)
    sized = (table["need_l_person_day"] / table["sizing_yield_l_m2_day"]).to_numpy(dtype=float)
    columns["share_of_need_at_sized_area"] = (
        columns["yield_l_m2_month"] / days * np.repeat(sized, MONTHS)
        / np.where(columns["need_l_person_day"] > 0, columns["need_l_person_day"], np.nan))
    factor = _draw_off(still, wishes)
    if factor is not None:
        salinity = np.repeat(table["feed_salinity_g_kg"].to_numpy(dtype=float), MONTHS) \
            if "feed_salinity_g_kg" in table else None
        found = feed_and_brine(columns["yield_l_m2_month"], factor, salinity)
        columns["feed_l_m2_month"], columns["brine_l_m2_month"] = found.feed_litres, found.brine_litres
        if found.salt_kg is not None:
            columns["salt_kg_m2_month"] = found.salt_kg
    return pd.DataFrame(columns)


def _notes(wishes: Wishes, *, typical: bool, years: int) -> tuple[str, ...]:
    said = []
    if typical:
        said.append("A typical year holds no poor year: how sure the litres are over the years is not told.")
    else:
        said += [f"{warning[0].upper()}{warning[1:]}." for warning in (years_warning(years),) if warning is not None]
    if wishes.field_factor is not None:
        factor = wishes.field_factor
        said.append(f"Litres of places are the modelled ones times {factor.value:g} ({factor.low:g} to "
                    f"{factor.high:g}), the field factor of {factor.source}.")
    return tuple(said)
