"""Places and their cells: distance on the globe, substitution, heights, ties."""

from __future__ import annotations

import numpy as np
import pytest

from stillfield.decisions.nearest import (
    STANDARD_LAPSE_K_PER_KM,
    cell_centres,
    great_circle_km,
    height_correction,
    nearest_cells,
)
from stillfield.errors import PlacesError


def test_the_nearest_cell_is_that_of_a_search_through_all_of_them():
    """Brute force over every pair, with places near the poles and the antimeridian, and holes in the grid."""
    rng = np.random.default_rng(7)
    latitude = np.concatenate([rng.uniform(-90, 90, 300), [89.9, -89.9, 0.0, 0.0]])
    longitude = np.concatenate([rng.uniform(-180, 180, 300), [10.0, 170.0, 179.99, -179.99]])
    north, east = cell_centres(np.arange(-88.0, 89.0, 4.0), np.arange(-178.0, 180.0, 4.0))
    valid = rng.random(north.size) < 0.6
    found = nearest_cells(latitude, longitude, north, east, valid)
    every = great_circle_km(latitude[:, None], longitude[:, None], north, east)
    assert valid[found.cell].all()
    np.testing.assert_allclose(found.distance_km, np.where(valid, every, np.inf).min(axis=1), atol=1e-6)
    np.testing.assert_allclose(found.closest_distance_km, every.min(axis=1), atol=1e-6)
    np.testing.assert_array_equal(found.substituted, found.distance_km > found.closest_distance_km + 1e-6)
    assert 50 < found.substituted.sum() < 200


@pytest.mark.parametrize(
    ("a", "b", "degrees"),
    [((0, 0), (0, 1), 1), ((0, 179.5), (0, -179.5), 1), ((89.5, 0), (89.5, 180), 1), ((-90, 0), (90, 77), 180),
     ((0, 359), (0, 1), 2)],
)
def test_arcs_of_known_length(a, b, degrees):
    # Closed form: pi R / 180 per degree of a great circle, R = 6371.0088 km.
    assert great_circle_km(*a, *b) == pytest.approx(np.pi * 6371.0088 / 180 * degrees, rel=1e-12)


def test_the_order_of_cells_does_not_matter_even_where_two_are_equally_near():
    north, east = cell_centres([-0.5, 0.5], [179.5, 180.5])
    for order in (np.arange(4), np.arange(4)[::-1], np.array([2, 0, 3, 1])):
        found = nearest_cells([0.0, -0.5], [-180.0, 180.0], north[order], east[order], np.ones(4, bool))
        chosen = order[found.cell]
        assert north[chosen].tolist() == [-0.5, -0.5]
        assert east[chosen].tolist() == [180.5, 180.5]  # -179.5, the lesser longitude


def test_an_equally_near_valid_cell_is_no_substitute():
    found = nearest_cells([10.0], [40.5], [10.0, 10.0], [40.0, 41.0], [False, True])
    assert (found.cell.tolist(), found.substituted.tolist()) == ([1], [False])


def test_heights_are_place_minus_cell_and_unknown_stays_unknown():
    found = nearest_cells(
        [10.0, 10.0, 11.0], [40.0, 40.0, 40.0], [10.0, 11.0], [40.0, 40.0], [True, True],
        height_m=[150.0, np.nan, 20.0], cell_height_m=[50.0, 320.0],
    )
    np.testing.assert_array_equal(found.height_difference_m, [100.0, np.nan, -300.0])
    without = nearest_cells([10.0], [40.0], [10.0], [40.0], [True], height_m=[5.0])
    assert np.isnan(without.height_difference_m).all()


def test_too_far_is_told_and_no_valid_cell_is_too():
    near = nearest_cells([10.0, 30.0], [40.0, 40.0], [10.0], [40.0], [True], max_distance_km=25.0)
    assert near.reached.tolist() == [True, False]
    assert near.cell.tolist() == [0, 0]
    none = nearest_cells([10.0], [40.0], [10.0, 10.2], [40.0, 40.0], [False, False])
    assert none.cell.tolist() == [-1]
    assert not none.reached.any()
    assert np.isinf(none.distance_km).all()
    assert none.closest_cell.tolist() == [0]


def test_no_places_get_no_cells():
    assert nearest_cells([], [], [10.0], [40.0], [True]).cell.shape == (0,)


def test_what_cannot_be_assigned_is_refused():
    with pytest.raises(PlacesError, match="no cell"):
        nearest_cells([10.0], [40.0], [], [], [])
    with pytest.raises(PlacesError, match="place 2: a place has no position"):
        nearest_cells([10.0, np.nan], [40.0, 40.0], [10.0], [40.0], [True])
    with pytest.raises(ValueError, match="2 flags for 1 cells"):
        nearest_cells([10.0], [40.0], [10.0], [40.0], [True, True])


def test_the_lapse_is_off_unless_asked_for_and_then_that_of_the_standard_atmosphere():
    # ISO 2533:1975: 15 degC at sea level, 8.5 degC at 1000 m, quoted from memory.
    assert height_correction([1000.0]).tolist() == [0.0]
    assert 15.0 + height_correction(1000.0, lapse_k_per_km=STANDARD_LAPSE_K_PER_KM) == pytest.approx(8.5)
    assert height_correction([np.nan, -500.0], lapse_k_per_km=6.5).tolist() == [0.0, 3.25]
