"""Sun, cover and sky of a row of cells in one step, compiled with numba; imported only when it is asked for.

Every function works through contiguous cells in single precision, so that the processor takes many at a time.
Nothing is looked up in a table: cosines, sines and the cover are polynomials (see `step_optics`). Choices are
written so that NaN passes: ``a if x > a else x`` gives x where x is NaN.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, TypeVar, cast

import numpy as np
from numba import njit

from stillfield.physics.basin import LEAST_COS_ZENITH
from stillfield.physics.irradiance import LEAST_COS_BEAM, LEAST_COS_CLEARNESS
from stillfield.physics.step_optics import angle_curves
from stillfield.physics.vapour import KELVIN

Function = TypeVar("Function", bound=Callable[..., Any])

#: Divisions are not checked, since a check would keep cells from going side by side. A multiplication and the
#: addition after it may be one instruction.
OPTIONS: dict[str, Any] = {"error_model": "numpy", "nogil": True, "fastmath": {"contract"}}


def compiled(function: Function) -> Function:
    """Compile at the first call.

    The cache follows changes of the file of `function` only: after a change here delete the ``*.nbi`` files of
    the other modules that call it.
    """
    made: Any
    try:
        made = njit(cache=True, **OPTIONS)(function)
    except RuntimeError:  # no folder to keep the cache in: compile anew in every process
        made = njit(**OPTIONS)(function)
    return cast("Function", made)


def row(function: Function) -> Function:
    """Compile into those that call it."""
    made: Any = njit(forceinline=True, **OPTIONS)(function)
    return cast("Function", made)


def rows(function: Function) -> Function:
    """Compile as a function of its own."""
    made: Any = njit(**OPTIONS)(function)
    return cast("Function", made)


#: Cells worked at a time: their rows fit the nearest cache.
STRIP = 512
#: Rows of a strip to work in.
(
    PASSED, KEPT, SKY, SUNSET, INDEX, EMISSIVITY, EAST, NORTH, UP, LIT, SHORTEN, BEAM_PASSED, BEAM_KEPT, INTAKE, SHARE,
    CURVE, DIRECT, DIFFUSE,
) = range(18)
WORK_ROWS = 18
#: Rows of the cells, see `step_optics.StepOptics`.
SIN_LAT, COS_LAT, TAN_LAT, SHIFT, COS_SHIFT, SIN_SHIFT = range(6)

_ZERO, _HALF, _ONE, _TWO = (np.float32(number) for number in (0.0, 0.5, 1.0, 2.0))
_PI, _TURN = np.float32(np.pi), np.float32(2.0 * np.pi)
_SHRINK_1, _SHRINK_2, _SHRINK_3 = (np.float32(-1.0 / number) for number in (6.0, 20.0, 42.0))
COSINE, SINE, ARC = (tuple(np.float32(number) for number in curve) for curve in angle_curves())
_DAY_MEGAJOULES = np.float32(86400.0 * 1e-6 / np.pi)
_TINY = np.float32(1e-12)
_LEAST_OUTSIDE = np.float32(1e-6)
_LEAST_CLEARNESS, _LEAST_BEAM = np.float32(LEAST_COS_CLEARNESS), np.float32(LEAST_COS_BEAM)
_LEAST_ZENITH = np.float32(LEAST_COS_ZENITH)
_KELVIN = np.float32(KELVIN)
# Swinbank's 0.0552 T^1.5 over T, to the fourth power: (0.0552² T)².
_SWINBANK = np.float32(0.0552**2)
# Berdahl & Martin's parabola, and the dew point of its lowest point.
_DEW_0, _DEW_1, _DEW_2 = np.float32(0.711), np.float32(0.0056), np.float32(7.3e-5)
_DEW_LOWEST = np.float32(-0.0056 / (2.0 * 7.3e-5))
# FAO-56 eq. 11, and the range of the humidity.
_DEW_A, _DEW_B, _PERCENT, _LEAST_SHARE = (np.float32(number) for number in (17.27, 237.3, 0.01, 0.01))
# Middle of the fourth root of that range, around which the logarithm is a series.
_ROOT = np.float32(0.01**0.125)
_LOG_ROOT = np.float32(np.log(0.01) / 8.0)
_FOUR, _THIRD, _FIFTH, _SEVENTH = (np.float32(number) for number in (4.0, 1.0 / 3.0, 0.2, 1.0 / 7.0))
# Erbs et al. 1982 eq. 1.
_DULL, _CLEAR = np.float32(0.22), np.float32(0.8)
_DULL_SLOPE, _CLEAR_SHARE = np.float32(-0.09), np.float32(0.165)
_ERBS_0, _ERBS_1, _ERBS_2, _ERBS_3, _ERBS_4 = (
    np.float32(number) for number in (0.9511, -0.1604, 4.388, -16.638, 12.336)
)


@row
def sunset_row(places: Any, day: Any, work: Any) -> None:
    """Sunset hour angle [rad] and, in place of the index, irradiation above the atmosphere [MJ m-2] of a day."""
    sin_dec, cos_dec, tan_dec, daily, a = day[0], day[1], day[2], day[4] * _DAY_MEGAJOULES, ARC
    for i in range(work.shape[1]):
        x = -places[TAN_LAT, i] * tan_dec
        size = abs(x)
        size = _ONE if size > _ONE else size
        high = a[4] + size * (a[5] + size * (a[6] + size * a[7]))
        angle = a[0] + size * (a[1] + size * (a[2] + size * (a[3] + size * high)))
        angle = angle * np.sqrt(_ONE - size)
        angle = _PI - angle if x < _ZERO else angle
        chord = np.sqrt((_ONE - size) * (_ONE + size))
        share = angle * places[SIN_LAT, i] * sin_dec + places[COS_LAT, i] * cos_dec * chord
        work[SUNSET, i] = angle
        work[INDEX, i] = daily * (share if share > _ZERO else _ZERO)


@row
def sunlit_row(places: Any, base: Any, half_width: Any, work: Any) -> bool:
    """Middle and half width [rad] of the sunlit part of a step, as NORTH and LIT; False by night."""
    bright = np.int32(0)
    for i in range(work.shape[1]):
        angle, sunset = base + places[SHIFT, i], work[SUNSET, i]
        angle = angle - _TURN if angle > _PI else angle
        angle = angle + _TURN if angle < -_PI else angle
        first, last = angle - half_width, angle + half_width
        first = -sunset if first < -sunset else first
        last = sunset if last > sunset else last
        half = _HALF * (last - first)
        half = _ZERO if half < _ZERO else half
        work[NORTH, i] = _HALF * (last + first)
        work[LIT, i] = half
        bright += np.int32(half > _ZERO)
    return bool(bright > 0)


@row
def sun_row(places: Any, day: Any, half_width: Any, work: Any) -> None:
    """Mean vector to the sun over the sunlit part of a step, as `sun.sun_over_steps` has it."""
    sin_dec, cos_dec, c, s = day[0], day[1], COSINE, SINE
    for i in range(work.shape[1]):
        turn, width = work[NORTH, i], work[LIT, i]
        square, half = turn * turn, width * width
        shrink = _ONE + half * _SHRINK_1 * (_ONE + half * _SHRINK_2 * (_ONE + half * _SHRINK_3))
        shrink = shrink if half > _ZERO else _ZERO
        cosine = c[3] + square * (c[4] + square * (c[5] + square * (c[6] + square * c[7])))
        cosine = shrink * (c[0] + square * (c[1] + square * (c[2] + square * cosine)))
        sine = s[3] + square * (s[4] + square * (s[5] + square * s[6]))
        sine = shrink * turn * (s[0] + square * (s[1] + square * (s[2] + square * sine)))
        steady = sin_dec if half > _ZERO else _ZERO
        sin_lat, cos_lat = places[SIN_LAT, i], places[COS_LAT, i]
        up = sin_lat * steady + cos_lat * cos_dec * cosine
        up = up if up > _ZERO else _ZERO
        north = cos_lat * steady - sin_lat * cos_dec * cosine
        east = -cos_dec * sine
        work[EAST, i], work[NORTH, i], work[UP, i] = east, north, up
        work[SHORTEN, i] = _ONE / np.sqrt(up * up + north * north + east * east + _TINY)
        work[LIT, i] = width / half_width


@row
def panel_row(directions: Any, number: Any, area: Any, flatness: Any, work: Any) -> None:
    """What a panel takes in of a unit beam, added to the sum; its share, and the place on the cover's curve."""
    for i in range(work.shape[1]):
        part = work[UP, i] + work[NORTH, i] * directions[number, 1, i] + work[EAST, i] * directions[number, 0, i]
        part = part if part > _ZERO else _ZERO
        work[CURVE, i] = _TWO * np.sqrt(part * work[SHORTEN, i] * flatness) - _ONE
        work[SHARE, i] = part * area
        work[INTAKE, i] += part * area


@row
def cover_row(curves: Any, part: Any, to: Any, work: Any) -> None:
    """Add what the cover passes (part 0) or absorbs (1) of the share of a panel: a polynomial of degree 10."""
    c = curves[part]
    c0, c1, c2, c3, c4, c5 = c[0], c[1], c[2], c[3], c[4], c[5]
    c6, c7, c8, c9, c10 = c[6], c[7], c[8], c[9], c[10]
    for i in range(work.shape[1]):
        y = work[CURVE, i]
        high = c5 + y * (c6 + y * (c7 + y * (c8 + y * (c9 + y * c10))))
        work[to, i] += work[SHARE, i] * (c0 + y * (c1 + y * (c2 + y * (c3 + y * (c4 + y * high)))))


@row
def beam_row(directions: Any, panels: Any, curves: Any, wall_gain: Any, keep: Any, work: Any) -> None:
    """Gain from a unit beam, transmitted and absorbed in the cover, as `basin.beam_gain` has it."""
    for i in range(work.shape[1]):
        work[BEAM_PASSED, i] = _ZERO
        work[BEAM_KEPT, i] = _ZERO
        work[INTAKE, i] = _ZERO
    for number in range(len(panels)):
        panel_row(directions, number, panels[number, 0], panels[number, 1], work)
        cover_row(curves, 0, BEAM_PASSED, work)
        if keep:
            cover_row(curves, 1, BEAM_KEPT, work)
    for i in range(work.shape[1]):
        up, taken = work[UP, i], work[INTAKE, i]
        taken = taken if taken > up else up
        taken = taken if taken > _TINY else _TINY
        work[BEAM_PASSED, i] *= wall_gain + (_ONE - wall_gain) * up / taken


@row
def erbs_row(ghi: Any, normal: Any, work: Any) -> None:
    """Direct normal and diffuse irradiance from the global one, as `irradiance.split_global` has it."""
    for i in range(work.shape[1]):
        up, whole = work[UP, i], ghi[i]
        outside = normal * work[LIT, i] * (up if up > _LEAST_CLEARNESS else _LEAST_CLEARNESS)
        clear = whole / (outside if outside > _LEAST_OUTSIDE else _LEAST_OUTSIDE)
        clear = _ONE if clear > _ONE else clear
        clear = _ZERO if clear < _ZERO else clear
        share = _ERBS_0 + clear * (_ERBS_1 + clear * (_ERBS_2 + clear * (_ERBS_3 + clear * _ERBS_4)))
        share = _ONE + _DULL_SLOPE * clear if clear <= _DULL else share
        share = _CLEAR_SHARE if clear > _CLEAR else share
        direct = whole - share * whole
        direct = direct if (up >= _LEAST_BEAM) & (whole >= _ZERO) else _ZERO
        work[DIRECT, i] = direct / (up if up > _LEAST_BEAM else _LEAST_BEAM)
        work[DIFFUSE, i] = whole - direct


@row
def given_row(ghi: Any, dni: Any, dhi: Any, mode: Any, work: Any) -> None:
    """The same where the file has dni (mode 1), dhi (2) or both (3), as `irradiance.complete_irradiance` has it.

    Direct irradiance of a cell without sun is not looked at.
    """
    for i in range(work.shape[1]):
        up = work[UP, i]
        high = up if up > _LEAST_BEAM else _LEAST_BEAM
        beam = ghi[i] - dhi[i]
        beam = _ZERO if (beam < _ZERO) | (up < _LEAST_BEAM) else beam / high
        given = dni[i] if up > _ZERO else _ZERO
        rest = ghi[i] - given * up
        rest = _ZERO if rest < _ZERO else rest
        work[DIRECT, i] = beam if mode == 2 else given
        work[DIFFUSE, i] = rest if mode == 1 else dhi[i]


@row
def haydavies_row(normal: Any, work: Any) -> None:
    """Turn direct and diffuse irradiance into the beam with its circumsolar light, and the even rest."""
    for i in range(work.shape[1]):
        up, direct, diffuse = work[UP, i], work[DIRECT, i], work[DIFFUSE, i]
        share = direct / normal
        share = _ONE if share > _ONE else share
        share = _ZERO if share < _ZERO else share
        share = share if up > _ZERO else _ZERO
        around = share * diffuse
        work[DIRECT, i] = direct + around / (up if up > _LEAST_ZENITH else _LEAST_ZENITH)
        work[DIFFUSE, i] = diffuse - around


@row
def dark_row(ghi: Any, dhi: Any, mode: Any, work: Any) -> None:
    """Diffuse irradiance of a step without sun."""
    for i in range(work.shape[1]):
        light = dhi[i] if mode >= 2 else ghi[i]
        work[DIFFUSE, i] = _ZERO if (mode == 1) & (light < _ZERO) else light
        work[DIRECT, i] = _ZERO
        work[BEAM_PASSED, i] = _ZERO
        work[BEAM_KEPT, i] = _ZERO


@row
def gather_row(ghi: Any, ground: Any, sky: Any, beam: Any, to: Any, work: Any) -> None:
    """Gain from the ground, the even sky and the beam together; `beam` and `to` are rows of `work`."""
    for i in range(work.shape[1]):
        even = ground * ghi[i] + sky * work[DIFFUSE, i]
        work[to, i] = even + work[beam, i] * work[DIRECT, i]


@rows
def light_row(ghi: Any, dni: Any, dhi: Any, modes: Any, cells: Any, times: Any, k: Any, work: Any) -> None:
    """All the optics of a step: what is transmitted as PASSED and, if asked for, absorbed in the cover as KEPT."""
    mode, keep = modes
    places, directions, panels, curves = cells
    day, middle = times
    if sunlit_row(places, middle + day[3], k.half_width, work):
        sun_row(places, day, k.half_width, work)
        if mode == 0:
            erbs_row(ghi, day[4], work)
        else:
            given_row(ghi, dni, dhi, mode, work)
        haydavies_row(day[4], work)
        beam_row(directions, panels, curves, k.wall_gain, keep, work)
    else:
        dark_row(ghi, dhi, mode, work)
    gather_row(ghi, k.ground, k.sky, BEAM_PASSED, PASSED, work)
    if keep:
        gather_row(ghi, k.ground_absorbed, k.sky_absorbed, BEAM_KEPT, KEPT, work)


@row
def clear_index_row(ghi: Any, first: Any, last: Any, start: Any, k: Any, work: Any) -> None:
    """Clear-sky index of a day, 0 to 1: irradiation over a cloudless day's; INDEX is H0 before."""
    count = work.shape[1]
    for i in range(count):
        work[SKY, i] = _ZERO
    for step in range(first, last):
        row = ghi[step, start : start + count]
        for i in range(count):
            work[SKY, i] += row[i]
    for i in range(count):
        outside = work[INDEX, i] if work[INDEX, i] > _LEAST_OUTSIDE else _LEAST_OUTSIDE
        index = work[SKY, i] * k.step_megajoules / (outside * k.cloudless)
        index = _ONE if index > _ONE else index
        work[INDEX, i] = _ZERO if index < _ZERO else index


@row
def dew_row(temp_air: Any, humidity: Any, mode: Any, work: Any) -> None:
    """Dew point as it is (mode 1) or from relative humidity (2), as EMISSIVITY."""
    if mode == 1:
        for i in range(work.shape[1]):
            work[EMISSIVITY, i] = humidity[i]
        return
    for i in range(work.shape[1]):
        share = humidity[i] * _PERCENT
        share = _LEAST_SHARE if share < _LEAST_SHARE else share
        share = _ONE if share > _ONE else share
        root = np.sqrt(np.sqrt(share))
        z = (root - _ROOT) / (root + _ROOT)
        square = z * z
        log = _LOG_ROOT + _TWO * z * (_ONE + square * (_THIRD + square * (_FIFTH + square * _SEVENTH)))
        exponent = _FOUR * log + _DEW_A * temp_air[i] / (temp_air[i] + _DEW_B)
        work[EMISSIVITY, i] = _DEW_B * exponent / (_DEW_A - exponent)


@row
def clear_sky_row(temp_air: Any, humidity: Any, mode: Any, places: Any, hour: Any, work: Any) -> None:
    """Emissivity of the clear sky from dew point (mode 1), relative humidity (2) or neither (0)."""
    if mode == 0:
        for i in range(work.shape[1]):
            root = _SWINBANK * (temp_air[i] + _KELVIN)
            clear = root * root
            work[EMISSIVITY, i] = _ONE if clear > _ONE else clear
        return
    dew_row(temp_air, humidity, mode, work)
    cosine, sine = hour[1], hour[2]
    for i in range(work.shape[1]):
        dew = work[EMISSIVITY, i]
        dew = _DEW_LOWEST if dew < _DEW_LOWEST else dew
        daily = cosine * places[COS_SHIFT, i] - sine * places[SIN_SHIFT, i]
        clear = _DEW_0 + dew * (_DEW_1 + dew * _DEW_2) + daily
        work[EMISSIVITY, i] = _ONE if clear > _ONE else clear


@row
def sky_row(temp_air: Any, work: Any) -> None:
    """Sky temperature [degC] from the clear-sky index and the emissivity of the clear sky, as SKY."""
    for i in range(work.shape[1]):
        index = work[INDEX, i]
        cloudy = (_ONE - index) + index * work[EMISSIVITY, i]
        cloudy = _ONE if cloudy > _ONE else cloudy
        sky = (temp_air[i] + _KELVIN) * np.sqrt(np.sqrt(cloudy)) - _KELVIN
        work[SKY, i] = temp_air[i] if sky > temp_air[i] else sky


@rows
def step_rows(fields: Any, modes: Any, cells: Any, times: Any, k: Any, span: Any, work: Any) -> None:
    """Light and sky of a step: PASSED, KEPT and SKY from SUNSET and INDEX of the day.

    `span` is (step of the window, step of the day, first cell).
    """
    ghi, dni, dhi, temp_air, humidity = fields
    light, humid, keep = modes
    day, clock = times
    step, hour, start = span
    end = start + work.shape[1]
    whole, temp = ghi[step, start:end], temp_air[step, start:end]
    beam, diffuse = dni[step, start:end], dhi[step, start:end]  # ghi again where they are not known
    light_row(whole, beam, diffuse, (light, keep), cells, (day, clock[hour, 0]), k, work)
    clear_sky_row(temp, humidity[step, start:end], humid, cells[0], clock[hour], work)
    sky_row(temp, work)


@rows
def begin_strip(tables: Any, start: Any, count: Any) -> Any:
    """Places and panels of a strip of cells, and its rows to work in."""
    places, directions, panels, curves = tables
    here = places[:, start : start + count].copy()
    turned = directions[:, :, start : start + count].copy()
    return (here, turned, panels, curves), np.zeros((WORK_ROWS, count), np.float32)


@rows
def begin_day(ghi: Any, places: Any, day: Any, span: Any, k: Any, work: Any) -> None:
    """Set the sunset and the clear-sky index of a day; `span` is (first step, step after its last, first cell)."""
    first, last, start = span
    sunset_row(places, day, work)
    clear_index_row(ghi, first, last, start, k, work)


@row
def give_rows(work: Any, k: Any, rows: Any, bright: Any) -> None:
    """Write absorbed, cover-absorbed and sky temperature of a step, and add to S of the day."""
    absorbed, cover_absorbed, temp_sky = rows
    for i in range(work.shape[1]):
        passed = work[PASSED, i]
        absorbed[i] = k.absorbing * passed
        bright[i] += k.step_megajoules * passed
    for i in range(work.shape[1]):
        cover_absorbed[i] = work[KEPT, i]
        temp_sky[i] = work[SKY, i]


@compiled
def forcing_of_steps(fields: Any, modes: Any, tables: Any, times: Any, k: Any, out: Any) -> None:
    """Fill absorbed, cover-absorbed [W m-2] and sky temperature [degC] of steps, and S of days [MJ m-2]."""
    days, clock = times
    absorbed, cover_absorbed, temp_sky, daily = out
    steps, count = len(clock), absorbed.shape[1]
    for start in range(0, count, STRIP):
        end = min(start + STRIP, count)
        cells, work = begin_strip(tables, start, end - start)
        for number in range(len(days)):
            day, first = days[number], number * steps
            begin_day(fields[0], cells[0], day, (first, first + steps, start), k, work)
            for hour in range(steps):
                step = first + hour
                step_rows(fields, modes, cells, (day, clock), k, (step, hour, start), work)
                rows = (absorbed[step, start:end], cover_absorbed[step, start:end], temp_sky[step, start:end])
                give_rows(work, k, rows, daily[number, start:end])
