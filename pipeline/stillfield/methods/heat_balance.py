"""The hourly heat balance as a yield method: reference, typical-year sites and whole grids."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import ClassVar, Literal

from stillfield.methods import Block, Cells, DailyYield, March
from stillfield.physics.forcing import step_forcing
from stillfield.physics.heat_balance import BalanceMarch
from stillfield.physics.still import Still


@dataclass(frozen=True)
class HeatBalance:
    """Two-node hourly balance of water and cover; see `stillfield.physics.heat_balance`."""

    name: ClassVar[str] = "heat-balance"
    resolution: ClassVar[Literal["daily", "hourly"]] = "hourly"
    needs: ClassVar[tuple[str, ...]] = ("ghi", "temp_air", "wind_speed")
    uses: ClassVar[tuple[str, ...]] = ("dni", "dhi", "temp_dew", "relative_humidity")
    knows_condition: ClassVar[bool] = True

    def begin(self, cells: Cells, still: Still, conditions: Sequence[str]) -> March:
        """Set out with `still` in each of `conditions`; days with missing weather are NaN, days with ice flagged."""
        usual = still.state.absorptance
        marches = [
            BalanceMarch(
                one, len(cells.latitude), steps_per_day=cells.steps_per_day,
                absorbed_share=one.state.absorptance / usual,
            )
            for one in map(still.in_condition, conditions)
        ]
        return _OneSunMarch(still, cells, marches)


@dataclass(frozen=True)
class _OneSunMarch:
    """Several conditions of a still under one sun: optics, wind and sky are worked once."""

    still: Still
    cells: Cells
    marches: Sequence[BalanceMarch]

    def advance(self, block: Block, *, last: bool) -> list[DailyYield]:
        """Give the yields of the days that are complete; the newest waits for its night."""
        forcing, _ = step_forcing(
            block.weather, self.still, latitude=self.cells.latitude, day_of_year=block.day_of_year,
            steps_per_day=self.cells.steps_per_day, clock_to_solar_hours=self.cells.clock_to_solar_hours,
        )
        found = [march.advance(forcing, last=last) for march in self.marches]
        return [DailyYield(one.daily_yield, frost=one.frost) for one in found]
