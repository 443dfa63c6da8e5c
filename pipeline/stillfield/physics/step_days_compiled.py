"""Predictors of days gathered from their steps in one pass, compiled with numba; see `step_days`."""

from __future__ import annotations

from typing import Any

import numpy as np

from stillfield.physics.day_shape import LEAST_WEIGHT_W_M2, MOST_PEAKED
from stillfield.physics.step_optics_compiled import (
    PASSED,
    SKY,
    STRIP,
    SUNSET,
    begin_day,
    begin_strip,
    compiled,
    row,
    step_rows,
)

#: Rows of the result.
TRANSMITTED, TEMP, WIND, LENGTH, SPAN, WARM, DEPRESSION, WINDY, PEAK = range(9)
#: Sums over a day: of weights, transmitted sunshine, temperature and wind; extremes; weighted sums.
_WEIGHT, _BRIGHT, _TEMP, _WIND, _LOW, _HIGH, _WARM, _SKY, _WINDY = range(9)
_SUMS = 9
#: What is carried: smoothed sunshine, its sum and the sum of its squares since the yield day started.
_SMOOTH, _TOTAL, _SQUARE = range(3)

_ZERO, _ONE, _FAR = np.float32(0.0), np.float32(1.0), np.float32(1e30)
_LEAST, _MOST = np.float32(LEAST_WEIGHT_W_M2), np.float32(MOST_PEAKED)
_HOURS = np.float32(24.0 / np.pi)
_ROOT_HALF = np.float32(np.sqrt(0.5))


@row
def clear_row(sums: Any) -> None:
    """Start the sums of a day."""
    for number in range(_SUMS):
        for i in range(sums.shape[1]):
            sums[number, i] = _ZERO
    for i in range(sums.shape[1]):
        sums[_LOW, i] = _FAR
        sums[_HIGH, i] = -_FAR


@row
def plain_row(temp_air: Any, wind: Any, sums: Any) -> None:
    """Add temperature and wind of a step; NaN stays in the sum, not in the extremes."""
    for i in range(sums.shape[1]):
        temp, low, high = temp_air[i], sums[_LOW, i], sums[_HIGH, i]
        sums[_TEMP, i] += temp
        sums[_WIND, i] += wind[i]
        sums[_LOW, i] = temp if temp < low else low
        sums[_HIGH, i] = temp if temp > high else high


@row
def weighted_row(temp_air: Any, wind: Any, work: Any, absorbing: Any, sums: Any) -> None:
    """Add what counts while the sun shines."""
    for i in range(sums.shape[1]):
        passed = work[PASSED, i]
        weight = absorbing * passed + _LEAST
        sums[_BRIGHT, i] += passed
        sums[_WEIGHT, i] += weight
        sums[_WARM, i] += weight * temp_air[i]
        sums[_SKY, i] += weight * work[SKY, i]
        sums[_WINDY, i] += weight * wind[i]


@row
def smooth_row(absorbed: Any, absorbing: Any, fade: Any, state: Any) -> None:
    """Smooth the sunshine of a step and add it to the yield day; NaN counts as none."""
    for i in range(state.shape[1]):
        light = absorbing * absorbed[i]
        light = light if light == light else _ZERO  # noqa: PLR0124 - NaN is not itself
        smooth = (_ONE - fade) * light + fade * state[_SMOOTH, i]
        state[_SMOOTH, i] = smooth
        state[_TOTAL, i] += smooth
        state[_SQUARE, i] += smooth * smooth


@row
def peak_row(state: Any, steps: Any, peak: Any) -> None:
    """End a yield day: its peakiness, and the sums from nothing again."""
    for i in range(state.shape[1]):
        mean = state[_TOTAL, i] / steps
        mean = mean if mean > _LEAST else _LEAST
        value = state[_SQUARE, i] / steps / (mean * mean)
        peak[i] = _MOST if value > _MOST else value
        state[_TOTAL, i] = _ZERO
        state[_SQUARE, i] = _ZERO


@row
def day_row(work: Any, sums: Any, steps: Any, k: Any, out: Any, number: Any, start: Any) -> None:
    """Write the predictors of a day."""
    for i in range(sums.shape[1]):
        temp, wind, weight = sums[_TEMP, i] / steps, sums[_WIND, i] / steps, sums[_WEIGHT, i]
        warm = sums[_WARM, i] / weight
        c = np.uint32(start + i)
        out[TRANSMITTED, number, c] = sums[_BRIGHT, i] * k.step_megajoules
        out[TEMP, number, c] = temp
        out[WIND, number, c] = wind
        out[LENGTH, number, c] = _HOURS * work[SUNSET, i]
        out[SPAN, number, c] = sums[_HIGH, i] - sums[_LOW, i] + _ZERO * temp
        out[WARM, number, c] = warm - temp
        out[DEPRESSION, number, c] = warm - sums[_SKY, i] / weight
        out[WINDY, number, c] = (np.sqrt(sums[_WINDY, i] / weight) - np.sqrt(wind)) * _ROOT_HALF


@row
def keep_row(work: Any, early: Any) -> None:
    """Keep the sunshine of a step."""
    for i in range(work.shape[1]):
        early[i] = work[PASSED, i]


@row
def night_rows(early: Any, k: Any, peak: Any, state: Any) -> None:
    """Let the first steps of the last day follow it."""
    for hour in range(early.shape[0]):
        smooth_row(early[hour], k.absorbing, peak[0], state)


@compiled
def days_of_steps(fields: Any, modes: Any, tables: Any, times: Any, k: Any, peak: Any, state: Any, out: Any) -> None:
    """Fill the predictors of days, one row on: row 0 is the day before the first, whose peakiness ends here.

    `peak` is (fade of a step, first step of the yield day, whether the last day ends here too).
    """
    days, clock = times
    fade, first, last = peak
    wind_speed, weather = fields[5], fields[:5]
    steps, count = len(clock), wind_speed.shape[1]
    single = np.float32(steps)
    for start in range(0, count, STRIP):
        end = min(start + STRIP, count)
        cells, work = begin_strip(tables, start, end - start)
        sums, carried = np.empty((_SUMS, end - start), np.float32), state[:, start:end].copy()
        early = np.zeros((first, end - start), np.float32)
        for number in range(len(days)):
            day, row_0 = days[number], number * steps
            begin_day(fields[0], cells[0], day, (row_0, row_0 + steps, start), k, work)
            clear_row(sums)
            for hour in range(steps):
                if hour == first:
                    peak_row(carried, single, out[PEAK, number, start:end])
                step = row_0 + hour
                step_rows(weather, (modes[0], modes[1], False), cells, (day, clock), k, (step, hour, start), work)
                temp, wind = fields[3][step, start:end], wind_speed[step, start:end]
                plain_row(temp, wind, sums)
                weighted_row(temp, wind, work, k.absorbing, sums)
                smooth_row(work[PASSED], k.absorbing, fade, carried)
                if hour < first:
                    keep_row(work, early[hour])
            day_row(work, sums, single, k, out, number + 1, start)
        if last:
            night_rows(early, k, peak, carried)
            peak_row(carried, single, out[PEAK, len(days), start:end])
        state[:, start:end] = carried
