"""Weather settled into a buffer: what is missing, clipped or refused, and where each value goes."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import settings as effort
from hypothesis import strategies as st

from stillfield.errors import WeatherError
from stillfield.sources.settle import Numbers, Sink, bounded, refuse_breach, settle
from stillfield.vocabulary import DAY_WEATHER, STEP_WEATHER

GHI = STEP_WEATHER["ghi"]
ENGINES = ("compiled", "numpy")


@pytest.mark.parametrize("engine", ENGINES)
def test_each_column_goes_to_its_own_rows_and_the_rest_is_dropped(engine):
    values = np.arange(24.0, dtype=np.float32).reshape(3, 2, 4)
    out = np.full((4, 8), -1.0, np.float32)
    assert settle(values, GHI, out, np.array([-1, 0, 0, 3]), engine=engine).counts == {}
    expected = np.full((4, 2, 4), -1.0)
    for i, r, c in np.ndindex(values.shape):
        row = (-1, 0, 0, 3)[c] + i
        if 0 <= row < 4:
            expected[row, r, c] = values[i, r, c]
    np.testing.assert_array_equal(out, expected.reshape(4, 8))


@pytest.mark.parametrize("engine", ENGINES)
def test_missing_taken_out_and_noise_are_counted_where_they_are(engine):
    values = np.array([[[5.0, np.nan, -3.0]], [[np.inf, 7.0, -0.5]]])
    out = np.zeros((2, 3), np.float32)
    found = settle(values, GHI, out, np.zeros(3, int), engine=engine)
    assert {kind: row.tolist() for kind, row in found.counts.items()} == {
        "missing": [1, 1, 0], "clipped": [0, 0, 2], "sentinel": [1, 0, 0]}
    np.testing.assert_array_equal(out, np.array([[5.0, np.nan, 0.0], [np.nan, 7.0, 0.0]], np.float32))
    assert found.breach is None


@pytest.mark.parametrize("engine", ENGINES)
def test_cells_outside_are_missing_and_neither_count_nor_breach(engine):
    values = np.full((2, 1, 2), 9000.0, np.float32)
    values[:, :, 1] = 10.0
    out = np.zeros((2, 2), np.float32)
    found = settle(values, GHI, out, np.zeros(2, int), np.array([[False, True]]), engine=engine)
    assert found.counts == {}
    assert found.breach is None
    np.testing.assert_array_equal(out, np.array([[np.nan, 10.0]] * 2, np.float32))


@pytest.mark.parametrize("engine", ENGINES)
def test_the_first_value_that_cannot_be_true_is_named(engine):
    values = np.full((3, 2, 2), 20.0)
    values[1, 1, 0], values[2, 0, 0] = 77.0, -90.0
    found = settle(values, DAY_WEATHER["temp_air"], np.zeros((3, 4), np.float32), np.zeros(2, int), engine=engine)
    assert found.breach is not None
    assert found.breach.number == 2
    with pytest.raises(WeatherError, match="temp_air cannot be true") as caught:
        refuse_breach(found.breach, DAY_WEATHER["temp_air"], where="a.nc")
    assert "2 such values" in str(caught.value)


@pytest.mark.parametrize("name", ["ghi", "temp_air"])
def test_a_small_negative_number_is_noise_only_in_sunshine(name):
    out = np.zeros((1, 1), np.float32)
    settle(np.full((1, 1, 1), -0.25), STEP_WEATHER[name], out, np.zeros(1, int))
    assert out[0, 0] == (0.0 if name == "ghi" else -0.25)


def test_a_buffer_of_another_form_is_refused():
    with pytest.raises(ValueError, match="contiguous float32"):
        settle(np.zeros((1, 1, 2)), GHI, np.zeros((1, 2)), np.zeros(2, int))  # type: ignore[arg-type]


@effort(deadline=None, max_examples=60)
@given(seed=st.integers(0, 10**6), shape=st.tuples(*[st.integers(1, 7)] * 3),
       stored=st.sampled_from(["f4", "f8", "i2"]),
       turned=st.sampled_from(["no", "rows", "columns", "record-last"]), masked=st.booleans())
def test_compiled_and_numpy_agree_to_the_last_bit(seed, shape, stored, turned, masked):
    random = np.random.default_rng(seed)
    values = random.normal(300.0, 300.0, shape)
    if stored != "i2":
        values[random.random(shape) < 0.1] = np.nan
        values[random.random(shape) < 0.1] = -999.0
    values = values.astype(stored)
    values = {"no": values, "rows": values[:, ::-1], "columns": values[:, :, ::-1],
              "record-last": np.ascontiguousarray(values.T).T}[turned]
    kept = random.random(shape[1:]) < 0.7 if masked else None
    at = random.integers(-2, 3, shape[2])
    kind = np.float32 if stored == "f4" else np.float64
    numbers = bounded(Numbers(0.7, 3.0, -100.0, 1e14, -999 * 0.7 + 3.0, -9999.0, 1.1, -5.0, instead=np.inf), GHI)
    results = []
    for engine in ENGINES:
        sink = Sink(np.zeros((shape[0] + 1, shape[1] * shape[2]), np.float32), at, shape[1], kept, engine=engine)
        sink.take(values, 0, (0, 0), numbers, absent=(44.0, 300.0), kind=kind)
        results.append((sink.out, sink.counts, sink.breach[0]))
    for one, other in zip(*results, strict=True):
        np.testing.assert_array_equal(one, other)
