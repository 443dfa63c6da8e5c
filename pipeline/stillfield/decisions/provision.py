"""Whole stills for the people of some places: area, number, capital and yearly cost, together and per person."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from stillfield.decisions.cost import ENDS, Array, Band, StillCost, annual_cost

#: Areas closer than this share of one still to a whole number of stills need no further still.
_WHOLE_STILLS = 1e-9


@dataclass(frozen=True)
class Provision:
    """Stills for the people of some places. Shapes follow the places; NaN where the area is not known.

    Attributes
    ----------
    area_per_person_m2, area_per_household_m2, area_m2 : ndarray
        Basin area needed by a person, a household, all people. [m2]
    stills : ndarray
        Whole stills for all people together. [1]
    stills_per_household : ndarray
        Whole stills when every household has its own. [1]
    area_built_m2 : ndarray
        Basin area of `stills`. [m2]
    capital, annual_cost : Band
        Of the area built. [money], [money a-1]
    capital_per_person, annual_cost_per_person : Band
        The same per person; NaN where nobody lives. [money], [money a-1]
    """

    area_per_person_m2: Array
    area_per_household_m2: Array
    area_m2: Array
    stills: Array
    stills_per_household: Array
    area_built_m2: Array
    capital: Band
    annual_cost: Band
    capital_per_person: Band
    annual_cost_per_person: Band


def number_of_stills(area_m2: ArrayLike, unit_area_m2: float) -> Array:
    """Whole stills that give at least an area.

    Parameters
    ----------
    area_m2 : float or ndarray
        Basin area needed. [m2]
    unit_area_m2 : float
        Basin area of one still. [m2]

    Returns
    -------
    ndarray, shape of `area_m2`
        Whole numbers; NaN where the area is not known. [1]

    Examples
    --------
    >>> number_of_stills([0.0, 2.0, 2.1], 1.0)
    array([0., 2., 3.])
    """
    stills: Array = np.ceil(np.asarray(area_m2, np.float64) / unit_area_m2 - _WHOLE_STILLS) + 0.0
    return stills


def provide(
    cost: StillCost, area_per_person_m2: ArrayLike, people: ArrayLike, people_per_household: ArrayLike = 5.0
) -> Provision:
    """Stills, capital and yearly cost for the people of some places.

    The area per person comes from sizing, where the availability belongs as well. Whole stills are paid for.

    Parameters
    ----------
    cost : StillCost
        Prices, lives, upkeep and the area of one still.
    area_per_person_m2 : float or ndarray
        Basin area each person needs. [m2]
    people : float or ndarray
        People of each place. [1]
    people_per_household : float or ndarray
        [1]

    Returns
    -------
    Provision

    Examples
    --------
    >>> from stillfield.decisions.cost import Part
    >>> still = StillCost((Part("still", 100.0, 10.0),), interest=0.0, unit_area_m2=2.0)
    >>> village = provide(still, 1.1, 41.0)
    >>> float(village.stills), float(village.stills_per_household), float(village.capital.central)
    (23.0, 3.0, 4600.0)
    """
    person, count, household = np.broadcast_arrays(
        *(np.asarray(value, np.float64) for value in (area_per_person_m2, people, people_per_household))
    )
    stills = number_of_stills(person * count, cost.unit_area_m2)
    built = stills * cost.unit_area_m2
    years = [annual_cost(cost, end) for end in ENDS]
    capital = Band(*(built * year.capital for year in years))
    yearly = Band(*(built * year.total for year in years))
    return Provision(
        area_per_person_m2=person, area_per_household_m2=person * household, area_m2=person * count, stills=stills,
        stills_per_household=number_of_stills(person * household, cost.unit_area_m2), area_built_m2=built,
        capital=capital, annual_cost=yearly,
        capital_per_person=_each(capital, count), annual_cost_per_person=_each(yearly, count),
    )


def _each(band: Band, people: Array) -> Band:
    somebody = np.where(people > 0.0, people, np.nan)
    return Band(band.low / somebody, band.central / somebody, band.high / somebody)
