"""Real gridded files: each is read as what it is, or refused with the sentence that says why.

Values are held against the bytes of the file, unpacked here by hand; facts about a file (its axes, calendar,
period) are those its providers document and its own attributes state.
"""

from __future__ import annotations

from pathlib import Path

import netCDF4
import numpy as np
import pytest
import xarray as xr

from data.fetch import fetched
from stillfield.errors import StillfieldError
from stillfield.sources.grids.joining import join_pieces
from stillfield.sources.grids.netcdf import open_netcdf
from stillfield.sources.grids.netcdf_pieces import Piece, read_pieces
from stillfield.sources.recognise import read_mapping
from stillfield.sources.region import Mask, Region, keep_region

#: None of the public files holds sunshine by the day or hour, so a variable of another kind takes its place; the
#: sentence then is about the file and not about the want of sunshine.
REFUSED = {
    "A1B_north_america.nc": ("air_temperature", r"this is monthly weather \(got steps of 360 days"),
    "HadISST1_SST_update.nc": ("sst", "neither daily nor hourly weather .*time bounds 31 days apart"),
    "tas_rectilinear_grid_2D.nc": ("tas", "this is monthly weather"),
    "bcsd_obs_1999.nc": ("tas", "this is monthly weather"),
    "cordex.nc": ("sfcWind", r"the grid is curvilinear or rotated: latitude and longitude have two dimensions \(got "
                             r"lat\(rlat, rlon\)"),
    "tas_rotated_grid_EUR11.nc": ("tas", "no latitude was found .*have to be regridded"),
    "atm_phy_mag0004_1985.nc": ("hfls", "no latitude was found .*have to be regridded"),
    "seam.nc": ("ps", "no latitude was found"),
    "sst30e_netcdf.nc": ("sst", r"the time axis is not in dates \(got time in units 'Month'"),
    "hgt.nc": ("HGT", "unable to decode time units 'months since 1958-1-1"),
    "landsea.nc": ("LSMASK", "no time axis was found"),
    "distributed_pvgis_weather.nc": ("ghi", "no latitude was found .*of stations the file must hold both"),
    "summit-weather.nc": ("ghi", "no latitude was found .*of stations the file must hold both"),
    "wgust_era5.nc": ("i10fg", "one time alone does not tell the time step"),
    "test_single.nc": ("t2m", "one time alone does not tell the time step"),
    "era5-levels-corrupted.grib": ("t", "GRIB"),
    "coads_climatology.cdf": ("AIRT", "time"),
}


@pytest.mark.parametrize("name", REFUSED)
def test_a_real_file_that_is_no_daily_or_hourly_grid_is_refused_in_words(name):
    variable, sentence = REFUSED[name]
    with pytest.raises(StillfieldError, match=sentence):
        open_netcdf([str(fetched(name))], variables={"irradiation": {"name": variable, "units": "MJ m-2"}})


def piece(name: str, variable: str) -> Piece:
    """One variable of a real file on canonical axes, in the place of a temperature."""
    (found,) = read_pieces(fetched(name), read_mapping({"temp_air": {"name": variable, "units": "K"}}))
    return found


def raw(name: str, variable: str) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Latitude, longitude and values of the first time, unpacked by the file's own numbers."""
    with netCDF4.Dataset(fetched(name)) as file:
        file.set_auto_maskandscale(False)
        about = file[variable]
        values = np.asarray(about[...], dtype=float)
        fill = getattr(about, "_FillValue", None)
        unpacked = values * getattr(about, "scale_factor", 1.0) + getattr(about, "add_offset", 0.0)
        unpacked[values == fill] = np.nan
        latitude, longitude = (next(np.asarray(file[key][:], dtype=float) for key in keys if key in file.variables)
                               for keys in (("latitude", "lat"), ("longitude", "lon")))
    return latitude, longitude, unpacked.reshape(-1, latitude.size, longitude.size)[0]


@pytest.mark.parametrize(
    ("name", "variable", "shape"),
    [
        ("era5_2t_1.nc", "t2m", (1, 9, 18)),  # reanalysis, packed, hours since 1900, north up
        ("era5_2t_2.nc", "t2m", (1, 9, 18)),
        ("test_single.nc", "t2m", (1, 7, 12)),  # written by cfgrib: scalar valid_time, no time dimension
        ("wgust_era5.nc", "i10fg", (1, 721, 1440)),  # packed, 0..359.75, north up
        ("era5_example_downloaded_raw.nc", "swvl1", (2, 721, 1440)),
        ("A1B_north_america.nc", "air_temperature", (240, 37, 49)),  # 225..315 east
        ("HadISST1_SST_update.nc", "sst", (1, 180, 360)),  # -1000 over ice is theirs, and no declared fill
        ("tas_rectilinear_grid_2D.nc", "tas", (12, 96, 192)),  # Gaussian rows, south up
    ],
)
def test_values_and_axes_are_those_of_the_bytes(name, variable, shape):
    found = piece(name, variable).values
    latitude, longitude, expected = raw(name, variable)
    assert found.shape == shape
    assert (np.diff(found.latitude) > 0).all()
    assert (np.diff(found.longitude) > 0).all()
    assert (found.longitude >= -180).all()
    assert (found.longitude < 180).all()
    first = found.isel(time=0).compute()
    for row in (0, latitude.size // 3, latitude.size - 1):
        for column in (0, longitude.size // 2, longitude.size - 1):
            spot = first.sel(latitude=latitude[row], longitude=(longitude[column] + 180) % 360 - 180, method="nearest")
            assert float(spot) == pytest.approx(expected[row, column], rel=1e-6, nan_ok=True), (row, column)


def test_two_packed_files_keep_each_its_own_scale():
    """Noon of two days, packed with different scales; merging them as they are stored would mix the scales."""
    pieces = [piece(name, "t2m") for name in ("era5_2t_2.nc", "era5_2t_1.nc")]
    joined = join_pieces(pieces).values
    times = joined.indexes["time"]
    assert times.is_monotonic_increasing
    assert len(times) == 2
    for one in pieces:
        own = joined.sel(time=one.values.time.values[0]).compute()
        np.testing.assert_allclose(own, one.values.isel(time=0).compute(), rtol=1e-6)


def test_a_calendar_of_360_days_stays_one():
    found = piece("A1B_north_america.nc", "air_temperature").values
    assert found.time.dt.calendar == "360_day"
    assert found.sizes["time"] == 240


def test_valid_time_is_the_time_of_a_cfgrib_file():
    found = piece("test_single.nc", "t2m").values
    with xr.open_dataset(fetched("test_single.nc")) as file:
        assert found.time.values[0] == file["valid_time"].values


def test_gaussian_rows_are_read_as_they_are():
    """T63: 96 rows, the northernmost at 88.572 degrees (table of Gaussian latitudes, ECMWF)."""
    rows = piece("tas_rectilinear_grid_2D.nc", "tas").values.latitude.values
    assert rows.size == 96
    assert rows[-1] == pytest.approx(88.572, abs=0.001)
    assert rows[0] == pytest.approx(-88.572, abs=0.001)


def sunny_globe(step: float) -> xr.Dataset:
    """Weather for a mask to be laid on: one day, the same everywhere."""
    latitude, longitude = np.arange(-60.0, 61.0, step), np.arange(-180.0, 180.0, step)
    values = np.full((1, latitude.size, longitude.size), 10.0, dtype=np.float32)
    return xr.Dataset({"irradiation": (("time", "latitude", "longitude"), values, {"units": "MJ m-2"})},
                      coords={"time": np.array(["2020-03-20"], "datetime64[ns]"), "latitude": latitude,
                              "longitude": longitude})


#: Places whose surroundings are land or sea on any map, degrees north and east.
LAND = {"Sahara": (23.0, 10.0), "Kansas": (39.0, -98.0), "Amazon": (-5.0, -60.0), "Siberia": (60.0, 100.0)}
SEA = {"North Atlantic": (30.0, -40.0), "Pacific at the date line": (0.0, 180.0), "Arabian Sea": (14.0, 64.0)}


@pytest.mark.parametrize("name", ["landmask_0.25_0.25.nc", "sftlf_mod1_rectilinear_grid_2D.nc"])
def test_real_masks_know_land_from_sea(name):
    """One as a flag of 0 and 1 without units on its axes and missing in the far south, one in per cent."""
    kept = keep_region(sunny_globe(2.0), Region(mask=Mask(fetched(name)))).irradiation.isel(time=0)
    for places, dry in ((LAND, True), (SEA, False)):
        for place, (latitude, longitude) in places.items():
            spot = kept.sel(latitude=latitude, longitude=(longitude + 180) % 360 - 180, method="nearest")
            assert bool(spot.notnull()) == dry, place
    # 29 % of the Earth is land; between 60 S and 60 N, by rows of equal angle, somewhat less.
    assert 0.2 < float(kept.notnull().mean()) < 0.35


def test_a_mask_of_kinds_of_land_is_refused():
    with pytest.raises(StillfieldError, match=r"the mask is no share of land \(got values from 0 to 4"):
        keep_region(sunny_globe(10.0), Region(mask=Mask(Path(fetched("landsea.nc")))))
