"""The rules of a trial: what is refused, what is warned of, and which rows are named."""

from __future__ import annotations

import numpy as np
import pytest

from stillfield.decisions.trial_rules import LoggedDays, TrialRules, one_season, refused, screen


def log_of(days=120, *, rows=None, span=1, noise=0.15):
    """A fair log of 2 to 5 L m-2, its first day in row 2."""
    random = np.random.default_rng(1)
    modelled = 3.5 + 1.5 * np.sin(np.arange(days) / 9.0)
    measured = 0.8 * modelled * (1 + noise * random.standard_normal(days))
    for row, litres in (rows or {}).items():
        measured[row - 2] = litres
    return LoggedDays(np.arange(days) + 2, np.arange(days) * span, measured, modelled, 6.5 * modelled)


def told(days, **options):
    kept, findings = screen(days, **options)
    return kept, {finding.rule: finding for finding in findings}


def test_a_fair_log_of_four_months_is_taken_whole_without_a_word():
    kept, findings = screen(log_of())
    assert kept.all()
    assert findings == []


@pytest.mark.parametrize(("days", "refusal"), [(3, True), (9, True), (10, False)])
def test_too_few_days_are_refused(days, refusal):
    assert ("least_days" in told(log_of(days))[1]) is refusal


def test_one_season_is_warned_of():
    _, findings = screen(log_of(60))
    assert [(one.weight, one.rule) for one in findings] == [("warned", "season_days")]
    assert one_season(findings)
    assert not refused(findings)


def test_a_long_trial_in_one_kind_of_weather_is_warned_of():
    days = log_of()
    even = np.full(120, 4.0)
    _, findings = told(LoggedDays(days.row, days.day, 3.0 + 0.2 * np.sin(days.day), even, 7 * even))
    assert findings["season_range"].weight == "warned"


def test_ten_times_the_litres_cannot_be_and_are_refused_with_the_row():
    _, findings = told(log_of(rows={42: 30.0}))
    assert findings["energy_ceiling"].rows == (42,)
    assert findings["energy_ceiling"].weight == "refused"
    assert "slipped decimal point" in str(findings["energy_ceiling"])


def test_a_day_ten_times_too_high_that_the_sunshine_allows_is_kept_out():
    """A dull day of 0.6 L m-2 after a bright one: 6 L could have been evaporated by the day before."""
    days = log_of(rows={42: 6.0})
    days.modelled[40], days.irradiation[40] = 0.75, 20.0
    kept, findings = told(days)
    assert findings["outliers"].rows == (42,)
    assert not kept[40]
    assert kept.sum() == 119


def test_reflectors_lift_the_ceiling():
    bright = log_of(rows={42: 14.0})
    assert "energy_ceiling" in told(bright)[1]
    assert "energy_ceiling" not in told(bright, energy_factor=3.0)[1]


def test_litres_below_nothing_are_refused():
    assert told(log_of(rows={5: -0.1, 9: -3.0}))[1]["negative_litres"].rows == (5, 9)


def test_outliers_are_kept_out_refused_or_kept_as_asked():
    days = log_of(rows={30: 0.0, 31: 0.01}, noise=0.05)
    kept, findings = told(days)
    assert findings["outliers"].rows == (30, 31)
    assert not kept[[28, 29]].any()
    assert told(days, outliers="refuse")[1]["outliers"].weight == "refused"
    kept, findings = told(days, outliers="keep")
    assert kept.all()
    assert "outliers" not in findings


def test_many_outliers_are_no_accident():
    days = log_of(rows=dict.fromkeys(range(30, 45), 0.0), noise=0.05)
    finding = told(days)[1]["most_outliers"]
    assert finding.weight == "refused"
    assert str(finding).endswith("(rows 30, 31, 32, 33, 34, 35, 36, 37, 38, 39, 40, 41 and 3 more)")


def test_even_and_heavy_tailed_logs_lose_next_to_nothing():
    """A log without noise has no outliers, and of Student's t with 4 degrees of freedom few days are beyond 6."""
    assert screen(log_of(noise=0.0))[0].all()
    random = np.random.default_rng(2)
    days = log_of(1000)
    heavy = 0.8 * days.modelled * np.clip(1 + 0.15 * random.standard_t(4, 1000), 0.0, None)
    kept, _ = screen(LoggedDays(days.row, days.day, heavy, days.modelled, days.irradiation))
    assert kept.mean() > 0.99


def test_days_without_weather_and_days_without_litres_are_listed():
    days = log_of()
    days.modelled[[3, 4]] = np.nan
    days.irradiation[[3, 4]] = np.nan
    days.measured[[7]] = np.nan
    kept, findings = told(days)
    assert findings["days_without_weather"].rows == (5, 6)
    assert findings["days_without_weather"].weight == "warned"
    assert findings["days_without_litres"].rows == (9,)
    assert kept.sum() == 117


def test_unusual_efficiency_is_warned_of():
    """60 % of 22.75 MJ m-2 is 6.0 L m-2."""
    days = log_of(rows={50: 6.5})
    days.modelled[48], days.irradiation[48] = 5.0, 22.75
    finding = told(days, outliers="keep")[1]["usual_efficiency"]
    assert (finding.weight, finding.rows) == ("warned", (50,))


def test_thresholds_can_be_set():
    assert "least_days" in told(log_of(30), rules=TrialRules(least_days=31))[1]
