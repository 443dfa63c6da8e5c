"""Print what reading weather costs: the bare NetCDF library, stored weather through it, and past it.

Run it by hand on an idle machine: ``python tests/benchmarks/bench_reading.py [folder]``. CPU time per value; ratios
matter, not seconds. The files are written into a temporary folder, or into the one given. Nothing here is a test.
"""

from __future__ import annotations

import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

import netCDF4
import numpy as np

from stillfield.sources.grids.netcdf import open_netcdf
from stillfield.sources.settle import settle
from stillfield.vocabulary import STEP_WEATHER

RECORDS, ROWS, COLUMNS = 1460, 120, 120
WHOLE = (slice(None),) * 3
LAYOUTS = {
    "float32, deflate": ("f4", {"zlib": True, "complevel": 4, "chunksizes": (365, 20, 40)}),
    "float32, a map a chunk": ("f4", {"zlib": True, "complevel": 4, "chunksizes": (1, 120, 120)}),
    "float32, pencils": ("f4", {"zlib": True, "complevel": 4, "chunksizes": (1460, 4, 4)}),
    "float32, zstd": ("f4", {"compression": "zstd", "complevel": 4, "chunksizes": (365, 20, 40)}),
    "float32, unpacked": ("f4", {"contiguous": True}),
    "int16, deflate": ("i2", {"zlib": True, "complevel": 4, "chunksizes": (365, 20, 40)}),
}


def write(path: Path, dtype: str, options: dict[str, object]) -> None:
    """Hourly air temperature that varies with the hour, the place, and at random."""
    random = np.random.default_rng(1)
    with netCDF4.Dataset(path, "w") as file:
        for name, values, unit in (
            ("time", np.arange(RECORDS) * 1.0, "hours since 2001-01-01"),
            ("latitude", np.linspace(-10.0, 20.0, ROWS), "degrees_north"),
            ("longitude", np.linspace(0.0, 30.0, COLUMNS), "degrees_east"),
        ):
            file.createDimension(name, values.size)
            file.createVariable(name, "f8", (name,))[:] = values
            file[name].units = unit
        hour = np.arange(RECORDS)[:, None, None]
        place = np.linspace(0.0, 6.0, ROWS)[:, None] + np.linspace(0.0, 3.0, COLUMNS)
        warm = 20.0 + 6.0 * np.sin(hour / 24 * 2 * np.pi) + place + random.normal(0.0, 0.5, (RECORDS, ROWS, COLUMNS))
        sun = np.maximum(0.0, 900.0 * np.sin((hour % 24 - 6) / 12 * np.pi)) * random.uniform(0.6, 1.0, warm.shape)
        for name, values, unit in (("t2m", warm.round(2), "degC"), ("ghi", sun.round(1), "W m-2")):
            stored = file.createVariable(name, dtype, ("time", "latitude", "longitude"), **options)
            stored.units = unit
            if dtype == "i2":
                stored.scale_factor, stored.add_offset = 0.02, 400.0
            stored[:] = values


def cost(work: Callable[[], object], values: int, repeats: int = 3) -> float:
    """Least CPU time of some runs after one that is not counted. [ns per value]"""
    work()
    best = np.inf
    for _ in range(repeats):
        start = time.process_time()
        work()
        best = min(best, time.process_time() - start)
    return float(best) / values * 1e9


def bare(path: Path) -> None:
    """A plain loop over chunks, numbers as stored."""
    with netCDF4.Dataset(path) as file:
        stored = file["t2m"]
        stored.set_auto_maskandscale(False)
        chunk = stored.chunking()
        step = chunk[0] if isinstance(chunk, list) and chunk[0] > 1 else 365
        for start in range(0, RECORDS, step):
            stored[start:start + step]


def main() -> None:
    """Write every layout, read it each way, and print the table."""
    folder = Path(sys.argv[1] if len(sys.argv) > 1 else tempfile.mkdtemp())
    values = RECORDS * ROWS * COLUMNS
    out, at = np.empty((RECORDS, ROWS * COLUMNS), np.float32), np.zeros(COLUMNS, int)
    said = {"ghi": {"name": "ghi", "means": "step-mean", "stamp": "start"}}
    print(f"{'CPU ns per value':28}{'bare':>8}{'plain':>8}{'fast':>8}{'bare / fast':>13}")
    for number, (name, (dtype, options)) in enumerate(LAYOUTS.items()):
        path = folder / f"layout-{number}.nc"
        write(path, dtype, options)
        stored = open_netcdf([str(path)], variables=said).encoding["stored"]
        costs = [
            cost(lambda path=path: bare(path), values),
            cost(lambda stored=stored: stored.read("temp_air", *WHOLE, out, at, fast=False), values),
            cost(lambda stored=stored: stored.read("temp_air", *WHOLE, out, at), values),
        ]
        print(f"{name:28}" + "".join(f"{one:8.2f}" for one in costs) + f"{costs[0] / costs[2]:13.2f}")
    weather = out.reshape(RECORDS, ROWS, COLUMNS).copy()
    alone = cost(lambda: settle(weather, STEP_WEATHER["temp_air"], out, at), values)
    print(f"{'settle alone':28}{alone:24.2f}")


if __name__ == "__main__":
    main()
