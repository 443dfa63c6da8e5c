"""From months of cells to a decision about places: the stages reach, size and rank in their order.

Run and notebook go through here, so that both decide alike.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import NDArray

from stillfield.decisions.cost import StillCost
from stillfield.decisions.nearest import NearestCells
from stillfield.decisions.need import need_of
from stillfield.decisions.ranking import Ranking
from stillfield.decisions.ranking_score import Screen
from stillfield.decisions.ranking_uncertainty import MonthlyYields, Uncertainty
from stillfield.physics.still import Still
from stillfield.stages.rank import rank_places
from stillfield.stages.reach import daily_of_places, reach_places
from stillfield.stages.size import DailyLitres, Sized, Wishes, size_places, values_at_places
from stillfield.stages.upgrade import Change, upgrade_places


@dataclass(frozen=True)
class Preferences:
    """How places are ordered.

    Attributes
    ----------
    weights : mapping of str to float or None
        By name of the criterion; the usual ones without it.
    screens : tuple of Screen
        Hard limits.
    uncertainty : Uncertainty or None
        What is varied.
    top : int
        Places to be visited in the first round.
    max_cell_distance_km : float
        A place farther than this from every valid cell gets no litres. [km]
    """

    weights: Mapping[str, float] | None = None
    screens: tuple[Screen, ...] = ()
    uncertainty: Uncertainty | None = field(default_factory=Uncertainty)
    top: int = 10
    max_cell_distance_km: float = 25.0


@dataclass(frozen=True)
class Decision:
    """What is said of the places of a run for one still.

    Attributes
    ----------
    places, months, storage : pandas.DataFrame
        In the order to visit; one row per place and month; one row per place and tank.
    ranking : Ranking
        Scales, screens, and the summary in words.
    notes : tuple of str
        What was assumed.
    """

    places: pd.DataFrame
    months: pd.DataFrame
    storage: pd.DataFrame
    ranking: Ranking
    notes: tuple[str, ...]


@dataclass(frozen=True)
class Days:
    """Daily litres that were kept of a run.

    Attributes
    ----------
    followed : mapping of int to ndarray, shape (still, day)
        By number of the cell. [L m-2]
    time : xarray.DataArray
        Dates of the days.
    still : int
        Number of the still.
    """

    followed: Mapping[int, NDArray[np.floating]]
    time: xr.DataArray
    still: int = 0


def usual_wishes(litres_per_person_day: float | None = None) -> Wishes:
    """Drinking water all year, the usual tanks.

    Parameters
    ----------
    litres_per_person_day : float, optional
        [L]; the published figure for drinking without it.

    Returns
    -------
    Wishes
    """
    return Wishes(need_of("drinking" if litres_per_person_day is None else litres_per_person_day))


def decide(
    monthly: xr.Dataset, places: pd.DataFrame, *, still: Still, cost: StillCost | None = None,
    wishes: Wishes | None = None, preferences: Preferences | None = None, days: Days | None = None,
    change: Change | None = None,
) -> Decision:
    """Size and rank places.

    Parameters
    ----------
    monthly : xarray.Dataset
        As `stages.aggregate.aggregate` gives it.
    places : pandas.DataFrame
        As `sources.places.read_places` gives it.
    still : Still
        The design.
    cost : StillCost, optional
        Its prices.
    wishes : Wishes, optional
        What the people need.
    preferences : Preferences, optional
        How they are ordered.
    days : Days, optional
        Daily litres; without them no tank is sized.
    change : Change, optional
        A modification of the still, compared with the still as it stands; needs `cost`.

    Returns
    -------
    Decision

    Raises
    ------
    PlacesError, DecisionError
        If a place, a weight or a wish cannot be used.
    """
    ways, wanted = preferences or Preferences(), wishes or usual_wishes()
    reach = reach_places(places, monthly, max_cell_distance_km=ways.max_cell_distance_km)
    litres = None if days is None else daily_of_places(reach, dict(days.followed), days.still)
    daily = None
    if days is not None and litres is not None and monthly.attrs.get("record") != "typical-year":
        stamps: Sequence[str] = [str(stamp)[:10] for stamp in days.time.values]
        daily = DailyLitres(litres, days.time.dt.month.to_numpy().astype(np.int64), stamps)
    sized = size_places(places, reach, monthly, still=still, cost=cost, wishes=wanted, days=daily)
    if cost is not None and change is not None:
        sized = _with_change(sized, reach, monthly, cost, change)
    order = rank_places(
        sized.places, _monthly_yields(sized, wanted), weights=ways.weights, screens=ways.screens,
        uncertainty=ways.uncertainty, top=ways.top,
    )
    return Decision(order.places, _in_order(sized.months, order.places), _in_order(sized.storage, order.places),
                    order.ranking, (*sized.notes, *order.notes))


def _with_change(
    sized: Sized, reach: NearestCells, monthly: xr.Dataset, cost: StillCost, change: Change
) -> Sized:
    """Add what a modification of the still does."""
    litres = sized.months["yield_l_m2_month"].to_numpy(dtype=float).reshape(len(sized.places), -1).T
    found = upgrade_places(
        sized.places, litres, values_at_places(monthly, "monthly_yield_rule", reach), cost=cost, change=change,
        typical=monthly.attrs.get("record") == "typical-year",
    )
    return replace(sized, places=sized.places.assign(**found.places), months=sized.months.assign(**found.months),
                   notes=(*sized.notes, *found.notes))


def _monthly_yields(sized: Sized, wishes: Wishes) -> MonthlyYields:
    return MonthlyYields(sized.by_year, sized.low, sized.high, need=np.asarray(wishes.need.month_factors),
                         days_in_month=tuple(sized.days_in_month.tolist()))


def _in_order(rows: pd.DataFrame, places: pd.DataFrame) -> pd.DataFrame:
    """Rows of places in the order of the places."""
    if rows.empty:
        return rows
    spot = {place: number for number, place in enumerate(places["id"])}
    return rows.iloc[np.argsort(rows["id"].map(spot).to_numpy(), kind="stable")].reset_index(drop=True)
