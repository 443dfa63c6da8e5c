"""Trial files: which stills were measured, when and in what weather, and which of them to compare."""

from __future__ import annotations

import datetime as dt
from pathlib import Path
from typing import Annotated, Any, Literal, Self

from pydantic import BeforeValidator, Field, WithJsonSchema, field_validator, model_validator

from stillfield.errors import RunFileError, StillfieldError
from stillfield.settings.base import MAX_NAME, Group, OneOf, Section, folder_name
from stillfield.settings.faults import check, not_a_choice
from stillfield.settings.model import Output, StillKey, output_in
from stillfield.settings.paths import FileKey, refuse
from stillfield.settings.text import harmless, read_text
from stillfield.settings.trial_log import LogRow, read_log
from stillfield.settings.weather import Weather

_METHODS = ("fitted", "heat-balance")
_Pair = tuple[str, str]


def _as_date(value: Any) -> Any:
    if value is None or isinstance(value, dt.date):
        return value
    try:
        return dt.date.fromisoformat(value)
    except (TypeError, ValueError):
        raise refuse(f"should be a date such as '2021-03-31' (got {harmless(str(value))!r})") from None


_Date = Annotated[dt.date, BeforeValidator(_as_date), WithJsonSchema({"type": "string", "format": "date"})]


class LogColumns(Group):
    """Columns of the log whose headings are not stillfield's own."""

    date: str | None = Field(None, description="Column with the date")
    still: str | None = Field(None, description="Column with the name of the still")
    litres: str | None = Field(None, description="Column with the litres collected [L]")
    remarks: str | None = Field(None, description="Column with remarks")
    irradiation_mj_m2: str | None = Field(None, description="Column with the irradiation of the day [MJ m-2]")
    irradiation_kwh_m2: str | None = Field(None, description="Column with the irradiation of the day [kWh m-2]")
    temp_air_degc: str | None = Field(None, description="Column with the mean air temperature of the day [degC]")
    wind_speed_m_s: str | None = Field(None, description="Column with the mean wind speed of the day [m s-1]")


class TrialLog(Group):
    """The log of measured litres."""

    table: FileKey = Field(description="CSV table with date, still, litres and, if measured, the weather of the day")
    columns: Section[LogColumns] = Field(
        default_factory=LogColumns, description="Names of columns that are not stillfield's own"
    )
    date_format: str | None = Field(
        None, min_length=2, description="Form of dates that are not ISO 8601, such as '%d/%m/%Y'"
    )
    collected: Literal["same-day", "next-morning"] = Field(
        "same-day", description="When the water of a day is collected: 'next-morning' counts it to the day before"
    )
    wind_height_m: float = Field(2.0, ge=0.5, le=200, description="Height of measured wind speeds [m]")

    @field_validator("date_format")
    @classmethod
    def _has_fields(cls, text: str | None) -> str | None:
        if text is not None and "%" not in text:
            raise refuse(f"should be made of fields such as %d, %m and %Y (got '{harmless(text)}')")
        return text


class TrialSite(Group):
    """Where the stills stood."""

    latitude_deg: float = Field(ge=-66, le=66, description="Latitude [deg north]")
    longitude_deg: float = Field(ge=-180, le=360, description="Longitude [deg east]")
    max_cell_distance_km: float = Field(
        25.0, ge=0, le=1000, description="How far the next cell or station with weather may lie [km]"
    )


class TrialStill(Group):
    """One still in one state: its file, its basin, and the days on which it was so."""

    file: StillKey = Field(description="Still file")
    area_m2: float = Field(gt=0, le=1e5, description="Basin area [m2]")
    modification: str | None = Field(None, min_length=1, max_length=MAX_NAME, description="What was changed")
    in_log: str | None = Field(
        None, min_length=1, description="Name in the log, where it is not the key: one still before and after a change"
    )
    start: _Date | None = Field(None, description="First day that counts")
    end: _Date | None = Field(None, description="Last day that counts")
    energy_factor: float = Field(
        1.0, ge=1, le=10, description="Energy taken in over the sunshine on the basin: above 1 with reflectors or "
                                      "further heat [1]"
    )

    @model_validator(mode="after")
    def _forward(self) -> Self:
        if self.start is not None and self.end is not None and self.start > self.end:
            raise refuse(f"start should not lie after end (got {self.start} and {self.end})")
        return self


class TrialSettings(Group):
    """One trial, checked."""

    name: str = Field(min_length=1, max_length=MAX_NAME, description="Name of the trial and of its output folder")
    log: TrialLog = Field(description="The log of measured litres")
    site: TrialSite = Field(description="Where the stills stood")
    weather: Weather | None = Field(
        None, description="Where the weather comes from; without it, from the columns of the log"
    )
    stills: dict[str, TrialStill] = Field(min_length=1, max_length=50, description="The stills of the log by name")
    compare: Annotated[tuple[_Pair, ...], Field(strict=False)] = Field(
        (), description="Pairs of stills: is the first better than the second?"
    )
    method: Annotated[str, OneOf(_METHODS)] = Field("fitted", description="Yield method behind the modelled litres")
    estimator: Literal["ratio-of-sums", "robust"] = Field(
        "ratio-of-sums", description="'robust' lets days far from the rest count less"
    )
    outliers: Literal["keep-out", "refuse", "keep"] = Field(
        "keep-out", description="What becomes of days that stand far out"
    )
    weather_error: float = Field(
        0.25, ge=0, le=1, description="Share by which a correction of the weather may be wrong [1]"
    )
    output: Section[Output] = Field(default_factory=Output, description="Where results go")

    @field_validator("name")
    @classmethod
    def _makes_a_folder_name(cls, name: str) -> str:
        if not folder_name(name):
            raise refuse(f"should hold at least one letter or digit (got '{harmless(name)}')")
        return name

    @field_validator("compare", mode="before")
    @classmethod
    def _as_pairs(cls, pairs: Any) -> Any:
        return [tuple(pair) if isinstance(pair, list) else pair for pair in pairs] if isinstance(pairs, list) else pairs

    @model_validator(mode="after")
    def _compares_what_is_there(self) -> Self:
        for pair in self.compare:
            for name in pair:
                if name not in self.stills:
                    raise refuse(f"compare: {not_a_choice(name, self.stills)}")
            if pair[0] == pair[1]:
                raise refuse(f"compare: '{harmless(pair[0])}' is compared with itself")
        return self

    @property
    def folder(self) -> Path:
        """The trial's own output folder."""
        return Path(self.output.folder).expanduser() / folder_name(self.name)

    def with_output(self, folder: str) -> TrialSettings:
        """Return the same trial with its results under another `folder`."""
        return self.model_copy(update={"output": output_in(folder)})

    @property
    def names_in_log(self) -> tuple[str, ...]:
        """Names under which the log may list stills."""
        return tuple(dict.fromkeys(still.in_log or name for name, still in self.stills.items()))


def load_trial(path: str | Path) -> tuple[TrialSettings, list[LogRow]]:
    """Read and check a trial file, the still files it names, and its log.

    Parameters
    ----------
    path : path
        The trial file.

    Returns
    -------
    settings : TrialSettings
    rows : list of LogRow
        The log, in its own order.

    Raises
    ------
    StillfieldError
        When there is no such file or it cannot be read.
    RunFileError
        With every fault of the trial file and its still files at once, or every fault of the log by its row.
    """
    file = Path(path)
    if not file.is_file():
        what = "is a folder, not a trial file" if file.is_dir() else "no such trial file"
        raise StillfieldError(what, where=str(path))
    settings, faults = check(TrialSettings, read_text(file, str(path)), {"folder": file.parent})
    if settings is None:
        raise RunFileError(str(path), faults)
    log = settings.log
    rows, faults = read_log(
        log.table.path, log.columns.model_dump(exclude_none=True), date_format=log.date_format,
        stills=settings.names_in_log, weather=settings.weather is None,
    )
    if faults:
        raise RunFileError(log.table.given, faults)
    return settings, rows
