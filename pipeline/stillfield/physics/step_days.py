"""Days seen through their steps, in windows: predictors of the variant 'hourly' of `correlation`.

The predictors follow from the steps of the day alone, all but the peakiness: it belongs to the yield day, from 06:00
to 06:00, and smooths the sunshine over what the basin remembers. So a day is given when the first steps of the next
are known. The last day of a record has no next: its own first steps follow it once more. The sunshine before the
first day is taken as none, which the first day with sun makes good.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from stillfield.physics.compiling import Engine, is_compiled
from stillfield.physics.correlation import Day
from stillfield.physics.day_shape import first_step, peak_of_days, plain_day, smoothed, smoothing_fade
from stillfield.physics.forcing import step_forcing
from stillfield.physics.step_optics import StepOptics, read_only, step_fields, step_optics, sun_of_days
from stillfield.physics.still import Still

Array = NDArray[np.floating[Any]]

#: Predictors in the order in which both engines give them.
PREDICTORS = (
    "transmitted", "temp_air", "wind_speed", "day_length", "temp_range", "warm_hours", "sky_depression", "windy_hours",
    "peakiness",
)


class StepDays:
    """Predictors of the days of some cells, walked through time.

    Parameters
    ----------
    still : Still
        Design in its central condition.
    latitude : ndarray, shape (cell,)
        [deg north]
    steps_per_day : int
        4 or more.
    clock_to_solar_hours : ndarray, shape (cell,) or ()
        Hours to add to the clock to get local mean solar time. [h]
    engine : {'auto', 'compiled', 'numpy'}
        'compiled' works in single precision on `step_optics`, 'numpy' in the precision of the weather on the exact
        path of `forcing`; 'auto' compiles where numba is installed.

    Raises
    ------
    MethodError
        If the engine is not there.
    ValueError
        With fewer than 4 steps a day.

    Examples
    --------
    >>> from stillfield.physics.still import Panel
    >>> still = Still("plain", (Panel(1.0, 15.0),))
    >>> hour = np.arange(48)[:, None] % 24 + 0.5
    >>> sun = 800.0 * np.maximum(np.sin((hour - 6.0) / 12.0 * np.pi), 0.0)
    >>> weather = {"ghi": sun, "temp_air": 0.0 * sun + 25.0, "wind_speed": 0.0 * sun + 2.0}
    >>> days = StepDays(still, np.array([10.0]), steps_per_day=24, engine="numpy")
    >>> day, given = days.advance(weather, np.array([80, 81]), last=False)
    >>> given, day.transmitted.shape
    (1, (1, 1))
    >>> day, given = days.advance(weather, np.array([82, 83]), last=True)
    >>> given, day.peakiness.round(1).ravel().tolist()
    (3, [2.1, 2.1, 2.1])
    """

    def __init__(
        self, still: Still, latitude: Array, *, steps_per_day: int, clock_to_solar_hours: Array | float = 0.0,
        engine: Engine = "auto",
    ) -> None:
        place = np.atleast_1d(np.asarray(latitude, dtype=float))
        fade, first = smoothing_fade(still, steps_per_day), first_step(steps_per_day)
        shift = np.broadcast_to(np.asarray(clock_to_solar_hours, dtype=float), place.shape)
        self._walk: _CompiledWalk | _PlainWalk
        if is_compiled(engine, "the predictors of days"):
            optics = step_optics(still, place, steps_per_day=steps_per_day, clock_to_solar_hours=shift)
            self._walk = _CompiledWalk(optics, fade, first)
        else:
            self._walk = _PlainWalk(still, place, shift, steps_per_day=steps_per_day, fade=fade, first=first)
        self._pending: Array | None = None

    def advance(
        self, weather: Mapping[str, Array], day_of_year: NDArray[np.integer[Any]], *, last: bool
    ) -> tuple[Day, int]:
        """Take the next days and give the predictors of all that are complete and not yet given.

        How the days are cut into calls changes no digit.

        Parameters
        ----------
        weather : mapping of str to ndarray, shape (day * steps_per_day, cell)
            ``ghi`` [W m-2], ``temp_air`` [degC] and ``wind_speed`` [m s-1]; where known ``dni``, ``dhi`` [W m-2], and
            ``temp_dew`` [degC] or ``relative_humidity`` [%]. The same variables in every call.
        day_of_year : ndarray of int, shape (day,)
            1 to 366; one day or more.
        last : bool
            Whether the record ends with these days.

        Returns
        -------
        day : Day
            Arrays of shape (days given, cell). A step without sunshine makes S, q, k and v of the day NaN, one without
            temperature or wind the predictors it enters; for the peakiness missing sunshine is none.
        days : int
            How many are given: the days taken, less the newest unless `last`, and the one kept back before.
        """
        rows = self._walk.advance(weather, np.asarray(day_of_year), last=last)
        start = 1
        if self._pending is not None:
            rows[:-1, 0] = self._pending
            start = 0
        end = rows.shape[1] if last else rows.shape[1] - 1
        self._pending = None if last else rows[:-1, -1].copy()
        given = rows[:, start:end]
        return Day(**dict(zip(PREDICTORS, given, strict=True))), given.shape[1]


class _CompiledWalk:
    """Predictors in single precision, in one compiled pass."""

    def __init__(self, optics: StepOptics, fade: float, first: int) -> None:
        self._optics, self._fade, self._first = optics, np.float32(fade), first
        self._state = np.zeros((3, optics.tables[0].shape[1]), np.float32)

    def advance(self, weather: Mapping[str, Array], day_of_year: NDArray[np.integer[Any]], *, last: bool) -> Array:
        """Predictors of one row more than there are days; in the first stands the peakiness of the day before."""
        from stillfield.physics import step_days_compiled

        fields, modes = step_fields(weather)
        out = np.empty((len(PREDICTORS), len(day_of_year) + 1, fields[0].shape[1]), np.float32)
        step_days_compiled.days_of_steps(
            (*fields, read_only(weather["wind_speed"])), modes, self._optics.tables,
            (sun_of_days(day_of_year), self._optics.clock), self._optics.numbers, (self._fade, self._first, last),
            self._state, out,
        )
        return out


class _PlainWalk:
    """The same in numpy, on the exact path."""

    def __init__(
        self, still: Still, latitude: Array, shift: Array, *, steps_per_day: int, fade: float, first: int
    ) -> None:
        self._still, self._latitude, self._shift = still, latitude, shift
        self._steps, self._fade, self._first = steps_per_day, fade, first
        # Smoothed sunshine of the yield day that has begun.
        self._begun: Array = np.zeros((steps_per_day - first, len(latitude)))

    def advance(self, weather: Mapping[str, Array], day_of_year: NDArray[np.integer[Any]], *, last: bool) -> Array:
        """Predictors of one row more than there are days; in the first stands the peakiness of the day before."""
        forcing, transmitted = step_forcing(
            weather, self._still, latitude=self._latitude, day_of_year=day_of_year, steps_per_day=self._steps,
            clock_to_solar_hours=self._shift, engine="numpy",
        )
        day = plain_day(
            weather, forcing, transmitted, latitude=self._latitude, day_of_year=day_of_year, steps_per_day=self._steps
        )
        light = forcing.absorbed
        if last:
            newest = light[len(light) - self._steps :]
            light = np.concatenate([light, newest[: self._first]])
        smooth = np.concatenate([self._begun, smoothed(light, self._fade, self._begun[-1])])
        whole = len(smooth) // self._steps
        peaks = peak_of_days(smooth[: whole * self._steps].reshape(whole, self._steps, -1))
        self._begun = smooth[whole * self._steps :]
        rows = np.full((len(PREDICTORS), len(day_of_year) + 1, len(self._latitude)), np.nan, light.dtype)
        for number, name in enumerate(PREDICTORS[:-1]):
            rows[number, 1:] = getattr(day, name)
        rows[-1, : len(peaks)] = peaks
        return rows
