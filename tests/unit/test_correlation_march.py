"""The daily correlation walked through time: cuts, engines, gaps, frost."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from stillfield.methods.fit_store import fit_for
from stillfield.physics.correlation import VARIANTS, DailyCorrelation, Day
from stillfield.physics.correlation_march import CorrelationMarch, daily_litres, rows
from stillfield.physics.still import Still
from stillfield.settings.still_file import load_still_file

DEEP = load_still_file("config/stills/deep-basin.yaml")
CONDITIONS = ("maintained", "weathered", "new")
ENGINES = ("numpy", "compiled")
RANGES = {
    "transmitted": (0.0, 29.0), "temp_air": (-15.0, 40.0), "wind_speed": (0.0, 12.0), "day_length": (6.0, 18.0),
    "clearness": (0.05, 0.78), "temp_range": (2.0, 20.0), "dew_depression": (0.0, 25.0), "peakiness": (1.5, 5.0),
    "warm_hours": (-1.0, 6.0), "sky_depression": (0.0, 28.0), "windy_hours": (-0.2, 0.5),
}


def fits(variant: str, still: Still = DEEP) -> list[DailyCorrelation]:
    return [fit_for(still.in_condition(condition)).correlations[variant] for condition in CONDITIONS]


def some_days(days: int, cells: int, *, seed: int = 5, gaps: float = 0.0) -> Day:
    """Weather in single precision, so that both engines see the same numbers; frost, heat and gaps in it."""
    random = np.random.default_rng(seed)
    found = {}
    for name, (low, high) in RANGES.items():
        values = random.uniform(low, high, (days, cells)).astype(np.float32)
        values[random.random((days, cells)) < gaps] = np.nan
        found[name] = values
    return Day(**found)


def marched(correlations: list[DailyCorrelation], day: Day, cuts: list[int], engine: str) -> list[np.ndarray]:
    """Litres, frost and outside of all correlations, put together from pieces that end before `cuts`."""
    days, cells = day.transmitted.shape
    march = CorrelationMarch(correlations, cells, engine=engine)
    ends = sorted({cut for cut in cuts if 0 < cut < days})
    pieces = [
        march.advance(rows(day, slice(start, end)), last=end == days)
        for start, end in zip([0, *ends], [*ends, days], strict=True)
    ]
    return [
        np.concatenate([piece[index][kind] for piece in pieces])
        for index in range(len(correlations)) for kind in range(3)
    ]


@pytest.mark.parametrize("engine", ENGINES)
@settings(max_examples=25, deadline=None)
@given(cuts=st.lists(st.integers(1, 49), max_size=8), cells=st.integers(1, 40), seed=st.integers(0, 1000))
def test_cuts_in_time_change_no_digit(engine: str, cuts: list[int], cells: int, seed: int) -> None:
    day = some_days(50, cells, seed=seed, gaps=0.1)
    correlations = fits("daily-range-humidity")
    for whole, cut in zip(
        marched(correlations, day, [], engine), marched(correlations, day, cuts, engine), strict=True
    ):
        np.testing.assert_array_equal(whole, cut)


@pytest.mark.parametrize("engine", ENGINES)
@pytest.mark.parametrize("variant", VARIANTS)
def test_a_day_at_a_time_changes_no_digit(engine: str, variant: str) -> None:
    day = some_days(30, 7, gaps=0.05)
    whole, single = (marched(fits(variant), day, cuts, engine) for cuts in ([], list(range(30))))
    for ours, theirs in zip(whole, single, strict=True):
        np.testing.assert_array_equal(ours, theirs)


@pytest.mark.parametrize("engine", ENGINES)
def test_cells_beside_a_cell_change_no_digit(engine: str) -> None:
    """700 cells are more than a tile of days: the cell alone is worked on in other company."""
    day = some_days(9, 700, gaps=0.1)
    together = daily_litres(fits("hourly"), day, engine=engine)
    for cell in (0, 17, 511, 699):
        alone = daily_litres(fits("hourly"), Day(**{n: getattr(day, n)[:, [cell]] for n in RANGES}), engine=engine)
        for whole, part in zip(together, alone, strict=True):
            for ours, theirs in zip(whole, part, strict=True):
                np.testing.assert_array_equal(ours[:, [cell]], theirs)


@pytest.mark.parametrize("gaps", [0.0, 0.2])
@pytest.mark.parametrize("cells", [1, 16, 77])
@pytest.mark.parametrize("variant", VARIANTS)
def test_both_engines_give_the_same_litres(variant: str, cells: int, gaps: float) -> None:
    day = some_days(60, cells, gaps=gaps, seed=cells)
    numpy, compiled = (daily_litres(fits(variant), day, engine=engine) for engine in ENGINES)
    for (litres, frost, outside), (theirs, their_frost, their_outside) in zip(numpy, compiled, strict=True):
        assert theirs.dtype == np.float32
        assert litres.dtype == np.float64
        np.testing.assert_allclose(theirs, litres, atol=1e-4, rtol=0.0)
        # A frost factor within single precision of its threshold may fall on either side.
        assert (frost != their_frost).mean() < 1e-3
        np.testing.assert_array_equal(outside, their_outside)
    assert np.nanmax(numpy[0][0]) > 0.0
    assert cells == 1 or (np.nanmin(numpy[0][0]) == 0.0 and numpy[0][1].any())


@pytest.mark.parametrize("still", ["single-slope-glass", "double-slope-glass", "low-cost-film"])
def test_both_engines_agree_for_shallow_basins(still: str) -> None:
    day = some_days(40, 33, gaps=0.02)
    shallow = fits("daily", load_still_file(f"config/stills/{still}.yaml"))
    numpy, compiled = (daily_litres(shallow, day, engine=engine) for engine in ENGINES)
    for ours, theirs in zip(numpy, compiled, strict=True):
        np.testing.assert_allclose(theirs[0], ours[0], atol=1e-4, rtol=0.0)


@pytest.mark.parametrize("engine", ENGINES)
def test_gaps_stay_where_they_are(engine: str) -> None:
    """A day without sunshine or temperature has no litres; the days beside it do."""
    day = some_days(12, 5)
    sunshine, temp = np.array(day.transmitted), np.array(day.temp_air)
    sunshine[:3, 0] = sunshine[5:7, 1] = sunshine[-2:, 2] = sunshine[:, 3] = np.nan
    temp[:2, 1] = temp[-1, 4] = np.nan
    torn = daily_litres(fits("daily"), replace(day, transmitted=sunshine, temp_air=temp), engine=engine)[0][0]
    np.testing.assert_array_equal(np.isnan(torn), np.isnan(sunshine) | np.isnan(temp))


@pytest.mark.parametrize("engine", ENGINES)
def test_the_memory_begins_with_the_first_day_there_is(engine: str) -> None:
    """Days missing before the first leave no trace: the record begins where it begins."""
    day = some_days(20, 3)
    late = rows(day, slice(6, 20))
    sunshine, temp = np.array(day.transmitted), np.array(day.temp_air)
    sunshine[:6] = temp[:6] = np.nan
    padded = daily_litres(fits("daily"), replace(day, transmitted=sunshine, temp_air=temp), engine=engine)
    for ours, theirs in zip(padded, daily_litres(fits("daily"), late, engine=engine), strict=True):
        np.testing.assert_array_equal(ours[0][6:], theirs[0])


@pytest.mark.parametrize("engine", ENGINES)
def test_a_missing_tomorrow_is_today(engine: str) -> None:
    day = some_days(6, 4)
    temp = np.array(day.temp_air)
    temp[4] = np.nan
    torn = daily_litres(fits("daily"), replace(day, temp_air=temp), engine=engine)[0][0]
    short = daily_litres(fits("daily"), rows(day, slice(0, 4)), engine=engine)[0][0]
    np.testing.assert_array_equal(torn[:4], short)


@pytest.mark.parametrize("engine", ENGINES)
def test_a_single_day_is_its_own_yesterday_and_tomorrow(engine: str) -> None:
    day = some_days(1, 3)
    twice = rows(day, np.zeros(2, dtype=int))
    once = daily_litres(fits("daily"), day, engine=engine)[0]
    np.testing.assert_allclose(daily_litres(fits("daily"), twice, engine=engine)[0][0][0], once[0][0], rtol=1e-5)
    assert once[0].shape == once[1].shape == once[2].shape == (1, 3)


@pytest.mark.parametrize("engine", ENGINES)
def test_the_newest_day_waits_for_tomorrow(engine: str) -> None:
    day = some_days(5, 2)
    march = CorrelationMarch(fits("daily"), 2, engine=engine)
    given = [
        len(march.advance(rows(day, some), last=some.stop == 5)[0][0])
        for some in (slice(0, 1), slice(1, 2), slice(2, 4), slice(4, 5))
    ]
    assert given == [0, 1, 2, 2]


@pytest.mark.parametrize("engine", ENGINES)
def test_the_pending_day_is_kept_though_its_array_is_used_again(engine: str) -> None:
    day = some_days(8, 3)
    window = rows(some_days(4, 3), slice(0, 4))
    march, found = CorrelationMarch(fits("daily"), 3, engine=engine), []
    for start in (0, 4):
        for name in RANGES:
            getattr(window, name)[:] = getattr(day, name)[start : start + 4]
        found.append(march.advance(window, last=start == 4)[0][0])
    np.testing.assert_array_equal(np.concatenate(found), daily_litres(fits("daily"), day, engine=engine)[0][0])


def test_warm_days_have_no_frost_and_cold_ones_lose_litres() -> None:
    mixed = some_days(40, 20)
    cold = replace(mixed, temp_air=mixed.temp_air / 20.0 - 15.0, transmitted=mixed.transmitted / 3.0)
    # The same days without the frost factor: a score of 20 leaves all.
    warm = [replace(one, frost=(20.0, *[0.0] * 8)) for one in fits("daily")]
    for engine in ENGINES:
        assert not daily_litres(fits("daily"), mixed, engine=engine)[0][1][mixed.temp_air >= 12.0].any()
        litres, frost, _ = daily_litres(fits("daily"), cold, engine=engine)[0]
        kept, no_frost, _ = daily_litres(warm, cold, engine=engine)[0]
        assert frost[5:].mean() > 0.9
        assert not no_frost.any()
        assert (litres <= kept).all()
        assert litres[frost].sum() < 0.9 * kept[frost].sum()


def test_broadcast_fields_are_filled() -> None:
    day = some_days(10, 4)
    spread = replace(day, day_length=np.full((10, 1), 12.0), wind_speed=np.full((1, 4), 2.0))
    full = replace(day, day_length=np.full((10, 4), 12.0), wind_speed=np.full((10, 4), 2.0))
    for engine in ENGINES:
        ours, theirs = (daily_litres(fits("daily"), one, engine=engine)[0][0] for one in (spread, full))
        np.testing.assert_array_equal(ours, theirs)


def test_every_walk_is_kept_under_a_name_of_its_own() -> None:
    """Two processes that compile two walks at once must not be able to put one in the place of the other."""
    from stillfield.physics.correlation_compiled import _walk

    walks = [_walk(variant, from_weather) for variant in VARIANTS for from_weather in (False, True)]
    names = {walk.stats.cache_path + walk._cache._cache_file._index_name for walk in walks}
    assert len(names) == len(walks) == 2 * len(VARIANTS)


def test_correlations_that_cannot_walk_together_are_refused() -> None:
    first = fits("daily")[0]
    for odd in (fits("hourly")[0], replace(first, memory=0.2), replace(first, ranges={})):
        with pytest.raises(ValueError, match="different"):
            CorrelationMarch([first, odd], 3)
    with pytest.raises(ValueError, match="coefficients"):
        CorrelationMarch([replace(first, frost=(1.0,))], 3)


def test_a_cyclic_record_is_walked_from_its_last_month_on() -> None:
    first = replace(fit_for(DEEP).correlations["daily"], memory=0.44)
    day = some_days(365, 2)
    thrice = rows(day, np.tile(np.arange(365), 3))
    for engine in ENGINES:
        cyclic = daily_litres([first], day, cyclic=True, engine=engine)[0][0]
        endless = daily_litres([first], thrice, engine=engine)[0][0][365:730]
        np.testing.assert_allclose(cyclic, endless, atol=1e-5)
