"""Print how fast steps become what drives a still: optics and sky, and the predictors of days.

Run it by hand on an idle machine: ``OPENBLAS_NUM_THREADS=1 python tests/benchmarks/bench_steps.py``. It prints
millions of cell-hours a second of CPU time for a block of 10 x 100 cells and what the compiled path is off by;
nothing here is a test.
"""

from __future__ import annotations

import time
from collections.abc import Callable
from functools import partial

import numpy as np

from stillfield.physics.forcing import step_forcing
from stillfield.physics.step_days import StepDays
from stillfield.physics.still import Still
from stillfield.physics.sun import sun_over_steps
from stillfield.settings.still_file import load_still_file

ROWS, COLUMNS, DAYS = 10, 100, 60
STILLS = ("single-slope-glass", "double-slope-glass")
KNOWN = {"ghi only": (), "dew point": ("temp_dew",), "humidity": ("relative_humidity",), "dni dhi dew": (
    "dni", "dhi", "temp_dew")}


def seconds(work: Callable[[], object], repeats: int = 5) -> float:
    """Least CPU seconds of some runs after one that is not counted."""
    work()
    best = np.inf
    for _ in range(repeats):
        start = time.process_time()
        work()
        best = min(best, time.process_time() - start)
    return float(best)


def block() -> tuple[dict[str, np.ndarray], dict[str, object]]:
    """Invented weather of a block of cells, and where they are."""
    random = np.random.default_rng(1)
    latitude = np.repeat(np.linspace(12.0, 14.25, ROWS), COLUMNS)
    shift = np.tile(np.linspace(-0.5, 0.5, COLUMNS), ROWS)
    days = np.arange(150, 150 + DAYS)
    sun = sun_over_steps(latitude, days, 24, shift)
    ghi = sun.normal_outside * sun.step_mean_cos_zenith * random.uniform(0.1, 0.75, sun.up.shape)
    temp = random.uniform(10.0, 35.0, ghi.shape)
    weather = {
        "ghi": ghi, "temp_air": temp, "wind_speed": random.uniform(0.3, 8.0, ghi.shape), "temp_dew": temp - 10.0,
        "relative_humidity": random.uniform(10.0, 100.0, ghi.shape), "dhi": 0.4 * ghi,
        "dni": 0.6 * ghi / np.maximum(sun.up, 0.1),
    }
    place = {"latitude": latitude, "clock_to_solar_hours": shift, "steps_per_day": 24, "day_of_year": days}
    return {name: values.astype(np.float32) for name, values in weather.items()}, place


def forcing(weather: dict[str, np.ndarray], still: Still, days: np.ndarray, place: dict[str, object], engine: str):
    return step_forcing(weather, still, day_of_year=days, engine=engine, **place)


def predictors(weather: dict[str, np.ndarray], still: Still, days: np.ndarray, place: dict[str, object], engine: str):
    return StepDays(still, engine=engine, **place).advance(weather, days, last=True)


def main() -> None:
    weather, place = block()
    days = place.pop("day_of_year")
    hours = weather["ghi"].size / 1e6
    print(f"{'M cell-hours/s':<34} {'forcing':>9} {'numpy':>7} {'days':>9} {'numpy':>7}")
    for name in STILLS:
        still = load_still_file(f"config/stills/{name}.yaml")
        for label, more in KNOWN.items():
            given = {key: weather[key] for key in ("ghi", "temp_air", "wind_speed", *more)}
            print(f"{name + ', ' + label:<34}", end="")
            for work in (forcing, predictors):
                quick = hours / seconds(partial(work, given, still, days, place, "compiled"))
                plain = hours / seconds(partial(work, given, still, days, place, "numpy"), 1)
                print(f" {quick:>9.0f} {plain:>7.1f}", end="")
            print()
        made, exact = (forcing(given, still, days, place, engine) for engine in ("compiled", "numpy"))
        off = float(np.abs(made[0].absorbed - exact[0].absorbed).max())
        print(f"{'':<4}off by {off:.3f} W m-2 of a step, {np.abs(made[1] / exact[1] - 1.0).max():.1e} of S at most")


if __name__ == "__main__":
    main()
