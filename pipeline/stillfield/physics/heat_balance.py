"""The hourly heat balance of a basin still: weather at the cover in, litres of every day out.

Per m² of basin, with the water T_w and the cover T_g (in steady state: it settles within minutes):

    cover:  absorbed_g + q_c + q_e + q_r = R_A [h_w (T_g - T_a) + ε_g σ (T_g⁴ - T_sky⁴)]
    water:  C dT_w/dt = absorbed_w - q_c - q_e - q_r - U_b (T_w - T_a)
    yield:  dM/dt = (1 - leak) q_e / L(T_w)

Sources: Dunkle 1961 (internal transfer, see `convection`), Watmuff et al. 1977 (wind, see `wind`), textbook
radiation between parallel planes. The time scheme is that of `balance_kernel`.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from importlib.util import find_spec
from math import ceil
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from stillfield.errors import MethodError
from stillfield.physics import balance_numpy
from stillfield.physics.balance_kernel import Cell, Numbers
from stillfield.physics.balance_schedule import blank_gaps, schedule
from stillfield.physics.brine import (
    FUSION_HEAT_J_KG,
    REFERENCE_TEMP_C,
    basin_heat_capacity,
    checked_salinity,
    density,
    freezing_point,
    water_activity,
)
from stillfield.physics.convection import BUOYANCY_FLOOR, BUOYANCY_PRESSURE_RATIO, MEAN_RANGE_C, transfer
from stillfield.physics.moist_air import STANDARD_PRESSURE_PA
from stillfield.physics.still import Still
from stillfield.physics.vapour import KELVIN, LATENT_RECIPROCAL, ROOT_POLYNOMIAL, ROOT_RANGE_C, Field
from stillfield.physics.wind import WIND_BASE, WIND_SLOPE, wind_coefficient

Array = NDArray[np.floating[Any]]
Engine = Literal["auto", "compiled", "numpy"]

STEFAN_BOLTZMANN = 5.670374419e-8  # W m-2 K-4
#: Heat transfer upwards from the water by which time constants are judged, the lowest of a mild night.
#: [W m-2 K-1] Common practice, no source.
SLOW_TRANSFER_W_M2_K = 8.0
#: Sub-steps in a day: two an hour, each with two Newton steps, keep a day's yield within 0.1 %.
SUBSTEPS_PER_DAY = 48
#: First guess of the cube root of X as a cubic of X^(1/4), relative least squares for X from 0.01 to 310 K.
CUBE_ROOT_GUESS = (-0.06970108, 0.79608679, 0.29604419, -0.02378867)
#: Rows of the array behind `Record`.
CHANNELS = ("water_mean", "cover", "convected", "evaporated", "radiated", "emitted", "stored", "water", "ice")


@dataclass(frozen=True)
class Forcing:
    """Weather and sunshine of every step and cell, means over the step.

    All arrays have shape (time, cell) with whole days, or broadcast to it. The run is computed in the
    precision of `absorbed`: single precision changes a day's yield by less than 1e-4 and halves the time.

    Attributes
    ----------
    absorbed : ndarray
        Sunshine absorbed in water and liner, per basin area. [W m-2]
    cover_absorbed : ndarray
        Sunshine absorbed in the cover, per basin area. [W m-2]
    temp_air : ndarray
        [degC]
    wind_speed : ndarray
        At 2 m. [m s-1]
    temp_sky : ndarray
        Radiative sky temperature. [degC]
    """

    absorbed: Array
    cover_absorbed: Array
    temp_air: Array
    wind_speed: Array
    temp_sky: Array


@dataclass(frozen=True)
class Record:
    """What went on in every step; means over the step unless it says otherwise. All (time, cell).

    Attributes
    ----------
    distillate : ndarray
        Of the step, after the leak. [kg m-2]
    water, ice : ndarray
        Water temperature [degC] and heat of fusion given off [J m-2], both at the end of the step.
    cover : ndarray
        Cover temperature. [degC]
    convected, evaporated, radiated : ndarray
        Heat from water to cover, per basin area. [W m-2]
    base_loss, cover_loss : ndarray
        Heat lost through base and sides, and from the cover to air and sky. [W m-2]
    stored : ndarray
        Heat taken up by water, liner and ice. [W m-2]
    residual : ndarray
        Sunshine absorbed less losses less heat stored: what the ledger does not explain. [W m-2]
    """

    distillate: Array
    water: Array
    ice: Array
    cover: Array
    convected: Array
    evaporated: Array
    radiated: Array
    base_loss: Array
    cover_loss: Array
    stored: Array
    residual: Array


@dataclass(frozen=True)
class BalanceResult:
    """Litres of every day and cell.

    Attributes
    ----------
    daily_yield : ndarray, shape (day, cell)
        Distillate per basin area, after the leak, from the start of the yield day to that of the next; NaN
        where weather is missing. [kg m-2]
    frost : ndarray of bool, shape (day, cell)
        Yield days on which there was ice in the basin at some time.
    record : Record or None
        Where it was asked for.
    """

    daily_yield: Array
    frost: NDArray[np.bool_]
    record: Record | None = None


def simulate(  # noqa: PLR0913
    forcing: Forcing,
    still: Still,
    *,
    steps_per_day: int = 24,
    salinity: Field | None = None,
    pressure: Field = STANDARD_PRESSURE_PA,
    spinup_days: int | None = None,
    cyclic: bool = False,
    day_start_hour: float = 6.0,
    substeps: int | None = None,
    engine: Engine = "auto",
    record: bool = False,
) -> BalanceResult:
    """Run the hourly heat balance of `still` in its central condition.

    The litres between `day_start_hour` of a day and of the next belong to the day: night output belongs to
    the day that heated the water. What runs before `day_start_hour` of the first day is not counted (of a
    cyclic year it is the night after the last day); the night after the last day repeats that day's own
    early hours. Start-up repeats the first day, or of a cyclic year its last days.

    A yield day with missing weather is NaN. After a gap the water starts at air temperature, and so many
    further days are NaN as a deep basin remembers (none up to some 5 cm, 2 for 20 cm).

    Parameters
    ----------
    forcing : Forcing
        Weather and sunshine.
    still : Still
        Design and condition.
    steps_per_day : int
        Steps in a day.
    salinity : float or ndarray of shape (cell,), optional
        Salinity of the brine in the basin; that of the design if not given. [g kg-1]
    pressure : float or ndarray of shape (cell,)
        Air pressure. [Pa]
    spinup_days : int, optional
        Days of start-up; from the time constant if not given.
    cyclic : bool
        Whether the last day comes before the first.
    day_start_hour : float
        Clock hour at which the yield day starts. [h]
    substeps : int, optional
        Sub-steps in a step; two an hour if not given.
    engine : {'auto', 'compiled', 'numpy'}
        'auto' compiles where numba is installed. Both give the same litres.
    record : bool
        Whether to keep what went on in every step.

    Returns
    -------
    BalanceResult

    Raises
    ------
    MethodError
        For steps that are not whole days, a salinity out of range, or an engine that is not there.

    Examples
    --------
    >>> from stillfield.physics.still import Panel
    >>> hour = np.arange(24)[:, None] + 0.5
    >>> sun = 800.0 * np.maximum(np.sin((hour - 6.0) / 12.0 * np.pi), 0.0)
    >>> weather = Forcing(0.7 * sun, 0.05 * sun, *(np.full_like(sun, x) for x in (25.0, 2.0, 12.0)))
    >>> day = simulate(weather, Still("plain", (Panel(1.0, 15.0),)), cyclic=True, engine="numpy")
    >>> day.daily_yield.round(1).tolist()
    [[3.5]]
    """
    fields, shape = _checked(forcing, steps_per_day)
    dtype = fields[0].dtype
    per_step = substeps or max(1, ceil(SUBSTEPS_PER_DAY / steps_per_day))
    seconds = 86400.0 / steps_per_day / per_step
    brine = checked_salinity(still.basin_salinity_g_kg if salinity is None else salinity)
    air_pressure = np.asarray(pressure, dtype=np.float64)
    k = _numbers(still, float(air_pressure.mean()), seconds)
    cells = _cells(still, brine, air_pressure, seconds, shape[1])
    days_back = spinup_days if spinup_days is not None else 2 + ceil(5.0 * _time_constant_days(still))
    plan = schedule(shape[0], steps_per_day, days_back, cyclic=cyclic, day_start_hour=day_start_hour)
    rows, row_count = plan.step_rows if record else plan.day_rows
    daily = np.zeros((row_count, shape[1]), dtype)
    frozen = np.zeros(daily.shape, np.bool_)
    kept = np.zeros((len(CHANNELS), *daily.shape), dtype) if record else None
    _march(engine)(
        fields,
        cells.astype(dtype),
        _in_precision(k, dtype),
        (plan.order, rows, per_step),
        daily,
        frozen,
        kept,
    )
    log = None
    if kept is not None:
        kept[:7] /= dtype.type(per_step)
        log = _record(kept[:, : shape[0]], daily[: shape[0]], fields, still, cells, seconds)
        daily = plan.by_day(daily).sum(axis=1)
        frozen = np.asarray(plan.by_day(frozen).any(axis=1))
    memory = max(ceil(3.0 * _time_constant_days(still)) - 1, 0)
    gap_before = np.isnan(np.sum([field[: plan.skipped].sum(axis=0) for field in fields], axis=0))
    blank_gaps(daily, frozen, gap_before, memory_days=memory, cyclic=cyclic)
    return BalanceResult(daily, frozen, log)


def _checked(forcing: Forcing, steps_per_day: int) -> tuple[tuple[Array, ...], tuple[int, int]]:
    """Fields of the forcing as contiguous arrays of one shape and precision, and the shape."""
    names = ("absorbed", "cover_absorbed", "temp_air", "wind_speed", "temp_sky")
    given = [np.asarray(getattr(forcing, name)) for name in names]
    dtype = np.dtype(np.float32 if given[0].dtype == np.float32 else np.float64)
    shape = np.broadcast_shapes(*(field.shape for field in given))
    if len(shape) != 2 or shape[0] < steps_per_day or shape[0] % steps_per_day:
        raise MethodError(
            "weather for the heat balance is not made of whole days",
            got=f"shape {shape} with {steps_per_day} steps a day",
            wanted="(days * steps_per_day, cell)",
            cure="Cut the series into whole local days first.",
        )
    fields = []
    for field in given:
        view = np.ascontiguousarray(np.broadcast_to(field, shape), dtype=dtype).view()
        view.flags.writeable = False  # of one kind, so that there is one compiled form
        fields.append(view)
    return tuple(fields), (shape[0], shape[1])


def _time_constant_days(still: Still) -> float:
    """Days in which the water of `still` loses all but 1/e of a difference, at the slowest."""
    capacity = float(basin_heat_capacity(still.brine_depth_m, 0.0, still.liner_heat_capacity_j_m2_k))
    return capacity / (SLOW_TRANSFER_W_M2_K + still.state.loss_w_m2_k) / 86400.0


def _cells(still: Still, salinity: Array, pressure: Array, seconds: float, count: int) -> NDArray[np.float64]:
    """Fields of `Cell` as rows of one array; k_h goes as p^(2/3) and k_e as 1/p from the mean pressure."""
    capacity = basin_heat_capacity(still.brine_depth_m, salinity, still.liner_heat_capacity_j_m2_k)
    water = density(REFERENCE_TEMP_C, salinity) * still.brine_depth_m * (1.0 - salinity / 1000.0)
    ratio = pressure / pressure.mean()
    cell = Cell(
        activity=water_activity(salinity),
        freezing=freezing_point(salinity),
        inertia=2.0 * capacity / seconds,
        ice_limit=FUSION_HEAT_J_KG * water / capacity,
        convection=ratio ** (2.0 / 3.0),
        evaporation=1.0 / ratio,
        buoyancy=BUOYANCY_PRESSURE_RATIO * pressure,
        pressure=pressure,
    )
    return np.ascontiguousarray([np.broadcast_to(row, (count,)) for row in cell], dtype=np.float64)


def _numbers(still: Still, pressure: float, seconds: float) -> Numbers:
    """Constants of a run."""
    relation = transfer(still.heat_transfer, pressure)
    area_ratio = still.cover_area_ratio
    per_watt = seconds * (1.0 - still.state.leak)
    inside = 1.0 / (1.0 / still.water_emittance + 1.0 / still.cover.emittance - 1.0)
    return Numbers(
        zero=0.0,
        half=0.5,
        one=1.0,
        third=1.0 / 3.0,
        four=4.0,
        eight=8.0,
        twelfth=1.0 / 12.0,
        kelvin=KELVIN,
        vapour_low=ROOT_RANGE_C[0],
        vapour_high=ROOT_RANGE_C[1],
        root=ROOT_POLYNOMIAL,
        guess=CUBE_ROOT_GUESS,
        buoyancy_floor=BUOYANCY_FLOOR,
        mean_low=MEAN_RANGE_C[0],
        mean_high=MEAN_RANGE_C[1],
        convection=relation.convection,
        evaporation=relation.evaporation,
        stefan=float(relation.stefan),
        radiation_inside=inside * STEFAN_BOLTZMANN,
        radiation_outside=area_ratio * still.cover.emittance * STEFAN_BOLTZMANN,
        area_ratio=area_ratio,
        wind_base=WIND_BASE,
        wind_slope=WIND_SLOPE,
        loss=still.state.loss_w_m2_k,
        distilling=tuple(per_watt * number for number in LATENT_RECIPROCAL),
    )


def _in_precision(numbers: Numbers, dtype: np.dtype[Any]) -> Numbers:
    """Constants as scalars of `dtype`."""
    return Numbers(
        *(tuple(map(dtype.type, part)) if isinstance(part, tuple) else dtype.type(part) for part in numbers)
    )


def _march(engine: Engine) -> Callable[..., None]:
    """Return the march of an engine; numba is imported here and nowhere else."""
    there = find_spec("numba") is not None
    if engine == "numpy" or (engine == "auto" and not there):
        return balance_numpy.march
    if not there:
        raise MethodError(
            "the compiled heat balance needs numba, which is not installed",
            got=f"engine {engine!r}",
            cure="Install stillfield[speed], or use the engine 'numpy' or 'auto'.",
        )
    from stillfield.physics import balance_compiled

    march: Callable[..., None] = balance_compiled.march
    return march


def _record(
    kept: Array, distillate: Array, fields: tuple[Array, ...], still: Still, cells: Array, seconds: float
) -> Record:
    """Fluxes and residual of every step from the sums over sub-steps."""
    absorbed, cover_absorbed, temp_air, wind, temp_sky = fields
    log = dict(zip(CHANNELS, kept, strict=True))
    area = still.cover_area_ratio
    sky = area * still.cover.emittance * STEFAN_BOLTZMANN * (temp_sky + KELVIN) ** 4
    cover_loss = area * wind_coefficient(wind) * (log["cover"] - temp_air) + log["emitted"] - sky
    base_loss = still.state.loss_w_m2_k * (log["water_mean"] - temp_air)
    capacity = 0.5 * cells[2] * seconds
    residual = absorbed + cover_absorbed - base_loss - cover_loss - log["stored"]
    return Record(
        distillate=distillate,
        water=log["water"],
        ice=log["ice"] * capacity,
        cover=log["cover"],
        convected=log["convected"],
        evaporated=log["evaporated"],
        radiated=log["radiated"],
        base_loss=base_loss,
        cover_loss=cover_loss,
        stored=log["stored"],
        residual=residual,
    )
