"""Money in a still file: what the still costs, and a modification that may or may not pay.

The physics knows nothing of this: the keys become records of their own beside the still.
"""

from __future__ import annotations

from pydantic import Field, model_validator

from stillfield.decisions.cost import Part, StillCost
from stillfield.decisions.panel import USUAL_SYSTEM_EFFICIENCY, PanelSupply
from stillfield.decisions.upgrade import Modification
from stillfield.settings.base import Group
from stillfield.settings.paths import refuse

_MOST_MONEY = 1e12
#: Name of the only part of a still that has one price.
_WHOLE = "still"


class PartKeys(Group):
    """One part of a still with a price and a life of its own."""

    name: str = Field(min_length=1, max_length=60, description="What it is: cover film, liner, insulation, frame, work")
    price_per_m2: float = Field(
        ge=0, le=_MOST_MONEY, description="Price with work and transport, per basin area [money m-2]"
    )
    price_low_per_m2: float | None = Field(None, ge=0, le=_MOST_MONEY, description="Low end of the price [money m-2]")
    price_high_per_m2: float | None = Field(None, ge=0, le=_MOST_MONEY, description="High end of the price [money m-2]")
    life_years: float = Field(gt=0, le=100, description="Years until it is replaced [a]")
    life_low_years: float | None = Field(None, gt=0, le=100, description="Low end of the life [a]")
    life_high_years: float | None = Field(None, gt=0, le=100, description="High end of the life [a]")
    salvage_share: float = Field(0.0, ge=0, le=1, description="Share of the price that comes back at the end [1]")

    @model_validator(mode="after")
    def _ends_in_order(self) -> PartKeys:
        _in_order("price", self.price_low_per_m2, self.price_per_m2, self.price_high_per_m2)
        _in_order("life", self.life_low_years, self.life_years, self.life_high_years)
        return self

    def build(self) -> Part:
        """The part as the decisions take it."""
        return Part(
            self.name, self.price_per_m2, self.life_years, self.salvage_share,
            price_low=self.price_low_per_m2, price_high=self.price_high_per_m2,
            life_low=self.life_low_years, life_high=self.life_high_years,
        )  # fmt: skip


class CostKeys(Group):
    """What a still costs: one price and life, or a list of parts."""

    currency: str = Field("money", min_length=1, max_length=20, description="Label of the money; never converted")
    capital_per_m2: float | None = Field(
        None, ge=0, le=_MOST_MONEY, description="Price of the whole still per basin area, instead of parts [money m-2]"
    )
    capital_low_per_m2: float | None = Field(None, ge=0, le=_MOST_MONEY, description="Low end of it [money m-2]")
    capital_high_per_m2: float | None = Field(None, ge=0, le=_MOST_MONEY, description="High end of it [money m-2]")
    life_years: float | None = Field(None, gt=0, le=100, description="Life of the whole still, instead of parts [a]")
    life_low_years: float | None = Field(None, gt=0, le=100, description="Low end of it [a]")
    life_high_years: float | None = Field(None, gt=0, le=100, description="High end of it [a]")
    salvage_share: float | None = Field(
        None, ge=0, le=1, description="Share of the price of the whole still that comes back at its end [1]"
    )
    parts: tuple[PartKeys, ...] | None = Field(
        None, strict=False, min_length=1, max_length=40, description="Parts with price and life, instead of one price"
    )
    interest: float = Field(ge=0, le=1, description="Interest of a year above inflation; 0.08 is 8 % [a-1]")
    maintenance_share: float = Field(
        0.0, ge=0, le=2, description="Upkeep as a share of the yearly capital recovery [1]; 0.1 to 0.15 is usual"
    )
    maintenance_per_m2_year: float = Field(
        0.0, ge=0, le=_MOST_MONEY, description="Upkeep in money, added to the share [money m-2 a-1]"
    )
    electricity_wh_m2_day: float = Field(0.0, ge=0, le=1e5, description="Electricity on a working day [Wh m-2 d-1]")
    electricity_price_per_kwh: float = Field(0.0, ge=0, le=_MOST_MONEY, description="Its price [money kWh-1]")
    availability: float = Field(1.0, gt=0, le=1, description="Share of the days on which the still works [1]")
    unit_area_m2: float = Field(1.0, gt=0, le=1e5, description="Basin area of one still [m2]")

    @model_validator(mode="after")
    def _one_price_or_parts(self) -> CostKeys:
        whole = {name: getattr(self, name) for name in _WHOLE_KEYS}
        stated = [name for name, value in whole.items() if value is not None]
        if self.parts is not None:
            if stated:
                raise refuse(f"either parts or {', '.join(stated)}, not both")
            return self
        absent = [name for name in ("capital_per_m2", "life_years") if whole[name] is None]
        if absent:
            raise refuse(f"needs parts, or capital_per_m2 and life_years (absent: {', '.join(absent)})")
        _in_order("capital", self.capital_low_per_m2, self.capital_per_m2, self.capital_high_per_m2)
        _in_order("life", self.life_low_years, self.life_years, self.life_high_years)
        return self

    def build(self) -> StillCost:
        """The cost as the decisions take it."""
        shared = self.model_dump(exclude={"parts", *_WHOLE_KEYS})
        return StillCost(parts=tuple(part.build() for part in self.parts) if self.parts else (self._whole(),), **shared)

    def _whole(self) -> Part:
        if self.capital_per_m2 is None or self.life_years is None:
            raise AssertionError("the check above lets no such cost through")
        return Part(
            _WHOLE, self.capital_per_m2, self.life_years, self.salvage_share or 0.0,
            price_low=self.capital_low_per_m2, price_high=self.capital_high_per_m2,
            life_low=self.life_low_years, life_high=self.life_high_years,
        )  # fmt: skip


#: Keys of a cost that speak of the still as a whole.
_WHOLE_KEYS = (
    "capital_per_m2", "capital_low_per_m2", "capital_high_per_m2", "life_years", "life_low_years", "life_high_years",
    "salvage_share",
)  # fmt: skip


class PhotovoltaicKeys(Group):
    """A small photovoltaic panel, sized from the sunshine of the weather data."""

    price_per_wp: float = Field(ge=0, le=_MOST_MONEY, description="Price with mounting and storage [money Wp-1]")
    life_years: float = Field(gt=0, le=100, description="Years until it is replaced [a]")
    system_efficiency: float = Field(
        USUAL_SYSTEM_EFFICIENCY, gt=0, le=1, description="Share of the nominal energy that arrives [1]; 0.6 to 0.8"
    )


class ModificationKeys(Group):
    """A change to the still, compared with the still as it stands in this file."""

    name: str = Field(min_length=1, max_length=60, description="What is changed")
    yield_factor: float = Field(gt=0, le=10, description="Litres with over litres without [1]; best from a trial")
    low: float = Field(gt=0, le=10, description="Low end of the yield factor [1]")
    high: float = Field(gt=0, le=10, description="High end of the yield factor [1]")
    monthly_factors: tuple[float, ...] | None = Field(
        None, strict=False, min_length=12, max_length=12,
        description="Yield factor of each month, January first, where it differs over the year [1]",
    )  # fmt: skip
    extra_capital_per_m2: float = Field(0.0, ge=0, le=_MOST_MONEY, description="Price of the change [money m-2]")
    life_years: float = Field(10.0, gt=0, le=100, description="Years until the change is made anew [a]")
    salvage_share: float = Field(0.0, ge=0, le=1, description="Share of its price that comes back at the end [1]")
    maintenance_per_m2_year: float = Field(
        0.0, ge=0, le=_MOST_MONEY, description="Upkeep beyond maintenance_share of the still [money m-2 a-1]"
    )
    electricity_wh_m2_day: float = Field(0.0, ge=0, le=1e5, description="Electricity on a working day [Wh m-2 d-1]")
    electricity_price_per_kwh: float | None = Field(
        None, ge=0, le=_MOST_MONEY, description="Its price where it comes from a grid [money kWh-1]"
    )
    panel: PhotovoltaicKeys | None = Field(None, description="Panel where it does not come from a grid")

    @model_validator(mode="after")
    def _fits_together(self) -> ModificationKeys:
        _in_order("yield_factor", self.low, self.yield_factor, self.high, names=("low", "high"))
        if self.monthly_factors is not None and min(self.monthly_factors) <= 0:
            raise refuse(f"monthly_factors should be above 0 (got {min(self.monthly_factors):g})")
        supplies = [self.electricity_price_per_kwh is not None, self.panel is not None]
        if all(supplies):
            raise refuse("electricity comes from electricity_price_per_kwh or from a panel, not from both")
        if self.electricity_wh_m2_day > 0 and not any(supplies):
            raise refuse("electricity_wh_m2_day also needs electricity_price_per_kwh or a panel")
        return self

    def build(self) -> Modification:
        """The modification as the decisions take it."""
        panel = PanelSupply(**self.panel.model_dump()) if self.panel is not None else None
        return Modification(**self.model_dump(exclude={"panel"}), panel=panel)


def _in_order(
    what: str, low: float | None, central: float | None, high: float | None, *, names: tuple[str, str] | None = None
) -> None:
    """Refuse ends that do not lie around the central figure."""
    below, above = names or (f"low end of the {what}", f"high end of the {what}")
    if low is not None and central is not None and low > central:
        raise refuse(f"{below} should not be above the {what} (got {low:g} above {central:g})")
    if high is not None and central is not None and high < central:
        raise refuse(f"{above} should not be below the {what} (got {high:g} below {central:g})")
