"""Whether a modification or a dearer material pays: litres and cost per litre with and without, by month and year.

A change multiplies the litres by a factor f and the cost of a year by a ratio r. It makes the litre cheaper exactly
where f is above r, the **break-even factor**, whatever the litres are: the weather and the condition of the still
are the same with and without and drop out. f and r each come as an interval. Since the cost of a litre falls with f
and rises with r, the ends of the intervals give the ends of the answer exactly; so the intervals are carried through
as they are. Random draws would need a shape for each distribution that nobody knows, and a seed, and could say no
more than: surely, surely not, or cannot tell.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from stillfield.decisions.cost import (
    DAYS_PER_YEAR,
    ENDS,
    MONTH_DAYS,
    Array,
    Band,
    StillCost,
    annual_cost,
    capital_recovery_factor,
    cost_per_litre,
    electricity_cost,
    require,
    sinking_fund_factor,
)
from stillfield.decisions.panel import PanelSupply, panel_size
from stillfield.errors import StillfieldError

PAYS = "pays"
PAYS_NOT = "does not pay"
CANNOT_TELL = "cannot tell"

#: Ratio of the litres of two stills at one site as far as the model knows it: 10 to 15 % (see README.md). [1]
USUAL_RATIO_UNCERTAINTY = 0.15


@dataclass(frozen=True)
class Modification:
    """A change to a still: what it does to the litres, and what it costs per square metre of basin.

    Attributes
    ----------
    name : str
        What it is.
    yield_factor, low, high : float
        Litres with over litres without, and the interval in which that lies; best from a trial. [1]
    monthly_factors : tuple of 12 float or None
        Factor of each month, January first, where it differs over the year; its interval is as wide, in proportion,
        as that of `yield_factor`. [1]
    extra_capital_per_m2 : float
        [money m-2]
    life_years : float
        [a]
    salvage_share : float
        Share of the extra capital that comes back at the end. [1]
    maintenance_per_m2_year : float
        Upkeep beyond the still's maintenance share, which holds for the extra capital as well. [money m-2 a-1]
    electricity_wh_m2_day : float
        On a working day. [W h m-2 d-1]
    electricity_price_per_kwh : float or None
        Price where it comes from a grid. [money kWh-1]
    panel : PanelSupply or None
        Panel where it does not.

    Raises
    ------
    StillfieldError
        When a number is impossible, or electricity comes from nowhere or from both.
    """

    name: str
    yield_factor: float
    low: float
    high: float
    monthly_factors: tuple[float, ...] | None = None
    extra_capital_per_m2: float = 0.0
    life_years: float = 10.0
    salvage_share: float = 0.0
    maintenance_per_m2_year: float = 0.0
    electricity_wh_m2_day: float = 0.0
    electricity_price_per_kwh: float | None = None
    panel: PanelSupply | None = None

    def __post_init__(self) -> None:
        """Refuse impossible numbers."""
        require(0.0 < self.low <= self.yield_factor <= self.high < np.inf, f"yield factor of '{self.name}'",
              f"{self.low:g}, {self.yield_factor:g}, {self.high:g}", "0 < low <= yield_factor <= high")
        months = self.monthly_factors
        require(months is None or (len(months) == len(MONTH_DAYS) and min(months) > 0.0),
              f"monthly factors of '{self.name}'", months, "12 numbers above 0")
        for name in ("extra_capital_per_m2", "maintenance_per_m2_year", "electricity_wh_m2_day"):
            require(0.0 <= getattr(self, name) < np.inf, f"{name} of '{self.name}'", getattr(self, name), "0 or more")
        require(self.life_years > 0.0, f"life of '{self.name}'", self.life_years, "above 0")
        require(0.0 <= self.salvage_share <= 1.0, f"salvage share of '{self.name}'", self.salvage_share, "0 to 1")
        supplies = (self.electricity_price_per_kwh is not None) + (self.panel is not None)
        require(supplies == 1 or (supplies == 0 and self.electricity_wh_m2_day == 0.0),
              f"electricity of '{self.name}'", f"{supplies} supplies", "a price per kWh or a panel")


@dataclass(frozen=True)
class Comparison:
    """Litres and cost per litre with and without a change.

    Shapes: (12, ...) by month, (...) by year; what follows the places' shape is `...`. All per square metre of basin;
    litres are those of working days only.

    Attributes
    ----------
    name : str
        The change.
    monthly_factor, annual_factor : Band
        Litres with over litres without. [1]
    monthly_litres_without, annual_litres_without : ndarray
        [L m-2]
    monthly_litres_with, annual_litres_with : Band
        From the interval of the factor alone. [L m-2]
    annual_cost_without, annual_cost_with : Band
        [money m-2 a-1]
    monthly_cost_per_litre_without, annual_cost_per_litre_without : ndarray
        The cost of a month is its share of the days of the year. [money L-1]
    monthly_cost_per_litre_with, annual_cost_per_litre_with : Band
        At central cost, over the interval of the factor. [money L-1]
    break_even_factor : Band
        Factor from which on the change pays: cost of a year with over without. [1]
    monthly_verdict, annual_verdict : ndarray of str
        'pays', 'does not pay' or 'cannot tell' in cost per litre.
    break_even_extra_capital : Band
        Extra capital at which the litre costs the same with and without, over the interval of the factor; negative
        where the change would not even pay as a gift. [money m-2]
    panel_wp : ndarray or None
        Size of the panel. [Wp m-2]
    """

    name: str
    monthly_factor: Band
    annual_factor: Band
    monthly_litres_without: Array
    annual_litres_without: Array
    monthly_litres_with: Band
    annual_litres_with: Band
    annual_cost_without: Band
    annual_cost_with: Band
    monthly_cost_per_litre_without: Array
    annual_cost_per_litre_without: Array
    monthly_cost_per_litre_with: Band
    annual_cost_per_litre_with: Band
    break_even_factor: Band
    monthly_verdict: NDArray[np.str_]
    annual_verdict: NDArray[np.str_]
    break_even_extra_capital: Band
    panel_wp: Array | None = None


@dataclass(frozen=True)
class _Change:
    """What both kinds of change come down to: costs of a year and the capital that moves them."""

    without: Band
    with_change: Band
    break_even_factor: Band
    #: Cost of a year that no capital moves [money m-2 a-1], cost of a year per capital [a-1], capital without.
    fixed: Array
    per_capital: float
    capital_without: float


def compare_modification(
    cost: StillCost,
    modification: Modification,
    monthly_litres: ArrayLike,
    irradiation_mj_m2: ArrayLike | None = None,
) -> Comparison:
    """Compare a still with and without a modification.

    Parameters
    ----------
    cost : StillCost
        Of the still without it.
    modification : Modification
        What is changed.
    monthly_litres : ndarray, (12, ...)
        Litres of each month without it, every day worked. [L m-2 month-1]
    irradiation_mj_m2 : ndarray, (12, ...), optional
        Irradiation of the mean day of each month; needed for a panel. [MJ m-2 d-1]

    Returns
    -------
    Comparison

    Raises
    ------
    StillfieldError
        When a panel should be sized without irradiation, or the months do not stand first.

    Examples
    --------
    >>> from stillfield.decisions.cost import Part
    >>> still = StillCost((Part("still", 100.0, 10.0),), interest=0.0)
    >>> mirror = Modification("mirror", 1.25, 1.15, 1.35, extra_capital_per_m2=10.0, life_years=10.0)
    >>> found = compare_modification(still, mirror, [80.0] * 12)
    >>> str(found.annual_verdict), float(found.break_even_factor.central)
    ('pays', 1.1)
    >>> round(float(found.break_even_extra_capital.central), 6)
    25.0
    """
    litres = _months_first(monthly_litres)
    central = np.ones(len(MONTH_DAYS)) * modification.yield_factor
    if modification.monthly_factors is not None:
        central = np.array(modification.monthly_factors)
    spread = (modification.low / modification.yield_factor, 1.0, modification.high / modification.yield_factor)
    factor = Band(*(np.broadcast_to((central * share).reshape(-1, *[1] * (litres.ndim - 1)), litres.shape)
                    for share in spread))  # fmt: skip
    wp = _panel_of(modification, irradiation_mj_m2)
    litres = litres * cost.availability
    months = Band(litres * factor.low, litres * factor.central, litres * factor.high)
    return _compared(modification.name, litres, factor, months, _modified(cost, modification, wp), panel_wp=wp)


def compare_stills(
    cost: StillCost,
    other_cost: StillCost,
    monthly_litres: ArrayLike,
    other_monthly_litres: ArrayLike,
    *,
    name: str = "other still",
    ratio_uncertainty: float = USUAL_RATIO_UNCERTAINTY,
) -> Comparison:
    """Compare a still with another one: of dearer material, deeper, with another cover.

    The factor is the ratio of their modelled litres, give or take `ratio_uncertainty`. Prices common to both move
    together in life but not here, so an interval of prices makes the answer more cautious than it need be.

    Parameters
    ----------
    cost, other_cost : StillCost
        Of the still and of the other, in the same money.
    monthly_litres, other_monthly_litres : ndarray, (12, ...)
        Litres of each month, every day worked. [L m-2 month-1]
    name : str
        What the other is called.
    ratio_uncertainty : float
        Half-width of the ratio, 0 to below 1. [1]

    Returns
    -------
    Comparison
        Without: the still; with: the other.

    Raises
    ------
    StillfieldError
        When the currencies differ (nothing is converted) or the shapes do.

    Examples
    --------
    >>> from stillfield.decisions.cost import Part
    >>> film = StillCost((Part("film", 20.0, 2.0),), interest=0.0)
    >>> glass = StillCost((Part("glass", 60.0, 20.0),), interest=0.0)
    >>> found = compare_stills(film, glass, [60.0] * 12, [80.0] * 12, name="glass")
    >>> str(found.annual_verdict), round(float(found.break_even_factor.central), 3)
    ('pays', 0.3)
    """
    if cost.currency != other_cost.currency:
        raise StillfieldError("costs in two currencies cannot be compared", got=f"{cost.currency}, "
                              f"{other_cost.currency}", cure="State both in the same money.")  # fmt: skip
    require(0.0 <= ratio_uncertainty < 1.0, "uncertainty of a ratio", ratio_uncertainty, "0 to below 1")
    litres, others = _months_first(monthly_litres), _months_first(other_monthly_litres)
    require(litres.shape == others.shape, "shape of the litres", f"{litres.shape}, {others.shape}", "the same")
    litres, others = litres * cost.availability, others * other_cost.availability
    months = Band(*(others * (1.0 + sign * ratio_uncertainty) for sign in (-1.0, 0.0, 1.0)))
    factor = Band(*(_ratio(month, litres) for month in (months.low, months.central, months.high)))
    return _compared(name, litres, factor, months, _replaced(cost, other_cost))


def verdict_in_words(found: Comparison, place: tuple[int, ...] = (), *, currency: str = "money") -> str:
    """One sentence about a year at one place.

    Parameters
    ----------
    found : Comparison
        As compared.
    place : tuple of int
        Index of the place; empty where there is one only.
    currency : str
        Label of the money.

    Returns
    -------
    str

    Examples
    --------
    >>> from stillfield.decisions.cost import Part
    >>> still = StillCost((Part("still", 100.0, 10.0),), interest=0.0)
    >>> fan = Modification("fan", 1.1, 0.95, 1.25, extra_capital_per_m2=10.0)
    >>> print(verdict_in_words(compare_modification(still, fan, [80.0] * 12)))
    fan: cannot tell whether it pays. It makes 0.95 to 1.25 times the litres and pays from 1.10 times on; it may \
cost up to 10.00 money per m2 more (-5.00 to 25.00).
    """
    verdict = str(found.annual_verdict[place])
    said = "cannot tell whether it pays" if verdict == CANNOT_TELL else verdict
    low, high = float(found.annual_factor.low[place]), float(found.annual_factor.high[place])
    even, room = float(found.break_even_factor.central[place]), found.break_even_extra_capital
    return (
        f"{found.name}: {said}. It makes {low:.2f} to {high:.2f} times the litres and pays from {even:.2f} times on; "
        f"it may cost up to {float(room.central[place]):.2f} {currency} per m2 more "
        f"({float(room.low[place]):.2f} to {float(room.high[place]):.2f})."
    )


def _panel_of(modification: Modification, irradiation: ArrayLike | None) -> Array | None:
    if modification.panel is None:
        return None
    if irradiation is None:
        raise StillfieldError(f"the panel of '{modification.name}' needs the irradiation of the months")
    return panel_size(modification.electricity_wh_m2_day, _months_first(irradiation),
                      modification.panel.system_efficiency)  # fmt: skip


def _modified(cost: StillCost, modification: Modification, panel_wp: Array | None) -> _Change:
    """Costs with a modification: everything it adds is the same at every end of the still's own cost."""
    kept = 1.0 + cost.maintenance_share
    per_capital = kept * float(capital_recovery_factor(cost.interest, modification.life_years)) - (
        modification.salvage_share * float(sinking_fund_factor(cost.interest, modification.life_years))
    )
    running = np.asarray(modification.maintenance_per_m2_year, np.float64)
    if modification.panel is not None and panel_wp is not None:
        years = float(capital_recovery_factor(cost.interest, modification.panel.life_years))
        running = running + panel_wp * modification.panel.price_per_wp * years * kept
    elif modification.electricity_price_per_kwh is not None:
        running = running + electricity_cost(
            modification.electricity_wh_m2_day, modification.electricity_price_per_kwh, cost.availability
        )
    extra = running + per_capital * modification.extra_capital_per_m2
    without = Band(*(np.asarray(annual_cost(cost, end).total) for end in ENDS))
    added = Band(without.low + extra, without.central + extra, without.high + extra)
    # The dearer the still itself, the less an extra cost weighs.
    even = Band(_ratio(added.high, without.high), _ratio(added.central, without.central),
                _ratio(added.low, without.low))  # fmt: skip
    return _Change(without, added, even, without.central + running, per_capital, 0.0)


def _replaced(cost: StillCost, other: StillCost) -> _Change:
    """Costs with another still in place of the first."""
    without, instead = (Band(*(np.asarray(annual_cost(one, end).total) for end in ENDS)) for one in (cost, other))
    even = Band(_ratio(instead.low, without.high), _ratio(instead.central, without.central),
                _ratio(instead.high, without.low))  # fmt: skip
    year = annual_cost(other)
    fixed = year.electricity + other.maintenance_per_m2_year
    per_capital = (year.total - fixed) / year.capital if year.capital > 0.0 else np.nan
    return _Change(without, instead, even, np.asarray(fixed), per_capital, annual_cost(cost).capital)


def _compared(
    name: str, litres: Array, factor: Band, months: Band, change: _Change, *, panel_wp: Array | None = None
) -> Comparison:
    """Litres, cost per litre, verdicts and room for capital."""
    year = litres.sum(axis=0)
    years = Band(*(month.sum(axis=0) for month in (months.low, months.central, months.high)))
    annual = Band(*(_ratio(total, year) for total in (years.low, years.central, years.high)))
    days = np.asarray(MONTH_DAYS, np.float64).reshape(-1, *[1] * (litres.ndim - 1)) / DAYS_PER_YEAR
    before, after = change.without.central, change.with_change.central
    shape = year.shape

    def room(times: Array) -> Array:
        with np.errstate(divide="ignore", invalid="ignore"):
            capital: Array = (times * before - change.fixed) / change.per_capital
        return np.broadcast_to(capital - change.capital_without, shape)

    return Comparison(
        name=name, monthly_factor=factor, annual_factor=annual, monthly_litres_without=litres,
        annual_litres_without=year, monthly_litres_with=months, annual_litres_with=years,
        annual_cost_without=_spread(change.without, shape), annual_cost_with=_spread(change.with_change, shape),
        monthly_cost_per_litre_without=cost_per_litre(before * days, litres),
        annual_cost_per_litre_without=cost_per_litre(before, year),
        monthly_cost_per_litre_with=_prices(after * days, months),
        annual_cost_per_litre_with=_prices(after, years),
        break_even_factor=_spread(change.break_even_factor, shape),
        monthly_verdict=_verdict(factor, change.break_even_factor, litres + months.central > 0.0),
        annual_verdict=_verdict(annual, change.break_even_factor, year + years.central > 0.0),
        break_even_extra_capital=Band(room(annual.low), room(annual.central), room(annual.high)),
        panel_wp=panel_wp,
    )  # fmt: skip


def _prices(cost: Array, litres: Band) -> Band:
    """Cost of a litre: lowest where the litres are most."""
    return Band(*(cost_per_litre(cost, value) for value in (litres.high, litres.central, litres.low)))


def _verdict(factor: Band, even: Band, water: NDArray[np.bool_]) -> NDArray[np.str_]:
    """Compare two intervals; where one is not known or there is no water at all nothing can be told."""
    surely, surely_not = water & (factor.low > even.high), water & (factor.high < even.low)
    return np.where(surely, PAYS, np.where(surely_not, PAYS_NOT, CANNOT_TELL))


def _ratio(value: Array, over: Array) -> Array:
    with np.errstate(divide="ignore", invalid="ignore"):
        ratio: Array = np.asarray(value) / np.asarray(over)
    return ratio


def _spread(band: Band, shape: tuple[int, ...]) -> Band:
    return Band(*(np.broadcast_to(value, shape) for value in (band.low, band.central, band.high)))


def _months_first(values: ArrayLike) -> Array:
    months = np.asarray(values, np.float64)
    require(months.ndim > 0 and months.shape[0] == len(MONTH_DAYS), "shape of the months", months.shape, "(12, ...)")
    return months
