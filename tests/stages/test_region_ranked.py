"""Cells of a region ranked: by the weights a cell can know, ties as ties, any order of the cells."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr

from product_samples import monthly_grid
from stillfield.products.tables import cells_frame
from stillfield.stages.rank import rank_region


def region(rows=3, columns=4, *, years=11, missing=()):
    """Cells whose litres fall from year to year by a share that grows eastwards."""
    grid = monthly_grid(20.0 - 0.5 * np.arange(rows), -40.0 + 0.5 * np.arange(columns), missing=missing)
    fall = np.linspace(0.0, 0.5, columns)
    share = 1.0 - np.linspace(-0.5, 0.5, years)[:, None, None, None] * fall
    by_year = share * grid["monthly_yield"].to_numpy()
    grid["monthly_yield_by_year"] = (("year", "month", "latitude", "longitude"), by_year)
    return grid.assign_attrs(record="series")


def test_by_yield_alone_the_rank_is_that_of_the_worst_month():
    grid = region(missing=[(1, 1)])
    frame = cells_frame(grid.assign(rank_region(grid, {"yield": 0.3, "people": 0.7})))
    litres = frame["worst_month_yield_l_m2_day"].to_numpy()
    assert frame["rank"].tolist() == [1 + int((litres > one).sum()) for one in litres]
    assert (frame["score"].iloc[0], frame["score"].iloc[-1]) == (1.0, 0.0)
    np.testing.assert_allclose(frame["score"], (litres - litres.min()) / np.ptp(litres))
    assert len(frame) == 11


def test_reliability_is_the_poor_year_over_the_usual_one():
    grid = region()
    found = rank_region(grid, {"reliability": 1.0})
    by_year = grid["monthly_yield_by_year"].to_numpy()
    ratio = np.empty((3, 4))
    for row, column in np.ndindex(3, 4):
        month = int(grid["worst_month"][row, column]) - 1
        years = by_year[:, month, row, column]
        ratio[row, column] = np.quantile(years, 0.1) / np.median(years)
    best = np.argsort(np.argsort(-ratio[0])) + 1
    assert best.tolist() == [1, 2, 3, 4]
    # The same ratio in every row: three cells share each rank.
    np.testing.assert_array_equal(found["cell_rank"], [[1, 4, 7, 10]] * 3)
    np.testing.assert_allclose(found["cell_score"][0], (ratio[0].round(2) - ratio[0].round(2).min())
                               / np.ptp(ratio[0].round(2)))


def test_weights_mix_and_the_cost_of_a_litre_goes_by_the_litres_of_a_year():
    grid = region()
    found = rank_region(grid, {"yield": 3.0, "cost": 1.0})

    def scaled(name):
        # A criterion that spans less than a fifth of its size counts in proportion (decisions.ranking_score).
        values = grid[name].to_numpy().round(2)
        return (values - values.min()) / np.ptp(values), min(1.0, np.ptp(values) / values.max() / 0.2)

    (worst, first), (annual, second) = scaled("worst_month_yield"), scaled("annual_yield")
    np.testing.assert_allclose(found["cell_score"], (3 * first * worst + second * annual) / (3 * first + second))
    assert "litres of a year (weight 1)" in found.attrs["note"]


def test_weights_that_no_cell_knows_leave_the_worst_month_to_decide():
    grid = region()
    xr.testing.assert_equal(rank_region(grid, {"people": 1.0}), rank_region(grid, {"yield": 1.0}))
    typical = grid.assign_attrs(record="typical-year")
    xr.testing.assert_equal(rank_region(typical, {"reliability": 1.0}), rank_region(grid, {"yield": 1.0}))


@pytest.mark.parametrize("weights", [{"yield": 1.0}, {"yield": 1.0, "reliability": 2.0, "cost": 1.0}])
def test_the_order_of_the_cells_does_not_matter(weights):
    grid = region()
    turned = grid.isel(latitude=[2, 0, 1], longitude=[3, 1, 0, 2])
    xr.testing.assert_allclose(rank_region(turned, weights).sortby(["latitude", "longitude"]),
                               rank_region(grid, weights).sortby(["latitude", "longitude"]))


def test_many_cells_are_not_chained_into_one_rank():
    """Scores of a hundred thousand cells lie closer than those of two places that count as level."""
    rows, columns = 250, 400
    random = np.random.default_rng(3)
    grid = region(2, 2, years=2).isel(latitude=[0] * rows, longitude=[0] * columns)
    grid = grid.assign_coords(latitude=np.arange(rows) / 10, longitude=np.arange(columns) / 10)
    grid["worst_month_yield"] = (("latitude", "longitude"), random.uniform(1.0, 4.0, (rows, columns)))
    grid["annual_yield"] = (("latitude", "longitude"), random.uniform(600.0, 1500.0, (rows, columns)))
    rank = rank_region(grid, {"yield": 1.0, "cost": 1.0})["cell_rank"].to_numpy().ravel()
    assert np.unique(rank).size > 0.9 * rank.size


def test_a_region_without_any_whole_year_has_no_ranks():
    grid = region()
    grid["worst_month"][:] = np.nan
    found = rank_region(grid)
    assert found["cell_rank"].isnull().all()
    assert found["cell_score"].isnull().all()
