"""GeoTIFF: cells lie where NetCDF says, missing stays missing and zero stays zero, in overviews too."""

from __future__ import annotations

import numpy as np
import pytest
import rasterio
import xarray as xr

from product_samples import monthly_grid
from stillfield.errors import OutputError
from stillfield.products.geotiff import write_geotiff
from stillfield.products.netcdf import write_netcdf
from stillfield.vocabulary import WATER_CAUTION

NORTH_DOWN, NORTH_UP = np.linspace(21.5, 19.5, 5), np.linspace(19.5, 21.5, 5)
LONGITUDE = np.linspace(-41.25, -39.75, 7)


@pytest.mark.parametrize("latitude", [NORTH_DOWN, NORTH_UP], ids=["north first", "south first"])
@pytest.mark.parametrize("longitude", [LONGITUDE, LONGITUDE + 360.0, LONGITUDE[::-1]], ids=["west", "turned", "east"])
def test_every_cell_lies_where_the_netcdf_says(tmp_path, latitude, longitude):
    grid = monthly_grid(latitude, longitude, missing=[(1, 2)])
    write_netcdf(grid, tmp_path / "a.nc", title="t", history="h")
    write_geotiff(grid, "monthly_yield", tmp_path / "a.tif")
    with xr.open_dataset(tmp_path / "a.nc") as cells, rasterio.open(tmp_path / "a.tif") as image:
        band = image.read(3, masked=True)
        assert image.transform.e < 0 < image.transform.a
        for lat in cells["latitude"].values:
            for lon in cells["longitude"].values:
                row, column = image.index((lon + 180.0) % 360.0 - 180.0, lat)
                x, y = image.xy(row, column)
                assert abs((x - lon + 180.0) % 360.0 - 180.0) < 0.01 * 0.25
                assert abs(y - lat) < 0.01 * 0.5
                expected = float(cells["monthly_yield"].sel(month=3, latitude=lat, longitude=lon))
                assert (np.isnan(expected) and band.mask[row, column]) or band[row, column] == np.float32(expected)


def test_corners_are_half_a_cell_outside_the_outer_centres(tmp_path):
    write_geotiff(monthly_grid(NORTH_UP, LONGITUDE), "monthly_yield", tmp_path / "a.tif")
    with rasterio.open(tmp_path / "a.tif") as image:
        assert image.crs.to_epsg() == 4326
        np.testing.assert_allclose(image.bounds, (-41.375, 19.25, -39.625, 21.75), atol=1e-9)


def test_bands_say_what_they_are(tmp_path):
    write_geotiff(monthly_grid(NORTH_UP, LONGITUDE), "monthly_yield", tmp_path / "a.tif")
    with rasterio.open(tmp_path / "a.tif") as image:
        assert image.descriptions[0] == "01 January"
        assert image.descriptions[11] == "12 December"
        assert set(image.units) == {"L m-2 month-1"}
        assert set(image.nodatavals) == {-9999.0}
        assert image.tags()["caution"] == WATER_CAUTION
        assert image.tags()["quantity"] == "monthly_yield"
        assert image.tags(ns="IMAGE_STRUCTURE")["LAYOUT"] == "COG"
        assert image.tags(ns="IMAGE_STRUCTURE")["COMPRESSION"] == "DEFLATE"


def test_zero_and_missing_stay_apart_in_overviews(tmp_path):
    rows, columns = 600, 640
    grid = monthly_grid(np.linspace(30.0, 20.0, rows), np.linspace(0.0, 12.0, columns))[["monthly_yield"]]
    values = grid["monthly_yield"].values
    values[:, :200, :] = np.nan
    values[:, 200:400, :] = 0.0
    values[:, 400:, ::2] = np.nan  # every second column: no overview cell may lose or dilute its valid half
    values[:, 400:, 1::2] = 50.0
    write_geotiff(grid, "monthly_yield", tmp_path / "a.tif")
    with rasterio.open(tmp_path / "a.tif") as image:
        assert image.overviews(1), "an image beyond one block has overviews"
    with rasterio.open(tmp_path / "a.tif", overview_level=0) as overview:
        band = overview.read(7, masked=True)
    third = band.shape[0] // 3
    assert band.mask[:third - 1].all()
    assert not band.mask[third + 1:].any()
    assert (band[third + 1:2 * third - 1] == 0.0).all()
    np.testing.assert_allclose(band[2 * third + 1:], 50.0)


def test_overviews_of_the_worst_month_are_months_that_occur(tmp_path):
    grid = monthly_grid(np.linspace(30.0, 20.0, 600), np.linspace(0.0, 12.0, 640))[["worst_month"]]
    stripes = np.where(np.arange(640) // 3 % 2 == 0, 1.0, 12.0)
    grid["worst_month"][:] = np.broadcast_to(stripes, (600, 640))
    write_geotiff(grid, "worst_month", tmp_path / "a.tif")
    with rasterio.open(tmp_path / "a.tif", overview_level=0) as overview:
        assert overview.nodata == 0
        assert set(np.unique(overview.read(1))) == {1, 12}


def test_uneven_spacing_is_refused_with_place_and_size(tmp_path):
    with pytest.raises(OutputError, match=r"latitude: uneven spacing.*from 0\.5 to 1 deg"):
        write_geotiff(monthly_grid([19.5, 20.0, 21.0, 21.5], LONGITUDE), "monthly_yield", tmp_path / "a.tif")
    assert not (tmp_path / "a.tif").exists()


def test_centres_in_single_precision_or_printed_to_two_decimals_are_even_enough(tmp_path):
    third = np.round(np.arange(30.0) / 3.0, 2)
    grid = monthly_grid(third, (179.95 + 0.1 * np.arange(40)).astype(np.float32))
    write_geotiff(grid, "monthly_yield", tmp_path / "a.tif")
    with rasterio.open(tmp_path / "a.tif") as image:
        assert image.res == pytest.approx((0.1, 1 / 3), rel=1e-3)


@pytest.mark.parametrize(
    ("latitude", "longitude", "size"),
    [([20.0], LONGITUDE, (0.25, 0.25)), (NORTH_UP, [-40.0], (0.5, 0.5))],
    ids=["one row", "one column"],
)
def test_single_row_or_column_takes_the_other_spacing(tmp_path, latitude, longitude, size):
    write_geotiff(monthly_grid(latitude, longitude), "monthly_yield", tmp_path / "a.tif")
    with rasterio.open(tmp_path / "a.tif") as image:
        assert image.res == pytest.approx(size)


def test_single_cell_needs_a_stated_size(tmp_path):
    grid = monthly_grid([20.0], [-40.0])
    with pytest.raises(OutputError, match="resolution_deg"):
        write_geotiff(grid, "monthly_yield", tmp_path / "a.tif")
    grid.attrs["resolution_deg"] = 0.1
    write_geotiff(grid, "annual_yield", tmp_path / "a.tif")
    with rasterio.open(tmp_path / "a.tif") as image:
        np.testing.assert_allclose(image.bounds, (-40.05, 19.95, -39.95, 20.05))


def test_a_grid_round_the_earth_is_cut_at_the_antimeridian(tmp_path):
    grid = monthly_grid([10.0, -10.0], np.arange(0.5, 360.0, 1.0))
    grid["annual_yield"][:] = np.broadcast_to(grid["longitude"].values, (2, 360))
    write_geotiff(grid, "annual_yield", tmp_path / "a.tif")
    with rasterio.open(tmp_path / "a.tif") as image:
        np.testing.assert_allclose(image.bounds[::2], (-180.0, 180.0))
        band = image.read(1)
        assert band[image.index(-0.5, 10.0)] == 359.5
        assert band[image.index(0.5, 10.0)] == 0.5


def test_a_box_across_the_antimeridian_stays_in_one_piece(tmp_path):
    write_geotiff(monthly_grid([1.0, 0.0], [179.0, 180.0, -179.0]), "annual_yield", tmp_path / "a.tif")
    with rasterio.open(tmp_path / "a.tif") as image:
        np.testing.assert_allclose(image.bounds[::2], (178.5, 181.5))


def test_a_repeated_last_column_is_refused(tmp_path):
    with pytest.raises(OutputError, match="more than once"):
        write_geotiff(monthly_grid([1.0, 0.0], np.arange(0.0, 361.0, 2.0)), "annual_yield", tmp_path / "a.tif")


def test_one_file_and_the_same_bytes(tmp_path):
    grid = monthly_grid(NORTH_UP, LONGITUDE)
    for name in ("a.tif.part", "b.tif.part"):
        write_geotiff(grid, "monthly_yield", tmp_path / name)
    assert sorted(path.name for path in tmp_path.iterdir()) == ["a.tif.part", "b.tif.part"]
    assert (tmp_path / "a.tif.part").read_bytes() == (tmp_path / "b.tif.part").read_bytes()


@pytest.mark.parametrize("variable", ["nothing", "site_yield"])
def test_sites_and_unknown_names_are_refused(tmp_path, variable):
    grid = monthly_grid(NORTH_UP, LONGITUDE)
    grid["site_yield"] = ("site", [1.0], {"units": "L m-2 d-1"})
    with pytest.raises(OutputError, match=variable):
        write_geotiff(grid, variable, tmp_path / "a.tif")
