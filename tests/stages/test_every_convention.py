"""One weather in every convention of gridded files gives the same monthly litres, by the rule and by the fit.

The weather is two cells, one on either side of the antimeridian, over 42 days of hours, and the sums of its
local days. Every pair of two ways of writing (a unit and a calendar, a packing and a file split, ...) occurs
in some case. The litres by the rule are also held against the rule worked by hand on the truth.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import combinations, product
from pathlib import Path
from typing import Any

import cftime
import numpy as np
import pytest
import xarray as xr

import stillfield as sf

DESIGN = sf.load_still(Path(__file__).parents[2] / "config" / "stills" / "single-slope-glass.yaml")
LATITUDE, LONGITUDE = 12.0, np.array([179.5, -179.5])
UTC_DAYS, FIRST = 42, (2010, 2, 26)
#: An hour of March when it is about midnight at both cells: sunshine missing then is known to be 0, and one hour of
#: temperature and wind is bridged. In daily files a day of February is missing instead.
MIDNIGHT = 20 * 24 + 12
#: 0.30 of the sunshine over 2.3 MJ L-1: common practice, no source; the rule's own definition.
RULE = 0.30 / 2.3

#: What may differ, and how. Each case takes one of each.
HOURLY_WAYS: dict[str, tuple[str, ...]] = {
    "sunshine": ("W m-2", "kW/m2", "J m**-2 of the hour", "kJ/m2 of the hour", "Wh m-2 of the hour",
                 "J m**-2 since 00 UTC", "kWh m-2 since 00 UTC"),
    "stamp": ("start", "middle", "end", "bounds"),
    "temperature": ("K", "degC", "deg C"),
    "wind": ("m s-1", "km/h", "components"),
    "longitude": ("0..360", "-180..180", "beyond 360"),
    "rows": ("one row", "south up", "north up"),
    "order": ("time, lat, lon", "lon, lat, time", "lat, time, lon"),
    "names": ("time, latitude, longitude", "valid_time, lat, lon", "t, y, x by attributes"),
    "numbers": ("float64", "float32", "int16", "float32 with -999"),
    "files": ("one", "cut in time", "one for each variable", "overlapping", "hours shuffled"),
    "engine": ("netcdf4", "h5netcdf", "classic"),
    "clock": ("hours since 1900", "seconds since 1970", "minutes since 2010", "days since, fractions"),
    "calendar": ("standard", "proleptic_gregorian", "noleap", "360_day", "all_leap"),
}
DAILY_WAYS: dict[str, tuple[str, ...]] = {
    **{key: HOURLY_WAYS[key] for key in ("temperature", "longitude", "rows", "order", "names", "numbers", "files",
                                         "engine", "calendar")},
    "sunshine": ("MJ m-2", "J m-2", "kWh/m2/day", "W m-2 mean of 24 h", "W m-2 mean of daylight"),
    "stamp": ("start", "middle", "end", "bounds"),
    "wind": ("m s-1", "km/h"),
    "clock": ("hours since 1900", "days since, fractions"),
}


def pairwise(ways: dict[str, tuple[str, ...]], allowed: Any) -> Iterator[dict[str, str]]:
    """Cases that together hold every allowed pair of values, found greedily; the same on every run."""
    keys = list(ways)
    left = {((a, x), (b, y)) for a, b in combinations(keys, 2) for x, y in product(ways[a], ways[b])
            if allowed({a: x, b: y})}
    while left:
        case: dict[str, str] = dict(min(left))
        for key in sorted((key for key in keys if key not in case), key=lambda key: -len(ways[key])):
            options = [value for value in ways[key] if allowed({**case, key: value})]
            case[key] = max(options, key=lambda value: sum(
                ((a, case.get(a, value)), (b, case.get(b, value))) in left
                for a, b in combinations(keys, 2) if key in (a, b) and {a, b} <= {*case, key}))
        left -= {((a, case[a]), (b, case[b])) for a, b in combinations(keys, 2)}
        yield case


def allowed_hourly(case: dict[str, str]) -> bool:
    """A growing sum has no middle and no start; a file of mixed kinds of stamps is no single convention."""
    grows = "since 00" in case.get("sunshine", "")
    return not (grows and case.get("stamp", "end") != "end")


NAMES = {"time, latitude, longitude": ("time", "latitude", "longitude"),
         "valid_time, lat, lon": ("valid_time", "lat", "lon"),
         "t, y, x by attributes": ("t", "y", "x")}
ROWS = {"one row": [LATITUDE], "south up": [LATITUDE, LATITUDE + 1], "north up": [LATITUDE + 1, LATITUDE]}
CLOCKS = {"hours since 1900": ("hours since 1900-01-01", "float64"),
          "seconds since 1970": ("seconds since 1970-01-01", "int64"),
          "minutes since 2010": ("minutes since 2010-01-01", "float64"),
          "days since, fractions": ("days since 2000-01-01", "float64")}
ENGINES: dict[str, dict[str, Any]] = {
    "netcdf4": {"engine": "netcdf4"}, "h5netcdf": {"engine": "h5netcdf"},
    "classic": {"engine": "netcdf4", "format": "NETCDF3_64BIT"},
}


@dataclass(frozen=True)
class Truth:
    """Two cells (last axis) in hours of UTC and in their own solar days."""

    ghi: np.ndarray
    temp: np.ndarray
    wind: np.ndarray

    def local(self, values: np.ndarray) -> np.ndarray:
        """Whole local days of each cell: shift by the hours of longitude / 15, rounded (12 and -12)."""
        east, west = values[12:-12, 0].reshape(-1, 24), values[12:-12, 1].reshape(-1, 24)
        return np.stack([east, west], axis=-1)


def truth() -> Truth:
    """Clear to dull days, different in both cells; sunshine by the cosine of the sun's height at the equinox."""
    hour = np.arange(UTC_DAYS * 24)
    random = np.random.default_rng(5)
    ghi = np.empty((hour.size, 2))
    for cell, longitude in enumerate(LONGITUDE):
        solar = hour + 0.5 + longitude / 15
        day = np.floor(solar / 24).astype(int) + 1
        height = np.cos((solar % 24 - 12) * np.pi / 12) * np.cos(np.radians(LATITUDE))
        ghi[:, cell] = 1000.0 * np.maximum(height, 0) * random.uniform(0.25, 0.75, UTC_DAYS + 3)[day]
    phase = ((hour % 24)[:, None] + LONGITUDE / 15 - 9) * np.pi / 12
    temp = 26 + 4 * np.sin(phase) + np.array([0.0, 1.0])
    return Truth(ghi, temp, 2.5 + 1.5 * np.sin(phase / 2) ** 2)


TRUE = truth()


def stamps(count: int, step: float, calendar: str, shift: float) -> np.ndarray:
    """Dates from the first on, moved by `shift` hours, in any calendar."""
    first = cftime.num2date(0.0, f"hours since {FIRST[0]}-{FIRST[1]:02d}-{FIRST[2]:02d}", calendar)
    numbers = np.arange(count) * step + shift
    return cftime.num2date(numbers, f"hours since {first.strftime('%Y-%m-%d')}", calendar)


def sunshine(case: dict[str, str], daily: bool) -> tuple[np.ndarray, str, str | None]:
    """Values, unit and what the run file has to say."""
    way = case["sunshine"]
    if daily:
        total = TRUE.local(TRUE.ghi).sum(axis=1) * 0.0036
        numbers = {"MJ m-2": (total, "MJ m-2", None), "J m-2": (total * 1e6, "J m-2", None),
                   "kWh/m2/day": (total / 3.6, "kWh/m2/day", None),
                   "W m-2 mean of 24 h": (total / 0.0864, "W m-2", "daily-mean")}
        if way in numbers:
            return numbers[way]
        from stillfield.physics.sun import day_length  # the check of the length itself is in test_own_days
        from stillfield.sources.calendars import solar_day_of_year

        dates = xr.DataArray(stamps(len(total), 24.0, case["calendar"], 0.0), dims="time")
        hours = day_length([LATITUDE], solar_day_of_year(dates))
        return total / (hours * 0.0036), "W m-2", "daylight-mean"
    summed = TRUE.ghi.reshape(UTC_DAYS, 24, 2).cumsum(axis=1).reshape(TRUE.ghi.shape)
    ends = {"start": "hour-starting accumulation", "middle": None, "bounds": None,
            "end": "hour-ending accumulation"}[case["stamp"]]
    return {
        "W m-2": (TRUE.ghi, "W m-2", None), "kW/m2": (TRUE.ghi / 1000, "kW/m2", None),
        "J m**-2 of the hour": (TRUE.ghi * 3600, "J m**-2", ends),
        "kJ/m2 of the hour": (TRUE.ghi * 3.6, "kJ/m2", ends),
        "Wh m-2 of the hour": (TRUE.ghi, "Wh m-2", ends),
        "J m**-2 since 00 UTC": (summed * 3600, "J m**-2", None),
        "kWh m-2 since 00 UTC": (summed / 1000, "kWh m-2", "since-00-UTC"),
    }[way]


def dataset(case: dict[str, str], daily: bool) -> tuple[xr.Dataset, dict[str, Any]]:
    """The weather in one convention, and the `variables` that have to go with it."""
    energy, unit, means = sunshine(case, daily)
    temp = TRUE.local(TRUE.temp).mean(axis=1) if daily else TRUE.temp
    wind = TRUE.local(TRUE.wind).mean(axis=1) if daily else TRUE.wind
    step = 24.0 if daily else 1.0
    shift = {"start": 0.0, "middle": step / 2, "end": step, "bounds": step / 2}[case["stamp"]]
    grows = "since 00" in case["sunshine"]
    # An instant or mean of temperature and wind belongs to the stamp as a start: a file that stamps its sunshine at
    # the end holds the temperature of an hour one stamp earlier. Daily files stamp everything alike.
    late = 1 if case["stamp"] == "end" and not daily else 0
    temp, wind = (np.concatenate([values[late:], values[:1][:late]]) for values in (temp, wind))
    tables: dict[str, tuple[np.ndarray, str]] = {"rsds": (energy, unit)}
    scale = {"K": (1.0, 273.15), "degC": (1.0, 0.0), "deg C": (1.0, 0.0)}[case["temperature"]]
    tables["tas"] = (temp * scale[0] + scale[1], case["temperature"])
    if case["wind"] == "components":
        tables |= {"u10": (0.6 * wind, "m s**-1"), "v10": (-0.8 * wind, "m s-1")}
    else:
        tables["sfcWind"] = (wind * (3.6 if case["wind"] == "km/h" else 1.0), case["wind"])
    time, lat, lon = NAMES[case["names"]]
    rows = ROWS[case["rows"]]
    east = {"0..360": LONGITUDE % 360, "-180..180": LONGITUDE, "beyond 360": LONGITUDE % 360 + 360}[case["longitude"]]
    columns = np.argsort(east)
    said: dict[str, Any] = {"name": "rsds"}
    said |= {} if means is None else {"means": means}
    if case["stamp"] in {"end", "start"} and not grows and means is None:
        said["stamp"] = case["stamp"]
    if daily and case["stamp"] == "end":
        said["stamp"] = "end"
    data = {}
    for name, (values, units) in tables.items():
        box = np.repeat(values[:, None, columns], len(rows), axis=1)
        if case["numbers"] == "float32 with -999" and not (grows and name == "rsds"):
            box[0 if daily else MIDNIGHT, :, 0] = -999.0
        data[name] = ((time, lat, lon), box, {"units": units})
    coords = {time: (time, stamps(len(temp), step, case["calendar"], shift), {"standard_name": "time"}),
              lat: (lat, rows, {"units": "degrees_north"}), lon: (lon, east[columns], {"units": "degrees_east"})}
    weather = xr.Dataset(data, coords=coords)
    order = {"time, lat, lon": (time, lat, lon), "lon, lat, time": (lon, lat, time), "lat, time, lon": (lat, time, lon)}
    weather = weather.transpose(*order[case["order"]])
    if case["stamp"] == "bounds":
        edges = [stamps(len(temp), step, case["calendar"], move) for move in (0.0, step)]
        weather[f"{time}_bnds"] = ((time, "nv"), np.stack(edges, axis=1))
        weather[time].attrs["bounds"] = f"{time}_bnds"
    # Daily stamps of one kind apply to all variables.
    others = {name: {"name": old, "stamp": "end"} for name, old in (("temp_air", "tas"), ("wind_speed", "sfcWind"))
              if daily and case["stamp"] == "end" and old in weather}
    return weather, {"irradiation": said, **others}


def write(weather: xr.Dataset, case: dict[str, str], folder: Path) -> list[str]:
    """Write the files of a case."""
    time = next(str(name) for name in weather.coords if name in {"time", "valid_time", "t"})
    half, count = weather.sizes[time] // 2, weather.sizes[time]
    names = [str(name) for name in weather.data_vars if not str(name).endswith("_bnds")]
    extra = [str(name) for name in weather.data_vars if str(name).endswith("_bnds")]
    shuffled = np.random.default_rng(1).permutation(count)
    parts = {
        "one": [weather],
        "cut in time": [weather.isel({time: slice(half, None)}), weather.isel({time: slice(None, half)})],
        "one for each variable": [weather[[name, *extra]] for name in names],
        "overlapping": [weather.isel({time: slice(None, half + 5)}), weather.isel({time: slice(half, None)})],
        "hours shuffled": [weather.isel({time: shuffled})],
    }[case["files"]]
    clock = CLOCKS[case["clock"]]
    files = []
    for number, part in enumerate(parts):
        path = folder / f"w{number}.nc"
        encoding: dict[str, Any] = {time: {"units": clock[0], "calendar": case["calendar"], "dtype": clock[1]}}
        if case["engine"] == "classic":
            encoding[time]["dtype"] = "float64"
        for name in (name for name in names if name in part):
            encoding[name] = packing(part[name], case["numbers"])
        single = {} if not case["numbers"].startswith("float32") else {
            dim: (dim, part[dim].values.astype(np.float32), part[dim].attrs)
            for dim in part.dims if dim in part.coords and dim != time}
        part.assign_coords(single).to_netcdf(path, encoding=encoding, **ENGINES[case["engine"]])
        files.append(str(path))
    return files


def packing(values: xr.DataArray, numbers: str) -> dict[str, Any]:
    """Each file packs its values with its own scale and offset."""
    if not numbers.startswith("int16"):
        return {"dtype": numbers.partition(" ")[0], "_FillValue": None}
    low, high = float(values.min()), float(values.max())
    return {"dtype": "int16", "scale_factor": max(high - low, 1e-6) / 65000, "add_offset": (high + low) / 2,
            "_FillValue": -32768}


def opened(case: dict[str, str], folder: Path, *, daily: bool) -> xr.Dataset:
    weather, said = dataset(case, daily)
    folder.mkdir()
    return sf.open_weather(write(weather, case, folder), "netcdf", variables=said,
                           **({"day_clock": "local"} if daily else {}))


def march_by_hand(calendar: str, daily: bool) -> np.ndarray:
    """The rule on the mean day of March times the days of March; local days carry the date of their own longitude."""
    per_day = TRUE.local(TRUE.ghi).sum(axis=1) * 0.0036
    # East of 180 the first whole day is that of the next date, west of it that of the first: local noon is at 0 UTC.
    dates = stamps(len(per_day) + 1, 24.0, calendar, 0.0)
    result = []
    for cell in range(2):
        own = dates[:-1] if daily or cell == 1 else dates[1:]
        chosen = np.array([date.month == 3 for date in own])
        length = {"360_day": 30}.get(calendar, 31)
        result.append(RULE * per_day[chosen, cell].mean() * length)
    return np.array(result)


def _name(case: dict[str, str]) -> str:
    return ", ".join(case[key] for key in sorted(case))


HOURLY = list(pairwise(HOURLY_WAYS, allowed_hourly))
DAILY = list(pairwise(DAILY_WAYS, lambda case: True))
CASES = [(False, case) for case in HOURLY] + [(True, case) for case in DAILY]
_BASELINE: dict[tuple[bool, str], np.ndarray] = {}


def baseline(daily: bool, calendar: str, folder: Path) -> np.ndarray:
    """March by the fit from the plainest files, once for each calendar."""
    key = (daily, calendar)
    if key not in _BASELINE:
        ways = DAILY_WAYS if daily else HOURLY_WAYS
        case = {**{name: values[0] for name, values in ways.items()}, "calendar": calendar}
        _BASELINE[key] = march(sf.monthly_yield(opened(case, folder, daily=daily), DESIGN, method="fitted"))
    return _BASELINE[key]


def march(monthly: xr.Dataset) -> np.ndarray:
    """March of the two cells, the eastern hemisphere's first."""
    assert float(abs(monthly.longitude.diff("longitude")).max()) == pytest.approx(1.0), "columns are not side by side"
    east = monthly.assign_coords(longitude=monthly.longitude % 360).sortby("longitude")
    rows = east["monthly_yield"].sel(month=3)
    return rows.sel(latitude=LATITUDE).to_numpy()


@pytest.mark.parametrize(("daily", "case"), CASES, ids=[f"{'daily' if daily else 'hourly'}: {_name(case)}"
                                                        for daily, case in CASES])
def test_the_litres_of_march_are_the_same(tmp_path, daily, case):
    weather = opened(case, tmp_path / "case", daily=daily)
    by_rule = march(sf.monthly_yield(weather, DESIGN, method="rule"))
    rounding = 3e-4 if case["numbers"].startswith("int16") else 3e-6
    np.testing.assert_allclose(by_rule, march_by_hand(case["calendar"], daily), rtol=rounding)
    by_fit = march(sf.monthly_yield(weather, DESIGN, method="fitted"))
    np.testing.assert_allclose(by_fit, baseline(daily, case["calendar"], tmp_path / "plain"), rtol=1e-3)


def test_every_pair_of_ways_occurs():
    for cases, ways, allowed in ((HOURLY, HOURLY_WAYS, allowed_hourly), (DAILY, DAILY_WAYS, lambda case: True)):
        for a, b in combinations(ways, 2):
            for x, y in product(ways[a], ways[b]):
                assert any(case[a] == x and case[b] == y for case in cases) or not allowed({a: x, b: y})
