"""What the water of a still costs: capital spread over years, upkeep, cost per litre.

The usual annual-cost method of engineering economy, as it is used for solar stills: every part is paid off over
its own life by the capital recovery factor, and replaced at the same price when that life ends; its salvage value
comes back through the sinking fund factor; maintenance and electricity are added. All money is per square metre
of basin unless a name says otherwise. The currency is a label and is never converted.

Sources: the two factors stand in every interest table (e.g. Blank & Tarquin, Engineering Economy, "A/P" and "A/F");
for stills e.g. Kabeel, Hamed & El-Agouz 2010, Energy 35:2901 (quoted from memory: FAC = CRF P, ASV = SFF S,
AMC = 15 % of FAC, AC = FAC + AMC - ASV, CPL = AC / M).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from stillfield.errors import StillfieldError

Array = NDArray[np.float64]
#: The cheap, the middle and the dear end of a figure.
End = Literal["low", "central", "high"]
ENDS: tuple[End, ...] = ("low", "central", "high")

DAYS_PER_YEAR = 365
#: Days of the months of a nominal year.
MONTH_DAYS = (31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31)


@dataclass(frozen=True)
class Band:
    """Low, central and high value of one figure; each a number or an array over places or cells."""

    low: Array
    central: Array
    high: Array


@dataclass(frozen=True)
class Part:
    """One part of a still with a price and a life of its own.

    Attributes
    ----------
    name : str
        What it is: 'cover film', 'liner', or 'still' where the whole has one price.
    price_per_m2 : float
        Price with its work and transport, per basin area. [money m-2]
    life_years : float
        Years until it is replaced. [a]
    salvage_share : float
        Share of the price that comes back at the end of its life. [1]
    price_low, price_high : float or None
        Ends of the price; the price itself where not stated. [money m-2]
    life_low, life_high : float or None
        Ends of the life; the life itself where not stated. [a]

    Raises
    ------
    StillfieldError
        When a number is impossible or an end lies on the wrong side.
    """

    name: str
    price_per_m2: float
    life_years: float
    salvage_share: float = 0.0
    price_low: float | None = None
    price_high: float | None = None
    life_low: float | None = None
    life_high: float | None = None

    def __post_init__(self) -> None:
        """Refuse impossible numbers."""
        prices, lives = self.price(), self.life()
        require(0.0 <= prices["low"] <= prices["central"] <= prices["high"] < np.inf,
              f"price of '{self.name}'", prices, "0 <= low <= price <= high")
        require(0.0 < lives["low"] <= lives["central"] <= lives["high"], f"life of '{self.name}'", lives,
              "0 < low <= life <= high")
        require(0.0 <= self.salvage_share <= 1.0, f"salvage share of '{self.name}'", self.salvage_share, "0 to 1")

    def price(self) -> Mapping[End, float]:
        """Price by its ends. [money m-2]."""
        return _ends(self.price_low, self.price_per_m2, self.price_high)

    def life(self) -> Mapping[End, float]:
        """Life by its ends. [a]."""
        return _ends(self.life_low, self.life_years, self.life_high)


@dataclass(frozen=True)
class StillCost:
    """What a still costs to buy and to keep, per square metre of basin.

    Attributes
    ----------
    parts : tuple of Part
        Everything that is paid for; at least one.
    interest : float
        Real interest of a year; 0.08 is 8 %. [a-1]
    currency : str
        Label of the money.
    maintenance_share : float
        Upkeep as a share of the yearly capital recovery ("first annual cost"). [1]
    maintenance_per_m2_year : float
        Upkeep in money, added to the share. [money m-2 a-1]
    electricity_wh_m2_day : float
        Electricity on a working day. [W h m-2 d-1]
    electricity_price_per_kwh : float
        [money kWh-1]
    availability : float
        Share of the days on which the still works. [1]
    unit_area_m2 : float
        Basin area of one still. [m2]

    Raises
    ------
    StillfieldError
        When a number is impossible.
    """

    parts: tuple[Part, ...]
    interest: float
    currency: str = "money"
    maintenance_share: float = 0.0
    maintenance_per_m2_year: float = 0.0
    electricity_wh_m2_day: float = 0.0
    electricity_price_per_kwh: float = 0.0
    availability: float = 1.0
    unit_area_m2: float = 1.0

    def __post_init__(self) -> None:
        """Refuse impossible numbers."""
        require(len(self.parts) > 0, "parts of a still's cost", "none", "at least one part")
        for name in ("interest", "maintenance_share", "maintenance_per_m2_year", "electricity_wh_m2_day",
                     "electricity_price_per_kwh"):
            value = getattr(self, name)
            require(0.0 <= value < np.inf, name, value, "0 or more")
        require(0.0 < self.availability <= 1.0, "availability", self.availability, "above 0 to 1")
        require(0.0 < self.unit_area_m2 < np.inf, "unit_area_m2", self.unit_area_m2, "above 0")


@dataclass(frozen=True)
class AnnualCost:
    """Cost of a year per square metre of basin, item by item. [money m-2 a-1; capital: money m-2]."""

    capital: float
    recovery: float
    maintenance: float
    electricity: float
    salvage: float

    @property
    def total(self) -> float:
        """Recovery + maintenance + electricity - salvage. [money m-2 a-1]."""
        return self.recovery + self.maintenance + self.electricity - self.salvage


def capital_recovery_factor(interest: ArrayLike, years: ArrayLike) -> Array:
    """Yearly payment that pays off 1 with interest over a life.

    CRF = i (1 + i)^n / ((1 + i)^n - 1); 1/n without interest. Source: any interest table, column A/P.

    Parameters
    ----------
    interest : float or ndarray
        Interest of a year, 0 or more. [a-1]
    years : float or ndarray
        Life n, above 0; it need not be whole. [a]

    Returns
    -------
    ndarray, broadcast of both
        [a-1]

    Raises
    ------
    StillfieldError
        Outside these ranges.

    Examples
    --------
    >>> round(float(capital_recovery_factor(0.08, 10)), 5), float(capital_recovery_factor(0.0, 10))
    (0.14903, 0.1)
    """
    return sinking_fund_factor(interest, years) + np.asarray(interest, dtype=np.float64)


def sinking_fund_factor(interest: ArrayLike, years: ArrayLike) -> Array:
    """Yearly deposit that grows to 1 with interest over a life.

    SFF = i / ((1 + i)^n - 1) = CRF - i; 1/n without interest. Source: any interest table, column A/F.

    Parameters
    ----------
    interest : float or ndarray
        Interest of a year, 0 or more. [a-1]
    years : float or ndarray
        Life n, above 0; it need not be whole. [a]

    Returns
    -------
    ndarray, broadcast of both
        [a-1]

    Raises
    ------
    StillfieldError
        Outside these ranges.

    Examples
    --------
    >>> round(float(sinking_fund_factor(0.08, 10)), 5)
    0.06903
    """
    rate, life = np.broadcast_arrays(np.asarray(interest, np.float64), np.asarray(years, np.float64))
    require(bool(np.all((rate >= 0.0) & np.isfinite(rate))), "interest", rate, "0 or more")
    require(bool(np.all(life > 0.0)), "life in years", life, "above 0")
    some = np.where(rate > 0.0, rate, 1.0)
    with np.errstate(over="ignore"):
        # expm1 and log1p keep their digits where interest is close to nothing.
        grown: Array = np.expm1(life * np.log1p(some))
    factor: Array = np.where(rate > 0.0, some / grown, 1.0 / life)
    return factor


def annual_cost(cost: StillCost, end: End = "central") -> AnnualCost:
    """Cost of a year per square metre of basin.

    Each part: recovery = price CRF(i, life), salvage = share price SFF(i, life). Maintenance is its share of the
    recovery plus its money; electricity is paid on working days. The low end takes low prices and long lives, the
    high end high prices and short lives.

    Parameters
    ----------
    cost : StillCost
        Prices, lives and upkeep.
    end : {'low', 'central', 'high'}
        Which end.

    Returns
    -------
    AnnualCost

    Examples
    --------
    >>> still = StillCost((Part("still", 100.0, 10.0, salvage_share=0.2),), interest=0.12, maintenance_share=0.15)
    >>> year = annual_cost(still)
    >>> round(year.recovery, 2), round(year.maintenance, 2), round(year.salvage, 2), round(year.total, 2)
    (17.7, 2.65, 1.14, 19.21)
    """
    life_end: End = {"low": "high", "central": "central", "high": "low"}[end]  # type: ignore[assignment]
    prices = np.array([part.price()[end] for part in cost.parts])
    lives = np.array([part.life()[life_end] for part in cost.parts])
    shares = np.array([part.salvage_share for part in cost.parts])
    recovery = float(prices @ capital_recovery_factor(cost.interest, lives))
    return AnnualCost(
        capital=float(prices.sum()),
        recovery=recovery,
        maintenance=cost.maintenance_share * recovery + cost.maintenance_per_m2_year,
        electricity=electricity_cost(cost.electricity_wh_m2_day, cost.electricity_price_per_kwh, cost.availability),
        salvage=float((prices * shares) @ sinking_fund_factor(cost.interest, lives)),
    )


def electricity_cost(wh_day: float, price_per_kwh: float, availability: float = 1.0) -> float:
    """Electricity of a year's working days.

    Parameters
    ----------
    wh_day : float
        Electricity on a working day. [W h m-2 d-1]
    price_per_kwh : float
        [money kWh-1]
    availability : float
        Share of the days worked. [1]

    Returns
    -------
    float
        [money m-2 a-1]

    Examples
    --------
    >>> electricity_cost(100.0, 0.5)
    18.25
    """
    return wh_day / 1000.0 * DAYS_PER_YEAR * availability * price_per_kwh


def cost_per_litre(yearly: ArrayLike, annual_yield: ArrayLike, availability: ArrayLike = 1.0) -> Array:
    """Cost of a litre: annual cost / (annual yield x availability).

    Parameters
    ----------
    yearly : float or ndarray
        Annual cost. [money m-2 a-1]
    annual_yield : float or ndarray
        Distillate of a year in which the still works every day. [L m-2 a-1]
    availability : float or ndarray
        Share of the days on which it works. [1]

    Returns
    -------
    ndarray, broadcast of all
        [money L-1]; infinite where there is no yield, NaN where the yield is not known.

    Examples
    --------
    >>> cost_per_litre(20.0, [1000.0, 500.0], 0.8)
    array([0.025, 0.05 ])
    """
    money = np.asarray(yearly, np.float64)
    litres = np.asarray(annual_yield, np.float64) * np.asarray(availability, np.float64)
    with np.errstate(divide="ignore", invalid="ignore"):
        price: Array = money / litres
    return np.where(litres == 0.0, np.inf, price)


def cost_per_litre_band(cost: StillCost, yield_low: ArrayLike, yield_central: ArrayLike, yield_high: ArrayLike) -> Band:
    """Cost of a litre from low to high over places or cells.

    The low end takes low prices, long lives and the high yield; the high end the reverse. All errors pulling one way
    make this the widest band, not a likely one.

    Parameters
    ----------
    cost : StillCost
        Prices, lives, upkeep and availability.
    yield_low, yield_central, yield_high : float or ndarray
        Distillate of a year per basin area. [L m-2 a-1]

    Returns
    -------
    Band
        [money L-1]

    Examples
    --------
    >>> still = StillCost((Part("still", 100.0, 10.0, price_low=80.0, price_high=150.0),), interest=0.0)
    >>> band = cost_per_litre_band(still, 500.0, 800.0, 1000.0)
    >>> float(band.low), float(band.central), float(band.high)
    (0.008, 0.0125, 0.03)
    """
    yields: dict[End, ArrayLike] = {"low": yield_high, "central": yield_central, "high": yield_low}
    return Band(*(cost_per_litre(annual_cost(cost, end).total, yields[end], cost.availability) for end in ENDS))


def _ends(low: float | None, central: float, high: float | None) -> Mapping[End, float]:
    return MappingProxyType({
        "low": central if low is None else low, "central": central, "high": central if high is None else high,
    })


def require(holds: bool, what: str, got: object, wanted: str) -> None:
    """Refuse a number that cannot be, unless it `holds`.

    Parameters
    ----------
    holds : bool
        Whether it may stand.
    what : str
        Its name.
    got : object
        What was found.
    wanted : str
        What may stand there.

    Raises
    ------
    StillfieldError
        Where it does not hold.
    """
    if not holds:
        shown = dict(got) if isinstance(got, Mapping) else got
        raise StillfieldError(f"{what} is impossible", got=shown, wanted=wanted)
