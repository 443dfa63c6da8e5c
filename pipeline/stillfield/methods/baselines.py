"""Methods for comparison: the constant-efficiency rule and a published regression."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import ClassVar, Literal

import numpy as np

from stillfield.methods import Block, DailyYield
from stillfield.physics.published_fits import NAFEY_2000, LinearDailyFit
from stillfield.physics.rule import USUAL_EFFICIENCY, yield_from_efficiency
from stillfield.physics.still import Still


@dataclass(frozen=True)
class ConstantEfficiency:
    """The rule Q = E·G·A/2.3: a share of the sunshine, whatever the still and the weather."""

    efficiency: float = USUAL_EFFICIENCY

    name: ClassVar[str] = "rule"
    resolution: ClassVar[Literal["daily", "hourly"]] = "daily"
    needs: ClassVar[tuple[str, ...]] = ("irradiation",)
    uses: ClassVar[tuple[str, ...]] = ()
    knows_condition: ClassVar[bool] = False

    def daily_yield(self, block: Block, still: Still) -> DailyYield:
        """Yield of every day; `still` plays no part."""
        litres = yield_from_efficiency(block.weather["irradiation"], self.efficiency)
        return DailyYield(np.asarray(litres))

    def daily_yields(self, block: Block, still: Still, conditions: Sequence[str]) -> list[DailyYield]:
        """The same in every condition."""
        return [self.daily_yield(block, still)] * len(conditions)


@dataclass(frozen=True)
class PublishedLine:
    """A published regression, floored at zero, with days outside its range flagged."""

    fit: LinearDailyFit = NAFEY_2000

    resolution: ClassVar[Literal["daily", "hourly"]] = "daily"
    needs: ClassVar[tuple[str, ...]] = ("irradiation", "temp_air", "wind_speed")
    uses: ClassVar[tuple[str, ...]] = ()
    knows_condition: ClassVar[bool] = False

    @property
    def name(self) -> str:
        """Name of the record."""
        return self.fit.name

    def daily_yield(self, block: Block, still: Still) -> DailyYield:
        """Yield by the printed line at the mean tilt of the still's cover."""
        tilt = sum(panel.share * panel.tilt_deg for panel in still.panels)
        irradiation, temp_air, wind_speed = (block.weather[name] for name in self.needs)
        litres = np.maximum(self.fit.litres(irradiation, temp_air, wind_speed, tilt), 0.0)
        return DailyYield(litres, outside=self.fit.outside(irradiation, temp_air, wind_speed, tilt))

    def daily_yields(self, block: Block, still: Still, conditions: Sequence[str]) -> list[DailyYield]:
        """The same in every condition."""
        return [self.daily_yield(block, still)] * len(conditions)
