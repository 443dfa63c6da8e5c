"""Monthly means, a climatology or a series, on grids that may differ: days are generated from them.

A month's mean says nothing of its days, and the yield bends with sunshine. So each month is given days whose
clearness spreads as that of real days (`stillfield.physics.clearness_days`); the mean irradiation of the month
is kept. Temperature, humidity and wind are the month's mean on all its days. What comes out is a typical year:
it holds no poor year, and none may be read from it.
"""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from stillfield.errors import WeatherError
from stillfield.physics.clearness_days import DAYS_IN_MONTH, daily_irradiation
from stillfield.physics.sun import extraterrestrial_irradiation
from stillfield.physics.temperature_range import irradiation_from_temperature
from stillfield.sources.gates import gate
from stillfield.sources.grids.file_proof import prove_whole
from stillfield.sources.grids.netcdf import check_choices, join_roles, require_sunshine
from stillfield.sources.grids.netcdf_pieces import Piece, take_pieces
from stillfield.sources.locate import locate
from stillfield.sources.months.month_axis import MONTHS, NOMINAL_YEAR, with_months
from stillfield.sources.months.nearest_cells import on_cells_of
from stillfield.sources.quantities import Joined, dew_point, mean_temperature, plain, wind
from stillfield.sources.recognise import Choice, Found, read_mapping
from stillfield.sources.stations.station_table import TableOptions, read_stations, where_of
from stillfield.sources.units import conversion, irradiation_kind
from stillfield.vocabulary import DAY_WEATHER

#: Month of every day of the nominal year, from 0.
_MONTH_OF_DAY = np.repeat(np.arange(MONTHS), DAYS_IN_MONTH)
#: Cells whose days are generated at a time.
_BLOCK_CELLS = 20_000
_HOURS = 24.0


def open_monthly_means(
    files: Sequence[str], *, variables: Mapping[str, str | Mapping[str, Any]] | None = None,
    table: Mapping[str, Any] | None = None, join_within_km: float | None = None,
    radiation_from_temperature: Mapping[str, float] | None = None,
) -> xr.Dataset:
    """Open monthly means as a typical year of generated days.

    Parameters
    ----------
    files : sequence of str
        NetCDF files, paths or patterns; they may split months and variables, and their grids may differ. Or
        tables of stations, a row for each month.
    variables : mapping, optional
        As for `stillfield.sources.grids.netcdf.open_netcdf`; ``means`` is 'daily-mean' for a rate, 'daily-total' or
        'monthly-total' for an energy.
    table : mapping, optional
        How tables are written, as for `stillfield.sources.stations.station_table.open_station_table`.
    join_within_km : float, optional
        Farthest that temperature, humidity and wind may come from, where their grid is not that of the
        sunshine; grids that differ are refused without it. [km]
    radiation_from_temperature : mapping, optional
        ``k_rs``: estimate the irradiation from monthly means of minimum and maximum temperature.

    Returns
    -------
    xarray.Dataset
        Daily weather of the year 2001, lazy; attributes ``record`` 'typical-year' and ``generated_days``.

    Raises
    ------
    WeatherError
        If a file is broken or not monthly, grids differ, or the sunshine can be read in two ways.
    UnitsError
        If a unit is missing, unknown or of the wrong kind.
    """
    paths = locate(files)
    choices = read_mapping(variables)
    if table is not None or not _is_netcdf(paths[0]):
        stations = read_stations(paths, choices, TableOptions(**(table or {})), monthly=True)
        pieces = take_pieces(stations.weather, where_of(paths), stations.choices)
        days = days_from_monthly(pieces, stations.choices, labels=[path.name for path in paths],
                                 available=stations.headings, radiation_from_temperature=radiation_from_temperature)
        said = [line for line in days.attrs["conventions"] if " is read as " not in line]
        return days.assign_attrs(conventions=[*stations.notes, *said], recognised=stations.recognised)
    pieces = [piece for path in paths for piece in _pieces(path, choices)]
    names = dict.fromkeys(name for path in paths[:3] for name in _variable_names(path))
    return days_from_monthly(
        pieces, choices, labels=[path.name for path in paths], available=", ".join(names),
        join_within_km=join_within_km, radiation_from_temperature=radiation_from_temperature,
    )


def _is_netcdf(path: Path) -> bool:
    with path.open("rb") as stream:
        return stream.read(4)[:3] in (b"CDF", b"\x89HD")


def _pieces(path: Path, choices: Mapping[str, Choice]) -> list[Piece]:
    prove_whole(path)
    try:
        raw = xr.open_dataset(path, engine="netcdf4", decode_times=False, decode_timedelta=False, cache=False)
    except Exception as fault:  # netCDF4 and HDF5 each raise their own kinds
        raise WeatherError("the file cannot be read", where=str(path), got=" ".join(str(fault).split())[:160],
                           cure="It is broken or cut off; get it again.") from fault
    try:
        weather, notes = with_months(raw, where=str(path))
        taken = take_pieces(weather, str(path), choices)
    except BaseException:
        raw.close()
        raise
    return [replace(piece, notes=(*piece.notes, *notes)) for piece in taken]


def _variable_names(path: Path) -> list[str]:
    with xr.open_dataset(path, engine="netcdf4", decode_cf=False) as raw:
        return [str(name) for name in raw.data_vars]


def days_from_monthly(
    pieces: Sequence[Piece], choices: Mapping[str, Choice], *, labels: Sequence[str], available: str,
    join_within_km: float | None = None, radiation_from_temperature: Mapping[str, float] | None = None,
) -> xr.Dataset:
    """Generate the days of a typical year from pieces whose times are the starts of months.

    Parameters
    ----------
    pieces : sequence of Piece
        From `netcdf_pieces.take_pieces`.
    choices : mapping of str to Choice
        What the run file says.
    labels : sequence of str
        Names of the files.
    available : str
        Variables there are, for errors.
    join_within_km, radiation_from_temperature
        As in `open_monthly_means`.

    Returns
    -------
    xarray.Dataset

    Raises
    ------
    WeatherError, UnitsError
        As `open_monthly_means`.
    """
    check_choices(choices, pieces, lambda: available, labels)
    joined, notes = join_roles(pieces)
    where = ", ".join(labels[:3])
    joined = {role: replace(one, values=one.values.compute()) for role, one in joined.items()}
    notes += _estimate(joined, radiation_from_temperature)
    require_sunshine(joined, labels, lambda: available)
    recognised = [one.found.told(daily=True) for one in joined.values()]
    sun, said = _sunshine(joined.pop("sun"))
    weather, notes = {"irradiation": sun}, [*notes, said]
    for build in (plain, wind, mean_temperature, dew_point):
        built, sentences = build(joined, _HOURS)
        weather |= {name: values for name, values in built.items() if name not in weather}
        notes += sentences
    weather, sentences = _year_of_means(weather)
    notes += sentences
    weather, sentences = on_cells_of("irradiation", weather, within_km=join_within_km, where=where)
    days = gate(_generated(weather), where=where)[0]
    days.attrs |= {
        "record": "typical-year", "step_hours": _HOURS, "clock": "own-days", "recognised": recognised,
        "origin": f"Days generated from monthly means read from {where}.",
        "generated_days": "Clearness spread by Saunier et al. 1987; the mean irradiation of every month is kept.",
        "conventions": [*notes, *sentences, _ABOUT_DAYS],
    }
    return days


_ABOUT_DAYS = (
    "Days were generated from monthly means: their clearness spreads by the distribution of Saunier, Reddy & Kumar "
    "1987 with the highest clearness of Hollands & Huget 1983, in a fixed order with the persistence of real days; "
    "temperature, humidity and wind are the month's mean on every day. Held against 16 real typical years, monthly "
    "yields were 2 to 3 % off on average and annual yields 1.4 %, at most 3 %; months with frost up to 18 %."
)


def _estimate(joined: dict[str, Joined], settings: Mapping[str, float] | None) -> list[str]:
    """Put sunshine estimated from the mean temperature range beside weather that lacks it, if asked for."""
    low, high = joined.get("temp_air_min"), joined.get("temp_air_max")
    if settings is None or "sun" in joined or low is None or high is None:
        if settings is not None:
            raise WeatherError("radiation_from_temperature has no use here", got="measured sunshine" if "sun" in joined
                               else "no minimum and maximum of the air temperature",
                               cure="Leave radiation_from_temperature out.")
        return []
    extremes, _ = plain({"temp_air_min": low, "temp_air_max": high}, _HOURS)
    coldest, warmest = xr.align(extremes["temp_air_min"], extremes["temp_air_max"], join="inner")
    axis = coldest["latitude"].dims[0]
    above = extraterrestrial_irradiation(coldest["latitude"].values, np.arange(1, 366))
    monthly = np.stack([above[month == _MONTH_OF_DAY].mean(axis=0) for month in range(MONTHS)])
    outside = xr.DataArray(monthly[coldest["time"].dt.month.values - 1], dims=("time", axis))
    sun = irradiation_from_temperature(
        coldest.transpose("time", ..., axis).values, warmest.transpose("time", ..., axis).values,
        outside.values.reshape(coldest.sizes["time"], *[1] * (coldest.ndim - 2), -1), k_rs=float(settings["k_rs"]),
    )
    values = coldest.transpose("time", ..., axis).copy(data=sun).transpose(*coldest.dims)
    joined["sun"] = Joined(Found("sun", "irradiation", "MJ m-2", "daily-total", None, None, "", "estimate"), None,
                           values, low.where)
    return [f"WARNING: sunshine was not measured: it is estimated from the temperature range with k_rs "
            f"{settings['k_rs']:g} (Hargreaves & Samani, FAO-56 equation 50). It may be 10 to 20 % off."]


def _sunshine(joined: Joined) -> tuple[xr.DataArray, str]:
    """Mean daily irradiation of every month [MJ m-2]."""
    found, values = joined.found, joined.values
    place = f"{found.name} in {joined.where}"
    units, per_month = _without_month(found.units)
    kind = irradiation_kind(units, where=place)
    means = "monthly-total" if per_month and found.means is None else found.means
    if means is None and kind == "energy-per-day":
        means = "daily-total"
    if means is None and kind == "power" and "time: mean" in re.sub(r":\s+", ": ", found.cell_methods):
        means = "daily-mean"
    if means == "daily-mean" and kind == "power":
        factor = conversion(units, "W m-2", where=place)[0] * 0.0864
        return values * factor, f"{found.name} is the mean irradiance of all hours of the month."
    if means == "daily-total" and kind != "power" and not per_month:
        factor = conversion(units, "MJ m-2" if kind == "energy" else "MJ m-2 day-1", where=place)[0]
        return values * factor, f"{found.name} is the mean energy of a day of the month."
    if means == "monthly-total" and kind == "energy":
        factor = conversion(units, "MJ m-2", where=place)[0]
        days = xr.DataArray(np.array(DAYS_IN_MONTH)[values["time"].dt.month.values - 1], dims="time")
        leap = (values["time"].dt.month == 2) & values["time"].dt.is_leap_year
        return values * factor / (days + leap), f"{found.name} is the energy of the whole month."
    raise WeatherError(
        f"units '{found.units}' and `means: {found.means}` do not say what a monthly value of sunshine is", where=place,
        wanted="'daily-mean' for a rate; 'daily-total' or 'monthly-total' for an energy",
        cure="Set variables.irradiation.means in the run file; the provider's documentation tells.",
    )


def _without_month(units: str | None) -> tuple[str | None, bool]:
    """Units of a monthly energy without their 'per month'; a month is no fixed time for a units library.

    Examples
    --------
    >>> _without_month("kWh/m2/month"), _without_month("kWh m-2"), _without_month("J m**-2 month**-1")
    (('kWh/m2', True), ('kWh m-2', False), ('J m**-2', True))
    """
    if units is None:
        return None, False
    bare = re.sub(r"\s*(/\s*(month|mon|mo)|\b(month|mon|mo)(\*\*|\^)?-1)\s*$", "", units, flags=re.IGNORECASE)
    return bare, bare != units


def _year_of_means(weather: Mapping[str, xr.DataArray]) -> tuple[dict[str, xr.DataArray], list[str]]:
    """Twelve months from a series: the mean over its years of every month."""
    year, notes = {}, []
    stamps = np.array([np.datetime64(f"{NOMINAL_YEAR}-{month:02d}-01", "ns") for month in range(1, MONTHS + 1)])
    longest = {}
    for name, values in weather.items():
        laid = values.transpose("time", ...)
        months = laid["time"].dt.month.values
        slots = np.stack([_mean(laid.values[months == month]) for month in range(1, MONTHS + 1)])
        coords = {key: coord for key, coord in laid.coords.items() if "time" not in coord.dims}
        year[name] = xr.DataArray(slots, dims=laid.dims, coords={**coords, "time": stamps})
        longest[name] = int(np.bincount(months, minlength=MONTHS + 1)[1:].max())
        absent = [month for month in range(1, MONTHS + 1) if month not in months]
        if absent:
            notes.append(f"{name} has no {', '.join(map(str, absent))}. month; the days of it stay missing.")
    if max(longest.values()) > 1:
        counts = ", ".join(f"{name} over {count}" for name, count in longest.items())
        notes.append(f"Every month is a mean over years: {counts}.")
    return year, notes


def _mean(values: NDArray[Any]) -> NDArray[Any]:
    """Mean over the first axis of what is there; NaN where nothing is."""
    count = np.isfinite(values).sum(axis=0)
    total = np.where(np.isfinite(values), values, 0.0).sum(axis=0)
    return np.where(count > 0, total / np.maximum(count, 1), np.nan)


def _generated(monthly: Mapping[str, xr.DataArray]) -> xr.Dataset:
    """Days of all variables, made block by block when they are computed."""
    import dask.array as da

    sun = monthly["irradiation"]
    space = [dim for dim in sun.dims if dim != "time"]
    shape = [sun.sizes[dim] for dim in space]
    columns = min(shape[-1], _BLOCK_CELLS)
    chunks = (*(max(1, _BLOCK_CELLS // columns),) * (len(shape) - 1), columns)
    template = xr.DataArray(np.zeros(shape), dims=space, coords={dim: sun[dim] for dim in space})
    latitude = da.from_array((sun["latitude"].reset_coords(drop=True) + template).transpose(*space).values, chunks)
    time = np.datetime64(f"{NOMINAL_YEAR}-01-01", "ns") + np.arange(_MONTH_OF_DAY.size) * np.timedelta64(1, "D")
    days = {}
    for name, values in monthly.items():
        months = da.from_array(values.transpose("time", *space).values, (MONTHS, *chunks))
        made = da.map_blocks(
            _sunny_days if name == "irradiation" else _even_days, months, latitude[None], dtype=float,
            chunks=((_MONTH_OF_DAY.size,), *months.chunks[1:]), meta=np.empty((0,) * months.ndim),
        )
        days[name] = (("time", *space), made, {"units": DAY_WEATHER[name].unit, "long_name": DAY_WEATHER[name].meaning})
    coords = {name: coord for name, coord in sun.coords.items() if "time" not in coord.dims}
    return xr.Dataset(days, coords={**coords, "time": time})


def _sunny_days(months: NDArray[Any], latitude: NDArray[Any]) -> NDArray[Any]:
    days = daily_irradiation(months.reshape(MONTHS, -1), latitude.ravel())
    return np.asarray(days.reshape(-1, *months.shape[1:]))


def _even_days(months: NDArray[Any], _latitude: NDArray[Any]) -> NDArray[Any]:
    return months[_MONTH_OF_DAY]
