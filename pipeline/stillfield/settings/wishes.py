"""What people need, how sure of it they want to be, and what counts in the order of places, as run files say it."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import BeforeValidator, Field, field_validator, model_validator

from stillfield.decisions.blend import TASTE_LIMITS
from stillfield.decisions.need import FIGURES
from stillfield.settings.base import Group, OneOf, Section
from stillfield.settings.paths import refuse

_MONTHS = 12


class Need(Group):
    """Water that people need from the stills."""

    litres_per_person_day: float | None = Field(
        None, ge=0.1, le=100, description="Water each person needs [L day-1]; that of `figure` without it"
    )
    figure: Annotated[str, OneOf(tuple(FIGURES))] = Field(
        "drinking", description="Published figure to take the litres from"
    )
    season: tuple[Annotated[float, Field(ge=0, le=100)], ...] | None = Field(
        None, strict=False, min_length=_MONTHS, max_length=_MONTHS,
        description="Need of each month, January first, as a multiple of the litres [1]; the same all year without it",
    )
    people_per_household: float = Field(5.0, gt=0, le=100, description="People in a household")
    share: float = Field(1.0, gt=0, le=1, description="Share of the need that the stills are to meet [1]")

    @field_validator("season")
    @classmethod
    def _some_need(cls, season: tuple[float, ...] | None) -> tuple[float, ...] | None:
        if season is not None and not any(season):
            raise refuse("water should be needed in at least one month")
        return season


class Storage(Group):
    """How sure the water is to be, and the tanks that are compared."""

    share_of_days: float = Field(
        0.95, gt=0, le=1, description="Share of days on which the whole need is to be met [1]"
    )
    tank_days: tuple[float, ...] = Field(
        (0.0, 1.0, 2.0, 3.0, 5.0, 7.0, 14.0), strict=False, min_length=1, max_length=20,
        description="Tanks to compare, in days of the mean need [d], from small to large",
    )
    tank_price_per_litre: float | None = Field(
        None, ge=0, description="Price of a tank, in the currency of the still file; it settles which tank is cheapest"
    )
    poor_share: float = Field(
        0.5, gt=0, le=1, description="A day that gives less than this share of the need is poor [1]"
    )

    @model_validator(mode="after")
    def _rising(self) -> Storage:
        if list(self.tank_days) != sorted(set(self.tank_days)) or self.tank_days[0] < 0:
            raise refuse("tank_days should rise from 0 or more")
        return self


class Feed(Group):
    """How brine is drawn off, and how salty a blend may taste."""

    flushing: Literal["continuous", "batch"] = Field("continuous", description="How brine is drawn off")
    taste_limit: Annotated[str, OneOf(tuple(TASTE_LIMITS))] = Field(
        "dissolved-solids-good", description="Taste limit under which raw water could be mixed in, for information"
    )


class FieldFactorKeys(Group):
    """Litres of this very still over the modelled ones, as `stillfield trial` gives it."""

    value: float = Field(gt=0, le=5, description="Factor [1]")
    low: float = Field(gt=0, le=5, description="Its lower bound [1]")
    high: float = Field(gt=0, le=5, description="Its upper bound [1]")
    source: str = Field(min_length=1, max_length=200, description="Trial it comes from")

    @model_validator(mode="after")
    def _in_order(self) -> FieldFactorKeys:
        if not self.low <= self.value <= self.high:
            raise refuse(f"should run from low over value to high (got {self.low:g}, {self.value:g}, {self.high:g})")
        return self


class Weights(Group):
    """How much each criterion counts in the order of the places; only the proportions matter."""

    yield_: float = Field(0.0, ge=0, le=1000, alias="yield", description="Weight of the litres in the sizing month")
    reliability: float = Field(0.0, ge=0, le=1000, description="Weight of the poor year's litres over the usual year's")
    cost: float = Field(0.0, ge=0, le=1000, description="Weight of the cost of a litre; needs prices in the still file")
    people: float = Field(0.0, ge=0, le=1000, description="Weight of the number of people")
    salinity: float = Field(0.0, ge=0, le=1000, description="Weight of the salinity of the water they have")
    distance: float = Field(0.0, ge=0, le=1000, description="Weight of the distance to the feed water")

    @model_validator(mode="after")
    def _some_weight(self) -> Weights:
        if not any(self.by_criterion().values()):
            raise refuse("at least one weight should be above 0")
        return self

    def by_criterion(self) -> dict[str, float]:
        """Weights by the name of the criterion, as the run file has them."""
        return self.model_dump(by_alias=True)


#: Weights of a run file that states none; one that states some gives the others no weight.
USUAL_WEIGHTS = {"yield": 0.3, "people": 0.3, "salinity": 0.2, "distance": 0.2}

#: Columns that places can be screened by.
SCREENED = (
    "population", "feed_salinity_g_kg", "distance_to_feed_km", "elevation_m", "cell_distance_km",
    "sizing_yield_l_m2_day", "area_per_person_m2", "cost_per_litre", "annual_yield_l_m2_year",
)


class ScreenKeys(Group):
    """A hard limit: a place that fails it is listed with the reason, and not ranked."""

    column: Annotated[str, OneOf(SCREENED)] = Field(description="Column that is compared")
    at_least: float | None = Field(None, description="Least value, in the unit of the column")
    at_most: float | None = Field(None, description="Greatest value, in the unit of the column")
    because: str = Field(min_length=1, max_length=120, description="Why a place that fails is left out, in words")

    @model_validator(mode="after")
    def _one_limit(self) -> ScreenKeys:
        if (self.at_least is None) == (self.at_most is None):
            raise refuse("should have at_least or at_most, one of them")
        return self


class UncertaintyKeys(Group):
    """What is varied to tell how sure the order is."""

    draws: int = Field(1000, ge=100, le=20000, description="How often the order is drawn")
    seed: int = Field(0, ge=0, description="Where the draws begin; the same seed gives the same result")
    years: bool = Field(True, description="Vary the years of the record")
    model: bool = Field(True, description="Vary the error of the model from place to place")
    condition: bool = Field(True, description="Vary the condition of the still within its band")
    weights: bool = Field(True, description="Vary the weights around the stated ones")


def _usual_if_empty(value: Any) -> Any:
    return dict(USUAL_WEIGHTS) if value in (None, {}) else value


class Rank(Group):
    """How the places are ordered."""

    weights: Annotated[Weights, BeforeValidator(_usual_if_empty)] = Field(
        default_factory=lambda: Weights(**USUAL_WEIGHTS),
        description="Weight of each criterion; one that is left out counts nothing",
    )
    screens: tuple[ScreenKeys, ...] = Field((), strict=False, max_length=20, description="Hard limits")
    top: int = Field(10, ge=1, le=1000, description="Places to be visited in the first round")
    uncertainty: Section[UncertaintyKeys] = Field(
        default_factory=UncertaintyKeys, description="What is varied to tell how sure the order is"
    )
