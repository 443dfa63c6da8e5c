"""Print what a whole run costs beside reading alone and beside what an analyst would write: CPU, wall, peak memory.

Run it by hand on an idle machine: ``python tests/benchmarks/bench_run.py [YEARS] [CELLS_A_SIDE]``. Every way runs in
a process of its own, in turn; ratios are to the bare reading loop. Nothing here is a test.
"""

from __future__ import annotations

import resource
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numpy as np
import pandas as pd
import xarray as xr

STILL = "config/stills/single-slope-glass.yaml"
ROUNDS = 3


def make_weather(folder: Path, years: int, side: int) -> None:
    """Daily float32 weather, deflated, a file per year: chunks of 73 days and a quarter of the grid."""
    random = np.random.default_rng(4)
    for year in range(2001, 2001 + years):
        time_axis = pd.date_range(f"{year}-01-01", f"{year}-12-31", freq="D")
        shape = (len(time_axis), side, side)
        season = 1.0 + 0.25 * np.cos(2 * np.pi * (time_axis.day_of_year.to_numpy() - 172) / 365.0)[:, None, None]
        fields = {
            "rsds": (200.0 * season * random.uniform(0.7, 1.1, shape), "W m-2", "time: mean"),
            "tas": (296.0 + 6.0 * (season - 1.0) * 4.0 + random.normal(0.0, 1.5, shape), "K", "time: mean"),
            "sfcWind": (random.uniform(1.0, 6.0, shape), "m s-1", "time: mean"),
        }
        data = xr.Dataset(
            {name: (("time", "lat", "lon"), values.astype(np.float32), {"units": unit, "cell_methods": cell})
             for name, (values, unit, cell) in fields.items()},
            coords={
                "time": time_axis,
                "lat": ("lat", np.linspace(10.0, 20.0, side), {"units": "degrees_north"}),
                "lon": ("lon", np.linspace(40.0, 50.0, side), {"units": "degrees_east"}),
            },
        )
        chunks = (73, side // 2, side // 2)
        stored = {"zlib": True, "complevel": 4, "chunksizes": chunks}
        data.to_netcdf(folder / f"{year}.nc", encoding=dict.fromkeys(data, stored))


def bare(folder: str) -> None:
    """Read every value once with the NetCDF library and add it up."""
    import netCDF4

    for path in sorted(Path(folder).glob("*.nc")):
        with netCDF4.Dataset(path) as file:
            for name in ("rsds", "tas", "sfcWind"):
                variable = file[name]
                variable.set_auto_maskandscale(False)
                for start in range(0, variable.shape[0], 73):
                    float(variable[start:start + 73].sum())


def ours(folder: str) -> None:
    """Take the months by the notebook interface, with the band and the rule beside them."""
    import stillfield as sf

    weather = sf.open_weather(
        f"{folder}/*.nc", variables={
            "irradiation": {"name": "rsds", "means": "daily-mean"}, "temp_air": "tas",
            "wind_speed": {"name": "sfcWind", "height_m": 10.0},
        },
    )
    sf.monthly_yield(weather, sf.load_still(STILL), "fitted")


def analyst(folder: str) -> None:
    """Write it the short way: xarray, a polynomial in sunshine, temperature and wind, pandas-style months."""
    data = xr.open_mfdataset(f"{folder}/*.nc", chunks={}, parallel=False)
    sunshine, air, wind = data["rsds"] * 0.0864, data["tas"] - 273.15, data["sfcWind"] * 0.75
    litres = (
        -0.5 + 0.1 * sunshine + 0.003 * sunshine**2 + 0.02 * air + 0.0005 * sunshine * air - 0.01 * np.sqrt(wind)
    ).clip(min=0.0)
    monthly = litres.resample(time="MS").sum()
    monthly.groupby("time.month").mean().compute()


def measured(way: str, folder: str) -> tuple[float, float, float]:
    """CPU seconds, wall seconds and peak MB of one way in a process of its own."""
    before = resource.getrusage(resource.RUSAGE_CHILDREN)
    start = time.perf_counter()
    out = subprocess.run([sys.executable, __file__, way, folder], check=True, capture_output=True, text=True).stdout
    wall = time.perf_counter() - start
    after = resource.getrusage(resource.RUSAGE_CHILDREN)
    spent = after.ru_utime + after.ru_stime - before.ru_utime - before.ru_stime
    return spent, wall, float(out.split()[-1])


def main() -> None:
    """Make the weather, run the ways in turn, print the table."""
    years, side = (int(sys.argv[1]), int(sys.argv[2])) if len(sys.argv) > 2 else (10, 100)
    ways = {"bare": "bare reading loop", "ours": "stillfield, three conditions and the rule",
            "analyst": "xarray, one polynomial, resample"}
    with tempfile.TemporaryDirectory() as folder:
        make_weather(Path(folder), years, side)
        found = {way: [measured(way, folder) for _ in range(ROUNDS)] for way in ways}
    base = min(cpu for cpu, _, _ in found["bare"])
    print(f"{years} years of days, {side} x {side} cells, three variables; least of {ROUNDS} runs")
    print(f"{'':<44}{'CPU s':>8}{'ratio':>8}{'wall s':>8}{'peak MB':>9}")
    for way, words in ways.items():
        cpu, wall, peak = (min(column) for column in zip(*found[way], strict=True))
        print(f"{words:<44}{cpu:>8.1f}{cpu / base:>8.1f}{wall:>8.1f}{peak:>9.0f}")


if __name__ == "__main__":
    if len(sys.argv) == 3 and sys.argv[1] in ("bare", "ours", "analyst"):
        {"bare": bare, "ours": ours, "analyst": analyst}[sys.argv[1]](sys.argv[2])
        print(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024.0)
    else:
        main()
