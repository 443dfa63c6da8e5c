"""Milliseconds a file that a plan of many small NetCDF files takes: python tests/benchmarks/bench_plan.py [FILES].

Speeds depend on the machine; what must hold is that a file costs a few milliseconds. Nothing here is a test.
"""

from __future__ import annotations

import shutil
import sys
import tempfile
import time
from pathlib import Path

import netCDF4
import numpy as np

from stillfield.plan import plan
from stillfield.settings.load import load_run
from stillfield.sources.grids.netcdf import open_netcdf

STILL = Path(__file__).parents[2] / "config" / "stills" / "single-slope-glass.yaml"
LATITUDE, LONGITUDE = np.arange(8.0, 10.0, 0.25), np.arange(-1.0, 1.0, 0.25)
VARIABLES = {
    "rsds": ("surface_downwelling_shortwave_flux_in_air", "MJ m-2", 18.0),
    "tas": ("air_temperature", "degC", 27.0),
    "sfcWind": ("wind_speed", "m s-1", 3.0),
}


def write_day(path: Path, day: int) -> None:
    """One file of one day, as daily archives have them."""
    with netCDF4.Dataset(path, "w") as file:
        for name, size in (("time", None), ("lat", LATITUDE.size), ("lon", LONGITUDE.size)):
            file.createDimension(name, size)
        for name, values, units in (
            ("time", [float(day)], "days since 1990-01-01"), ("lat", LATITUDE, "degrees_north"),
            ("lon", LONGITUDE, "degrees_east"),
        ):
            axis = file.createVariable(name, "f8", (name,))
            axis.setncatts({"units": units, "standard_name": {"lat": "latitude", "lon": "longitude"}.get(name, name)})
            axis[:] = values
        for name, (standard_name, units, value) in VARIABLES.items():
            variable = file.createVariable(name, "f4", ("time", "lat", "lon"), zlib=True, fill_value=np.float32(1e20))
            variable.setncatts({"standard_name": standard_name, "units": units, "long_name": name,
                                "cell_methods": "time: mean", "grid_mapping": "none"})
            variable[:] = value


def measured(label: str, files: int, work: object) -> None:
    """Time of one call, in all and a file."""
    start = time.perf_counter()
    work()  # type: ignore[operator]
    seconds = time.perf_counter() - start
    print(f"{label:32} {seconds:8.1f} s {1000 * seconds / files:8.2f} ms a file")


def main() -> None:
    """Make the files, plan, and clear up."""
    count = int(sys.argv[1]) if len(sys.argv) > 1 else 2000
    folder = Path(tempfile.mkdtemp(prefix="bench-plan-"))
    try:
        start = time.perf_counter()
        for day in range(count):
            write_day(folder / f"w{day:05d}.nc", day)
        print(f"{count} files of one day and {LATITUDE.size * LONGITUDE.size} cells made in "
              f"{time.perf_counter() - start:.0f} s")
        run_file = folder / "run.yaml"
        run_file.write_text(f"name: bench\nweather: {{kind: netcdf, files: 'w*.nc'}}\nstill: {STILL.as_posix()}\n")
        open_netcdf([str(folder / "w00000.nc"), str(folder / "w00001.nc")])  # imports are not counted
        settings = []
        measured("reading the run file", count, lambda: settings.append(load_run(run_file)))
        measured("plan, everything after that", count, lambda: plan(settings[0], run_file=run_file))
        measured("opening alone, as a run does", count, lambda: open_netcdf([str(folder / "w*.nc")]))
    finally:
        shutil.rmtree(folder)


if __name__ == "__main__":
    main()
