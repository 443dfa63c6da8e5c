"""Methods for comparison: the constant-efficiency rule and a published regression."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import partial
from typing import ClassVar, Literal

import numpy as np

from stillfield.methods import Block, Cells, DailyYield, March
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

    def begin(self, cells: Cells, still: Still, conditions: Sequence[str]) -> March:
        """Set out; neither cells nor `still` play a part."""
        return _DayByDay(self._litres, len(conditions))

    def _litres(self, block: Block) -> DailyYield:
        return DailyYield(np.asarray(yield_from_efficiency(block.weather["irradiation"], self.efficiency)))


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

    def begin(self, cells: Cells, still: Still, conditions: Sequence[str]) -> March:
        """Set out with the printed line at the mean tilt of the still's cover."""
        return _DayByDay(partial(self._litres, sum(panel.share * panel.tilt_deg for panel in still.panels)),
                         len(conditions))

    def _litres(self, tilt: float, block: Block) -> DailyYield:
        irradiation, temp_air, wind_speed = (block.weather[name] for name in self.needs)
        litres = np.maximum(self.fit.litres(irradiation, temp_air, wind_speed, tilt), 0.0)
        return DailyYield(litres, outside=self.fit.outside(irradiation, temp_air, wind_speed, tilt))


@dataclass(frozen=True)
class _DayByDay:
    """A march without memory: each day by itself, the same in every condition."""

    litres: Callable[[Block], DailyYield]
    conditions: int

    def advance(self, block: Block, *, last: bool) -> list[DailyYield]:
        """Give the yields of the days of `block`."""
        return [self.litres(block)] * self.conditions
