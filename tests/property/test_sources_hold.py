"""What must hold for any clock, any grid and any order of rows."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from stillfield.sources.grids.grid_axes import clean_degrees, longitude_order
from stillfield.sources.typical.alignment import measure_sun_offset, whole_hours_off
from stillfield.sources.typical.nominal_year import place
from typical_year_samples import calendar, clear_sky

MONTH, DAY, START = calendar()


@settings(max_examples=15, deadline=None)
@given(latitude=st.floats(-60, 60), longitude=st.floats(-180, 180), zone=st.sampled_from([-9.5, -3, 0, 4.5, 5.75, 12]),
       offset=st.floats(-500, 500))
def test_any_offset_of_the_clock_is_found(latitude, longitude, zone, offset):
    sky = clear_sky(MONTH, DAY, START + offset, latitude=latitude, longitude=longitude, zone=zone)
    fit = measure_sun_offset(sky, latitude=latitude, longitude=longitude, clock_offset_hours=zone,
                             day_of_year=np.arange(1.0, 366.0))
    assert fit is not None
    # Textbook sines for the sun are good to a minute or so; a clock half a day off comes round.
    assert abs((fit.offset_minutes - offset + 720) % 1440 - 720) < 3.0


@given(st.floats(-700, 700))
def test_moving_by_whole_hours_always_ends_within_45_minutes(offset):
    assert abs(offset - 60 * whole_hours_off(offset) - 30) < 45.0


@settings(max_examples=15, deadline=None)
@given(st.integers(0, 2**32 - 1))
def test_the_order_of_rows_does_not_matter(seed):
    order = np.random.default_rng(seed).permutation(8760)
    values = np.sin(np.arange(8760.0))
    placed = place(MONTH[order], DAY[order], START[order], {"x": values[order]}, where="x")
    np.testing.assert_array_equal(placed.values["x"], values)


@given(columns=st.sampled_from([4, 12, 36, 144]), first=st.integers(-360, 360), repeat=st.booleans())
def test_any_cut_of_a_global_grid_is_one_grid(columns, first, repeat):
    step = 360.0 / columns
    longitude = clean_degrees(np.arange(columns + repeat) * step + round(first / step) * step)
    order, east, _ = longitude_order(longitude, where="x")
    assert east == pytest.approx(np.arange(columns) * step - 180.0)
    np.testing.assert_allclose((longitude[order] - east) % 360.0, 0.0, atol=1e-6)
