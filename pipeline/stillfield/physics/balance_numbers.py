"""From the design of a still to the numbers of its heat balance."""

from __future__ import annotations

from math import ceil
from typing import Any

import numpy as np
from numpy.typing import NDArray

from stillfield.physics.balance_kernel import Cell, Numbers
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
from stillfield.physics.still import Still
from stillfield.physics.vapour import KELVIN, LATENT_RECIPROCAL, ROOT_POLYNOMIAL, ROOT_RANGE_C, Field
from stillfield.physics.wind import WIND_BASE, WIND_SLOPE

STEFAN_BOLTZMANN = 5.670374419e-8  # W m-2 K-4
#: Heat transfer upwards from the water by which time constants are judged, the lowest of a mild night.
#: [W m-2 K-1] Common practice, no source.
SLOW_TRANSFER_W_M2_K = 8.0
#: Sub-steps in a day: two an hour, each with two Newton steps. Against eight times as many, over invented climates
#: and days of more than a litre, a 2 cm basin is within 0.1 % on 97 days of 100, at worst 0.8 %, and 0.1 % in a year.
SUBSTEPS_PER_DAY = 48
#: First guess of the cube root of X as a cubic of X^(1/4), relative least squares for X from 0.01 to 310 K.
CUBE_ROOT_GUESS = (-0.06970108, 0.79608679, 0.29604419, -0.02378867)


def time_constant_days(still: Still) -> float:
    """Days in which the water of `still` loses all but 1/e of a difference, at the slowest.

    Parameters
    ----------
    still : Still
        Design and condition.

    Returns
    -------
    float
        C / (U + `SLOW_TRANSFER_W_M2_K`), of fresh water. [days]
    """
    capacity = float(basin_heat_capacity(still.brine_depth_m, 0.0, still.liner_heat_capacity_j_m2_k))
    return capacity / (SLOW_TRANSFER_W_M2_K + still.state.loss_w_m2_k) / 86400.0


def start_up_days(still: Still) -> int:
    """Days of start-up after which a basin has forgotten how it began.

    Parameters
    ----------
    still : Still
        Design and condition.

    Returns
    -------
    int
        Five time constants and two days. [days]
    """
    return 2 + ceil(5.0 * time_constant_days(still))


def memory_days(still: Still) -> int:
    """Days after a gap that are not to be trusted: none up to some 5 cm of water, 2 for 20 cm.

    Parameters
    ----------
    still : Still
        Design and condition.

    Returns
    -------
    int
        Three time constants, the first day left out. [days]
    """
    return max(ceil(3.0 * time_constant_days(still)) - 1, 0)


def cell_rows(
    still: Still, seconds: float, count: int, *, salinity: Field | None, pressure: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Fields of `Cell` as rows of one array, for sub-steps of `seconds`.

    k_h goes as p^(2/3) and k_e as 1/p from the mean pressure.

    Parameters
    ----------
    still : Still
        Design and condition.
    seconds : float
        Length of a sub-step. [s]
    count : int
        Number of cells.
    salinity : float or ndarray of shape (cell,), or None
        Of the brine in the basin; None for that of the design. [g kg-1]
    pressure : float or ndarray of shape (cell,)
        Air pressure. [Pa]

    Returns
    -------
    ndarray, shape (8, cell)

    Raises
    ------
    MethodError
        For a salinity out of range.
    """
    salt = checked_salinity(still.basin_salinity_g_kg if salinity is None else salinity)
    capacity = basin_heat_capacity(still.brine_depth_m, salt, still.liner_heat_capacity_j_m2_k)
    water = density(REFERENCE_TEMP_C, salt) * still.brine_depth_m * (1.0 - salt / 1000.0)
    ratio = pressure / pressure.mean()
    cell = Cell(
        activity=water_activity(salt),
        freezing=freezing_point(salt),
        inertia=2.0 * capacity / seconds,
        ice_limit=FUSION_HEAT_J_KG * water / capacity,
        convection=ratio ** (2.0 / 3.0),
        evaporation=1.0 / ratio,
        buoyancy=BUOYANCY_PRESSURE_RATIO * pressure,
        pressure=pressure,
    )
    return np.ascontiguousarray([np.broadcast_to(row, (count,)) for row in cell], dtype=np.float64)


def numbers(still: Still, pressure: float, seconds: float, absorbed_share: float = 1.0) -> Numbers:
    """Constants of a run.

    Parameters
    ----------
    still : Still
        Design and condition.
    pressure : float
        Mean air pressure. [Pa]
    seconds : float
        Length of a sub-step. [s]
    absorbed_share : float
        Sunshine absorbed over that given as `Forcing.absorbed`. [1]

    Returns
    -------
    Numbers
    """
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
        stefan=True if relation.stefan else None,
        radiation_inside=inside * STEFAN_BOLTZMANN,
        radiation_outside=area_ratio * still.cover.emittance * STEFAN_BOLTZMANN,
        area_ratio=area_ratio,
        wind_base=WIND_BASE,
        wind_slope=WIND_SLOPE,
        loss=still.state.loss_w_m2_k,
        absorbed_share=absorbed_share,
        distilling=tuple(per_watt * number for number in LATENT_RECIPROCAL),
    )


def in_precision(constants: Numbers, dtype: np.dtype[Any]) -> Numbers:
    """Constants as scalars of `dtype`; the flag stays as it is.

    Parameters
    ----------
    constants : Numbers
        From `numbers`.
    dtype : dtype
        The precision to work in.

    Returns
    -------
    Numbers
    """
    return Numbers(*(_as(part, dtype) for part in constants))


def _as(part: Any, dtype: np.dtype[Any]) -> Any:
    if part is None or part is True:
        return part
    return tuple(map(dtype.type, part)) if isinstance(part, tuple) else dtype.type(part)
