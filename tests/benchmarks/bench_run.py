"""Print what a whole run costs beside reading alone and beside what an analyst would write: CPU, wall, peak memory.

Run it by hand on an idle machine::

    python tests/benchmarks/bench_run.py --step day --years 10 --side 100
    python tests/benchmarks/bench_run.py --step hour --years 10 --side 100 --chunks map
    python tests/benchmarks/bench_run.py --ways bare,fast,one-still,two-stills --years 40

Every way runs in a process of its own, in turn and again; ratios are to the bare reading loop of the same round.
Nothing here is a test.
"""

from __future__ import annotations

import argparse
import os
import resource
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np

STILL = "config/stills/single-slope-glass.yaml"
SECOND_STILL = "config/stills/double-slope-glass.yaml"
VARIABLES = {
    "irradiation": {"name": "rsds", "means": "step-mean"}, "temp_air": {"name": "tas"},
    "wind_speed": {"name": "sfcWind", "height_m": 10.0},
}
NAMES = ("rsds", "tas", "sfcWind")
STEPS = {"day": 1, "hour": 24}
#: Chunks by layout: of days or hours, rows, columns; None is the whole axis.
CHUNKS: dict[str, dict[str, tuple[int | None, int | None, int | None]]] = {
    "block": {"day": (73, 50, 50), "hour": (240, 50, 50)},
    "map": {"day": (1, None, None), "hour": (1, None, None)},
    "pencil": {"day": (None, 5, 5), "hour": (None, 5, 5)},
}


def make_weather(
    folder: Path, *, step: str, years: int, side: int, chunks: str = "block", packed: bool = False
) -> None:
    """Float32 weather with the smoothness of a model's output, shuffled and deflated, a file per year."""
    import pandas as pd
    import xarray as xr

    random = np.random.default_rng(4)
    for year in range(2001, 2001 + years):
        axis = pd.date_range(f"{year}-01-01", f"{year + 1}-01-01", freq="D" if step == "day" else "h", inclusive="left")
        fields = _fields(axis, side, random, hourly=step == "hour")
        data = xr.Dataset(
            {name: (("time", "lat", "lon"), values, {"units": unit, "cell_methods": "time: mean"})
             for name, (values, unit) in fields.items()},
            coords={
                "time": axis, "lat": ("lat", np.linspace(10.0, 20.0, side), {"units": "degrees_north"}),
                "lon": ("lon", np.linspace(40.0, 50.0, side), {"units": "degrees_east"}),
            },
        )
        sizes = [whole if size is None else min(size, whole)
                 for size, whole in zip(CHUNKS[chunks][step], (len(axis), side, side), strict=True)]
        stored = {"zlib": True, "complevel": 4, "shuffle": True, "chunksizes": tuple(sizes)}
        if packed:
            scales = {"rsds": 0.05, "tas": 0.005, "sfcWind": 0.002}
            encoding = {name: {**stored, "dtype": "i2", "scale_factor": scales[name], "_FillValue": -32768,
                               "add_offset": float(data[name].mean())} for name in data}
        else:
            encoding = dict.fromkeys(data, stored)
        data.to_netcdf(folder / f"{year}.nc", encoding=encoding)


def _fields(axis, side, random, *, hourly):
    """Seasons, fronts of some hundred kilometres and noise in the last digits."""
    day = axis.day_of_year.to_numpy()[:, None, None]
    season = np.cos(2 * np.pi * (day - 172) / 365.0)
    coarse = random.normal(0.0, 1.0, (len(axis) // (24 if hourly else 1) + 2, 7, 7))
    at = np.linspace(0.0, coarse.shape[0] - 2.0, len(axis))
    low = at.astype(int)
    front = coarse[low] + (at - low)[:, None, None] * (coarse[low + 1] - coarse[low])
    front = np.repeat(np.repeat(front, -(-side // 7), axis=1), -(-side // 7), axis=2)[:, :side, :side]
    fine = random.normal(0.0, 1.0, (len(axis), side, side)).astype(np.float32)
    clear = np.clip(0.6 + 0.08 * front + 0.03 * fine, 0.1, 0.75)
    outside = 380.0 + 90.0 * season
    if hourly:
        solar = (axis.hour.to_numpy()[:, None, None] + 0.5 + 3.0) % 24.0
        outside = 1250.0 * np.maximum(np.cos((solar - 12.0) / 12.0 * np.pi), 0.0) * (0.85 + 0.1 * season)
    return {
        "rsds": ((outside * clear).astype(np.float32), "W m-2"),
        "tas": ((296.0 + 6.0 * season + 2.0 * front + 0.3 * fine).astype(np.float32), "K"),
        "sfcWind": (np.abs(3.0 + front + 0.5 * fine).astype(np.float32), "m s-1"),
    }


def bare(folder: str) -> None:
    """Read every value once with the NetCDF library, a file and a stored chunk's length at a time."""
    import netCDF4

    for path in sorted(Path(folder).glob("*.nc")):
        with netCDF4.Dataset(path) as file:
            for name in NAMES:
                variable = file[name]
                variable.set_auto_maskandscale(False)
                length = max(variable.chunking()[0], 240)
                for start in range(0, variable.shape[0], length):
                    variable[start:start + length]


def months(folder: str, *, stills: tuple[str, ...] = (STILL,), method: str = "fitted", fast: bool = True,
           workers: int = 1, scheduler: str | None = None) -> None:
    """Months of every cell in memory: the whole of a run but its products."""
    from stillfield.engine.job import Means, months_of, prepare
    from stillfield.methods.registry import get_method
    from stillfield.settings.still_file import load_still_file
    from stillfield.stages.read import read_weather

    hourly = "hour" in Path(folder).name
    variables = {**VARIABLES, "irradiation": {"name": "rsds", "means": "step-mean" if hourly else "daily-mean"}}
    weather = read_weather("netcdf", [f"{folder}/*.nc"], variables=variables)
    prepared = prepare(weather, get_method(method, hourly=hourly), stills=len(stills),
                       means=Means(workers, scheduler=scheduler, fast=fast))
    months_of(prepared, [load_still_file(still) for still in stills])


def analyst(folder: str) -> None:
    """What is written in an afternoon: xarray and pandas, a polynomial, months by groupby; whole arrays in memory."""
    import xarray as xr

    data = xr.open_mfdataset(f"{folder}/*.nc", parallel=False)
    data = _to_days(data, folder).load()
    litres = _polynomial(data)
    frame = litres.to_dataframe(name="litres").reset_index()
    keys = [frame["time"].dt.year, frame["time"].dt.month, frame["lat"], frame["lon"]]
    frame.groupby(keys)["litres"].sum()


def resample(folder: str) -> None:
    """The same with dask arrays and xarray's resample, at the chunks of the files."""
    import xarray as xr

    data = _to_days(xr.open_mfdataset(f"{folder}/*.nc", chunks={}, parallel=False), folder)
    monthly = _polynomial(data).resample(time="MS").sum()
    monthly.groupby("time.month").mean().compute()


def _to_days(data, folder):
    return data.resample(time="D").mean() if "hour" in Path(folder).name else data


def _polynomial(data):
    sunshine, air, wind = data["rsds"] * 0.0864, data["tas"] - 273.15, data["sfcWind"] * 0.75
    return (
        -0.5 + 0.1 * sunshine + 0.003 * sunshine**2 + 0.02 * air + 0.0005 * sunshine * air - 0.01 * np.sqrt(wind)
    ).clip(min=0.0)


WAYS: dict[str, tuple[str, Callable[[str], None]]] = {
    "bare": ("bare reading loop", bare),
    "fast": ("stillfield", months),
    "plain": ("stillfield, NetCDF library", lambda folder: months(folder, fast=False)),
    "two-stills": ("stillfield, two stills", lambda folder: months(folder, stills=(STILL, SECOND_STILL))),
    "rule": ("stillfield, constant efficiency", lambda folder: months(folder, method="rule")),
    "balance": ("stillfield, heat balance", lambda folder: months(folder, method="heat-balance")),
    "balance-two-threads": (
        "stillfield, heat balance, two threads", lambda folder: months(folder, method="heat-balance", workers=2)),
    "balance-two-processes": (
        "stillfield, heat balance, cluster of two",
        lambda folder: months(folder, method="heat-balance", workers=2, scheduler="processes")),
    "two-threads": ("stillfield, two threads", lambda folder: months(folder, workers=2)),
    "one-process": ("stillfield, cluster of one", lambda folder: months(folder, workers=1, scheduler="processes")),
    "two-processes": ("stillfield, cluster of two", lambda folder: months(folder, workers=2, scheduler="processes")),
    "analyst": ("xarray and pandas, a polynomial", analyst),
    "resample": ("xarray and dask, resample", resample),
}


def measured(way: str, folder: str) -> tuple[float, float, float]:
    """CPU seconds, wall seconds and peak MB of one way in a process of its own."""
    before = resource.getrusage(resource.RUSAGE_CHILDREN)
    start = time.perf_counter()
    out = subprocess.run([sys.executable, __file__, "--inner", way, folder], check=True, capture_output=True, text=True,
                         env={**os.environ, "OMP_NUM_THREADS": "1"}).stdout
    wall = time.perf_counter() - start
    after = resource.getrusage(resource.RUSAGE_CHILDREN)
    spent = after.ru_utime + after.ru_stime - before.ru_utime - before.ru_stime
    return spent, wall, float(out.split()[-1])


def main() -> None:
    """Make the weather, run the ways in turn, print the table."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--step", choices=STEPS, default="day")
    parser.add_argument("--years", type=int, default=10)
    parser.add_argument("--side", type=int, default=100)
    parser.add_argument("--chunks", choices=CHUNKS, default="block")
    parser.add_argument("--packed", action="store_true")
    parser.add_argument("--rounds", type=int, default=3)
    parser.add_argument("--ways", default="bare,fast,plain,two-stills,analyst,resample")
    asked = parser.parse_args()
    ways = list(dict.fromkeys(["bare", *asked.ways.split(",")]))
    with tempfile.TemporaryDirectory(prefix=f"{asked.step}-") as folder:
        make_weather(Path(folder), step=asked.step, years=asked.years, side=asked.side, chunks=asked.chunks,
                     packed=asked.packed)
        size = sum(path.stat().st_size for path in Path(folder).glob("*.nc"))
        found: dict[str, list[tuple[float, float, float]]] = {way: [] for way in ways}
        for _ in range(asked.rounds):
            for way in ways:
                found[way].append(measured(way, folder))
    print(f"{asked.years} years of {asked.step}s, {asked.side} x {asked.side} cells, three variables, chunks by "
          f"{asked.chunks}{', packed' if asked.packed else ''}, {size / 1e6:.0f} MB; median of {asked.rounds} rounds")
    print(f"{'':<36}{'CPU s':>8}{'ratio':>8}{'wall s':>8}{'peak MB':>9}")
    for way in ways:
        cpu, wall, peak = (statistics.median(column) for column in zip(*found[way], strict=True))
        ratio = statistics.median(mine[0] / base[0] for mine, base in zip(found[way], found["bare"], strict=True))
        print(f"{WAYS[way][0]:<36}{cpu:>8.2f}{ratio:>8.2f}{wall:>8.2f}{peak:>9.0f}")


if __name__ == "__main__":
    if sys.argv[1:2] == ["--inner"]:
        WAYS[sys.argv[2]][1](sys.argv[3])
        status = Path("/proc/self/status").read_text()  # rusage would count what the parent held before the start
        print(float(status.split("VmHWM:")[1].split()[0]) / 1024.0)
    else:
        main()
