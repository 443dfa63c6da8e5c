"""The daily correlation compiled with numba; imported only when it is asked for.

The twin in numpy is `stillfield.physics.correlation`. Here some days of all cells are worked on together, as
many as fit the nearest cache; every loop runs over neighbouring numbers and does one thing, so that the
processor takes sixteen at once.
"""

from __future__ import annotations

from collections.abc import Sequence
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
#: Predictors that are a field less or more and divided, and the rows of `LETTERS` they go to.
_SCALED = tuple(SCALES)
_ROWS = np.array([LETTERS.index(letter) for letter in _SCALED])
_FACTORS = np.array([[1.0 / scale, offset] for _, scale, offset in SCALES.values()], _f)
_S, _T, _W, _E, _M, _N = (LETTERS.index(letter) for letter in "STwEmn")



@register_jitable
def _scaled(values: Any, factor: Any, summand: Any, out: Any, count: Any) -> None:
    for i in range(count):
        out[i] = values[i] * factor + summand


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
    left = numbers[2]
    sunshine, less = x[_S], x[_E]
    for i in range(count):
        most = ceiling * (sunshine[i] * _f(20.0) + left * (less[i] + sunshine[i]))
        most = _ZERO if most < _ZERO else most
        made = _ZERO if litres[i] < _ZERO else litres[i]
        litres[i] = most if made > most else made


@register_jitable
def _predicted(fields: Any, known: Any, state: Any, numbers: Any, x: Any, first: Any, cells: Any, count: Any) -> None:
    """Fill the rows of `x` from the days whose first number stands at `first`."""
    scaled, wind, temp_next = fields
    for which in known:
        _scaled(scaled[which].reshape(-1)[first:], _FACTORS[which, 0], _FACTORS[which, 1], x[_ROWS[which]], count)
    _rooted(wind.reshape(-1)[first:], x[_W], count)
    for start in range(0, count, cells):
        _remembered(x[_S, start:], state[0], numbers, x[_E, start:], cells)
        _remembered(x[_T, start:], state[1], numbers, x[_M, start:], cells)
    _risen(temp_next.reshape(-1)[first:], x[_T], x[_N], count)


def _walk_with(polynomial: Any) -> Any:
    """Make the walk of a variant, compiled at its first call."""
    polynomial = register_jitable(polynomial)

    def walk(fields: Any, known: Any, state: Any, numbers: Any, model: Any, results: Any, at: Any) -> None:
        """Work through days, some at a time.

        Parameters
        ----------
        fields : (tuple of ndarray, ndarray, ndarray), each of shape (day, cell)
            Those of `SCALES`, wind speed, temperature of the next day.
        known : ndarray of int
            Which of the first are there.
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
        scaled, wind, temp_next = fields
        days, cells = temp_next.shape
        length = max(1, TILE // cells)
        x = np.empty((len(LETTERS), length * cells), np.float32)
        score = np.empty(length * cells, np.float32)
        for day in range(0, days, length):
            first, count, to = day * cells, min(length, days - day) * cells, (at + day) * cells
            _predicted(fields, known, state, numbers, x, first, cells, count)
            sunshine, temp = scaled[0].reshape(-1)[first:], scaled[1].reshape(-1)[first:]
            _strange(sunshine, temp, wind.reshape(-1)[first:], numbers, outside.reshape(-1)[to:], count)
            cold = _cold(temp, count)
            for one in range(len(ceilings)):
                made = litres[one].reshape(-1)[to:]
                polynomial(x, coefficients[one], made, count)
                if cold:
                    _frost(x, frost_coefficients[one], score, count)
                    _thawed(temp, score, made, frost[one].reshape(-1)[to:], count)
                _held(x, numbers, ceilings[one], made, count)

    try:
        return njit(error_model="numpy", nogil=True, cache=True)(walk)
    except RuntimeError:  # no folder to keep the cache in: compile anew in every process
        return njit(error_model="numpy", nogil=True)(walk)


_frost = register_jitable(POLYNOMIALS["frost"])
#: By variant. The cache follows changes of this module, not of the polynomials: after a change there, delete the
#: ``*.nbi`` files in ``__pycache__``.
WALKS = {variant: _walk_with(POLYNOMIALS[variant]) for variant in VARIANTS}


class CompiledWalk:
    """Correlations in the form that `WALKS` take; see `stillfield.physics.correlation_march`."""

    def __init__(self, correlations: Sequence[DailyCorrelation]) -> None:
        first = correlations[0]
        ranges = [first.ranges.get(name, (-np.inf, np.inf)) for name in "STu"]
        memory = first.memory
        self._walk = WALKS[first.variant]
        self._numbers = np.array([memory, 1.0 - memory, 40.0 * memory, *np.ravel(ranges)], np.float32)
        self._model = (
            np.array([one.coefficients for one in correlations], np.float32),
            np.array([one.frost for one in correlations], np.float32),
            np.array([one.ceiling for one in correlations], np.float32),
        )
        used = set("".join(VARIANTS[first.variant]))
        self._known = np.array([row for row, letter in enumerate(_SCALED) if letter in used | set("STN")])

    def __call__(self, day: Day, after: Array, state: Array, results: Results, at: int) -> None:
        """Write the yields of `day` to the results from row `at` on."""
        values = [getattr(day, field) for field, _, _ in SCALES.values()]
        scaled = tuple(day.temp_air if one is None else one for one in values)
        written_to = (results.litres, results.frost, results.outside)
        self._walk((scaled, day.wind_speed, after), self._known, state, self._numbers, self._model, written_to, at)
