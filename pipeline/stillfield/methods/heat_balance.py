"""The hourly heat balance as a yield method: reference, typical-year sites and, slower, whole grids."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import ClassVar, Literal

from stillfield.methods import Block, DailyYield
from stillfield.physics.forcing import step_forcing
from stillfield.physics.heat_balance import simulate
from stillfield.physics.still import Still


@dataclass(frozen=True)
class HeatBalance:
    """Two-node hourly balance of water and cover; see `stillfield.physics.heat_balance`."""

    name: ClassVar[str] = "heat-balance"
    resolution: ClassVar[Literal["daily", "hourly"]] = "hourly"
    needs: ClassVar[tuple[str, ...]] = ("ghi", "temp_air", "wind_speed")
    uses: ClassVar[tuple[str, ...]] = ("dni", "dhi", "temp_dew", "relative_humidity")
    knows_condition: ClassVar[bool] = True

    def daily_yield(self, block: Block, still: Still) -> DailyYield:
        """Yield of every day; days with missing weather are NaN, days with ice are flagged."""
        return self.daily_yields(block, still, (still.condition,))[0]

    def daily_yields(self, block: Block, still: Still, conditions: Sequence[str]) -> list[DailyYield]:
        """The same in each of `conditions`; optics, wind and sky are worked once."""
        forcing, _ = step_forcing(
            block.weather, still, latitude=block.latitude, day_of_year=block.day_of_year,
            steps_per_day=block.steps_per_day, clock_to_solar_hours=block.clock_to_solar_hours,
        )
        found = []
        for condition in conditions:
            one = still.in_condition(condition)
            share = one.state.absorptance / still.state.absorptance
            driven = replace(forcing, absorbed=forcing.absorbed * forcing.absorbed.dtype.type(share))
            result = simulate(driven, one, steps_per_day=block.steps_per_day, cyclic=block.cyclic)
            found.append(DailyYield(result.daily_yield, frost=result.frost))
        return found
