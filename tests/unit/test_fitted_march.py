"""The fitted correlation as a yield method: windows, variants, engines, typical years."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from stillfield.methods import WARM_UP_DAYS, Block, Cells, whole_record
from stillfield.methods.fitted import Fitted
from stillfield.physics.climates import invented_climates
from stillfield.physics.correlation import VARIANTS
from stillfield.physics.vapour import dew_point
from stillfield.settings.still_file import load_still_file

STILL = load_still_file("config/stills/deep-basin.yaml")
CONDITIONS = ("maintained", "weathered", "new")
DAYS, CELLS = 40, 9
LATITUDE = np.linspace(-33.0, 41.0, CELLS)
RICHER = {
    "daily": (), "daily-range": ("temp_air_min", "temp_air_max"), "daily-humidity": ("relative_humidity",),
    "daily-range-humidity": ("temp_air_min", "temp_air_max", "temp_dew"),
}


def weather(more: tuple[str, ...] = (), days: int = DAYS) -> dict[str, np.ndarray]:
    random = np.random.default_rng(4)

    def some(low: float, high: float) -> np.ndarray:
        return random.uniform(low, high, (days, CELLS)).astype(np.float32)

    temp = some(-5.0, 36.0)
    found = {
        "irradiation": some(2.0, 28.0), "temp_air": temp, "wind_speed": some(0.3, 7.0), "temp_air_min": temp - 5.0,
        "temp_air_max": temp + 6.0, "relative_humidity": some(0.0, 104.0), "temp_dew": temp - some(0.0, 20.0),
    }
    found["irradiation"][7:9, 3] = found["temp_air"][11, 4] = np.nan
    return {name: found[name] for name in ("irradiation", "temp_air", "wind_speed", *more)}


def block_of(fields: dict[str, np.ndarray], some: slice = slice(None), **more: Any) -> Block:
    days = len(fields["irradiation"])
    return Block({name: values[some] for name, values in fields.items()}, LATITUDE,
                 (np.arange(days)[some] + 340) % 365 + 1, **more)


@pytest.mark.parametrize("engine", ["numpy", "compiled"])
@settings(max_examples=10, deadline=None)
@given(cuts=st.lists(st.integers(1, DAYS - 1), max_size=6))
def test_windows_change_no_digit(engine: Any, cuts: list[int]) -> None:
    fields, method = weather(RICHER["daily-range-humidity"]), Fitted(engine=engine)
    whole = whole_record(method, block_of(fields), STILL, CONDITIONS)
    march = method.begin(Cells(LATITUDE, np.zeros(CELLS)), STILL, CONDITIONS)
    ends = sorted(set(cuts))
    pieces = [march.advance(block_of(fields, slice(start, end)), last=end == DAYS)
              for start, end in zip([0, *ends], [*ends, DAYS], strict=True)]
    for index, theirs in enumerate(whole):
        for name in ("litres", "frost", "outside"):
            ours = np.concatenate([getattr(piece[index], name) for piece in pieces])
            np.testing.assert_array_equal(ours, getattr(theirs, name))


@pytest.mark.parametrize("variant", RICHER)
def test_both_engines_give_the_same_litres_from_daily_weather(variant: str) -> None:
    block = block_of(weather(RICHER[variant]))
    numpy, compiled = (whole_record(Fitted(engine=engine), block, STILL, CONDITIONS)
                       for engine in ("numpy", "compiled"))
    for ours, theirs in zip(numpy, compiled, strict=True):
        assert theirs.litres.dtype == np.float32
        np.testing.assert_allclose(theirs.litres, ours.litres, atol=2e-4, rtol=0.0)
        np.testing.assert_array_equal(theirs.outside, ours.outside)
        assert (theirs.frost != ours.frost).mean() < 0.005
    assert np.isnan(numpy[0].litres).sum() == 3


@pytest.mark.parametrize("variant", RICHER)
def test_the_weather_decides_the_variant(variant: str) -> None:
    fields = weather(RICHER[variant])
    assert Fitted().variant(fields, STILL) == variant
    assert Fitted("hourly").variant(["ghi", "temp_air", "wind_speed"], STILL) == "hourly"
    assert set(RICHER) | {"hourly"} == set(VARIANTS)
    everything = whole_record(Fitted(engine="numpy"), block_of(weather(RICHER[variant])), STILL, ["maintained"])
    plain = whole_record(Fitted(engine="numpy"), block_of(weather()), STILL, ["maintained"])
    same = np.array_equal(everything[0].litres, plain[0].litres, equal_nan=True)
    assert same == (variant == "daily")


def test_humidity_counts_as_the_dew_point_it_gives() -> None:
    humid = weather(("relative_humidity",))
    dewy = {name: values for name, values in humid.items() if name != "relative_humidity"}
    dewy["temp_dew"] = dew_point(humid["temp_air"].astype(float), humid["relative_humidity"].astype(float))
    for engine in ("numpy", "compiled"):
        ours, theirs = (whole_record(Fitted(engine=engine), block_of(one), STILL, ["maintained"])[0].litres
                        for one in (humid, dewy))
        np.testing.assert_allclose(ours, theirs, atol=1e-4)


def test_a_better_condition_gives_more_water() -> None:
    central, low, high = whole_record(Fitted(), block_of(weather()), STILL, CONDITIONS)
    assert np.nansum(low.litres) < np.nansum(central.litres) < np.nansum(high.litres)


def test_a_typical_year_has_no_beginning() -> None:
    fields = weather(days=365)
    turned = {name: np.roll(values, 100, axis=0) for name, values in fields.items()}
    day = (np.arange(365) + 340) % 365 + 1
    ours, theirs = (
        whole_record(Fitted(engine="numpy"), Block(one, LATITUDE, days, cyclic=True), STILL, ["new"])[0].litres
        for one, days in ((fields, day), (turned, np.roll(day, 100)))
    )
    # What is left of the day before the warm-up: memory ** WARM_UP_DAYS.
    assert WARM_UP_DAYS == 30
    np.testing.assert_allclose(np.roll(ours, 100, axis=0), theirs, atol=1e-9)


@pytest.mark.parametrize("engine", ["numpy", "compiled"])
def test_steps_may_come_in_windows(engine: Any) -> None:
    climates = invented_climates(6)
    steps = {name: getattr(climates, name)[: 24 * 30] for name in ("ghi", "temp_air", "wind_speed", "temp_dew")}
    days, method = climates.day_of_year[:30], Fitted("hourly", engine=engine)
    whole = whole_record(method, Block(steps, climates.latitude, days, 24), STILL, CONDITIONS)
    march = method.begin(Cells(climates.latitude, np.zeros(6), 24), STILL, CONDITIONS)
    found = []
    for start, end in ((0, 1), (1, 12), (12, 30)):
        some = {name: values[24 * start : 24 * end] for name, values in steps.items()}
        found.append(march.advance(Block(some, climates.latitude, days[start:end], 24), last=end == 30))
    for index, theirs in enumerate(whole):
        np.testing.assert_array_equal(np.concatenate([one[index].litres for one in found]), theirs.litres)
        assert theirs.litres.shape == (30, 6)
        assert 0.5 < theirs.litres.mean() < 8.0
