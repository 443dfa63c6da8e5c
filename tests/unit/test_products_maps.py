"""Maps and charts: one scale, cells where they belong, missing left open, words on the page, equal bytes."""

from __future__ import annotations

import struct
import subprocess
import sys
from dataclasses import replace

import matplotlib as mpl
import numpy as np
import pytest
from matplotlib.collections import LineCollection
from matplotlib.image import AxesImage, imread
from shapely.geometry import box

from product_samples import monthly_grid, monthly_sites
from stillfield.errors import OutputError
from stillfield.products.cartography import View, month_scale, scale_bar_km, yield_scale
from stillfield.products.maps import (
    MapPlace,
    draw_single,
    draw_twelve_months,
    write_map_single,
    write_map_twelve_months,
)
from stillfield.products.netcdf import MONTH_NAMES
from stillfield.products.page import Words, house_style
from stillfield.products.site_months import draw_site_months, write_site_months
from stillfield.vocabulary import WATER_CAUTION

LATITUDE, LONGITUDE = np.linspace(19.75, 22.25, 11), np.linspace(-41.9, -39.9, 9)
LAND = [box(-41.0, 19.0, -38.0, 23.0)]
WORDS = Words("Invented coast", footer="Method: rule · Still: plain $5 box")


@pytest.fixture
def grid():
    return monthly_grid(LATITUDE, LONGITUDE, missing=[(0, 0), (5, 7)])


def twelve(grid, **changes):
    with house_style():
        return draw_twelve_months(grid, **{"words": WORDS, "variable": "monthly_yield", "land": LAND, "places": (),
                                           **changes})


def single(grid, variable, **changes):
    with house_style():
        return draw_single(grid, variable, **{"words": WORDS, "land": LAND, "places": (), **changes})


def panels(figure):
    return [axes for axes in figure.axes if axes.get_title(loc="left") in MONTH_NAMES]


def image_of(axes):
    (image,) = [child for child in axes.get_children() if isinstance(child, AxesImage)]
    return image


def chunks(path):
    """Names of the chunks of a PNG file."""
    data, names, place = path.read_bytes(), [], 8
    while place < len(data):
        (length,), name = struct.unpack(">I", data[place:place + 4]), data[place + 4:place + 8]
        names.append(name.decode())
        place += 12 + length
    return names


@pytest.mark.parametrize("kind", ["twelve", "annual_yield", "worst_month_yield", "worst_month"])
def test_picture_is_wide_full_and_the_same_twice(grid, tmp_path, kind):
    places = [MapPlace(21.0, -40.5, rank=1), MapPlace(50.0, 0.0, rank=2)]
    for name in ("a.png", "b.png.part"):
        if kind == "twelve":
            write_map_twelve_months(grid, tmp_path / name, words=WORDS, land=LAND, places=places)
        else:
            write_map_single(grid, kind, tmp_path / name, words=WORDS, land=LAND, places=places)
    assert (tmp_path / "a.png").read_bytes() == (tmp_path / "b.png.part").read_bytes()
    assert "tEXt" not in chunks(tmp_path / "a.png"), "no program name and no date"
    picture = imread(tmp_path / "a.png")
    assert picture.shape[1] == 1600
    colours = (255 * picture[::4, ::4, :3]).astype(int) @ [1 << 16, 1 << 8, 1]
    assert len(np.unique(colours)) > 50


def test_all_months_share_one_scale_that_holds_every_value(grid):
    axes = panels(twelve(grid))
    assert [one.get_title(loc="left") for one in axes] == list(MONTH_NAMES)
    norms = {id(image_of(one).norm) for one in axes}
    assert len(norms) == 1
    norm, values = image_of(axes[0]).norm, grid["monthly_yield"].values
    assert norm.vmin <= np.nanmin(values) < np.nanmax(values) <= norm.vmax


def test_every_month_shows_its_own_values_at_their_place(grid):
    for number, axes in enumerate(panels(twelve(grid))):
        image = image_of(axes)
        np.testing.assert_allclose(image.get_extent(), (-42.025, -39.775, 19.625, 22.375))
        assert image.origin == "lower"
        shown = np.ma.filled(image.get_array(), np.nan)
        np.testing.assert_array_equal(shown, grid["monthly_yield"].values[number])


def test_the_picture_does_not_depend_on_the_order_of_the_axes(grid, tmp_path):
    turned = grid.isel(latitude=slice(None, None, -1), longitude=slice(None, None, -1)).transpose("longitude", ...)
    write_map_twelve_months(grid, tmp_path / "a.png", words=WORDS, land=LAND)
    write_map_twelve_months(turned, tmp_path / "b.png", words=WORDS, land=LAND)
    assert (tmp_path / "a.png").read_bytes() == (tmp_path / "b.png").read_bytes()


def test_cells_are_square_on_the_ground(grid):
    axes = panels(twelve(grid))[0]
    # A degree of longitude is cos(latitude) of a degree of latitude.
    assert axes.get_aspect() == pytest.approx(1.0 / np.cos(np.radians(21.0)))


def test_missing_cells_are_masked_and_land_below_is_hatched(grid):
    axes = panels(twelve(grid))[0]
    mask = np.ma.getmaskarray(image_of(axes).get_array())
    assert mask[0, 0]
    assert mask[5, 7]
    assert mask.sum() == 2
    assert any(patch.get_hatch() for patch in axes.patches)
    assert all(patch.get_zorder() < image_of(axes).get_zorder() for patch in axes.patches)


def test_shore_is_drawn_and_is_the_given_one(grid):
    for axes in panels(twelve(grid)):
        lines = [child for child in axes.get_children() if isinstance(child, LineCollection)]
        points = np.concatenate([segment for line in lines for segment in line.get_segments()])
        assert -41.0 in points[:, 0]


def test_shipped_coast_is_drawn_without_any_land_given():
    sicily = monthly_grid(np.linspace(36.6, 38.4, 10), np.linspace(12.3, 15.7, 18))
    axes = panels(twelve(sicily, land=None))[0]
    assert any(isinstance(child, LineCollection) and child.get_segments() for child in axes.get_children())


@pytest.mark.parametrize("kind", ["months", "single", "sites"])
def test_caution_title_and_footer_stand_on_the_page(grid, kind):
    if kind == "sites":
        with house_style():
            figure = draw_site_months(monthly_sites(["Marl"]), words=WORDS, limit=24)
    else:
        figure = twelve(grid) if kind == "months" else single(grid, "annual_yield")
    text = " ".join(item.get_text() for item in figure.texts)
    for words in (WATER_CAUTION, WORDS.title, WORDS.footer):
        assert words in text


def test_words_stay_on_the_page(grid):
    long = replace(WORDS, title="A very long title " * 8, footer="Method and still " * 20)
    for figure in (twelve(grid, words=long), single(grid, "worst_month", words=long)):
        figure.canvas.draw()
        page = figure.bbox
        for item in figure.texts:
            extent = item.get_window_extent()
            assert 0 <= extent.x0 <= extent.x1 <= page.width, item.get_text()
            assert 0 <= extent.y0 <= extent.y1 <= page.height, item.get_text()


def test_colours_stay_ordered_in_grey():
    # Relative luminance of sRGB (IEC 61966-2-1; coefficients of ITU-R BT.709): a colour-blind reader still sees it.
    scale = yield_scale(np.array([20.0, 160.0]))
    colours = scale.colours(np.arange(scale.colours.N))[:, :3]
    linear = np.where(colours <= 0.04045, colours / 12.92, ((colours + 0.055) / 1.055) ** 2.4)
    assert np.all(np.diff(linear @ [0.2126, 0.7152, 0.0722]) > 0.0)


def test_neighbouring_months_differ_in_grey():
    colours = month_scale().colours(np.arange(12))[:, :3]
    grey = colours @ np.array([0.2126, 0.7152, 0.0722])
    assert np.abs(np.diff(np.append(grey, grey[0]))).min() > 0.1


@pytest.mark.parametrize(("low", "high"), [(0.0, 0.0), (1e-3, 2e-3), (59.99, 60.01), (0.0, 620.0), (-0.0, 7300.0)])
def test_scale_holds_its_range_and_labels_are_distinct(low, high):
    scale = yield_scale(np.array([low, high, np.nan]))
    assert scale.levels[0] <= low <= high <= scale.levels[-1]
    assert len(set(scale.labels)) == len(scale.levels)
    np.testing.assert_allclose([float(label) for label in scale.labels], scale.levels, atol=1e-9)


def test_scale_bar_is_as_long_on_the_ground_as_it_says():
    view = View((-42.0, 17.0, -38.0, 23.0), [], [])
    # Great-circle distance of the west and east edge at 20 deg N on the sphere of 6371 km (haversine formula).
    half = np.sin(np.radians(2.0)) * np.cos(np.radians(20.0))
    assert view.width_km == pytest.approx(2 * 6371.0 * np.arcsin(half), rel=1e-3)
    assert scale_bar_km(view, 0.3) == 100.0


def test_first_ranks_are_numbered_and_lie_on_top(grid):
    places = [MapPlace(20.0 + 0.1 * rank, -40.5, rank=rank) for rank in range(1, 18)]
    axes = single(grid, "annual_yield", places=places).axes[0]
    numbers = [item.get_text() for item in axes.texts]
    assert numbers == [str(rank) for rank in range(15, 0, -1)]


def test_places_in_another_turn_find_their_spot(grid):
    axes = single(grid, "annual_yield", places=[MapPlace(21.0, 319.5)]).axes[0]
    np.testing.assert_allclose(axes.lines[-1].get_xydata(), [[-40.5, 21.0]])


def test_worst_months_are_written_on_the_map(grid):
    grid["worst_month"][:] = np.where(np.arange(9) < 5, 1.0, 7.0)
    axes = single(grid, "worst_month").axes[0]
    assert sorted(item.get_text() for item in axes.texts) == ["Jan", "Jul"]


@pytest.mark.parametrize(
    ("latitude", "longitude"),
    [([20.0], LONGITUDE), (LATITUDE, [-40.0]), ([19.0, 20.0, 22.0], [-41.0, -40.0, -38.5]),
     ([1.0, 0.0], [179.0, 180.0, -179.0])],
    ids=["one row", "one column", "uneven", "antimeridian"],
)
def test_odd_grids_are_drawn(tmp_path, latitude, longitude):
    write_map_single(monthly_grid(latitude, longitude), "annual_yield", tmp_path / "a.png", words=WORDS)
    assert imread(tmp_path / "a.png").shape[1] == 1600


def test_a_result_without_any_value_is_a_map_that_says_so(grid):
    grid["monthly_yield"][:] = np.nan
    assert {axes.get_title(loc="right") for axes in panels(twelve(grid))} == {"no values"}


def test_sites_and_wrong_shapes_are_refused(grid, tmp_path):
    sites = monthly_sites(["Marl", "Bresk"])
    with pytest.raises(OutputError, match="monthly_yield"):
        write_map_twelve_months(sites, tmp_path / "a.png", words=WORDS)
    with pytest.raises(OutputError, match="month"):
        write_map_single(grid, "monthly_yield", tmp_path / "a.png", words=WORDS)
    with pytest.raises(OutputError, match="twelve months"):
        write_map_twelve_months(grid, tmp_path / "a.png", words=WORDS, variable="annual_yield")
    with pytest.raises(OutputError, match="sites"):
        write_site_months(grid, tmp_path / "a.png", words=WORDS)
    assert list(tmp_path.iterdir()) == []


def test_site_charts_share_a_scale_and_carry_their_names(tmp_path):
    sites = monthly_sites(["Marl $1 and $2", "Bresk", "村"])
    sites["monthly_yield"][4, 1] = np.nan
    for name in ("a.png", "b.png"):
        write_site_months(sites, tmp_path / name, words=WORDS)
    assert (tmp_path / "a.png").read_bytes() == (tmp_path / "b.png").read_bytes()
    with house_style():
        figure = draw_site_months(sites, words=WORDS, limit=24)
    charts = [axes for axes in figure.axes if axes.get_title(loc="left")]
    assert [axes.get_title(loc="left") for axes in charts] == ["Marl $1 and $2", "Bresk", "村"]
    (limits,) = {axes.get_ylim() for axes in charts}
    assert limits[0] == 0.0
    assert limits[1] > float(sites["monthly_yield_high"].max())
    heights = [bar.get_height() for bar in charts[0].patches]
    np.testing.assert_allclose(heights, sites["monthly_yield"].values[:, 0])


def test_more_sites_than_a_page_holds_are_counted():
    with house_style():
        figure = draw_site_months(monthly_sites([f"Well {n}" for n in range(9)]), words=WORDS, limit=4)
    assert any("4 of 9 sites" in item.get_text() for item in figure.texts)


def test_drawing_leaves_no_trace(grid, tmp_path):
    before = dict(mpl.rcParams)
    write_map_single(grid, "annual_yield", tmp_path / "a.png", words=WORDS, land=LAND)
    assert dict(mpl.rcParams) == before


def test_modules_are_light_until_they_draw():
    code = ("import sys; import stillfield.products.maps, stillfield.products.site_months, "
            "stillfield.products.geotiff, stillfield.products.manifest; "
            "print([m for m in ('matplotlib', 'rasterio', 'shapely', 'pvlib') if m in sys.modules])")
    result = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert result.stdout.strip() == "[]"
