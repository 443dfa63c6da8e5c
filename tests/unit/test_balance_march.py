"""The heat balance window after window: the cuts change no digit, gaps and the last night are those of a record."""

from __future__ import annotations

from dataclasses import replace
from functools import cache
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from stillfield.errors import MethodError
from stillfield.methods import Block, Cells, whole_record
from stillfield.methods.heat_balance import HeatBalance
from stillfield.physics.heat_balance import BalanceMarch, BalanceResult, Forcing, simulate
from stillfield.physics.still import Panel, Still

DAYS, CELLS = 9, 5
STILLS = {
    "plain": Still("plain", (Panel(1.0, 15.0),)),
    "salt": Still("salt", (Panel(1.0, 15.0),), feed_salinity_g_kg=20.0, heat_transfer="moist-air"),
    "deep": Still("deep", (Panel(1.0, 15.0),), brine_depth_m=0.20),
}
#: Steps and cells that miss a value: in the first night, by day, in a later night, in the last hour.
GAPS = ((2, 0), (60, 1), (98, 2), (24 * DAYS - 1, 3))


@cache
def weather(dtype: type = np.float64, *, gaps: bool = False, days: int = DAYS) -> Forcing:
    """Unlike days and cells; the first cell freezes."""
    draw = np.random.default_rng(5)
    hour = ((np.arange(24 * days) + 0.5) % 24.0)[:, None]
    bright = np.repeat(draw.uniform(0.1, 1.0, (days, CELLS)), 24, axis=0)
    sun = 900.0 * bright * np.maximum(np.sin((hour - 6.0) / 12.0 * np.pi), 0.0)
    air = np.linspace(-8.0, 32.0, CELLS) + 5.0 * np.sin((hour - 9.0) / 12.0 * np.pi)
    wind = draw.uniform(0.0, 6.0, sun.shape)
    if gaps:
        for step, cell in GAPS:
            wind[step, cell] = np.nan
    return Forcing(*(field.astype(dtype) for field in (0.7 * sun, 0.05 * sun, air, wind, air - 15.0)))


def days_of(forcing: Forcing, first: int, end: int, steps: int = 24) -> Forcing:
    return Forcing(*(field[steps * first : steps * end] for field in vars(forcing).values()))


def in_windows(forcing: Forcing, cuts: list[int], march: BalanceMarch, steps: int = 24) -> list[BalanceResult]:
    edges = [0, *sorted(cuts), forcing.absorbed.shape[0] // steps]
    return [
        march.advance(days_of(forcing, first, end, steps), last=end == edges[-1])
        for first, end in pairwise(edges)
    ]


def joined(results: list[BalanceResult], name: str) -> np.ndarray:
    return np.concatenate([getattr(one, name) for one in results])


@pytest.mark.parametrize("engine", ["numpy", "compiled"])
@pytest.mark.parametrize("name", STILLS)
@settings(max_examples=6, deadline=None)
@given(cuts=st.sets(st.integers(1, DAYS - 1)), single=st.booleans(), gaps=st.booleans())
def test_cuts_change_no_digit(name, engine, cuts, single, gaps):
    forcing = weather(np.float32 if single else np.float64, gaps=gaps)
    whole = simulate(forcing, STILLS[name], engine=engine)
    parts = in_windows(forcing, list(cuts), BalanceMarch(STILLS[name], CELLS, engine=engine))
    np.testing.assert_array_equal(joined(parts, "daily_yield"), whole.daily_yield)
    np.testing.assert_array_equal(joined(parts, "frost"), whole.frost)
    assert whole.daily_yield.dtype == forcing.absorbed.dtype


@pytest.mark.parametrize("engine", ["numpy", "compiled"])
def test_cuts_change_no_digit_of_the_record(engine):
    forcing = weather()
    whole = simulate(forcing, STILLS["plain"], engine=engine, record=True)
    march = BalanceMarch(STILLS["plain"], CELLS, engine=engine, record=True)
    parts = in_windows(forcing, [1, 4, 5], march)
    for name, values in vars(whole.record).items():
        np.testing.assert_array_equal(np.concatenate([getattr(one.record, name) for one in parts]), values)


def test_a_record_changes_no_digit_of_the_litres():
    forcing = weather(gaps=True)
    kept, quiet = (simulate(forcing, STILLS["deep"], engine="numpy", record=record) for record in (True, False))
    np.testing.assert_array_equal(kept.daily_yield, quiet.daily_yield)
    np.testing.assert_array_equal(kept.frost, quiet.frost)
    assert quiet.record is None


# The processor may join other operations into one where there is a record: the last digits may differ.
def test_a_record_changes_no_compiled_litres():
    forcing = weather(gaps=True)
    kept, quiet = (simulate(forcing, STILLS["deep"], engine="compiled", record=record) for record in (True, False))
    np.testing.assert_allclose(kept.daily_yield, quiet.daily_yield, rtol=1e-12)


def test_the_newest_day_waits_for_its_night():
    forcing = weather()
    given_days = [len(one.daily_yield) for one in in_windows(forcing, [1, 2, 6], BalanceMarch(STILLS["plain"], CELLS))]
    assert given_days == [0, 1, 4, 4]


def test_a_day_that_starts_at_midnight_does_not_wait():
    forcing = weather()
    march = BalanceMarch(STILLS["plain"], CELLS, day_start_hour=0.0)
    parts = in_windows(forcing, [1, 2, 6], march)
    assert [len(one.daily_yield) for one in parts] == [1, 1, 4, 3]
    whole = simulate(forcing, STILLS["plain"], day_start_hour=0.0)
    np.testing.assert_array_equal(joined(parts, "daily_yield"), whole.daily_yield)


@pytest.mark.parametrize("hour", [9.0, 18.0, 23.9])
def test_other_start_hours(hour):
    forcing = weather(gaps=True)
    whole = simulate(forcing, STILLS["deep"], day_start_hour=hour, engine="numpy")
    march = BalanceMarch(STILLS["deep"], CELLS, day_start_hour=hour, engine="numpy")
    np.testing.assert_array_equal(joined(in_windows(forcing, [2, 3, 8], march), "daily_yield"), whole.daily_yield)


@pytest.mark.parametrize("steps", [4, 8, 48])
def test_other_steps(steps):
    each = [field[:: 24 // steps] if steps < 24 else field.repeat(2, axis=0) for field in vars(weather()).values()]
    forcing = Forcing(*each)
    whole = simulate(forcing, STILLS["plain"], steps_per_day=steps)
    parts = in_windows(forcing, [1, 7], BalanceMarch(STILLS["plain"], CELLS, steps_per_day=steps), steps)
    np.testing.assert_array_equal(joined(parts, "daily_yield"), whole.daily_yield)


# Days 0 to 2 of a 20 cm basin: the gap at 02:00 before the first yield day costs two days, one at noon of the third
# day that day and two more, one at 02:00 of the fifth the day before and two more, one in the last hour the last.
@pytest.mark.parametrize("cuts", [[], [1], [2, 3, 4, 5], list(range(1, DAYS))])
def test_gaps_reach_over_the_cuts(cuts):
    parts = in_windows(weather(gaps=True), cuts, BalanceMarch(STILLS["deep"], CELLS, engine="numpy"))
    missing = np.isnan(joined(parts, "daily_yield"))
    expected = {0: [0, 1], 1: [2, 3, 4], 2: [3, 4, 5], 3: [8], 4: []}
    assert {cell: np.flatnonzero(missing[:, cell]).tolist() for cell in range(CELLS)} == expected
    assert not (joined(parts, "frost") & missing).any()


def test_frost_is_flagged_in_every_window():
    parts = in_windows(weather(), [3, 6], BalanceMarch(STILLS["plain"], CELLS))
    frost = joined(parts, "frost")
    assert frost[:, 0].all()
    assert not frost[:, -1].any()


@pytest.mark.parametrize("engine", ["numpy", "compiled"])
def test_one_cell_alone_is_as_among_others(engine):
    forcing = weather(gaps=True)
    whole = simulate(forcing, STILLS["deep"], engine=engine).daily_yield
    alone = Forcing(*(field[:, 2:3] for field in vars(forcing).values()))
    parts = in_windows(alone, [4], BalanceMarch(STILLS["deep"], 1, engine=engine))
    np.testing.assert_allclose(joined(parts, "daily_yield"), whole[:, 2:3], rtol=1e-12)


def test_more_cells_than_one_block():
    forcing = Forcing(*(np.tile(field, (1, 120)) for field in vars(weather(np.float32, days=3)).values()))
    whole = simulate(forcing, STILLS["plain"], engine="compiled")
    parts = in_windows(forcing, [1, 2], BalanceMarch(STILLS["plain"], 120 * CELLS, engine="compiled"))
    np.testing.assert_array_equal(joined(parts, "daily_yield"), whole.daily_yield)


def test_share_of_the_sun_is_that_of_a_forcing_with_less():
    forcing = weather()
    less = replace(forcing, absorbed=forcing.absorbed * 0.9)
    march = BalanceMarch(STILLS["plain"], CELLS, absorbed_share=0.9, engine="numpy", record=True)
    found, expected = march.advance(forcing, last=True), simulate(less, STILLS["plain"], engine="numpy", record=True)
    np.testing.assert_array_equal(found.daily_yield, expected.daily_yield)
    np.testing.assert_array_equal(found.record.residual, expected.record.residual)


def test_other_cells_than_it_began_with_are_refused():
    with pytest.raises(MethodError, match="other cells"):
        BalanceMarch(STILLS["plain"], CELLS + 1).advance(weather(), last=True)


def block(days: int, *, cyclic: bool = False) -> Block:
    """Hourly weather of three cells."""
    draw = np.random.default_rng(11)
    hour = ((np.arange(24 * days) + 0.5) % 24.0)[:, None]
    sun = np.repeat(draw.uniform(300.0, 950.0, (days, 3)), 24, axis=0)
    ghi = sun * np.maximum(np.sin((hour - 6.0) / 12.0 * np.pi), 0.0)
    air = 22.0 + 6.0 * np.sin((hour - 9.0) / 12.0 * np.pi) + np.zeros((1, 3))
    fields = {"ghi": ghi, "temp_air": air, "wind_speed": draw.uniform(0.0, 5.0, ghi.shape)}
    single = {name: np.ascontiguousarray(values, np.float32) for name, values in fields.items()}
    return Block(single, np.array([12.0, 14.0, 16.0]), np.arange(80, 80 + days), 24, np.zeros(3), cyclic)


def part_of(whole: Block, first: int, end: int) -> Block:
    cut = {name: values[24 * first : 24 * end] for name, values in whole.weather.items()}
    return replace(whole, weather=cut, day_of_year=whole.day_of_year[first:end])


def test_conditions_walk_under_one_sun():
    still, whole, names = STILLS["plain"], block(8), ["maintained", "weathered", "new"]
    at_once = whole_record(HeatBalance(), whole, still, names)
    march = HeatBalance().begin(Cells(whole.latitude, whole.clock_to_solar_hours, 24), still, names)
    parts = [march.advance(part_of(whole, a, b), last=b == 8) for a, b in ((0, 1), (1, 5), (5, 8))]
    for at, expected in enumerate(at_once):
        np.testing.assert_array_equal(np.concatenate([one[at].litres for one in parts]), expected.litres)
        assert expected.litres.dtype == np.float32
    low, central, high = (at_once[at].litres for at in (1, 0, 2))
    assert ((low < central) & (central < high)).all()


def test_a_condition_by_the_way_is_that_condition_alone():
    still, whole = STILLS["plain"], block(4)
    among = whole_record(HeatBalance(), whole, still, ["maintained", "neglected"])[1].litres
    alone = whole_record(HeatBalance(), whole, still.in_condition("neglected"), ["neglected"])[0].litres
    np.testing.assert_allclose(among, alone, rtol=1e-4)


def test_a_typical_year_begins_where_it_ends():
    whole = block(40, cyclic=True)
    found = whole_record(HeatBalance(), whole, STILLS["deep"], ["maintained"])[0].litres
    twice = Block({name: np.tile(values, (2, 1)) for name, values in whole.weather.items()}, whole.latitude,
                  np.tile(whole.day_of_year, 2), 24, whole.clock_to_solar_hours)
    expected = whole_record(HeatBalance(), twice, STILLS["deep"], ["maintained"])[0].litres[40:]
    np.testing.assert_allclose(found[:-1], expected[:-1], rtol=1e-4)
