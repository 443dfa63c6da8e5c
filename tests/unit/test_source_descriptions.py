"""Description files: each fits files of its convention, adds to a run file, and is checked like one."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from gridded_samples import DAYS, days, grid, hours, truth
from stillfield.errors import RunFileError, WeatherError
from stillfield.settings.load import load_run, resolved_yaml
from stillfield.sources import open_source

CONFIG = Path(__file__).parents[2] / "config"
STILL = CONFIG / "stills" / "single-slope-glass.yaml"


MONTHLY = {"reanalysis-monthly", "climate-model-monthly", "ship-climatology"}


def loaded(folder: Path, description: str, *, kind: str = "netcdf", more: str = ""):
    given = (CONFIG / "sources" / description).as_posix() if description.endswith(".yaml") else description
    run = folder / "run.yaml"
    weather = f"weather:\n  kind: {kind}\n  files: '*.nc'\n  description: {given}\n{more}"
    run.write_text(f"name: x\n{weather}still: {STILL}\n")
    return load_run(run)


def opened(folder: Path, description: str, **options):
    weather = loaded(folder, description, **options).weather
    return open_source(weather.kind, weather.names, **weather.options()).open()


def instants(true):
    """Temperature, dew point and wind components as reanalyses have them."""
    return {"t2m": (true.temp_air + 273.15, "K"), "d2m": (true.temp_air + 263.15, "K"),
            "u10": (0.6 * true.wind_10m, "m s**-1"), "v10": (0.8 * true.wind_10m, "m s**-1")}


def since_midnight(true) -> np.ndarray:
    """Energy since 00 UTC, stamped at the end of each hour."""
    return np.cumsum(true.ghi.reshape(DAYS, 24, *true.ghi.shape[1:]), axis=1).reshape(true.ghi.shape) * 3600.0


def months(values: np.ndarray) -> np.ndarray:
    return np.repeat(values.mean(axis=0, keepdims=True), 12, axis=0)


STARTS = np.array([f"2001-{month:02d}-01" for month in range(1, 13)], dtype="datetime64[ns]")


def written(description: str, folder: Path) -> None:
    """Files of the convention, made of the invented weather of the samples."""
    true = truth()
    if description == "reanalysis-hourly.yaml":
        sun = grid(hours(1.0), ssrd=(true.ghi * 3600.0, "J m**-2"))
        xr.merge([sun, grid(hours(), **instants(true))], join="outer").to_netcdf(folder / "a.nc")
    elif description == "reanalysis-land-hourly.yaml":
        sun = grid(hours(1.0), ssrd=(since_midnight(true), "J m**-2"))
        xr.merge([sun, grid(hours(), **instants(true))], join="outer").to_netcdf(folder / "a.nc")
    elif description == "climate-model-daily.yaml":
        day = grid(days(12.0), rsds=(true.irradiation / 0.0864, "W m-2"),
                   tas=(true.temp_air[::24] + 273.15, "K"), sfcWind=(true.wind_10m[::24], "m s-1"))
        day.to_netcdf(folder / "a.nc")
    elif description == "observed-grid-daily.yaml":
        grid(days(), qq=(true.irradiation / 0.0864, "W/m2"), tg=(true.temp_air[::24], "Celsius"),
             fg=(true.wind_10m[::24], "m/s")).to_netcdf(folder / "a.nc")
    else:
        names = {"reanalysis-monthly.yaml": ("ssrd", 1e6, "J m**-2", "t2m", "si10"),
                 "climate-model-monthly.yaml": ("rsds", 1 / 0.0864, "W m-2", "tas", "sfcWind"),
                 "ship-climatology.yaml": ("ghi", 1 / 0.0864, "W m-2", "AIRT", "WSPD")}[description]
        sun, factor, units, air, wind = names
        about = {"units": units, "cell_methods": "time: mean"} if sun == "ghi" else units
        grid(STARTS, **{sun: (months(true.irradiation) * factor, about), air: (months(true.temp_air) + 273.15, "K"),
                        wind: (months(true.wind_10m), "m s-1")}).to_netcdf(folder / "a.nc")


@pytest.mark.parametrize("path", sorted((CONFIG / "sources").glob("*.yaml")), ids=lambda path: path.name)
def test_every_shipped_description_fits_files_of_its_convention(tmp_path, path):
    written(path.name, tmp_path)
    true = truth()
    kind = "monthly-means" if path.stem in MONTHLY else "netcdf"
    weather = opened(tmp_path, path.name, kind=kind)
    assert {"temp_air", "wind_speed"} <= set(weather)
    if "ghi" in weather:
        known = weather.ghi.sel(time=hours())
        np.testing.assert_allclose(known, true.ghi, rtol=1e-6, atol=1e-3)
        np.testing.assert_allclose(weather.wind_speed.sel(time=hours()), 0.748 * true.wind_10m, rtol=1e-3)
        np.testing.assert_allclose(weather.temp_dew.sel(time=hours()), true.temp_air - 10, atol=1e-6)
    elif kind == "netcdf":
        np.testing.assert_allclose(weather.irradiation, true.irradiation, rtol=1e-6)
    else:
        means = weather.irradiation.groupby("time.month").mean("time")
        np.testing.assert_allclose(means, months(true.irradiation), rtol=1e-6)
        np.testing.assert_allclose(weather.wind_speed[0], 0.748 * true.wind_10m.mean(axis=0), rtol=1e-3)


def test_the_wrong_description_is_contradicted_by_the_numbers(tmp_path):
    written("reanalysis-hourly.yaml", tmp_path)
    with pytest.raises(WeatherError, match="contradicts the numbers, which do not grow from 00 UTC on"):
        opened(tmp_path, "reanalysis-land-hourly.yaml")


def test_the_run_file_adds_to_a_description_key_by_key(tmp_path):
    written("climate-model-daily.yaml", tmp_path)
    more = "  variables: {irradiation: sun, wind_speed: {height_m: 2}, temp_dew: td}\n"
    mapping = loaded(tmp_path, "climate-model-daily.yaml", more=more).weather.options()["variables"]
    assert mapping["irradiation"] == {"name": "sun", "means": "daily-mean"}
    assert mapping["wind_speed"] == {"name": "sfcWind", "height_m": 2, "optional": True}
    assert mapping["temp_dew"] == {"name": "td"}
    assert mapping["temp_air"] == {"name": "tas", "optional": True}
    other = loaded(tmp_path, "reanalysis-hourly.yaml", more="  variables: {irradiation: sun}\n").weather.options()
    assert other["variables"]["irradiation"] == {"name": "sun", "means": "hour-ending accumulation"}
    assert "ghi" not in other["variables"]


def test_what_a_run_file_names_must_be_there_and_what_a_description_names_need_not(tmp_path):
    written("climate-model-daily.yaml", tmp_path)
    assert "relative_humidity" not in opened(tmp_path, "climate-model-daily.yaml")
    with pytest.raises(WeatherError, match=r"no such variable in a\.nc"):
        opened(tmp_path, "climate-model-daily.yaml", more="  variables: {relative_humidity: hurs}\n")


def test_faults_of_a_description_stand_among_those_of_the_run_file(tmp_path):
    written("climate-model-daily.yaml", tmp_path)
    (tmp_path / "d.yaml").write_text("about: mine\nvariables:\n  irradiatoin: rsds\n  tas: {unit: K}\nabuot: x\n")
    with pytest.raises(RunFileError) as caught:
        loaded(tmp_path, str(tmp_path / "d.yaml"))
    text = str(caught.value)
    assert "irradiatoin: unknown key (did you mean 'irradiation'?)" in text
    assert "abuot: unknown key (did you mean 'about'?)" in text
    assert "line 5, weather.description" in text
    with pytest.raises(RunFileError, match="no such file"):
        loaded(tmp_path, str(tmp_path / "e.yaml"))


def test_a_description_is_an_input_and_survives_the_resolved_file(tmp_path):
    written("climate-model-daily.yaml", tmp_path)
    (tmp_path / "d.yaml").write_text("about: mine\nvariables: {irradiation: {means: daily-mean}}\n")
    run = tmp_path / "run.yaml"
    run.write_text(f"name: x\nweather: {{kind: netcdf, files: a.nc, description: d.yaml}}\nstill: {STILL}\n")
    settings = load_run(run)
    assert [Path(name).name for name in settings.weather.further] == ["d.yaml"]
    (tmp_path / "again.yaml").write_text(resolved_yaml(settings).replace(f".../{STILL.name}", str(STILL)))
    again = load_run(tmp_path / "again.yaml").weather
    assert again.options() == settings.weather.options()
