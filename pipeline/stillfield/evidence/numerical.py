"""The time scheme of the balance against other solvers and against itself at half the step."""

from __future__ import annotations

from importlib.metadata import version
from importlib.util import find_spec

import numpy as np

from stillfield.evidence.reference_balance import lagged_solution, made_weather, tight_solution
from stillfield.evidence.row import CLOSED_FORM, Row
from stillfield.physics.heat_balance import simulate
from stillfield.physics.still import Panel, Still

DAYS = 3
MULLICK = "Sharma & Mullick 1993, ASME J. Solar Energy Eng. 115:231: lagged coefficients give 24 h within 1.5 %"


def rows() -> list[Row]:
    """Largest relative difference of a day's litres, or of three days, from each reference."""
    return [*_tight(), *_lagged(), *_halving(), _engines()]


def _stills() -> dict[str, Still]:
    return {
        "shallow": Still("shallow", (Panel(1.0, 15.0),), brine_depth_m=0.01, condition="new"),
        "sea water": Still("sea water", (Panel(1.0, 15.0),), feed_salinity_g_kg=35.0, condition="weathered"),
        "deep": Still("deep", (Panel(1.0, 15.0),), brine_depth_m=0.15, condition="neglected"),
    }


def _tight() -> list[Row]:
    source = f"own coding of the equations in scipy {version('scipy')}, solve_ivp LSODA, rtol 1e-7"
    found = []
    for name, still in _stills().items():
        for climate, peak, air in (("hot", 950.0, 32.0), ("mild", 600.0, 16.0)):
            forcing = made_weather(DAYS, 7, peak=peak, mean_air=air)
            expected = tight_solution(forcing, still, DAYS)
            got = simulate(forcing, still, spinup_days=0, engine="numpy").daily_yield[:, 0]
            worst = float(np.max(np.abs(got / expected - 1.0)))
            found.append(Row("time scheme", f"{name}, {climate}: worst day of {DAYS}", source, 0.0, 100.0 * worst, 0.5,
                             "%"))
    return found


def _lagged() -> list[Row]:
    found = []
    for name in ("shallow", "sea water"):
        still = _stills()[name]
        forcing = made_weather(DAYS, 11, peak=900.0, mean_air=27.0)
        expected = float(lagged_solution(forcing, still, DAYS).sum())
        got = float(simulate(forcing, still, spinup_days=0, engine="numpy").daily_yield.sum())
        found.append(Row("time scheme", f"{name}: total of {DAYS} days", MULLICK, expected, got, 0.015 * expected,
                         "L/m2"))
    return found


def _halving() -> list[Row]:
    forcing = made_weather(4, 3, peak=900.0, mean_air=25.0)
    found = []
    for depth in (0.01, 0.02, 0.20):
        still = Still("any", (Panel(1.0, 15.0),), brine_depth_m=depth)
        coarse, fine = (simulate(forcing, still, substeps=n, engine="numpy").daily_yield for n in (2, 4))
        worst = 100.0 * float(np.max(np.abs(coarse / fine - 1.0)))
        found.append(Row("time scheme", f"{100 * depth:g} cm: worst day when the step is halved",
                         f"{CLOSED_FORM}: the limit of small steps", 0.0, worst, 0.2, "%"))
    return found


def _engines() -> Row:
    forcing = made_weather(4, 3, peak=900.0, mean_air=25.0)
    still = _stills()["sea water"]
    got = None
    if find_spec("numba") is not None:
        numpy, compiled = (simulate(forcing, still, engine=engine).daily_yield for engine in ("numpy", "compiled"))
        got = float(np.max(np.abs(compiled / numpy - 1.0)))
    return Row("time scheme", "compiled against numpy, worst day", f"{CLOSED_FORM}: the same arithmetic", 0.0, got,
               1e-12, "1")
