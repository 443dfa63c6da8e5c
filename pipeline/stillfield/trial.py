"""Do a trial: hold logged litres against modelled ones, tell the field factors, compare stills, and write it down."""

from __future__ import annotations

import logging
from collections.abc import Sequence
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from stillfield.decisions.trial import LEVEL, FactorEstimate, FieldFactor, factor_for_runs, field_factor
from stillfield.decisions.trial_comparison import Comparison, StillDays, compare_stills
from stillfield.decisions.trial_rules import Finding, LoggedDays, TrialRules, one_season, refused, screen
from stillfield.errors import StillfieldError
from stillfield.physics.day_shape import basin_memory
from stillfield.products.summary import Summary
from stillfield.products.trial_files import write_trial
from stillfield.settings.trial_file import TrialSettings, TrialStill
from stillfield.settings.trial_log import LogRow
from stillfield.stages.read import describe_inputs
from stillfield.stages.write import check_outputs
from stillfield.trial_weather import SiteDays, modelled_litres, site_days
from stillfield.vocabulary import WATER_CAUTION

log = logging.getLogger(__name__)

RULES = TrialRules()


@dataclass(frozen=True)
class StillTrial:
    """What a trial found of one still.

    Attributes
    ----------
    name : str
        Key in the trial file.
    keys : TrialStill
        What the trial file says of it.
    rows : tuple of LogRow
        Its rows of the log, by date.
    dates : ndarray of datetime64[D], shape (day,)
        Days whose sunshine made the litres.
    logged : LoggedDays
        Litres and model of every row.
    kept : ndarray of bool, shape (day,)
        Days that were used.
    findings : list of Finding
        What the rules say.
    factor : FactorEstimate or None
        None where the rules refuse one.
    """

    name: str
    keys: TrialStill
    rows: tuple[LogRow, ...]
    dates: NDArray[np.datetime64]
    logged: LoggedDays
    kept: NDArray[np.bool_]
    findings: list[Finding]
    factor: FactorEstimate | None

    @property
    def days(self) -> StillDays:
        """Days that were used, for a comparison."""
        there, used = self.logged, self.kept
        return StillDays(self.name, there.day[used], there.measured[used], there.modelled[used],
                         basin_memory(self.keys.file.still))

    def for_runs(self, trial_name: str) -> FieldFactor | None:
        """The factor as a run file takes it."""
        if self.factor is None:
            return None
        first, last = self.dates[self.kept][[0, -1]]
        source = f"trial {trial_name}, {self.name}: {self.factor.days} days from {first} to {last}"
        return factor_for_runs(self.factor, source, one_season=one_season(self.findings))


def trial(settings: TrialSettings, rows: Sequence[LogRow], *, trial_file: str | Path) -> Summary:
    """Do everything a trial file asks for.

    Parameters
    ----------
    settings : TrialSettings
        A checked trial.
    rows : sequence of LogRow
        Its checked log.
    trial_file : path
        The file it came from; inputs are named relative to its folder.

    Returns
    -------
    Summary

    Raises
    ------
    StillfieldError
        If the weather cannot be used, or the rules refuse every still.
    """
    check_outputs([settings.folder])
    log.info("reading the weather")
    weather = site_days(settings, rows)
    stills = {name: _one_still(name, keys, settings, rows, weather) for name, keys in settings.stills.items()}
    if all(still.factor is None for still in stills.values()):
        said = "".join(f"\n  {still.name}: {finding}" for still in stills.values()
                       for finding in refused(still.findings))
        raise StillfieldError(f"{settings.log.table.given}: the trial is refused:{said}")
    compared = [_compared(settings, stills[first], stills[second], weather) for first, second in settings.compare]
    sentences = _sentences(settings, stills, compared, weather)
    title = f"Trial of solar stills, {settings.name}"
    figures = _figures(settings, stills, compared, weather, trial_file)
    files = write_trial(settings.folder, _table(stills.values(), weather), figures, title=title, sentences=sentences)
    text = "\n".join([title, "", *sentences, "", WATER_CAUTION, "", f"Written to {settings.folder}"])
    return Summary(text, files)


def _one_still(
    name: str, keys: TrialStill, settings: TrialSettings, rows: Sequence[LogRow], weather: SiteDays
) -> StillTrial:
    earlier = np.timedelta64(1 if settings.log.collected == "next-morning" else 0, "D")
    mine = sorted((row for row in rows if row.still == (keys.in_log or name)), key=lambda row: row.date)
    mine = [row for row in mine if (keys.start is None or row.date >= keys.start)
            and (keys.end is None or row.date <= keys.end)]
    dates = (np.array([row.date for row in mine], dtype="datetime64[D]") - earlier).astype("datetime64[D]")
    still = keys.file.still
    memory = basin_memory(still)
    litres = np.array([np.nan if row.litres is None else row.litres for row in mine], dtype=np.float64)
    before = 1 if memory < 0.1 else 1 + int(np.ceil(np.log(0.1) / np.log(memory)))
    logged = LoggedDays(
        np.array([row.row for row in mine], dtype=np.int64), dates.astype(np.int64), litres / keys.area_m2,
        modelled_litres(weather, still, dates), weather.irradiation_on(dates, before),
    )
    kept, findings = screen(logged, RULES, outliers=settings.outliers, energy_factor=keys.energy_factor)
    factor = None
    if not refused(findings) and float(logged.measured[kept].sum()) > 0.0:
        factor = field_factor(
            logged.measured[kept], logged.modelled[kept], logged.day[kept], basin_memory=memory,
            estimator=settings.estimator,
        )
    return StillTrial(name, keys, tuple(mine), dates, logged, kept, findings, factor)


def _compared(
    settings: TrialSettings, first: StillTrial, second: StillTrial, weather: SiteDays
) -> Comparison | str:
    """The comparison, or why there is none."""
    without = [still.name for still in (first, second) if still.factor is None]
    if without:
        return f"{first.name} and {second.name} are not compared: no factor for {' and '.join(without)}."
    dates = np.union1d(first.dates[first.kept], second.dates[second.kept])
    same = [modelled_litres(weather, still.keys.file.still, dates) for still in (first, second)]
    known = np.isfinite(same[0]) & np.isfinite(same[1])
    return compare_stills(
        first.days, second.days, same_weather=(float(same[0][known].mean()), float(same[1][known].mean())),
        estimator=settings.estimator, weather_error=settings.weather_error,
    )


def _sentences(
    settings: TrialSettings, stills: dict[str, StillTrial], compared: Sequence[Comparison | str], weather: SiteDays
) -> list[str]:
    said: list[str] = []
    for name, still in stills.items():
        what = f"{name}{f' ({still.keys.modification})' if still.keys.modification else ''}"
        if still.factor is None:
            said.append(f"{what}: REFUSED, no factor.")
        else:
            found, days = still.factor, still.days
            said.append(
                f"{what}: field factor {found.factor:.2f} ({100 * LEVEL:.0f} % interval {found.low:.2f} to "
                f"{found.high:.2f}), {found.days} days that tell as much as {found.independent_days:.0f} independent "
                f"ones; measured {days.measured.mean():.2f}, modelled {days.modelled.mean():.2f} L m-2 a day.")
        said += [f"{name}: {'WARNING: ' if finding.weight == 'warned' else ''}{finding}." for finding in still.findings]
    for one in compared:
        said += [one] if isinstance(one, str) else [one.sentence(), _raw_and_adjusted(one), _still_needed(one)]
    said += [f"Modelled by method {weather.method.name} in the condition that each still file states.", *weather.origin]
    return [sentence for sentence in said if sentence]


def _raw_and_adjusted(one: Comparison) -> str:
    weather = "on the same days" if one.paired else "each in its own weather"
    return (f"Raw: {one.first} {one.raw_first:.2f}, {one.second} {one.raw_second:.2f} L m-2 a day, {weather} "
            f"({100 * (one.raw_ratio - 1.0):+.0f} %). Weather taken out: {one.adjusted_first:.2f} and "
            f"{one.adjusted_second:.2f} ({100 * (one.ratio - 1.0):+.0f} %).")


def _still_needed(one: Comparison) -> str:
    words = []
    for settling in one.settling:
        share = f"{100 * settling.difference:.0f} %"
        if settling.more_days is None:
            words.append(f"{share}: no number of such days, run them side by side")
        else:
            words.append(f"{share}: {settling.more_days} more days" if settling.more_days else f"{share}: enough days")
    return f"To settle a difference of {'; '.join(words)} (of each still, like those there are)."


def _table(stills: Any, weather: SiteDays) -> pd.DataFrame:
    parts = [
        pd.DataFrame({
            "still": still.name, "date": still.dates.astype(str), "log_row": still.logged.row,
            "collected_l": still.logged.measured * still.keys.area_m2, "measured_l_m2_day": still.logged.measured,
            "modelled_l_m2_day": still.logged.modelled, "irradiation_mj_m2": weather.irradiation_on(still.dates, 0),
            "used": still.kept.astype(object),
        }) for still in stills if still.rows
    ]
    return pd.concat(parts, ignore_index=True)


def _figures(
    settings: TrialSettings, stills: dict[str, StillTrial], compared: Sequence[Comparison | str], weather: SiteDays,
    trial_file: str | Path,
) -> dict[str, Any]:
    files = [str(settings.log.table.path), *(str(still.file.path) for still in settings.stills.values())]
    files += [] if settings.weather is None else [*settings.weather.names, *settings.weather.further]
    figures = {
        "name": settings.name, "caution": WATER_CAUTION,
        "settings": settings.model_dump(mode="json", exclude_none=True), "rules": asdict(RULES),
        "stills": {
            name: {
                "factor": None if still.factor is None else asdict(still.factor),
                "findings": [asdict(finding) for finding in still.findings],
                "measured_l_m2_day": float(still.days.measured.mean()) if still.kept.any() else None,
                "modelled_l_m2_day": float(still.days.modelled.mean()) if still.kept.any() else None,
                "still_field_factor": None if (found := still.for_runs(settings.name)) is None else asdict(found),
            } for name, still in stills.items()
        },
        "comparisons": [{"refused": one} if isinstance(one, str) else {**asdict(one), "sentence": one.sentence()}
                        for one in compared],
        "method": weather.method.name, "weather": list(weather.origin),
        "inputs": describe_inputs(dict.fromkeys(files), Path(trial_file).parent),
    }
    return _plain(figures)  # type: ignore[no-any-return]


def _plain(value: Any) -> Any:
    """Numbers of a figure to six digits; what is not finite is nothing."""
    if isinstance(value, dict):
        return {key: _plain(one) for key, one in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(one) for one in value]
    if isinstance(value, float):
        return float(f"{value:.6g}") if np.isfinite(value) else None
    return value
