"""How tables of station weather are written: the keys of ``weather.table``."""

from __future__ import annotations

from typing import Annotated, Any

from pydantic import Field, field_validator

from stillfield.settings.base import Group, Section
from stillfield.settings.paths import FileKey, refuse
from stillfield.settings.text import harmless


class TableColumns(Group):
    """Columns that place a row in space and time and whose headings are not recognised by themselves."""

    site: str | None = Field(None, description="Column with the name or number of the station")
    name: str | None = Field(None, description="Column with the station's name in words")
    latitude: str | None = Field(None, description="Column with the latitude [deg north]")
    longitude: str | None = Field(None, description="Column with the longitude [deg east]")
    elevation: str | None = Field(None, description="Column with the height above sea [m]")
    utc_offset_hours: str | None = Field(None, description="Column with the clock's hours ahead of UTC [h]")
    date: str | None = Field(None, description="Column with the date, or date and time")
    time: str | None = Field(None, description="Column with the time of day, beside a date")
    year: str | None = Field(None, description="Column with the year")
    month: str | None = Field(None, description="Column with the month, 1 to 12")
    day: str | None = Field(None, description="Column with the day of the month")
    day_of_year: str | None = Field(None, description="Column with the day of the year, 1 to 366")
    hour: str | None = Field(None, description="Column with the hour, 0 to 23 or 1 to 24")


class SiteKeys(Group):
    """Position of the one station of a table."""

    name: str | None = Field(None, min_length=1, description="Name of the station")
    latitude_deg: float = Field(ge=-90, le=90, description="Latitude [deg north]")
    longitude_deg: float = Field(ge=-180, le=360, description="Longitude [deg east]")
    elevation_m: float | None = Field(None, ge=-500, le=9000, description="Height above sea [m]")


class TableKeys(Group):
    """How tables of station weather are written."""

    columns: Section[TableColumns] = Field(
        default_factory=TableColumns, description="Columns of site and time that are not recognised by themselves"
    )
    date_format: str | None = Field(
        None, min_length=2, description="Form of dates that are not ISO 8601, such as '%d/%m/%Y' or '%d-%b-%y'"
    )
    utc_offset_hours: float | None = Field(
        None, ge=-12, le=14, description="Clock of tables with steps shorter than a day: hours ahead of UTC [h]"
    )
    stations: FileKey | None = Field(None, description="Table with site, latitude, longitude and more of each station")
    site: SiteKeys | None = Field(None, description="Position of the station, where all rows are of one")
    missing: Annotated[tuple[float, ...], Field(strict=False)] = Field(
        (), description="Numbers that stand for missing values, beside -99, -999 and -9999"
    )
    comment: str | None = Field(None, min_length=1, max_length=5, description="Lines that start with it are left out")
    header: bool = Field(True, description="Whether the first row names the columns; else they are '1', '2' and so on")
    skip_lines: int = Field(0, ge=0, le=1000, description="Lines to leave out at the top, comments not counted")

    @field_validator("date_format")
    @classmethod
    def _has_fields(cls, text: str | None) -> str | None:
        if text is not None and "%" not in text:
            raise refuse(f"should be made of fields such as %d, %m and %Y (got '{harmless(text)}')")
        return text

    def options(self) -> dict[str, Any]:
        """Arguments of the source."""
        return {
            **self.model_dump(exclude={"columns", "stations", "site"}),
            "columns": self.columns.model_dump(exclude_none=True),
            "stations": None if self.stations is None else str(self.stations.path),
            "site": None if self.site is None else self.site.model_dump(exclude_none=True),
        }
