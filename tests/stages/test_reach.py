"""Which cell stands for a place, and whose days are kept for it."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr

from decision_samples import STILL, daily, monthly_of, places
from stillfield.decide import Preferences, decide
from stillfield.errors import PlacesError
from stillfield.stages import reach
from stillfield.stages.reach import cells_to_follow, daily_of_places, reach_places


@pytest.fixture(scope="module")
def monthly() -> xr.Dataset:
    return monthly_of(daily())


def decided(monthly, table, **ways):
    return decide(monthly, table, still=STILL, preferences=Preferences(uncertainty=None, **ways)).places


def test_a_village_on_a_sea_cell_takes_the_nearest_valid_one_and_says_so(monthly):
    row = decided(monthly, places([(10.05, 40.8)]), max_cell_distance_km=120.0).iloc[0]
    assert (row["cell_latitude_deg"], row["cell_longitude_deg"]) == (10.0, 40.0)
    assert row["nearest_cell_missing"]
    # Haversine on the mean radius of IUGG 1980, written out.
    north, east = np.radians(0.05), np.radians(0.8)
    half = np.sin(north / 2) ** 2 + np.cos(np.radians(10.05)) * np.cos(np.radians(10.0)) * np.sin(east / 2) ** 2
    assert row["cell_distance_km"] == pytest.approx(2 * 6371.0088 * np.arcsin(np.sqrt(half)))


def test_a_village_on_land_is_not_substituted(monthly):
    row = decided(monthly, places([(10.05, 40.1)])).iloc[0]
    assert not row["nearest_cell_missing"]
    assert row["rank"] == 1


def test_too_far_stays_in_the_table_and_says_how_far(monthly):
    table = decided(monthly, places([(10.0, 40.0), (30.0, 40.0)]))
    far = table.iloc[-1]
    assert far["name"] == "v1"
    # 19 degrees of a meridian from 11 N, of 111.195 km each (mean radius of IUGG 1980).
    assert far["reason"] == ("no litres: the nearest cell with twelve known months is 2113 km away, beyond "
                             "places.max_cell_distance_km")
    assert far["remark"] == f"Left out: {far['reason']}."
    numbers = far[["annual_yield_l_m2_year", "area_per_person_m2", "score", "sizing_month", "yield_jan_l_m2_month"]]
    assert numbers.isna().all()
    assert far["rank"] is not far["rank"] or far[["rank", "rank_low", "rank_high"]].isna().all()


def test_where_no_cell_knows_its_every_month_places_are_refused(monthly):
    nothing = monthly.where(monthly["longitude"] > 90.0)
    with pytest.raises(PlacesError, match="no cell has litres for all twelve months"):
        decided(nothing, places([(10.0, 40.0), (11.0, 40.0)]))


def test_height_is_told_from_the_place_up_to_the_cell(monthly):
    heights = np.full((2, 3), 100.0)
    heights[0, 0] = 340.0
    told = monthly.assign_coords(elevation=(("latitude", "longitude"), heights))
    table = decided(told, places([(10.0, 40.0), (11.0, 42.0)], elevation_m=[40.0, np.nan])).set_index("name")
    assert table.loc["v0", "cell_height_difference_m"] == 300.0
    assert np.isnan(table.loc["v1", "cell_height_difference_m"])
    assert "cell_height_difference_m" not in decided(monthly, places([(10.0, 40.0)], elevation_m=[40.0]))


def test_a_month_that_is_missing_makes_a_cell_unfit():
    days = daily()
    days["daily_yield"][days["time"].dt.month == 3, 0, 0] = np.nan
    row = decided(monthly_of(days), places([(10.0, 40.0)]), max_cell_distance_km=120.0).iloc[0]
    assert (row["cell_latitude_deg"], row["cell_longitude_deg"]) == (11.0, 40.0)
    assert row["nearest_cell_missing"]


def test_days_are_kept_of_cells_that_may_come_to_stand_for_a_place(monthly, monkeypatch):
    table, inside = places([(10.0, 40.1)]), np.ones(6, dtype=bool)
    inside[0] = False
    # From 10 N, 40.1 E without its own cell: 10 N 41 E, 11 N 40 E, 11 N 41 E, then 42 E.
    assert cells_to_follow(table, monthly, inside, values_per_cell=365) == [1, 2, 3, 4]
    monkeypatch.setattr(reach, "MOST_FOLLOWED", 3 * 365)
    assert cells_to_follow(table, monthly, inside, values_per_cell=365) == [1]
    monkeypatch.setattr(reach, "MOST_FOLLOWED", 364)
    assert cells_to_follow(table, monthly, inside, values_per_cell=365) == []
    assert cells_to_follow(table, monthly, np.zeros(6, dtype=bool), values_per_cell=1) == []


def test_days_come_to_the_places_whose_cell_was_followed(monthly):
    near = reach_places(places([(10.0, 40.0), (11.0, 42.0), (40.0, 40.0)]), monthly, max_cell_distance_km=25.0)
    followed = {0: np.array([[1.0, 2.0], [3.0, 4.0]]), 1: np.zeros((2, 2))}
    found = daily_of_places(near, followed, 1)
    np.testing.assert_array_equal(found, [[3.0, np.nan, np.nan], [4.0, np.nan, np.nan]])
    assert daily_of_places(near, {}, 0) is None
