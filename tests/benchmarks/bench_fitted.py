"""Print how fast the daily correlation is: against the hourly balance, the plain expression, and to fit.

Run it by hand on an idle machine: ``OPENBLAS_NUM_THREADS=1 python tests/benchmarks/bench_fitted.py``. Ratios
matter, not seconds; nothing here is a test.
"""

from __future__ import annotations

import time
from collections.abc import Callable

import numpy as np

from stillfield.methods import Block, whole_record
from stillfield.methods.fit_store import fit_for
from stillfield.methods.fitted import Fitted
from stillfield.methods.heat_balance import HeatBalance
from stillfield.physics.climates import invented_climates
from stillfield.physics.correlation import VARIANTS, scaled_predictors
from stillfield.physics.day_shape import day_from_days
from stillfield.physics.fitting import fit_still
from stillfield.physics.gain_table import GainTable
from stillfield.settings.still_file import load_still_file

CELLS, DAYS, HOURLY_CELLS = 2000, 730, 300


def seconds(work: Callable[[], object], repeats: int = 3) -> float:
    """Least CPU seconds of some runs after one that is not counted."""
    work()
    best = np.inf
    for _ in range(repeats):
        start = time.process_time()
        work()
        best = min(best, time.process_time() - start)
    return float(best)


def main() -> None:
    still = load_still_file("config/stills/single-slope-glass.yaml")
    random = np.random.default_rng(1)
    latitude = np.repeat(np.linspace(-30.0, 30.0, 40), CELLS // 40)
    weather = {
        "irradiation": random.uniform(5.0, 25.0, (DAYS, CELLS)), "temp_air": random.uniform(10, 35, (DAYS, CELLS)),
        "wind_speed": random.uniform(0.5, 7.0, (DAYS, CELLS)),
    }
    day_of_year = np.arange(DAYS) % 365 + 1
    block = Block(weather, latitude, day_of_year)
    rows = GainTable(still).for_latitudes(latitude)
    day = day_from_days(weather, rows, latitude=latitude, day_of_year=day_of_year)
    correlation = fit_for(still).correlations["daily"]

    def plain() -> object:
        predictors = scaled_predictors(day, correlation.memory, cyclic=False)
        total = np.zeros((DAYS, CELLS))
        for term, coefficient in zip(VARIANTS["daily"], correlation.coefficients, strict=True):
            product = np.full((DAYS, CELLS), coefficient)
            for letter in term.replace("1", ""):
                product = product * predictors[letter]
            total = total + product
        return np.maximum(total, 0.0)

    climates = invented_climates(HOURLY_CELLS)
    hours = Block(
        {"ghi": climates.ghi, "temp_air": climates.temp_air, "wind_speed": climates.wind_speed,
         "temp_dew": climates.temp_dew},
        climates.latitude, climates.day_of_year, steps_per_day=24,
    )
    figures = {
        "fitted, daily weather, one condition": (seconds(lambda: Fitted().daily_yield(block, still)), DAYS * CELLS),
        "fitted, daily weather, three conditions": (
            seconds(lambda: Fitted().daily_yields(block, still, ("maintained", "weathered", "new"))), DAYS * CELLS
        ),
        "  of it the correlation alone": (seconds(lambda: correlation.litres(day)), DAYS * CELLS),
        "the correlation as a plain expression": (seconds(plain), DAYS * CELLS),
        "fitted, hourly weather": (seconds(lambda: Fitted("hourly").daily_yield(hours, still)), 365 * HOURLY_CELLS),
        "heat balance, hourly weather": (
            seconds(lambda: whole_record(HeatBalance(), hours, still, [still.condition])), 365 * HOURLY_CELLS
        ),
    }
    base = figures["fitted, daily weather, one condition"]
    print(f"{'':<42} {'M cell-days/s':>14} {'time per cell-day':>18}")
    for name, (spent, work) in figures.items():
        ratio = (spent / work) / (base[0] / base[1])
        print(f"{name:<42} {work / spent / 1e6:>14.2f} {ratio:>17.1f}x")
    print(f"\nfitting one still in one condition: {seconds(lambda: fit_still(still), 1):.1f} s CPU")


if __name__ == "__main__":
    main()
