"""The hourly heat balance of a basin still: weather at the cover in, litres of every day out.

Per m² of basin, with the water T_w and the cover T_g (in steady state: it settles within minutes):

    cover:  absorbed_g + q_c + q_e + q_r = R_A [h_w (T_g - T_a) + ε_g σ (T_g⁴ - T_sky⁴)]
    water:  C dT_w/dt = absorbed_w - q_c - q_e - q_r - U_b (T_w - T_a)
    yield:  dM/dt = (1 - leak) q_e / L(T_w)

Sources: Dunkle 1961 (internal transfer, see `convection`), Watmuff et al. 1977 (wind, see `wind`), textbook
radiation between parallel planes. The time scheme is that of `balance_kernel`.
"""

from __future__ import annotations

from stillfield.physics.balance_march import BalanceMarch, shape_of
from stillfield.physics.balance_records import BalanceResult, Forcing, Record
from stillfield.physics.compiling import Engine
from stillfield.physics.moist_air import STANDARD_PRESSURE_PA
from stillfield.physics.still import Still
from stillfield.physics.vapour import Field

__all__ = ["BalanceMarch", "BalanceResult", "Forcing", "Record", "simulate"]


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

    Days, gaps and the night after the last day are those of `BalanceMarch`, which takes the same record in
    windows. Of a cyclic year the first night is counted after the last day, and start-up is its last days.

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
    >>> import numpy as np
    >>> from stillfield.physics.still import Panel
    >>> hour = np.arange(24)[:, None] + 0.5
    >>> sun = 800.0 * np.maximum(np.sin((hour - 6.0) / 12.0 * np.pi), 0.0)
    >>> weather = Forcing(0.7 * sun, 0.05 * sun, *(np.full_like(sun, x) for x in (25.0, 2.0, 12.0)))
    >>> day = simulate(weather, Still("plain", (Panel(1.0, 15.0),)), cyclic=True, engine="numpy")
    >>> day.daily_yield.round(1).tolist()
    [[3.5]]
    """
    cells = (0, *shape_of(forcing))[-1]
    march = BalanceMarch(
        still, cells, steps_per_day=steps_per_day, salinity=salinity, pressure=pressure,
        spinup_days=spinup_days, day_start_hour=day_start_hour, substeps=substeps, engine=engine, record=record,
    )
    return march.around(forcing) if cyclic else march.advance(forcing, last=True)
