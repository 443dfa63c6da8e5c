"""The fitted daily correlation as a yield method: for every cell of a region and decades of days."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, fields
from pathlib import Path
from typing import ClassVar, Literal

from stillfield.methods import Block, Cells, DailyYield, March
from stillfield.methods.fit_store import fit_for
from stillfield.physics.compiling import Engine
from stillfield.physics.correlation_march import CorrelationMarch
from stillfield.physics.day_shape import DayWeather, variant_of
from stillfield.physics.fitting import StillFit
from stillfield.physics.gain_table import GainRows, GainTable
from stillfield.physics.step_days import StepDays
from stillfield.physics.still import Still

_TAKEN = {one.name for one in fields(DayWeather)}


@dataclass(frozen=True)
class Fitted:
    """Daily correlation fitted to the hourly balance of the still; see `stillfield.physics.correlation`.

    Attributes
    ----------
    resolution : {'daily', 'hourly'}
        'daily' takes daily weather; 'hourly' takes steps and knows when in the day the sun shone.
    folder : Path, optional
        Where fits of stills that are not shipped are kept.
    engine : {'auto', 'compiled', 'numpy'}
        'auto' is compiled where numba is installed: single precision, many times as fast.
    """

    resolution: Literal["daily", "hourly"] = "daily"
    folder: Path | None = None
    engine: Engine = "auto"

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

    def begin(self, cells: Cells, still: Still, conditions: Sequence[str]) -> March:
        """Set out; days with frost and days outside the range of the fit will be flagged.

        Fits that are neither shipped nor kept are made here. The weather of the first days decides which variant
        of the correlation is walked: all days must have the same variables.
        """
        fits = [fit_for(still.in_condition(condition), self.folder) for condition in conditions]
        if self.resolution == "daily":
            return _DailyMarch(fits, GainTable(still).for_latitudes(cells.latitude), self.engine)
        return _HourlyMarch(fits, still, cells, self.engine)

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
        return variant_of(known) if self.resolution == "daily" else "hourly"


class _DailyMarch:
    """A march from daily weather."""

    def __init__(self, fits: Sequence[StillFit], gains: GainRows, engine: Engine) -> None:
        self._fits, self._gains, self._engine = fits, gains, engine
        self._march: CorrelationMarch | None = None

    def advance(self, block: Block, *, last: bool) -> list[DailyYield]:
        """Give the yields of all days complete and not yet given, one per condition."""
        if self._march is None:
            variant = variant_of(block.weather)
            correlations = [fit.correlations[variant] for fit in self._fits]
            self._march = CorrelationMarch(
                correlations, len(self._gains.row), gains=self._gains, engine=self._engine
            )
        taken = {name: values for name, values in block.weather.items() if name in _TAKEN}
        days = DayWeather(**taken, day_of_year=block.day_of_year)
        return [DailyYield(*found) for found in self._march.advance(days, last=last)]


class _HourlyMarch:
    """A march from steps within the day."""

    def __init__(self, fits: Sequence[StillFit], still: Still, cells: Cells, engine: Engine) -> None:
        self._still, self._cells, self._engine = still, cells, engine
        correlations = [fit.correlations["hourly"] for fit in fits]
        self._march = CorrelationMarch(correlations, len(cells.latitude), engine=engine)
        self._steps: StepDays | None = None

    def advance(self, block: Block, *, last: bool) -> list[DailyYield]:
        """Give the yields of all days complete and not yet given, one per condition."""
        if self._steps is None:
            self._steps = StepDays(
                self._still, self._cells.latitude, steps_per_day=block.steps_per_day,
                clock_to_solar_hours=self._cells.clock_to_solar_hours, engine=self._engine,
            )
        day, _ = self._steps.advance(block.weather, block.day_of_year, last=last)
        return [DailyYield(*found) for found in self._march.advance(day, last=last)]
