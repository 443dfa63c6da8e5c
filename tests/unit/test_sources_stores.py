"""Zarr stores and GRIB files give the weather that NetCDF gives; what is broken or not installed is told."""

from __future__ import annotations

import shutil

import eccodes
import numpy as np
import pytest
import xarray as xr

from data.fetch import fetched
from gridded_samples import LATITUDE, LONGITUDE, grid, hours, truth
from stillfield.errors import WeatherError
from stillfield.products.manifest import digest_file, size_of
from stillfield.settings.load import load_run
from stillfield.sources import guess_kind, open_source
from stillfield.sources.grids import stores
from stillfield.sources.grids.netcdf import open_netcdf
from stillfield.sources.recognise import read_mapping
from stillfield.stages.read import describe_inputs

ENDING = {"ghi": {"means": "hour-ending accumulation"}}


def hourly() -> xr.Dataset:
    true = truth()
    return grid(hours(), ghi=(true.ghi, "W m-2"), t2m=(true.temp_air + 273.15, "K"),
                ws10m=(true.wind_10m, {"units": "m s-1", "long_name": "10 metre wind speed"}))


def alike(weather: xr.Dataset, atol: float = 1e-6) -> None:
    true = truth()
    assert weather.attrs["clock"] == "UTC"
    np.testing.assert_allclose(weather.ghi, true.ghi, atol=max(atol, 1e-9))
    np.testing.assert_allclose(weather.temp_air, true.temp_air, atol=max(atol, 1e-9))


# --- Zarr ----------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("version", [2, 3])
@pytest.mark.parametrize("consolidated", [True, False])
@pytest.mark.filterwarnings("ignore:Consolidated metadata is currently not part")
def test_a_store_gives_what_netcdf_gives(tmp_path, version, consolidated):
    weather = hourly()
    weather.to_netcdf(tmp_path / "w.nc")
    weather.chunk(time=30, longitude=2).to_zarr(tmp_path / "w.zarr", zarr_format=version, consolidated=consolidated)
    store = str(tmp_path / "w.zarr")
    assert guess_kind([store]) == "zarr"
    opened = open_source("zarr", [store]).open()
    assert opened.chunks
    alike(opened)
    same = open_netcdf([str(tmp_path / "w.nc")])
    for name in ("ghi", "temp_air", "wind_speed"):
        np.testing.assert_array_equal(opened[name], same[name])
    assert [line for line in opened.attrs["conventions"] if "read as" in line] == [
        line for line in same.attrs["conventions"] if "read as" in line
    ]


def test_packed_stores_and_split_stores_are_joined(tmp_path):
    weather = hourly()
    encoding = {"t2m": {"dtype": "int16", "scale_factor": 0.001, "add_offset": 300.0, "_FillValue": -32768}}
    weather.isel(time=slice(48, None)).to_zarr(tmp_path / "a.zarr", encoding=encoding, zarr_format=2)
    weather.isel(time=slice(0, 48)).to_zarr(tmp_path / "b.zarr", encoding=encoding, zarr_format=2)
    alike(open_source("zarr", [str(tmp_path / "*.zarr")]).open(), atol=6e-4)


def test_lost_chunks_that_would_read_as_numbers_are_refused(tmp_path):
    encoding = {"ghi": {"_FillValue": None}}
    hourly().chunk(time=24).to_zarr(tmp_path / "w.zarr", encoding=encoding, zarr_format=2)
    lost = next(path for path in (tmp_path / "w.zarr" / "ghi").iterdir() if path.name.startswith("2"))
    lost.unlink()
    with pytest.raises(WeatherError, match=r"chunks of 'ghi' are missing and would read as 0\.0 \(got 3 of 4 chunks\)"):
        open_source("zarr", [str(tmp_path / "w.zarr")]).open()


def test_lost_chunks_that_read_as_missing_are_missing(tmp_path):
    hourly().chunk(time=24).to_zarr(tmp_path / "w.zarr", zarr_format=2)
    next(path for path in (tmp_path / "w.zarr" / "t2m").iterdir() if path.name.startswith("1")).unlink()
    weather = open_source("zarr", [str(tmp_path / "w.zarr")]).open()
    assert int(np.isnan(weather.temp_air).any(("latitude", "longitude")).sum()) == 24


def test_folders_that_are_no_stores_and_stores_that_are_broken(tmp_path):
    (tmp_path / "empty.zarr").mkdir()
    with pytest.raises(WeatherError, match="no Zarr store"):
        open_source("zarr", [str(tmp_path / "empty.zarr")]).open()
    hourly().to_zarr(tmp_path / "w.zarr", zarr_format=3, consolidated=False)
    (tmp_path / "w.zarr" / "ghi" / "zarr.json").write_text("{")
    with pytest.raises(WeatherError, match="the store cannot be read"):
        open_source("zarr", [str(tmp_path / "w.zarr")]).open()
    with pytest.raises(WeatherError, match="kind of a store is 'zarr'"):
        open_netcdf([str(tmp_path / "w.zarr")])


def test_a_store_is_named_in_a_run_file_and_its_identity_is_that_of_its_files(tmp_path, config):
    hourly().to_zarr(tmp_path / "w.zarr", zarr_format=2)
    still = config / "stills" / "single-slope-glass.yaml"
    (tmp_path / "run.yaml").write_text(f"name: x\nweather: {{kind: zarr, files: '*.zarr'}}\nstill: {still}\n")
    weather = load_run(tmp_path / "run.yaml").weather
    alike(open_source(weather.kind, weather.names, **weather.options()).open())
    told = describe_inputs(weather.names, tmp_path)
    assert list(told) == ["w.zarr"]
    assert told["w.zarr"]["bytes"] == size_of(tmp_path / "w.zarr") > 1000
    shutil.copytree(tmp_path / "w.zarr", tmp_path / "copy.zarr")
    assert digest_file(tmp_path / "copy.zarr") == told["w.zarr"]["sha256"]
    (tmp_path / "copy.zarr" / ".zattrs").write_text("{}\n")
    assert digest_file(tmp_path / "copy.zarr") != told["w.zarr"]["sha256"]


@pytest.fixture
def config(request):
    return request.config.rootpath / "config"


# --- GRIB ----------------------------------------------------------------------------------------------------


def grib(path, fields, *, leads=None):
    """Write messages of (short name, values by time) on the sample grid, north to south, on a surface."""
    true_rows = LATITUDE[::-1]
    keys = {
        "Ni": LONGITUDE.size, "Nj": LATITUDE.size, "latitudeOfFirstGridPointInDegrees": true_rows[0],
        "latitudeOfLastGridPointInDegrees": true_rows[-1], "longitudeOfFirstGridPointInDegrees": LONGITUDE[0] + 360.0,
        "longitudeOfLastGridPointInDegrees": LONGITUDE[-1], "iDirectionIncrementInDegrees": 0.5,
        "jDirectionIncrementInDegrees": 0.5,
    }
    with path.open("wb") as stream:
        for name, values, shift in fields:
            for at, stamp in enumerate(hours(shift)):
                lead = 0 if leads is None else at % leads
                start = np.datetime64(stamp, "m") - np.timedelta64(lead, "h")
                text = str(start).replace("-", "").replace(":", "")
                message = eccodes.codes_grib_new_from_samples("regular_ll_sfc_grib1")
                times = {"dataDate": int(text[:8]), "dataTime": int(text[9:13]), "step": lead}
                for key, value in {**keys, **times}.items():
                    eccodes.codes_set(message, key, value)
                eccodes.codes_set(message, "shortName", name)
                eccodes.codes_set(message, "bitsPerValue", 24)
                eccodes.codes_set_values(message, values[at, ::-1].ravel())
                eccodes.codes_write(message, stream)
                eccodes.codes_release(message)
    return str(path)


def test_a_grib_file_gives_the_weather_that_was_written(tmp_path):
    """The grid lies across Greenwich, where ecCodes lists its columns in another order than their values."""
    true = truth()
    path = grib(tmp_path / "w.grib", [("ssrd", true.ghi * 3600, 1.0), ("2t", true.temp_air + 273.15, 0.0)])
    assert guess_kind([path]) == "grib"
    weather = open_source("grib", [path], variables=ENDING).open()
    assert weather.latitude.values.tolist() == LATITUDE.tolist()
    assert weather.longitude.values.tolist() == LONGITUDE.tolist()
    np.testing.assert_allclose(weather.ghi, true.ghi, atol=0.01)
    np.testing.assert_allclose(weather.temp_air, true.temp_air, atol=0.001)
    assert [one.name for one in tmp_path.iterdir()] == ["w.grib"]  # no index beside it
    with pytest.raises(WeatherError, match="do not say of which period"):
        open_source("grib", [path]).open()


def test_forecast_starts_and_leads_become_one_series(tmp_path):
    true = truth()
    path = grib(tmp_path / "w.grib", [("ssrd", true.ghi * 3600, 1.0), ("2t", true.temp_air + 273.15, 0.0)], leads=12)
    weather = open_source("grib", [path], variables=ENDING).open()
    np.testing.assert_allclose(weather.ghi, true.ghi, atol=0.01)
    np.testing.assert_allclose(weather.temp_air, true.temp_air, atol=0.001)


@pytest.mark.parametrize("share", [0.3, 0.9, 0.999])
def test_a_grib_file_cut_anywhere_is_refused(tmp_path, share):
    path = tmp_path / "w.grib"
    grib(path, [("ssrd", truth().ghi * 3600, 1.0)])
    raw = path.read_bytes()
    path.write_bytes(raw[: int(share * len(raw))])
    with pytest.raises(WeatherError, match="cut off"):
        open_source("grib", [str(path)], variables=ENDING).open()


def test_real_grib_files():
    """Files of the samples of a GRIB library: a regular one is read as far as it goes, a reduced grid is refused."""
    regular, reduced = (fetched(name) for name in ("era5-single-level-scalar-time.grib", "reduced_gg.grib"))
    (weather,) = stores._grib_datasets(regular)
    (piece,) = stores.take_pieces(weather, str(regular), read_mapping(None))
    assert (piece.found.role, piece.found.units) == ("temp_air", "K")
    assert piece.values.sizes == {"time": 1, "latitude": 121, "longitude": 201}
    assert 230 < float(piece.values.mean()) < 310
    with pytest.raises(WeatherError, match="no sunshine was recognised"):
        open_source("grib", [str(regular)]).open()
    with pytest.raises(WeatherError, match=r"rows and columns .*grid type reduced_gg"):
        open_source("grib", [str(reduced)]).open()
    with pytest.raises(WeatherError, match=r"the file cannot be read .*Wrong message length"):
        open_source("grib", [str(fetched("era5-levels-corrupted.grib"))]).open()


def test_other_files_are_no_grib(tmp_path):
    (tmp_path / "w.grib").write_bytes(b"<html>")
    with pytest.raises(WeatherError, match="no GRIB file"):
        open_source("grib", [str(tmp_path / "w.grib")]).open()


# --- extras --------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(("kind", "module"), [("zarr", "zarr"), ("grib", "cfgrib"), ("grib", "eccodes")])
def test_a_missing_extra_is_named_once_and_plainly(tmp_path, monkeypatch, kind, module):
    monkeypatch.setattr(stores, "find_spec", lambda name: None if name == module else object())
    with pytest.raises(WeatherError) as caught:
        open_source(kind, [str(tmp_path / "w")]).open()
    assert f"needs the extra '{kind}'" in str(caught.value)
    assert f"pip install 'stillfield[{kind}]'" in str(caught.value)
