"""Daily gain of a design in tables over clearness: what a day's irradiation gives, at the cost of a look-up.

A row of a table holds one latitude; it is made once in a process, however many pieces of a region ask for it.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from stillfield.physics.basin import GROUND_ALBEDO
from stillfield.physics.gain import daily_gain, day_moments
from stillfield.physics.irradiance import clearness_index
from stillfield.physics.still import CoverMaterial, Panel, Still
from stillfield.physics.sun import day_length, extraterrestrial_irradiation

Array = NDArray[np.floating[Any]]

#: Days of a table; day 366 is the last row.
DAYS = 366
#: Step of clearness between the columns of a table, and its last column; beyond it the end is carried on.
CLEARNESS_STEP = 0.02
LAST_CLEARNESS = 0.82

#: Latitudes that differ by less share a row of the table: g moves by less than 0.1 %. [deg]
LATITUDE_STEP_DEG = 0.05
#: Rows that are kept: those of a design from pole to pole on a grid of a quarter of a degree.
ROWS_KEPT = 1024

# Values of a working array that still fit the cache of a core.
_CACHE_VALUES = 32_768


@dataclass(frozen=True)
class Sunshine:
    """What the daily correlation needs to know of the sun.

    Attributes
    ----------
    transmitted : ndarray, shape (day, cell)
        S. [MJ m-2 of basin]
    clearness : ndarray, shape (day, cell)
        k_T, 0 to 1. [1]
    day_length : ndarray, shape (day, cell)
        [h]
    """

    transmitted: Array
    clearness: Array
    day_length: Array


@dataclass(frozen=True)
class GainRows:
    """Daily gains of one design for the latitudes of some cells.

    Attributes
    ----------
    table : ndarray of float32, shape (DAYS, row, column)
        g at clearness 0, CLEARNESS_STEP, ... LAST_CLEARNESS. [1]
    row : ndarray of int, shape (cell,)
        Row of each cell.
    outside : ndarray, shape (DAYS, row)
        Extraterrestrial irradiation. [MJ m-2]
    day_length : ndarray, shape (DAYS, row)
        [h]
    """

    table: Array
    row: NDArray[np.intp]
    outside: Array
    day_length: Array

    def sunshine(self, irradiation: Array, day_of_year: NDArray[np.integer[Any]]) -> Sunshine:
        """S, clearness and day length of days at once.

        Parameters
        ----------
        irradiation : ndarray, shape (day, cell)
            Global horizontal irradiation H. [MJ m-2]
        day_of_year : ndarray of int, shape (day,)
            1 to 366.

        Returns
        -------
        Sunshine
            NaN where the irradiation is, but for the day length.
        """
        return Sunshine(
            self.transmitted(irradiation, day_of_year), self.clearness(irradiation, day_of_year),
            self.day_length[np.asarray(day_of_year) - 1][:, self.row],
        )

    def gain(self, day_of_year: NDArray[np.integer[Any]], clearness: Array) -> Array:
        """Look up g = S / H.

        Parameters
        ----------
        day_of_year : ndarray of int, shape (day,)
            1 to 366.
        clearness : ndarray, shape (day, cell)
            k_T. [1]

        Returns
        -------
        ndarray, shape (day, cell)
            NaN where the clearness is. [1]
        """
        days, cells = clearness.shape
        result = np.empty((days, cells))
        step = max(1, _CACHE_VALUES // max(cells, 1))
        for start in range(0, days, step):
            some = slice(start, start + step)
            result[some] = self._look_up(np.asarray(day_of_year[some]) - 1, clearness[some])
        return result

    def clearness(self, irradiation: Array, day_of_year: NDArray[np.integer[Any]]) -> Array:
        """Clearness k_T of days.

        Parameters
        ----------
        irradiation : ndarray, shape (day, cell)
            Global horizontal irradiation H. [MJ m-2]
        day_of_year : ndarray of int, shape (day,)
            1 to 366.

        Returns
        -------
        ndarray, shape (day, cell)
            0 to 1; NaN where the irradiation is. [1]
        """
        return clearness_index(irradiation, self.outside[np.asarray(day_of_year) - 1][:, self.row])

    def transmitted(self, irradiation: Array, day_of_year: NDArray[np.integer[Any]]) -> Array:
        """Daily S from daily irradiation.

        Parameters
        ----------
        irradiation : ndarray, shape (day, cell)
            Global horizontal irradiation H. [MJ m-2]
        day_of_year : ndarray of int, shape (day,)
            1 to 366.

        Returns
        -------
        ndarray, shape (day, cell)
            [MJ m-2 of basin]
        """
        days, cells = irradiation.shape
        result = np.empty((days, cells))
        step = max(1, _CACHE_VALUES // max(cells, 1))
        for start in range(0, days, step):
            some = slice(start, start + step)
            day = np.asarray(day_of_year[some]) - 1
            outside = np.maximum(self.outside[day], 1e-6)[:, self.row]
            np.multiply(self._look_up(day, irradiation[some] / outside), irradiation[some], out=result[some])
        return result

    def _look_up(self, day: NDArray[np.integer[Any]], clearness: Array) -> Array:
        """Interpolate in clearness; `day` counts from 0."""
        rows, columns = self.table.shape[1:]
        position = np.clip(clearness, 0.0, 1.0) * (1.0 / CLEARNESS_STEP)
        known = np.nan_to_num(position)
        cell = np.minimum(known, columns - 2).astype(np.int64)
        position -= cell
        cell += (day[:, None] * rows + self.row) * columns
        flat = self.table.reshape(-1)
        low = flat.take(cell)
        cell += 1
        position *= flat.take(cell) - low
        position += low
        return np.asarray(position)


@dataclass(frozen=True)
class GainTable:
    """Daily gains of one design, made for the latitudes at hand.

    Attributes
    ----------
    still : Still
        The design; its condition does not matter.
    albedo : float
        Reflectance of the ground. [1]
    """

    still: Still
    albedo: float = GROUND_ALBEDO

    def for_latitudes(self, latitude: ArrayLike) -> GainRows:
        """Rows of some cells: about 2 ms and 60 kB for each latitude that is new to the process.

        Parameters
        ----------
        latitude : array_like, shape (cell,)
            [deg north]

        Returns
        -------
        GainRows
            Within 0.1 % of `daily_gain`.

        Examples
        --------
        >>> from stillfield.physics.still import Panel
        >>> rows = GainTable(Still("flat", (Panel(1.0, 0.0),))).for_latitudes([0.0, 30.0])
        >>> rows.transmitted(np.array([[20.0, 20.0]]), np.array([80])).round(1)
        array([[17.1, 17.1]])
        """
        steps = np.round(np.atleast_1d(np.asarray(latitude, dtype=float)) / LATITUDE_STEP_DEG)
        distinct, row = np.unique(steps, return_inverse=True)
        optics = (self.still.panels, self.still.cover, self.still.wall_gain, self.albedo)
        made = [_row(*optics, step) for step in distinct.tolist()]
        table, outside, hours = (np.stack(part, axis=1) for part in zip(*made, strict=True))
        return GainRows(table, row.astype(np.intp), outside, hours)


@lru_cache(maxsize=ROWS_KEPT)
def _row(
    panels: tuple[Panel, ...], cover: CoverMaterial, wall_gain: float, albedo: float, step: float
) -> tuple[Array, Array, Array]:
    """Gain of a design at a latitude, shape (DAYS, column), irradiation outside and day length, shape (DAYS,)."""
    still, place, day = Still("", panels, cover, wall_gain), [step * LATITUDE_STEP_DEG], np.arange(1, DAYS + 1)
    columns = np.linspace(0.0, LAST_CLEARNESS, round(LAST_CLEARNESS / CLEARNESS_STEP) + 1)
    gain = daily_gain(still, day_moments(still, place, day), columns, albedo=albedo).astype(np.float32)
    return gain, extraterrestrial_irradiation(place, day)[:, 0], day_length(place, day)[:, 0]
