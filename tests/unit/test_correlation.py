"""The daily correlation: evaluation, bounds, memory, variants, flags."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from stillfield.methods.fit_store import fit_for
from stillfield.physics import correlation_polynomials, correlation_source
from stillfield.physics.correlation import (
    FROST_TERMS,
    VARIANTS,
    DailyCorrelation,
    Day,
    design_matrix,
    evaluate,
    remembered,
    scaled_predictors,
    thaw,
)
from stillfield.physics.still import Panel, Still
from stillfield.settings.still_file import load_still_file

_DAILY_FIELDS = ("transmitted", "temp_air", "wind_speed", "day_length", "clearness")
DESIGNS = ("single-slope-glass", "double-slope-glass", "low-cost-film", "deep-basin")


def still_of(design: str) -> Still:
    return load_still_file(f"config/stills/{design}.yaml")


def some_days(count: int = 40, cells: int = 6, seed: int = 3) -> Day:
    random = np.random.default_rng(seed)
    return Day(
        transmitted=random.uniform(0.0, 27.0, (count, cells)),
        temp_air=random.uniform(-4.0, 40.0, (count, cells)),
        wind_speed=random.uniform(0.0, 12.0, (count, cells)),
        day_length=random.uniform(6.0, 17.0, (count, cells)),
        clearness=random.uniform(0.05, 0.78, (count, cells)),
    )


def test_written_out_polynomials_give_the_sum_of_the_terms() -> None:
    random = np.random.default_rng(1)
    day = replace(
        some_days(), temp_range=random.uniform(2, 18, (40, 6)), dew_depression=random.uniform(0, 25, (40, 6)),
        peakiness=random.uniform(1.5, 5, (40, 6)), warm_hours=random.uniform(0, 6, (40, 6)),
        sky_depression=random.uniform(0, 25, (40, 6)), windy_hours=random.uniform(-0.2, 0.5, (40, 6)),
    )
    predictors = scaled_predictors(day, 0.3)
    flat = {letter: values.ravel() for letter, values in predictors.items()}
    for name, terms in {**VARIANTS, "frost": FROST_TERMS}.items():
        coefficients = random.normal(size=len(terms)).tolist()
        plain = design_matrix(flat, terms) @ coefficients
        ours = evaluate(name, predictors, coefficients)
        np.testing.assert_allclose(ours.ravel(), plain, rtol=1e-10, atol=1e-10)


def test_the_written_polynomials_are_those_of_the_terms() -> None:
    written = Path(correlation_polynomials.__file__).read_text(encoding="utf-8")
    cure = "write it anew: python -m stillfield.physics.correlation_source > .../correlation_polynomials.py"
    assert written == correlation_source.source(), cure


def test_terms_are_unique_and_use_known_predictors() -> None:
    for variant, terms in VARIANTS.items():
        assert len({"".join(sorted(term)) for term in terms}) == len(terms), variant
        letters = set("".join(terms)) - {"1"}
        allowed = set("STwNEmn") if variant == "hourly" else set("STwNEmnK")
        allowed |= {"D"} if "range" in variant else set()
        allowed |= {"h"} if "humidity" in variant else set()
        allowed |= set("PqkvD") if variant == "hourly" else set()
        assert letters <= allowed, variant


@pytest.mark.parametrize("design", DESIGNS)
@pytest.mark.parametrize("condition", ["new", "maintained", "weathered", "neglected"])
def test_never_negative_never_above_the_energy(design: str, condition: str) -> None:
    still = still_of(design).in_condition(condition)
    correlation = fit_for(still).correlations["daily"]
    day = some_days(400, 20)
    litres, _, _ = correlation.litres(day)
    assert (litres >= 0.0).all()
    # All absorbed sunshine of today and of what the basin remembers, evaporated at 2.31 MJ kg-1 (80 degC).
    share = still.state.absorptance / 0.9 * (1.0 - still.state.leak)
    remembered_s = remembered(day.transmitted, correlation.memory)
    most = share * (day.transmitted + 2.0 * correlation.memory * remembered_s) / 2.30
    assert (litres <= most).all()


@pytest.mark.parametrize("design", DESIGNS)
def test_no_sun_no_litres(design: str) -> None:
    correlation = fit_for(still_of(design)).correlations["daily"]
    day = replace(some_days(), transmitted=np.zeros((40, 6)))
    litres, _, _ = correlation.litres(day)
    assert (litres == 0.0).all()


@pytest.mark.parametrize("design", DESIGNS)
def test_more_sun_more_litres_on_ordinary_days(design: str) -> None:
    correlation = fit_for(still_of(design)).correlations["daily"]
    # A steady run of equal days, so that the memory is the day itself.
    sunshine = np.linspace(6.0, 25.0, 39)[None, :].repeat(30, axis=0)
    even = (np.full_like(sunshine, value) for value in (27.0, 2.5, 12.0))
    day = Day(sunshine, *even, clearness=sunshine / 0.8 / 36.0)
    litres = correlation.litres(day)[0][-1]
    assert (np.diff(litres) > 0.0).all()
    exponent = np.polyfit(np.log(sunshine[0]), np.log(litres), 1)[0]
    # Yield is convex in sunshine: exponent 1.1 to 1.4 in H (model of the trade, published efficiencies rising
    # with irradiation); in steady days over a wide range it may reach a little more.
    assert 1.05 < exponent < 1.6


def test_days_outside_the_fit_are_flagged_one_by_one() -> None:
    correlation = fit_for(still_of("single-slope-glass")).correlations["daily"]
    ordinary = Day(*(np.full((1, 4), value) for value in (15.0, 25.0, 3.0, 12.0, 0.5)))
    day = Day(
        np.array([[15.0, 40.0, 15.0, 15.0]]), np.array([[25.0, 25.0, 48.0, 25.0]]),
        np.array([[3.0, 3.0, 3.0, 30.0]]), np.full((1, 4), 12.0), np.full((1, 4), 0.5),
    )
    assert correlation.outside(ordinary).tolist() == [[False] * 4]
    assert correlation.outside(day).tolist() == [[False, True, True, True]]


def test_frost_factor_leaves_warm_days_alone_and_flags_cold_ones() -> None:
    correlation = fit_for(still_of("single-slope-glass")).correlations["daily"]
    air = np.array([[-15.0, 2.0, 12.5, 30.0]]).repeat(5, axis=0)
    day = Day(np.full_like(air, 8.0), air, *(np.full_like(air, value) for value in (2.0, 10.0, 0.5)))
    _, frost, _ = correlation.litres(day)
    assert frost[-1, 0]
    assert not frost[-1, 2:].any()
    assert 0.0 <= float(thaw(np.array(-50.0))) < 1e-6 < 1.0 - float(thaw(np.array(50.0))) + 1e-5


def test_missing_days_stay_missing_and_do_not_spread() -> None:
    correlation = fit_for(still_of("deep-basin")).correlations["daily"]
    day = some_days(30, 3)
    holes = np.array(day.transmitted)
    holes[10, 1] = np.nan
    whole, _, _ = correlation.litres(day)
    torn, _, _ = correlation.litres(replace(day, transmitted=holes))
    assert np.argwhere(np.isnan(torn)).tolist() == [[10, 1]]
    np.testing.assert_array_equal(torn[:, [0, 2]], whole[:, [0, 2]])
    np.testing.assert_array_equal(torn[:10, 1], whole[:10, 1])


def test_memory_follows_its_closed_form() -> None:
    values = np.zeros((12, 1))
    values[3] = 1.0
    memory = 0.4
    out = remembered(values, memory)[:, 0]
    expected = [0.0] * 4 + [0.6 * 0.4**day for day in range(8)]
    np.testing.assert_allclose(out, expected, atol=1e-12)


def test_memory_is_the_same_whether_or_not_another_cell_has_a_gap() -> None:
    random = np.random.default_rng(2)
    values = random.uniform(0.0, 30.0, (90, 3))
    holed = values.copy()
    holed[40, 2] = np.nan
    whole = remembered(values, 0.4)
    torn = remembered(holed, 0.4)
    np.testing.assert_array_equal(torn[:, :2], whole[:, :2])
    np.testing.assert_array_equal(torn[:41, 2], whole[:41, 2])
    assert torn[41, 2] == torn[40, 2]


def test_a_cyclic_year_has_no_beginning() -> None:
    correlation = fit_for(still_of("deep-basin")).correlations["daily"]
    day = some_days(365, 2)

    def turned(field: np.ndarray) -> np.ndarray:
        return np.roll(field, 100, axis=0)

    other = Day(*(turned(getattr(day, name)) for name in _DAILY_FIELDS))
    np.testing.assert_allclose(
        turned(correlation.litres(day, cyclic=True)[0]), correlation.litres(other, cyclic=True)[0], atol=1e-9
    )


def test_variant_follows_what_is_known() -> None:
    day = some_days()
    some = np.ones((40, 6))
    assert day.variant == "daily"
    assert replace(day, temp_range=some).variant == "daily-range"
    assert replace(day, dew_depression=some).variant == "daily-humidity"
    assert replace(day, temp_range=some, dew_depression=some).variant == "daily-range-humidity"
    assert replace(day, temp_range=some, peakiness=some).variant == "hourly"


def test_coefficients_must_match_the_terms() -> None:
    wrong = DailyCorrelation("daily", (1.0,), (1.0,) * 9, 0.0, 0.3, {}, 0.0, 0.0)
    with pytest.raises(ValueError, match="coefficients"):
        wrong.litres(some_days())


def test_a_still_that_is_not_shipped_is_fitted_and_kept(tmp_path: object) -> None:
    folder = Path(str(tmp_path))
    odd = Still("odd", (Panel(1.0, 22.0),), brine_depth_m=0.035)
    made = fit_for(odd, folder)
    (kept,) = folder.iterdir()
    assert kept.name == f"fit-{odd.fingerprint()}.json"
    again = fit_for(replace(odd, name="renamed"), folder)
    assert again.fingerprint == made.fingerprint
    kept.write_text(kept.read_text()[:-200])  # a torn file is made again, not believed
    np.testing.assert_allclose(
        fit_for(odd, folder).correlations["daily"].coefficients, made.correlations["daily"].coefficients, rtol=1e-6
    )


def test_shipped_fits_are_those_of_today() -> None:
    """Regression: the shipped numbers are what the code makes now, for every shipped design and condition."""
    from stillfield.methods.fit_store import _shipped
    from stillfield.physics.fitting import fit_still

    expected = {
        still_of(design).in_condition(condition).fingerprint()
        for design in DESIGNS
        for condition in ("new", "maintained", "weathered", "neglected")
    }
    assert set(_shipped()) == expected
    still = still_of("single-slope-glass")
    fresh, shipped = fit_still(still), _shipped()[still.fingerprint()]
    for variant, correlation in fresh.correlations.items():
        kept = shipped.correlations[variant]
        day = some_days(60, 8)
        if variant == "daily":
            np.testing.assert_allclose(correlation.litres(day)[0], kept.litres(day)[0], atol=2e-3)
        assert correlation.monthly_error == pytest.approx(kept.monthly_error, rel=0.02)
