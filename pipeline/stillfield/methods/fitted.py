"""The fitted daily correlation as a yield method: for every cell of a region and decades of days."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, fields
from pathlib import Path
from typing import Any, ClassVar, Literal, Protocol

import numpy as np

from stillfield.methods import Block, Cells, DailyYield, March
from stillfield.methods.fit_store import fit_for
from stillfield.physics.compiling import Engine
from stillfield.physics.correlation import Day
from stillfield.physics.correlation_march import CorrelationMarch
from stillfield.physics.day_shape import day_from_days, day_from_steps, variant_of
from stillfield.physics.fitting import StillFit
from stillfield.physics.forcing import step_forcing
from stillfield.physics.gain_table import GainRows, GainTable
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
        predictors: _Predictors
        if self.resolution == "daily":
            predictors = _Days(GainTable(still).for_latitudes(cells.latitude), self.engine)
        else:
            predictors = _Steps(still, cells)
        return _FittedMarch(fits, predictors, len(cells.latitude), self.engine)

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


class _Predictors(Protocol):
    """Makes the predictors of the days that are complete."""

    def advance(self, block: Block, *, last: bool) -> Day:
        """Take the next days."""
        ...


class _FittedMarch:
    """A march that makes predictors and walks the correlations through them."""

    def __init__(self, fits: Sequence[StillFit], predictors: _Predictors, cells: int, engine: Engine) -> None:
        self._fits, self._predictors, self._cells, self._engine = fits, predictors, cells, engine
        self._march: CorrelationMarch | None = None

    def advance(self, block: Block, *, last: bool) -> list[DailyYield]:
        """Give the yields of all days complete and not yet given, one per condition."""
        day = self._predictors.advance(block, last=last)
        if self._march is None:
            correlations = [fit.correlations[day.variant] for fit in self._fits]
            self._march = CorrelationMarch(correlations, self._cells, engine=self._engine)
        return [DailyYield(*found) for found in self._march.advance(day, last=last)]


@dataclass(frozen=True)
class _Days:
    """Predictors of days alone: each day by itself."""

    rows: GainRows
    engine: Engine

    def advance(self, block: Block, *, last: bool) -> Day:
        """Give the days of `block`."""
        return day_from_days(block.weather, self.rows, day_of_year=block.day_of_year, engine=self.engine)


class _Steps:
    """Predictors of days seen through their steps; they are made at the end, of the whole record."""

    def __init__(self, still: Still, cells: Cells) -> None:
        self._still, self._cells = still, cells
        self._blocks: list[Block] = []

    def advance(self, block: Block, *, last: bool) -> Day:
        """Keep the days of `block`, or where `last` give all."""
        self._blocks.append(block)
        if not last:
            return Day(*[np.empty((0, len(self._cells.latitude)))] * len(fields(Day)))
        weather = {name: np.concatenate([one.weather[name] for one in self._blocks]) for name in block.weather}
        place: dict[str, Any] = {
            "latitude": block.latitude, "steps_per_day": block.steps_per_day,
            "day_of_year": np.concatenate([one.day_of_year for one in self._blocks]),
        }
        forcing, transmitted = step_forcing(
            weather, self._still, clock_to_solar_hours=block.clock_to_solar_hours, **place
        )
        return day_from_steps(weather, forcing, transmitted, self._still, **place)
