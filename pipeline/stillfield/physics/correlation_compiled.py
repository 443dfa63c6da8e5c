"""The daily correlation compiled with numba; imported only when it is asked for.

The twin in numpy is `stillfield.physics.correlation`. Here some days of all cells are worked on together, as
many as fit the nearest cache, from weather to litres; every loop runs over neighbouring numbers and does one thing,
so that the processor takes sixteen at once.
"""

from __future__ import annotations

from collections.abc import Sequence
from functools import lru_cache
from typing import TYPE_CHECKING, Any

import numpy as np
from numba import njit
from numba.extending import register_jitable
from numpy.typing import NDArray

from stillfield.physics.correlation import (
    FROST_BELOW_DEGC,
    FROST_FLAG,
    LETTERS,
    SCALES,
    VARIANTS,
    DailyCorrelation,
    Day,
)
from stillfield.physics.correlation_polynomials import POLYNOMIALS
from stillfield.physics.day_shape import DayWeather
from stillfield.physics.gain_compiled import gain_tables, look_up
from stillfield.physics.gain_table import GainRows
from stillfield.physics.vapour_compiled import dryness

if TYPE_CHECKING:
    from stillfield.physics.correlation_march import Results

Array = NDArray[np.floating[Any]]

#: Cell-days worked on together where a day has fewer cells.
TILE = 512
_f = np.float32
_ZERO, _HALF, _ONE, _TWENTIETH = _f(0.0), _f(0.5), _f(1.0), _f(1.0 / 20.0)
_INFINITE = _f(np.inf)
_FROST_BELOW, _FROST_FLAG = _f(FROST_BELOW_DEGC), _f(FROST_FLAG)
#: Beyond it the logistic step is 0 or 1 to single precision.
_STEEPEST = _f(16.0)
_SIXTH, _24TH, _120TH, _64TH = _f(1.0 / 6.0), _f(1.0 / 24.0), _f(1.0 / 120.0), _f(1.0 / 64.0)
#: Rows of the predictors, in the order of `LETTERS`, and after them S as it is.
_S, _T, _W, _LENGTH, _E, _M, _NEXT, _K, _D, _H = range(10)
_SUNSHINE = len(LETTERS)
#: Factor and summand by row, for predictors that are a scaled field.
_SCALED = np.array([
    (1.0 / SCALES[letter][1], SCALES[letter][2]) if letter in SCALES else (1.0, 0.0) for letter in LETTERS
], _f)
#: Fields of `Day` that are not in every variant, and their rows.
_MORE = tuple(letter for letter in SCALES if letter not in "STN")
_MORE_ROWS = np.array([LETTERS.index(letter) for letter in _MORE])


@register_jitable
def _scaled(values: Any, row: Any, x: Any, count: Any) -> None:
    factor, summand, out = _SCALED[row, 0], _SCALED[row, 1], x[row]
    for i in range(count):
        out[i] = values[i] * factor + summand


@register_jitable
def _of_day(source: Any, temp: Any, x: Any, first: Any, cells: Any, count: Any) -> None:
    """Predictors of the days whose first number stands at `first`, from those as measured."""
    sunshine, hours, more, there = source
    given, out = sunshine.reshape(-1)[first:], x[_SUNSHINE]
    for i in range(count):
        out[i] = given[i]
    _scaled(hours.reshape(-1)[first:], _LENGTH, x, count)
    for which in there:
        _scaled(more[which].reshape(-1)[first:], _MORE_ROWS[which], x, count)


@register_jitable
def _of_weather(source: Any, temp: Any, x: Any, first: Any, cells: Any, count: Any) -> None:
    """The same, from daily weather and the gain of the design."""
    irradiation, day_of_year, low, high, damp, (ranged, dewy, humid), gain = source
    day = first // cells
    for start in range(0, count, cells):
        look_up(gain, day_of_year[day] - 1, irradiation[day],
                x[_SUNSHINE, start:start + cells], x[_K, start:start + cells], x[_LENGTH, start:start + cells])
        day += 1
    _scaled(x[_K], _K, x, count)
    lowest, highest, moist = low.reshape(-1)[first:], high.reshape(-1)[first:], damp.reshape(-1)[first:]
    out = x[_D]
    if ranged:
        for i in range(count):
            out[i] = highest[i] - lowest[i]
        _scaled(out, _D, x, count)
    out = x[_H]
    if dewy:
        for i in range(count):
            out[i] = temp[i] - moist[i]
    elif humid:
        dryness(temp, moist, out, count)
    if dewy or humid:
        _scaled(out, _H, x, count)


@register_jitable
def _rooted(wind: Any, out: Any, count: Any) -> None:
    for i in range(count):
        half = wind[i] * _HALF
        out[i] = np.sqrt(_ZERO if half < _ZERO else half) - _ONE


@register_jitable
def _remembered(today: Any, state: Any, numbers: Any, out: Any, count: Any) -> None:
    """What the basin remembers less today's, and what it remembers tomorrow."""
    memory, new = numbers[0], numbers[1]
    for i in range(count):
        value, now = today[i], state[i]
        known = abs(value) < _INFINITE
        now = value if np.isnan(now) & known else now
        out[i] = now - value
        state[i] = memory * now + new * value if known else now


@register_jitable
def _risen(temp_next: Any, today: Any, out: Any, count: Any) -> None:
    for i in range(count):
        after = temp_next[i] * _TWENTIETH - _ONE
        out[i] = (after if abs(after) < _INFINITE else today[i]) - today[i]


@register_jitable
def _strange(sunshine: Any, temp: Any, wind: Any, numbers: Any, out: Any, count: Any) -> None:
    """Days outside the range of the fit."""
    s_low, s_high, t_low, t_high, u_low, u_high = (
        numbers[3], numbers[4], numbers[5], numbers[6], numbers[7], numbers[8]
    )
    for i in range(count):
        out[i] = (
            (sunshine[i] < s_low) | (sunshine[i] > s_high) | (temp[i] < t_low) | (temp[i] > t_high)
            | (wind[i] < u_low) | (wind[i] > u_high)
        )


@register_jitable
def _cold(temp: Any, count: Any) -> Any:
    found = 0
    for i in range(count):
        found += temp[i] < _FROST_BELOW
    return found > 0


@register_jitable
def _thawed(temp: Any, score: Any, litres: Any, frost: Any, count: Any) -> None:
    """Take off what stays frozen: the logistic step by an exponential of a 64th, squared six times."""
    for i in range(count):
        steep = (_HALF - score[i]) * _f(4.0)
        steep = _STEEPEST if steep > _STEEPEST else steep
        steep = -_STEEPEST if steep < -_STEEPEST else steep
        y = steep * _64TH
        power = _ONE + y * (_ONE + y * (_HALF + y * (_SIXTH + y * (_24TH + y * _120TH))))
        power = power * power
        power = power * power
        power = power * power
        power = power * power
        power = power * power
        power = power * power
        factor = _ONE / (_ONE + power) if temp[i] < _FROST_BELOW else _ONE
        litres[i] = (_ZERO if litres[i] < _ZERO else litres[i]) * factor
        frost[i] = factor < _FROST_FLAG


@register_jitable
def _held(x: Any, numbers: Any, ceiling: Any, litres: Any, count: Any) -> None:
    """Keep litres between 0 and the energy ceiling."""
    left, sunshine, scaled, less = numbers[2], x[_SUNSHINE], x[_S], x[_E]
    for i in range(count):
        most = ceiling * (sunshine[i] + left * (less[i] + scaled[i]))
        most = _ZERO if most < _ZERO else most
        made = _ZERO if litres[i] < _ZERO else litres[i]
        litres[i] = most if made > most else made


@register_jitable
def _remembering(days: Any, state: Any, numbers: Any, x: Any, cells: Any, count: Any) -> None:
    """Predictors that all variants have in common, once S is known."""
    temp, wind, temp_next = days
    _scaled(x[_SUNSHINE], _S, x, count)
    _scaled(temp, _T, x, count)
    _rooted(wind, x[_W], count)
    for start in range(0, count, cells):
        _remembered(x[_S, start:], state[0], numbers, x[_E, start:], cells)
        _remembered(x[_T, start:], state[1], numbers, x[_M, start:], cells)
    _risen(temp_next, x[_T], x[_NEXT], count)


_frost = register_jitable(POLYNOMIALS["frost"])


@lru_cache(maxsize=2 * len(VARIANTS))
def _walk(variant: str, from_weather: bool) -> Any:
    """Make the walk of a variant, compiled at its first call.

    The compiled code is kept. It follows changes of this module, not of those with the polynomials, the gain and the
    dew point: after a change there, delete the ``*.nbi`` files in ``__pycache__``.
    """
    polynomial = register_jitable(POLYNOMIALS[variant])
    predictors = _of_weather if from_weather else _of_day

    def walk(days: Any, source: Any, state: Any, numbers: Any, model: Any, results: Any, at: Any) -> None:
        """Work through days, some at a time.

        Parameters
        ----------
        days : (ndarray, ndarray, ndarray), each of shape (day, cell)
            Air temperature, wind speed, air temperature of the next day.
        source : tuple
            What `predictors` takes.
        state : ndarray, shape (2, cell)
            What the basin remembers of S and T.
        numbers : ndarray, shape (9,)
            Memory, what it takes up, share of the ceiling, ranges.
        model : (ndarray, ndarray, ndarray)
            Coefficients (set, term), those of the frost, ceilings.
        results : (ndarray, ndarray, ndarray)
            Litres, frost (set, day, cell), outside (day, cell).
        at : int
            Row of the results of the first day.
        """
        coefficients, frost_coefficients, ceilings = model
        litres, frost, outside = results
        number, cells = days[0].shape
        length = max(1, TILE // cells)
        x = np.empty((len(LETTERS) + 1, length * cells), np.float32)
        score = np.empty(length * cells, np.float32)
        for day in range(0, number, length):
            first, count, to = day * cells, min(length, number - day) * cells, (at + day) * cells
            temp, wind, temp_next = (
                days[0].reshape(-1)[first:], days[1].reshape(-1)[first:], days[2].reshape(-1)[first:]
            )
            predictors(source, temp, x, first, cells, count)
            _remembering((temp, wind, temp_next), state, numbers, x, cells, count)
            _strange(x[_SUNSHINE], temp, wind, numbers, outside.reshape(-1)[to:], count)
            cold = _cold(temp, count)
            for one in range(len(ceilings)):
                made = litres[one].reshape(-1)[to:]
                polynomial(x, coefficients[one], made, count)
                if cold:
                    _frost(x, frost_coefficients[one], score, count)
                    _thawed(temp, score, made, frost[one].reshape(-1)[to:], count)
                _held(x, numbers, ceilings[one], made, count)

    # What numba keeps it files by this name, and numbers within it. Under one name two processes could take one number
    # for two walks.
    walk.__qualname__ = f"walk_{variant}_from_{'weather' if from_weather else 'predictors'}"
    try:
        return njit(error_model="numpy", nogil=True, cache=True)(walk)
    except RuntimeError:  # no folder to keep the cache in: compile anew in every process
        return njit(error_model="numpy", nogil=True)(walk)


class CompiledWalk:
    """Correlations in compiled form; see `stillfield.physics.correlation_march`."""

    def __init__(self, correlations: Sequence[DailyCorrelation], gains: GainRows | None) -> None:
        first = correlations[0]
        ranges = [first.ranges.get(name, (-np.inf, np.inf)) for name in "STu"]
        memory = first.memory
        self._walk = _walk(first.variant, gains is not None)
        self._gain = None if gains is None else gain_tables(gains)
        self._numbers = np.array([memory, 1.0 - memory, 40.0 * memory, *np.ravel(ranges)], np.float32)
        self._model = (
            np.array([one.coefficients for one in correlations], np.float32),
            np.array([one.frost for one in correlations], np.float32),
            np.array([one.ceiling for one in correlations], np.float32),
        )

    def __call__(self, days: Day | DayWeather, after: Array, state: Array, results: Results, at: int) -> None:
        """Write the yields of `days` to the results from row `at` on."""
        source = _day_source(days) if isinstance(days, Day) else (*_weather_source(days), self._gain)
        self._walk(
            (days.temp_air, days.wind_speed, after), source, state, self._numbers, self._model,
            (results.litres, results.frost, results.outside), at,
        )


def _day_source(day: Day) -> tuple[Any, ...]:
    more = [getattr(day, SCALES[letter][0]) for letter in _MORE]
    there = np.array([which for which, values in enumerate(more) if values is not None], dtype=np.int64)
    # Where there is nothing, any array of that type stands in its place.
    return day.transmitted, day.day_length, tuple(day.temp_air if one is None else one for one in more), there


def _weather_source(weather: DayWeather) -> tuple[Any, ...]:
    nothing = weather.temp_air
    dewy, humid = weather.temp_dew is not None, weather.relative_humidity is not None
    low, high, damp = (
        nothing if one is None else one
        for one in (weather.temp_air_min, weather.temp_air_max, weather.temp_dew if dewy else weather.relative_humidity)
    )
    kinds = (weather.temp_air_min is not None, dewy, humid)
    return weather.irradiation, weather.day_of_year, low, high, damp, kinds
