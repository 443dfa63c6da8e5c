"""Where the weather of a run comes from: one group of keys per kind of source."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, Any, Literal, Self

from pydantic import BeforeValidator, Field, WithJsonSchema, field_validator, model_validator

from stillfield.settings.base import Box, Group, OneOf, Section
from stillfield.settings.paths import FileKey, FilesKey, InputFiles, refuse
from stillfield.settings.tables import TableKeys
from stillfield.settings.variables import SUNS, DescriptionKey, Variables, check_variables

#: Formats of typical-year files.
FORMATS = ("auto", "epw", "tmy2", "tmy3", "pvgis-csv", "pvgis-json", "nsrdb")

#: Bounds of invented weather: what its climate is made for, and what fits into memory.
LARGEST_LATITUDE = 60.0
MAX_CELL_DAYS = 200_000_000

_Count = Annotated[int, Field(ge=1, le=5000)]
_Shape = tuple[_Count, _Count]


def _as_list(value: Any) -> Any:
    """One file may be written without the brackets of a list."""
    return [value] if isinstance(value, str) else value


_Files = Annotated[
    tuple[FilesKey, ...],
    BeforeValidator(_as_list),
    WithJsonSchema({
        "anyOf": [{"type": "string"}, {"type": "array", "items": {"type": "string"}, "minItems": 1}],
    }),
]


class FileWeather(Group):
    """What the kinds of weather that read files share."""

    files: _Files = Field(
        strict=False, min_length=1,
        description="Weather files: paths from this file's folder, patterns such as 'era/*.nc', or "
                    "'package:path' for a file inside an installed package",
    )

    @field_validator("files")
    @classmethod
    def _each_once(cls, entries: tuple[InputFiles, ...]) -> tuple[InputFiles, ...]:
        first: dict[Path, str] = {}
        for entry in entries:
            for path in entry.paths:
                if path in first:
                    raise refuse(f"names '{path.name}' twice ('{first[path]}' and '{entry.given}')")
                first[path] = entry.given
        return entries

    @property
    def paths(self) -> tuple[Path, ...]:
        """Every file, patterns followed, in the order of the run file."""
        return tuple(path for entry in self.files for path in entry.paths)

    @property
    def names(self) -> tuple[str, ...]:
        """Every file as the sources take it: a path, or ``package:path`` as given."""
        return tuple(name for entry in self.files for name in entry.names)

    @property
    def further(self) -> tuple[str, ...]:
        """Files that are read beside the weather itself."""
        return ()


class TypicalYearWeather(FileWeather):
    """Typical years of single sites, one file per site."""

    kind: Literal["typical-year"]
    format: Annotated[str, OneOf(FORMATS)] = Field(
        "auto", description="Format of the files; 'auto' recognises each from its content"
    )
    wind_height_m: float | None = Field(
        None, ge=0.5, le=200, description="Height of the wind speeds, where it is not the format's own [m]"
    )

    def options(self) -> dict[str, Any]:
        """Arguments of the source beside the files."""
        return {"format": None if self.format == "auto" else self.format, "wind_height_m": self.wind_height_m}


class RadiationFromTemperature(Group):
    """Sunshine estimated from the daily range of temperature, where none was measured."""

    k_rs: float = Field(
        ge=0.1, le=0.25, description="Coefficient of Hargreaves & Samani [K-0.5]: 0.16 inland, 0.19 on coasts (FAO-56)"
    )


class MappedWeather(FileWeather):
    """What the kinds of weather share whose variables are looked up."""

    variables: Section[Variables] = Field(
        default_factory=dict,
        description="Quantities by stillfield's names, and how the files name them; one that is left out is "
                    "recognised by its name or standard_name",
    )
    description: DescriptionKey | None = Field(
        None, description="File that describes what the variables of such files mean; `variables` adds to it"
    )
    radiation_from_temperature: RadiationFromTemperature | None = Field(
        None, description="Estimate sunshine that was not measured from minimum and maximum temperature; rough"
    )

    @model_validator(mode="after")
    def _sun_once_and_heights_of_wind_only(self) -> Self:
        check_variables(self.variables)
        return self

    @property
    def further(self) -> tuple[str, ...]:
        """Files that are read beside the weather itself."""
        return () if self.description is None else (str(self.description.path),)

    def options(self) -> dict[str, Any]:
        """Arguments of the source beside the files."""
        described = {} if self.description is None else self.description.variables
        mapping = {name: {**key, "optional": True} for name, key in described.items()}
        for name, key in self.variables.items():
            twin = next((twin for twin in SUNS if name in SUNS and twin in mapping), name)
            mapping[name] = {**mapping.pop(twin, {}), **key.model_dump(exclude_none=True)}
            if key.name is not None:
                mapping[name].pop("optional", None)
        estimate = self.radiation_from_temperature
        return {
            "variables": mapping,
            "radiation_from_temperature": None if estimate is None else estimate.model_dump(),
        }


class SeriesWeather(MappedWeather):
    """What the containers of series on grids or of stations share."""

    day_clock: Annotated[str, Field(pattern=r"^(local|UTC([+-][0-9]{1,2}(:[0-9]{2})?)?)$")] | None = Field(
        None, description="Clock by which the days of daily files were cut: 'UTC', 'local', or an offset like 'UTC+8'"
    )

    def options(self) -> dict[str, Any]:
        """Arguments of the source beside the files."""
        return {**super().options(), "day_clock": self.day_clock}


class NetcdfWeather(SeriesWeather):
    """Gridded weather from NetCDF files."""

    kind: Literal["netcdf"]


class ZarrWeather(SeriesWeather):
    """Gridded weather from Zarr stores; needs the extra 'zarr'."""

    kind: Literal["zarr"]


class GribWeather(SeriesWeather):
    """Gridded weather from GRIB files; needs the extra 'grib'."""

    kind: Literal["grib"]


class TabularWeather(MappedWeather):
    """What the kinds of weather share that may come as tables of text."""

    table: TableKeys | None = Field(None, description="How tables of stations are written")

    @property
    def further(self) -> tuple[str, ...]:
        """Files that are read beside the weather itself."""
        stations = self.table and self.table.stations
        return (*super().further, *([str(stations.path)] if stations else []))

    def options(self) -> dict[str, Any]:
        """Arguments of the source beside the files."""
        return {**super().options(), "table": None if self.table is None else self.table.options()}


class StationTableWeather(TabularWeather):
    """Stations in tables of text: all in one, or a table for each; daily or in shorter steps."""

    kind: Literal["station-table"]


class MonthlyMeansWeather(TabularWeather):
    """Monthly means, gridded or of stations in tables; days are generated from them."""

    kind: Literal["monthly-means"]
    join_within_km: float | None = Field(
        None, gt=0, le=1000,
        description="How far temperature, humidity and wind may come from, where their grid is not that of the "
                    "sunshine [km]; refused without it",
    )

    def options(self) -> dict[str, Any]:
        """Arguments of the source beside the files."""
        return {**super().options(), "join_within_km": self.join_within_km}


class Years(Group):
    """A run of calendar years."""

    first: int = Field(2011, ge=1900, le=2200, description="First calendar year")
    count: int = Field(8, ge=1, le=100, description="Number of years")


class SyntheticWeather(Group):
    """Invented weather on an invented land, to try things with; never a statement about a real place."""

    kind: Literal["synthetic"]
    seed: int = Field(1, ge=0, le=2**32 - 1, description="Seed of the weather: same seed, same weather")
    years: Section[Years] = Field(default_factory=Years, description="Calendar years to invent")
    box: Box = Field(description="Region to fill with weather, within 60 deg of the equator")
    shape: _Shape = Field((60, 60), strict=False, description="Rows and columns of the grid")
    land: FileKey = Field(description="GeoJSON file of land polygons; cells at sea stay without weather")

    @model_validator(mode="after")
    def _fits_on_the_map_and_in_memory(self) -> SyntheticWeather:
        box, (rows, columns) = self.box, self.shape
        if max(abs(box.south), abs(box.north)) > LARGEST_LATITUDE or not -180 <= box.west < box.east <= 180:
            raise refuse(
                f"box should lie within {LARGEST_LATITUDE:g} deg of the equator and between 180 W and 180 E, "
                "west of east"
            )
        if rows * columns * self.years.count * 365 > MAX_CELL_DAYS:
            raise refuse(f"asks for more than {MAX_CELL_DAYS} cell-days; take fewer rows, columns or years")
        return self

    @property
    def names(self) -> tuple[str, ...]:
        """No weather file is read."""
        return ()

    @property
    def further(self) -> tuple[str, ...]:
        """The outline of the land."""
        return (str(self.land.path),)

    def options(self) -> dict[str, Any]:
        """Arguments of the source."""
        return {
            **self.box.model_dump(), "land": self.land.path, "shape": self.shape, "seed": self.seed,
            "first_year": self.years.first, "years": self.years.count,
        }


Weather = Annotated[
    SyntheticWeather | TypicalYearWeather | NetcdfWeather | ZarrWeather | GribWeather | MonthlyMeansWeather
    | StationTableWeather,
    Field(discriminator="kind", description="Where the weather comes from"),
]
