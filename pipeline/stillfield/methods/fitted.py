"""The fitted daily correlation as a yield method: for every cell of a region and decades of days."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import ClassVar, Literal

import numpy as np

from stillfield.methods import Block, DailyYield
from stillfield.methods.fit_store import fit_for
from stillfield.physics.correlation import Day
from stillfield.physics.correlation_march import daily_litres
from stillfield.physics.day_shape import day_from_days, day_from_steps
from stillfield.physics.forcing import step_forcing
from stillfield.physics.gain import GainTable
from stillfield.physics.still import Still


@dataclass(frozen=True)
class Fitted:
    """Daily correlation fitted to the hourly balance of the still; see `stillfield.physics.correlation`.

    Attributes
    ----------
    resolution : {'daily', 'hourly'}
        'daily' takes daily weather; 'hourly' takes steps and knows when in the day the sun shone.
    folder : Path, optional
        Where fits of stills that are not shipped are kept.
    """

    resolution: Literal["daily", "hourly"] = "daily"
    folder: Path | None = None

    name: ClassVar[str] = "fitted"
    knows_condition: ClassVar[bool] = True

    @property
    def needs(self) -> tuple[str, ...]:
        """Weather it cannot do without."""
        return ("irradiation" if self.resolution == "daily" else "ghi", "temp_air", "wind_speed")

    @property
    def uses(self) -> tuple[str, ...]:
        """Weather that makes it better."""
        if self.resolution == "daily":
            return ("temp_air_min", "temp_air_max", "temp_dew", "relative_humidity")
        return ("dni", "dhi", "temp_dew", "relative_humidity")

    def daily_yield(self, block: Block, still: Still) -> DailyYield:
        """Yield of every day; days with frost and days outside the range of the fit are flagged."""
        return self.daily_yields(block, still, (still.condition,))[0]

    def daily_yields(self, block: Block, still: Still, conditions: Sequence[str]) -> list[DailyYield]:
        """The same in each of `conditions`; predictors and their products are made once."""
        day = self._day(block, still)
        fits = [fit_for(still.in_condition(condition), self.folder) for condition in conditions]
        found = daily_litres([fit.correlations[day.variant] for fit in fits], day, cyclic=block.cyclic)
        return [DailyYield(litres, frost=frost, outside=outside) for litres, frost, outside in found]

    def variant(self, known: Iterable[str], still: Still) -> str:
        """Name the predictors of the correlation that weather with the variables `known` allows.

        Parameters
        ----------
        known : iterable of str
            Vocabulary names of the weather there is; all of `needs` must be among them.
        still : Still
            The design.

        Returns
        -------
        str
            A key of `stillfield.physics.correlation.VARIANTS`.
        """
        steps = 1 if self.resolution == "daily" else 24
        there = set(known)
        any_day = {name: np.full((steps, 1), 10.0) for name in (*self.needs, *self.uses) if name in there}
        block = Block(any_day, latitude=np.zeros(1), day_of_year=np.array([80]), steps_per_day=steps)
        return self._day(block, still).variant

    def _day(self, block: Block, still: Still) -> Day:
        if self.resolution == "daily":
            rows = GainTable(still).for_latitudes(block.latitude)
            return day_from_days(block.weather, rows, latitude=block.latitude, day_of_year=block.day_of_year)
        forcing, transmitted = step_forcing(
            block.weather, still, latitude=block.latitude, day_of_year=block.day_of_year,
            steps_per_day=block.steps_per_day, clock_to_solar_hours=block.clock_to_solar_hours,
        )
        return day_from_steps(
            block.weather, forcing, transmitted, still, latitude=block.latitude,
            day_of_year=block.day_of_year, steps_per_day=block.steps_per_day,
        )
