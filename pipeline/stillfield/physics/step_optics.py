"""Optics and sky of steps in single precision: what the compiled rows need to know of a still and its cells.

The exact path (`gain.gain_over_steps`) looks the cover up in a table and works in double precision through many
arrays. Here all of a step is one pass over contiguous cells, which takes the place of every look-up by a
polynomial: the cover in the root of the cosine of incidence, the sun's cosine and sine in the square of the hour
angle, and the sunset's arc cosine. Nothing of it is tabulated over days or latitudes, so lone sites gain as much
as grids, and every clock is followed exactly.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import lru_cache
from typing import Any, NamedTuple

import numpy as np
from numpy.polynomial import Polynomial
from numpy.polynomial.chebyshev import Chebyshev
from numpy.typing import ArrayLike, NDArray

from stillfield.physics.basin import absorbed, diffuse_gain, panel_direction
from stillfield.physics.cover import transmittance_and_absorptance
from stillfield.physics.sky import CLOUDLESS_CLEARNESS
from stillfield.physics.still import CoverMaterial, Still
from stillfield.physics.sun import (
    LONGEST_STEP_HOURS,
    declination,
    equation_of_time,
    normal_irradiance_outside,
)

Array = NDArray[np.floating[Any]]
Rows = NDArray[np.float32]

MJ_PER_WH = 3600.0 / 1e6
#: Degree of the polynomials of the cover; what a panel passes of the beam is then within 5e-5 of the beam.
COVER_DEGREE = 10
#: Points of a fit, enough for it to be as good as the best polynomial within a few per cent.
_FIT_POINTS = 400
#: Amplitude of the daily course of the clear sky's emissivity, Berdahl & Martin 1984. [1]
_DAILY_EMISSIVITY = 0.013


class OpticsNumbers(NamedTuple):
    """Constants of a still and of the steps, in single precision."""

    half_width: Any  # half a step in hour angle [rad]
    wall_gain: Any
    ground: Any  # diffuse gains of `basin.DiffuseGain`
    sky: Any
    ground_absorbed: Any
    sky_absorbed: Any
    absorbing: Any  # absorbed in the basin over transmitted [1]
    cloudless: Any  # clearness of a cloudless day [1]
    step_megajoules: Any  # MJ of a step per W


@dataclass(frozen=True)
class StepOptics:
    """A still on some cells, ready for the compiled rows.

    Attributes
    ----------
    numbers : OpticsNumbers
        Constants of the still and of the steps.
    tables : tuple of ndarray
        Of the cells, shape (6, cell): sine, cosine and tangent of the latitude, clock to solar time [rad], its
        cosine and sine. Of the panels on the cells, shape (panel, 2, cell): components of `basin.panel_direction`.
        Of the panels, shape (panel, 2): share and cosine of the tilt. `cover_curves`, shape (2, power).
    clock : ndarray, shape (step of the day, 3)
        Hour angle of the middle of the step [rad]; daily course of the clear sky's emissivity as the factors of
        the cosine and of the sine of clock to solar time.
    """

    numbers: OpticsNumbers
    tables: tuple[Rows, Rows, Rows, Rows]
    clock: Rows


def step_optics(
    still: Still, latitude: ArrayLike, *, steps_per_day: int, clock_to_solar_hours: ArrayLike = 0.0
) -> StepOptics:
    """Prepare a still on some cells.

    Parameters
    ----------
    still : Still
        Design in its central condition.
    latitude : array_like, shape (cell,)
        [deg north]
    steps_per_day : int
        4 or more.
    clock_to_solar_hours : array_like, shape (cell,) or ()
        Hours to add to the clock to get local mean solar time. [h]

    Returns
    -------
    StepOptics

    Raises
    ------
    ValueError
        With fewer than 4 steps a day.

    Examples
    --------
    >>> from stillfield.physics.still import Panel
    >>> optics = step_optics(Still("flat", (Panel(1.0, 0.0),)), [0.0, 30.0], steps_per_day=24)
    >>> [table.shape for table in optics.tables], optics.clock.shape
    ([(6, 2), (1, 2, 2), (1, 2), (2, 11)], (24, 3))
    """
    if steps_per_day * LONGEST_STEP_HOURS < 24:
        raise ValueError(f"steps_per_day is {steps_per_day}; a step may last {LONGEST_STEP_HOURS} h at most")
    place = np.atleast_1d(np.asarray(latitude, dtype=float))
    phi = np.radians(place)
    hours = np.broadcast_to(np.asarray(clock_to_solar_hours, dtype=float), place.shape)
    shift = (np.remainder(hours + 12.0, 24.0) - 12.0) * (np.pi / 12.0)
    cells = [np.sin(phi), np.cos(phi), np.tan(phi), shift, np.cos(shift), np.sin(shift)]
    directions = [panel_direction(panel, place) for panel in still.panels]
    panels = [(panel.share, np.cos(np.radians(panel.tilt_deg))) for panel in still.panels]
    hour = (np.arange(steps_per_day) + 0.5) * (2.0 * np.pi / steps_per_day)
    clock = [hour - np.pi, _DAILY_EMISSIVITY * np.cos(hour), _DAILY_EMISSIVITY * np.sin(hour)]
    tables = (_rows(cells), _rows(directions), _rows(panels), _rows(cover_curves(still.cover)))
    return StepOptics(_numbers(still, steps_per_day), tables, _rows(np.transpose(clock)))


def _rows(values: ArrayLike) -> Rows:
    return np.ascontiguousarray(values, dtype=np.float32)


def _numbers(still: Still, steps_per_day: int) -> OpticsNumbers:
    """Constants of a run."""
    diffuse = diffuse_gain(still)
    numbers = OpticsNumbers(
        half_width=np.pi / steps_per_day,
        wall_gain=still.wall_gain,
        ground=diffuse.ground,
        sky=diffuse.sky,
        ground_absorbed=diffuse.ground_absorbed,
        sky_absorbed=diffuse.sky_absorbed,
        absorbing=float(absorbed(np.array(1.0), still)),
        cloudless=CLOUDLESS_CLEARNESS,
        step_megajoules=24.0 / steps_per_day * MJ_PER_WH,
    )
    return OpticsNumbers(*map(np.float32, numbers))


@lru_cache(maxsize=64)
def cover_curves(cover: CoverMaterial) -> tuple[tuple[float, ...], tuple[float, ...]]:
    """Transmittance and absorptance of a sheet as polynomials in y = 2 sqrt(cos(theta)) - 1.

    The fit weights the angles by the root of what of a beam they take in: near grazing incidence, where a clear
    sheet changes fast, little light is caught.

    Parameters
    ----------
    cover : CoverMaterial
        The sheet.

    Returns
    -------
    transmittance, absorptance : tuple of float
        Coefficients, lowest power first. cos(theta) times the error is below 5e-5. [1]

    Examples
    --------
    >>> curve, _ = cover_curves(CoverMaterial(1.526, 4.0, 0.004))
    >>> round(float(Polynomial(curve)(1.0)), 3)
    0.902
    """
    y = -np.cos(np.pi * (np.arange(_FIT_POINTS) + 0.5) / _FIT_POINTS)
    root = 0.5 * (1.0 + y)
    parts = transmittance_and_absorptance(root**2, cover)
    fits = [Chebyshev.fit(y, part, COVER_DEGREE, domain=[-1.0, 1.0], w=root) for part in parts]
    first, second = (_powers(fit, COVER_DEGREE) for fit in fits)
    return first, second


def _powers(fit: Chebyshev, degree: int) -> tuple[float, ...]:
    """Coefficients of powers of the variable, `degree` + 1 of them."""
    powers = fit.convert(kind=Polynomial, domain=[-1.0, 1.0], window=[-1.0, 1.0]).coef
    return tuple(map(float, np.pad(powers, (0, degree + 1 - len(powers)))))


def angle_curves() -> tuple[tuple[float, ...], tuple[float, ...], tuple[float, ...]]:
    """Polynomials of the cosine, the sine and the arc cosine, to about 1e-7.

    Returns
    -------
    cosine, sine, arc : tuple of float
        Coefficients, lowest power first, 8, 7 and 8 of them: cos(x) in x² and sin(x) / x in x² from 0 to pi,
        arccos(x) / sqrt(1 - x) in x from 0 to 1.
    """
    def fit(function: Callable[[Array], Array], highest: float, degree: int) -> tuple[float, ...]:
        return _powers(Chebyshev.interpolate(function, degree, domain=[0.0, highest]), degree)

    return (
        fit(lambda square: np.cos(np.sqrt(square)), np.pi**2, 7),
        fit(lambda square: np.sinc(np.sqrt(square) / np.pi), np.pi**2, 6),
        fit(lambda x: np.arccos(x) / np.sqrt(1.0 - x), 1.0, 7),
    )


@lru_cache(maxsize=1)
def _sun_of_year() -> Rows:
    day = np.arange(1, 367)
    delta = declination(day)
    turn = equation_of_time(day) * (np.pi / 12.0)
    rows = [np.sin(delta), np.cos(delta), np.tan(delta), turn, normal_irradiance_outside(day)]
    return _rows(np.transpose(rows))


def sun_of_days(day_of_year: NDArray[np.integer[Any]]) -> Rows:
    """What the compiled rows need of the sun on some days.

    Parameters
    ----------
    day_of_year : ndarray of int, shape (day,)
        1 to 366.

    Returns
    -------
    ndarray of float32, shape (day, 5)
        Sine, cosine and tangent of the declination [1], equation of time [rad], irradiance above the atmosphere
        on a plane facing the sun [W m-2].

    Examples
    --------
    >>> round(float(sun_of_days(np.array([3]))[0, 4]))
    1414
    """
    return _rows(_sun_of_year()[np.asarray(day_of_year) - 1])


def step_fields(weather: Mapping[str, Array]) -> tuple[tuple[Rows, ...], tuple[int, int]]:
    """Weather as the compiled rows take it.

    Parameters
    ----------
    weather : mapping of str to ndarray, shape (time, cell)
        As `forcing.step_forcing` takes it.

    Returns
    -------
    fields : tuple of ndarray of float32
        ghi, dni, dhi, air temperature, dew point or relative humidity; ghi stands where one is not there. Read
        only, so that there is one compiled form.
    modes : (int, int)
        Light: 1 with dni, 2 with dhi, 3 with both, else 0. Humidity: 1 with dew point, 2 with relative humidity,
        else 0.
    """
    light = ("dni" in weather) + 2 * ("dhi" in weather)
    humid, moisture = (1, "temp_dew") if "temp_dew" in weather else (0, "ghi")
    if not humid and "relative_humidity" in weather:
        humid, moisture = 2, "relative_humidity"
    names = ("ghi", "dni" if light & 1 else "ghi", "dhi" if light & 2 else "ghi", "temp_air", moisture)
    return tuple(read_only(weather[name]) for name in names), (light, humid)


def read_only(values: Array) -> Rows:
    """A view in single precision, contiguous, that cannot be written to: one kind, so one compiled form.

    Parameters
    ----------
    values : ndarray
        Copied only where it is of another precision or order.

    Returns
    -------
    ndarray of float32, shape of `values`
    """
    view = _rows(values).view()
    view.flags.writeable = False
    return view


def compiled_forcing(
    weather: Mapping[str, Array], optics: StepOptics, day_of_year: NDArray[np.integer[Any]]
) -> tuple[Rows, Rows, Rows, Rows]:
    """Optics and sky of steps, compiled.

    Parameters
    ----------
    weather : mapping of str to ndarray, shape (day * steps_per_day, cell)
        As `forcing.step_forcing` takes it.
    optics : StepOptics
        The still on the cells.
    day_of_year : ndarray of int, shape (day,)
        1 to 366.

    Returns
    -------
    absorbed, cover_absorbed : ndarray of float32, shape (day * steps_per_day, cell)
        [W m-2 of basin]
    temp_sky : ndarray of float32, same shape
        [degC]
    transmitted : ndarray of float32, shape (day, cell)
        S. [MJ m-2 of basin]
    """
    from stillfield.physics import step_optics_compiled

    fields, (light, humid) = step_fields(weather)
    shape = fields[0].shape
    in_basin, in_cover, sky = (np.empty(shape, np.float32) for _ in range(3))
    out = (in_basin, in_cover, sky, np.zeros((len(day_of_year), shape[1]), np.float32))
    times = (sun_of_days(day_of_year), optics.clock)
    step_optics_compiled.forcing_of_steps(fields, (light, humid, True), optics.tables, times, optics.numbers, out)
    return out
