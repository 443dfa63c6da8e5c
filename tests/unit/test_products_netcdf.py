"""NetCDF: two independent readers find the same numbers, units, bounds and grid mapping."""

from __future__ import annotations

import h5netcdf
import netCDF4
import numpy as np
import pytest
import xarray as xr
from rasterio.crs import CRS

from product_samples import monthly_grid, monthly_sites
from stillfield.errors import OutputError
from stillfield.products.netcdf import described_dataset, write_netcdf
from stillfield.vocabulary import WATER_CAUTION

LATITUDE, LONGITUDE = np.linspace(21.5, 19.5, 5), np.linspace(-41.25, -39.75, 7)


def written(dataset, path, **words):
    write_netcdf(dataset, path, title="Invented coast", history="made by a test", **words)
    return path


@pytest.fixture
def grid():
    return monthly_grid(LATITUDE, LONGITUDE, missing=[(1, 2)])


@pytest.mark.parametrize("engine", ["netcdf4", "h5netcdf"])
def test_both_readers_give_the_values_back_in_single_precision(grid, tmp_path, engine):
    with xr.open_dataset(written(grid, tmp_path / "a.nc"), engine=engine) as back:
        for name in grid.data_vars:
            np.testing.assert_allclose(back[name].values, grid[name].values, rtol=1e-7, equal_nan=True)
        np.testing.assert_array_equal(back["latitude"], LATITUDE)
        assert back["monthly_yield"].attrs["units"] == "L m-2 month-1"
        assert back["latitude"].attrs["standard_name"] == "latitude"
        assert back["longitude"].attrs["units"] == "degrees_east"


def test_global_attributes_carry_the_caution(grid, tmp_path):
    with netCDF4.Dataset(written(grid, tmp_path / "a.nc")) as file:
        assert file.Conventions == "CF-1.11"
        assert file.caution == WATER_CAUTION
        assert file.source == "invented weather"
        assert file.conventions_assumed == "Months are typical."
        assert {"title", "summary", "history"} <= set(file.ncattrs())


@pytest.mark.parametrize("step", [1, -1])
def test_bounds_enclose_their_centres_and_join(grid, tmp_path, step):
    turned = grid.isel(latitude=slice(None, None, step))
    with h5netcdf.File(written(turned, tmp_path / "a.nc"), "r") as file:
        for name, spacing in (("latitude", 0.5), ("longitude", 0.25)):
            assert file[name].attrs["bounds"] == f"{name}_bnds"
            bounds, centres = file[f"{name}_bnds"][...], file[name][...]
            np.testing.assert_allclose(bounds.mean(axis=1), centres)
            np.testing.assert_allclose(np.abs(np.diff(bounds, axis=1)), spacing)
            np.testing.assert_array_equal(bounds[:-1, 1], bounds[1:, 0])


def test_grid_mapping_is_wgs84(grid, tmp_path):
    with netCDF4.Dataset(written(grid, tmp_path / "a.nc")) as file:
        assert file["monthly_yield"].grid_mapping == "crs"
        assert file["crs"].grid_mapping_name == "latitude_longitude"
        # EPSG's own definition, as PROJ carries it.
        assert CRS.from_wkt(file["crs"].crs_wkt) == CRS.from_epsg(4326)


def test_storage_is_deflated_level_1_with_shuffle_and_declares_missing(grid, tmp_path):
    with netCDF4.Dataset(written(grid, tmp_path / "a.nc")) as file:
        filters = file["monthly_yield"].filters()
        assert (filters["zlib"], filters["complevel"], filters["shuffle"]) == (True, 1, True)
        assert file["monthly_yield"].dtype == np.float32
        assert np.isnan(file["monthly_yield"]._FillValue)
        assert file["worst_month"].dtype == np.int8
        assert file["worst_month"][:].mask[1, 2]
        assert "_FillValue" not in file["latitude"].ncattrs()
        assert "_FillValue" not in file["latitude_bnds"].ncattrs()


def test_worst_month_flags_name_all_twelve_months(grid):
    attributes = described_dataset(grid)["worst_month"].attrs
    assert len(attributes["flag_values"]) == len(attributes["flag_meanings"].split()) == 12


def test_sites_keep_their_place_and_identity(tmp_path):
    sites = monthly_sites(["Marl", "Őld Saltern", "Bresk"])
    with xr.open_dataset(written(sites, tmp_path / "a.nc"), decode_coords="all") as back:
        assert back["name"].values.tolist() == ["Marl", "Őld Saltern", "Bresk"]
        assert back["site"].attrs["cf_role"] == "timeseries_id"
        assert {"latitude", "longitude", "elevation"} <= set(back["monthly_yield"].coords)
    with netCDF4.Dataset(tmp_path / "a.nc") as file:
        assert {"latitude", "longitude"} <= set(file["monthly_yield"].coordinates.split())


def test_same_data_and_words_give_the_same_file(grid, tmp_path):
    first, second = written(grid, tmp_path / "a.nc"), written(grid.chunk({"latitude": 2}), tmp_path / "b.nc")
    assert first.read_bytes() == second.read_bytes()


def test_single_row_takes_the_spacing_of_the_other_axis(tmp_path):
    with xr.open_dataset(written(monthly_grid([20.0], LONGITUDE), tmp_path / "a.nc")) as back:
        np.testing.assert_allclose(back["latitude_bnds"], [[19.875, 20.125]])


def test_bounds_stop_at_the_poles():
    described = described_dataset(monthly_grid([88.0, 90.0], [0.0, 2.0]))
    assert described["latitude_bnds"].values.max() == 90.0


def test_variable_without_unit_is_refused(grid, tmp_path):
    grid["puzzle"] = (("latitude", "longitude"), np.ones((5, 7)))
    with pytest.raises(OutputError, match="puzzle"):
        written(grid, tmp_path / "a.nc")


def test_latitudes_that_run_both_ways_are_refused(tmp_path):
    with pytest.raises(OutputError, match="one way"):
        written(monthly_grid([20.0, 21.0, 20.5], LONGITUDE), tmp_path / "a.nc")
