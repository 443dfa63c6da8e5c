"""Places: nearest valid cell, area from the worst month, an order that does not depend on the input's."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
import xarray as xr

from month_samples import months_of_days
from stillfield.errors import PlacesError
from stillfield.stages.rank import great_circle_km, rank_places


@pytest.fixture
def monthly() -> xr.Dataset:
    """Two by three cells; the cell at 10 N, 41 E is sea."""
    days = 365
    base = np.array([[3.0, np.nan, 4.0], [5.0, 3.5, 2.0]])
    season = 1.0 + 0.3 * np.cos(2 * np.pi * (np.arange(days) - 172) / 365)
    values = season[:, None, None] * base
    coords = {
        "time": pd.date_range("2001-01-01", periods=days, freq="D"), "latitude": [10.0, 11.0],
        "longitude": [40.0, 41.0, 42.0],
    }
    data = {"daily_yield": (("time", "latitude", "longitude"), values)}
    return months_of_days(xr.Dataset(data, coords=coords, attrs={"record": "series"}), band=(0.75, 1.25))


def table(**columns: list[object]) -> pd.DataFrame:
    count = len(columns["latitude"])
    return pd.DataFrame({"name": [f"v{i}" for i in range(count)], "id": [str(i) for i in range(count)], **columns})


def test_a_degree_of_a_great_circle_is_the_same_in_every_direction() -> None:
    # Closed form: pi R / 180, also across the antimeridian.
    degree = np.pi * 6371.0088 / 180.0
    zero, one = np.array(0.0), np.array(1.0)
    assert float(great_circle_km(zero, zero, one, zero)) == pytest.approx(degree, rel=1e-12)
    assert float(great_circle_km(zero, np.array(179.5), zero, np.array(-179.5))) == pytest.approx(degree, rel=1e-12)


def test_a_village_on_a_sea_cell_takes_the_nearest_valid_one(monthly: xr.Dataset) -> None:
    ranked = rank_places(monthly, table(latitude=[10.05], longitude=[40.8]), max_cell_distance_km=120.0)
    row = ranked.iloc[0]
    assert (row["cell_latitude_deg"], row["cell_longitude_deg"]) == (10.0, 40.0)
    assert row["nearest_cell_missing"]
    expected = great_circle_km(np.array(10.05), np.array(40.8), np.array(10.0), np.array(40.0))
    assert row["cell_distance_km"] == pytest.approx(float(expected))


def test_too_far_stays_in_the_table_with_its_reason(monthly: xr.Dataset) -> None:
    ranked = rank_places(monthly, table(latitude=[10.0, 30.0], longitude=[40.0, 40.0]))
    far = ranked.iloc[-1]
    assert far["name"] == "v1"
    assert "no valid cell within 25 km" in far["reason"]
    assert np.isnan(far["annual_yield_l_m2_year"])
    assert np.isnan(far["area_per_person_m2"])
    assert pd.isna(far["rank"])


def test_area_is_need_over_the_worst_month(monthly: xr.Dataset) -> None:
    ranked = rank_places(
        monthly, table(latitude=[11.0], longitude=[40.0], population=[200.0]), litres_per_person_day=3.0
    )
    row = ranked.iloc[0]
    days = pd.Series(
        5.0 * (1 + 0.3 * np.cos(2 * np.pi * (np.arange(365) - 172) / 365)),
        index=pd.date_range("2001-01-01", periods=365, freq="D"),
    )
    daily_mean = days.groupby(days.index.month).mean()
    assert row["worst_month"] == daily_mean.idxmin()
    assert row["worst_month_yield_l_m2_day"] == pytest.approx(daily_mean.min())
    assert row["area_per_person_m2"] == pytest.approx(3.0 / daily_mean.min())
    assert row["area_village_m2"] == pytest.approx(200 * 3.0 / daily_mean.min())
    assert row["area_per_person_at_low_yield_m2"] == pytest.approx(3.0 / (0.75 * daily_mean.min()))
    assert row["area_per_person_at_high_yield_m2"] == pytest.approx(3.0 / (1.25 * daily_mean.min()))


def test_order_of_input_does_not_matter_and_ties_share_a_rank(monthly: xr.Dataset) -> None:
    places = table(
        latitude=[10.0, 11.0, 11.0, 11.0], longitude=[40.0, 40.0, 42.0, 42.0],
        population=[100.0, 300.0, 50.0, 50.0], feed_salinity_g_kg=[5.0, 9.0, 3.0, 3.0],
        distance_to_feed_km=[1.0, 2.0, 0.5, 0.5],
    )
    one = rank_places(monthly, places)
    two = rank_places(monthly, places.iloc[[3, 1, 0, 2]])
    pd.testing.assert_frame_equal(one, two)
    assert one["name"].tolist() == ["v1", "v0", "v2", "v3"]
    assert one["rank"].tolist() == [1, 2, 3, 3]
    assert one["score"].iloc[0] == pytest.approx(1.0)


def test_a_constant_criterion_decides_nothing(monthly: xr.Dataset) -> None:
    places = table(latitude=[10.0, 11.0], longitude=[40.0, 40.0], population=[70.0, 70.0])
    with_people = rank_places(monthly, places, weights={"yield": 1.0, "people": 5.0})
    without = rank_places(monthly, places, weights={"yield": 1.0})
    np.testing.assert_allclose(with_people["score"], without["score"])


@pytest.mark.parametrize("weights", [{"yield": 0.0}, {"yield": -1.0, "people": 2.0}, {"beauty": 1.0}])
def test_unusable_weights_are_refused(monthly: xr.Dataset, weights: dict[str, float]) -> None:
    with pytest.raises(PlacesError, match="ranking weights are unusable"):
        rank_places(monthly, table(latitude=[10.0], longitude=[40.0]), weights=weights)
