"""How fast and how exact the heat balance is, in one run: python tests/benchmarks/bench_balance.py.

Speeds depend on the machine; the ratios are what to compare. Nothing here is a test.
"""

from __future__ import annotations

import sys
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1] / "published"))

from test_balance_references import made_weather, tight_solution

from stillfield.methods import Block, Cells
from stillfield.methods.heat_balance import HeatBalance
from stillfield.physics.climates import invented_climates
from stillfield.physics.heat_balance import BalanceMarch, Forcing, simulate
from stillfield.physics.still import Panel, Still

DAYS = 10
SPINUP_DAYS = 1
STILL = Still("usual", (Panel(1.0, 15.0),))


def tiled(cells: int, dtype: type, days: int = DAYS) -> Forcing:
    """Invented weather of sixteen cells, repeated to `cells`."""
    each = [made_weather(days, seed, peak=900.0, mean_air=25.0) for seed in range(16)]
    names = ("absorbed", "cover_absorbed", "temp_air", "wind_speed", "temp_sky")
    sixteen = (np.concatenate([getattr(one, name) for one in each], axis=1) for name in names)
    return Forcing(*(np.tile(field, (1, cells // 16)).astype(dtype) for field in sixteen))


def processor_seconds(work: Callable[[], object], repeats: int = 3) -> float:
    """Shortest processor time of `repeats` calls after a first one. [s]."""
    work()
    times = []
    for _ in range(repeats):
        start = time.process_time()
        work()
        times.append(time.process_time() - start)
    return min(times)


def print_windows() -> None:
    """Time a piece of a grid in single precision: 512 cells, window after window of 30 days."""
    cells, days, windows = 512, 30, 10
    climates = invented_climates(cells)
    weather = {name: getattr(climates, name).astype(np.float32) for name in ("ghi", "temp_air", "wind_speed")}
    place = Cells(climates.latitude, np.zeros(cells), 24)
    blocks = []
    for first in range(0, days * windows, days):
        part = {name: values[24 * first : 24 * (first + days)] for name, values in weather.items()}
        blocks.append(Block(part, climates.latitude, climates.day_of_year[first : first + days], 24, np.zeros(cells)))
    hours = cells * 24 * days
    march = HeatBalance().begin(place, STILL, ["maintained", "weathered", "new"])
    three = min(processor_seconds(lambda b=block: march.advance(b, last=False), 1) for block in blocks)
    print(f"{days} days, {cells} cells, three conditions with optics: {three / hours * 1e9:.1f} ns per cell-hour")
    forcing = tiled(cells, np.float32, days)
    alone = BalanceMarch(STILL, cells)
    one = processor_seconds(lambda: alone.advance(forcing, last=False), 10)
    print(f"  of it one balance: {one / hours * 1e9:.1f} ns per cell-hour")


def main() -> None:
    """Print the table."""
    one = made_weather(DAYS, 3, peak=900.0, mean_air=25.0)
    reference = tight_solution(one, STILL, DAYS)
    scipy_seconds = processor_seconds(lambda: tight_solution(one, STILL, DAYS), repeats=1)
    scipy_speed = 24 * DAYS / scipy_seconds
    print(f"{'engine':26} {'sub-steps':>9} {'cells':>6} {'M cell-hours/s':>15} {'x scipy':>9} {'worst day':>10}")
    print(f"{'scipy solve_ivp, per cell':26} {'':>9} {1:>6} {scipy_speed / 1e6:>15.5f} {1.0:>9.0f} {'':>10}")
    for engine, dtype, cells in (
        ("numpy", np.float64, 1), ("numpy", np.float64, 8192), ("numpy", np.float32, 8192),
        ("compiled", np.float64, 1), ("compiled", np.float64, 8192), ("compiled", np.float32, 8192),
    ):
        for substeps in (1, 2, 4):
            forcing = tiled(cells, dtype) if cells > 1 else one
            run = lambda f=forcing, n=substeps, e=engine: simulate(  # noqa: E731
                f, STILL, engine=e, substeps=n, spinup_days=SPINUP_DAYS
            )
            hours = cells * (24 * (DAYS + SPINUP_DAYS) + 6)
            speed = hours / processor_seconds(run)
            single = Forcing(*(np.asarray(field, dtype) for field in vars(one).values()))
            made = simulate(single, STILL, engine=engine, substeps=substeps, spinup_days=0).daily_yield[:, 0]
            error = float(np.abs(made / reference - 1.0).max())
            label = f"{engine}, {np.dtype(dtype).name}"
            ratio = speed / scipy_speed
            print(f"{label:26} {substeps:>9} {cells:>6} {speed / 1e6:>15.4f} {ratio:>9.0f} {error:>10.1e}")
    print_windows()


if __name__ == "__main__":
    main()
