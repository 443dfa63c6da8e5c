"""Print how fast the fitted correlation is: by variant, conditions, shape of a piece and engine, and to begin.

Run it by hand on an idle machine: ``OPENBLAS_NUM_THREADS=1 python tests/benchmarks/bench_fitted.py``. Times are CPU
seconds of one core; nothing here is a test.
"""

from __future__ import annotations

import subprocess
import sys
import time
from collections.abc import Callable
from functools import partial

import numpy as np

from stillfield.methods import Block, Cells, whole_record
from stillfield.methods.fit_store import fit_for
from stillfield.methods.fitted import Fitted
from stillfield.methods.heat_balance import HeatBalance
from stillfield.physics.climates import invented_climates
from stillfield.physics.compiling import Engine
from stillfield.physics.correlation import DailyCorrelation, Day
from stillfield.physics.correlation_march import CorrelationMarch
from stillfield.physics.fitting import fit_still
from stillfield.physics.still import Still
from stillfield.settings.still_file import load_still_file

#: Days and cells of a piece: a year of a wide one, ten years of a narrow one.
PIECES = ((366, 512), (3652, 64))
CONDITIONS = ("maintained", "weathered", "new")
ENGINES: tuple[Engine, ...] = ("compiled", "numpy")
HOURLY_CELLS = 300
FIELDS = {
    "transmitted": (5.0, 25.0), "temp_air": (13.0, 33.0), "wind_speed": (0.5, 7.0), "day_length": (8.0, 16.0),
    "clearness": (0.1, 0.75), "temp_range": (4.0, 18.0), "dew_depression": (1.0, 20.0), "peakiness": (2.0, 4.0),
    "warm_hours": (0.0, 5.0), "sky_depression": (5.0, 25.0), "windy_hours": (-0.2, 0.4),
}
WEATHER = {
    "irradiation": (5.0, 25.0), "temp_air": (13.0, 33.0), "wind_speed": (0.5, 7.0), "temp_air_min": (5.0, 13.0),
    "temp_air_max": (33.0, 40.0), "relative_humidity": (20.0, 95.0),
}
FIRST_CALL = """
import time
begun = time.process_time()
import numba
numba_there = time.process_time()
import numpy as np
from stillfield.methods import Block, whole_record
from stillfield.methods.fitted import Fitted
from stillfield.physics.still import Panel, Still
from stillfield.settings.still_file import load_still_file
still = load_still_file("config/stills/single-slope-glass.yaml")
block = Block({name: np.full((3, 4), 15.0, np.float32) for name in ("irradiation", "temp_air", "wind_speed")},
              np.full(4, 10.0), np.arange(1, 4))
method = Fitted(engine="numpy")
whole_record(method, block, still, ["new"])
ready = time.process_time()
whole_record(Fitted(engine="compiled"), block, still, ["new"])
print(f"numba {numba_there - begun:.2f} s, first compiled call {time.process_time() - ready:.2f} s CPU")
"""


def seconds(work: Callable[[], object], repeats: int) -> float:
    """Least CPU seconds of some runs after one that is not counted."""
    work()
    best = np.inf
    for _ in range(repeats):
        start = time.process_time()
        work()
        best = min(best, time.process_time() - start)
    return float(best)


def rate(work: Callable[[], object], cell_days: int, engine: str = "compiled") -> str:
    spent = seconds(work, 9 if engine == "compiled" else 2)
    return f"{cell_days / spent / 1e6:9.1f} M cell-days/s {spent / cell_days * 1e9:8.1f} ns"


def some(ranges: dict[str, tuple[float, float]], shape: tuple[int, int]) -> dict[str, np.ndarray]:
    random = np.random.default_rng(1)
    return {name: random.uniform(*span, shape).astype(np.float32) for name, span in ranges.items()}


def walk(fits: list[DailyCorrelation], day: Day, engine: Engine) -> object:
    return CorrelationMarch(fits, day.transmitted.shape[1], engine=engine).advance(day, last=True)


def march(method: Fitted, block: Block, still: Still, conditions: tuple[str, ...]) -> object:
    cells = Cells(block.latitude, np.zeros(len(block.latitude)))
    return method.begin(cells, still, conditions).advance(block, last=True)


def correlations_alone(still: Still) -> None:
    print("\nthe correlation alone, from predictors")
    for variant in ("daily", "daily-range-humidity", "hourly"):
        for count in (1, 3):
            fits = [fit_for(still.in_condition(condition)).correlations[variant] for condition in CONDITIONS[:count]]
            for shape in PIECES:
                day = Day(**some(FIELDS, shape))
                cold = Day(**{**some(FIELDS, shape), "temp_air": day.temp_air - 15.0})
                for engine in ENGINES:
                    told = [rate(partial(walk, fits, one, engine), shape[0] * shape[1], engine) for one in (day, cold)]
                    print(f"  {variant:<21} {count} {shape!s:>11} {engine:<9}{told[0]}   with cold days{told[1]}")


def from_weather(still: Still) -> None:
    print("\nthe method, from daily weather")
    for names in (list(WEATHER)[:3], list(WEATHER)):
        for count in (1, 3):
            for days, cells in PIECES:
                fields = some({name: WEATHER[name] for name in names}, (days, cells))
                latitude = np.repeat([10.0, 10.25], cells // 2)
                block = Block(fields, latitude, np.arange(days) % 365 + 1)
                for engine in ENGINES:
                    method = Fitted(engine=engine)
                    told = rate(partial(march, method, block, still, CONDITIONS[:count]), days * cells, engine)
                    print(f"  {method.variant(names, still):<21} {count} {(days, cells)!s:>11} {engine:<9}{told}")


def from_steps(still: Still) -> None:
    climates = invented_climates(HOURLY_CELLS)
    hours = Block(
        {"ghi": climates.ghi, "temp_air": climates.temp_air, "wind_speed": climates.wind_speed,
         "temp_dew": climates.temp_dew},
        climates.latitude, climates.day_of_year, steps_per_day=24,
    )
    print("\nfrom hourly weather, one condition")
    for method in (Fitted("hourly"), HeatBalance()):
        told = rate(partial(whole_record, method, hours, still, [still.condition]), 365 * HOURLY_CELLS, "steps")
        print(f"  {method.name:<33} {told}")


def main() -> None:
    still = load_still_file("config/stills/single-slope-glass.yaml")
    print("a process begins, compiled code kept:", subprocess.run(
        [sys.executable, "-c", FIRST_CALL], check=True, capture_output=True, text=True
    ).stdout.strip())
    correlations_alone(still)
    from_weather(still)
    from_steps(still)
    print(f"\nfitting one still in one condition: {seconds(lambda: fit_still(still), 1):.1f} s CPU")


if __name__ == "__main__":
    main()
