"""What a trial must be for its figures to mean something: thresholds by name, and the rows that break them."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from stillfield.decisions.trial import MAD_TO_SD, expected_spread

Array = NDArray[np.float64]
Weight = Literal["refused", "warned", "told"]

#: Heat that evaporates a kilogram of water at its boiling point, the least there is in an open still (IAPWS,
#: 2.257 MJ kg-1). [MJ kg-1]
LEAST_LATENT_HEAT_MJ_KG = 2.257

_MOST_ROWS_TOLD = 12


@dataclass(frozen=True)
class TrialRules:
    """Thresholds of a trial; those without a source are choices of this project.

    Attributes
    ----------
    least_days : int
        Days with measured and modelled litres below which no factor is given.
    season_days : int
        First to last day; less is one season.
    season_range : float
        Modelled litres that only one day in ten exceeds, over those that nine in ten exceed; less is one kind of
        weather. [1]
    outlier_spreads : float
        A day farther from the rest than so many robust standard deviations (median absolute deviation) stands out.
    outlier_share : float
        ... and farther than this share of the expected litres, so that a very even log has no outliers. [1]
    most_outliers : float
        Share of the days that may stand out; more is no accident but the nature of the log. [1]
    usual_efficiency : float
        Share of the sunshine in the distillate that single-effect basin stills are not known to exceed over a day
        (Cooper 1973, Solar Energy 15:205, quoted from memory). [1]
    """

    least_days: int = 10
    season_days: int = 90
    season_range: float = 1.5
    outlier_spreads: float = 6.0
    outlier_share: float = 0.5
    most_outliers: float = 0.05
    usual_efficiency: float = 0.60


@dataclass(frozen=True)
class Finding:
    """What a rule says of a trial.

    Attributes
    ----------
    weight : {'refused', 'warned', 'told'}
        Refused: no figure is given.
    rule : str
        Name of the rule.
    message : str
        A sentence without the rows.
    rows : tuple of int
        Rows of the log, as a spreadsheet numbers them.
    """

    weight: Weight
    rule: str
    message: str
    rows: tuple[int, ...] = ()

    def __str__(self) -> str:
        """Sentence with the rows, the first of them."""
        if not self.rows:
            return self.message
        rest = len(self.rows) - _MOST_ROWS_TOLD
        shown = ", ".join(map(str, self.rows[:_MOST_ROWS_TOLD])) + (f" and {rest} more" if rest > 0 else "")
        return f"{self.message} (row{'s' if len(self.rows) > 1 else ''} {shown})"


@dataclass(frozen=True)
class LoggedDays:
    """Days of one still as they were logged, with the model beside them.

    Attributes
    ----------
    row : ndarray of int, shape (day,)
        Row in the log.
    day : ndarray of int, shape (day,)
        Number of the day on one calendar, rising.
    measured, modelled : ndarray, shape (day,)
        NaN where nothing was measured, or where there is no weather. [L m-2]
    irradiation : ndarray, shape (day,)
        Most sunshine of the day itself and of the days whose heat it may still give; NaN where unknown. [MJ m-2]
    """

    row: NDArray[np.int64]
    day: NDArray[np.int64]
    measured: Array
    modelled: Array
    irradiation: Array


def screen(
    days: LoggedDays, rules: TrialRules | None = None, *, outliers: Literal["keep-out", "refuse", "keep"] = "keep-out",
    energy_factor: float = 1.0,
) -> tuple[NDArray[np.bool_], list[Finding]]:
    """Hold the days of one still against the rules.

    Parameters
    ----------
    days : LoggedDays
        One still.
    rules : TrialRules, optional
        Thresholds.
    outliers : {'keep-out', 'refuse', 'keep'}
        What becomes of days that stand out.
    energy_factor : float
        Energy the still takes in over the sunshine on its basin: above 1 with reflectors or further heat. [1]

    Returns
    -------
    kept : ndarray of bool, shape (day,)
        Days to work with.
    findings : list of Finding
        What was found; with any 'refused' among them no figure should be given.

    Examples
    --------
    >>> three = np.array([1, 2, 3])
    >>> litres = np.array([3.0, 3.1, 2.9])
    >>> kept, findings = screen(LoggedDays(three + 1, three, litres, litres, 8.0 * litres))
    >>> findings[0].weight, findings[0].rule
    ('refused', 'least_days')
    """
    used = rules or TrialRules()
    there = np.isfinite(days.measured) & np.isfinite(days.modelled)
    findings = [*_absent(days), *_impossible(days, used, energy_factor)]
    kept = there.copy()
    if there.sum() >= used.least_days and outliers != "keep":
        out = there & _stands_out(days, there, used)
        kept &= ~out
        findings += _told_outliers(days.row[out], int(there.sum()), used, outliers)
    return kept, [*_too_few(days.day[kept], days.modelled[kept], used), *findings]


def refused(findings: list[Finding]) -> list[Finding]:
    """Findings that forbid a figure."""
    return [finding for finding in findings if finding.weight == "refused"]


def one_season(findings: list[Finding]) -> bool:
    """Whether the trial tells of one season or one kind of weather only."""
    return any(finding.rule in ("season_days", "season_range") for finding in findings)


def _too_few(day: NDArray[np.int64], modelled: Array, rules: TrialRules) -> list[Finding]:
    if day.size < rules.least_days:
        return [Finding("refused", "least_days", f"{day.size} days with litres and weather are too few for a factor; "
                        f"{rules.least_days} are the least")]
    found = []
    span = int(day[-1] - day[0]) + 1
    if span < rules.season_days:
        found.append(Finding("warned", "season_days", f"the days span {span} days, which is one season (less than "
                             f"{rules.season_days}): in others the factor may differ"))
    low, high = np.quantile(modelled, [0.1, 0.9])
    if high < rules.season_range * low:
        found.append(Finding(
            "warned", "season_range", f"the modelled litres run from {low:.2g} to {high:.2g} L m-2 on most days, one "
            f"kind of weather (less than {rules.season_range:g} to 1): in others the factor may differ"))
    return found


def _absent(days: LoggedDays) -> list[Finding]:
    unmeasured = ~np.isfinite(days.measured)
    unmodelled = ~unmeasured & ~np.isfinite(days.modelled)
    found = []
    if unmodelled.any():
        found.append(Finding("warned", "days_without_weather", f"{unmodelled.sum()} measured days have no weather and "
                             "are left out", tuple(days.row[unmodelled].tolist())))
    if unmeasured.any():
        found.append(Finding("told", "days_without_litres", f"{unmeasured.sum()} days have no litres and are left out",
                             tuple(days.row[unmeasured].tolist())))
    return found


def _impossible(days: LoggedDays, rules: TrialRules, energy_factor: float) -> list[Finding]:
    heat = days.irradiation * energy_factor
    ceiling = heat / LEAST_LATENT_HEAT_MJ_KG
    with np.errstate(invalid="ignore"):
        negative = days.measured < 0.0
        above = days.measured > ceiling
        unusual = (days.measured > rules.usual_efficiency * ceiling) & ~above
    found = []
    if negative.any():
        found.append(Finding("refused", "negative_litres", "litres cannot be below 0",
                             tuple(days.row[negative].tolist())))
    if above.any():
        worst = int(np.nanargmax(np.where(above, days.measured / ceiling, np.nan)))
        found.append(Finding(
            "refused", "energy_ceiling", "more litres than the sunshine could evaporate, such as "
            f"{days.measured[worst]:.1f} L m-2 where it can evaporate {ceiling[worst]:.1f}: a slipped decimal point, "
            "a wrong area, or several days in one reading", tuple(days.row[above].tolist())))
    if unusual.any():
        found.append(Finding(
            "warned", "usual_efficiency", f"more than {100 * rules.usual_efficiency:.0f} % of the sunshine in the "
            "distillate, more than basin stills are known for", tuple(days.row[unusual].tolist())))
    return found


def _stands_out(days: LoggedDays, there: NDArray[np.bool_], rules: TrialRules) -> NDArray[np.bool_]:
    """Days whose residual lies far from the median of all, by the median absolute deviation."""
    y, m = days.measured[there], days.modelled[there]
    usual = np.median(y) / np.median(m)
    u = (y - usual * m) / expected_spread(m)
    away = np.abs(u - np.median(u))
    limit = max(rules.outlier_spreads * MAD_TO_SD * float(np.median(away)), rules.outlier_share * float(usual))
    out = np.zeros(there.size, dtype=bool)
    out[there] = away > limit
    return out


def _told_outliers(
    rows: NDArray[np.int64], days: int, rules: TrialRules, outliers: Literal["keep-out", "refuse"]
) -> list[Finding]:
    if rows.size == 0:
        return []
    number, numbers = tuple(rows.tolist()), f"{rows.size} day{'s' if rows.size > 1 else ''}"
    most = max(int(rules.most_outliers * days), 1)
    if outliers == "refuse":
        return [Finding("refused", "outliers", f"{numbers} far from all others; correct the log, or let them be kept "
                        "out (outliers: keep-out)", number)]
    if rows.size > most:
        return [Finding("refused", "most_outliers", f"{numbers} far from all others, more than the {most} that may be "
                        "an accident; find out what happened", number)]
    return [Finding("warned", "outliers", f"{numbers} far from all others kept out", number)]
