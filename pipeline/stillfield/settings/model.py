"""The run file as frozen settings: every key with its unit, its range and its meaning."""

from __future__ import annotations

import re
from dataclasses import dataclass
from pathlib import Path
from typing import Annotated, Any

from pydantic import (
    BeforeValidator,
    Field,
    GetPydanticSchema,
    PlainSerializer,
    ValidationError,
    ValidationInfo,
    WithJsonSchema,
    field_serializer,
    field_validator,
)
from pydantic_core import PydanticCustomError, core_schema

from stillfield.errors import RunFileError, StillfieldError
from stillfield.physics.still import Still
from stillfield.settings.base import MAX_NAME, Group, OneOf, Section, folder_name
from stillfield.settings.paths import FileKey, find_file, folder_of, refuse, shown
from stillfield.settings.region import Region
from stillfield.settings.still_file import StillDesign, load_still_design
from stillfield.settings.text import harmless
from stillfield.settings.weather import Weather
from stillfield.settings.wishes import Feed, FieldFactorKeys, Need, Rank, Storage
from stillfield.vocabulary import METHODS


@dataclass(frozen=True)
class StillChoice:
    """A still file named in a run file, and the design it describes."""

    given: str
    path: Path
    design: StillDesign

    @property
    def still(self) -> Still:
        """The still as the physics takes it."""
        return self.design.still


def _load_choice(given: str, folder: Path) -> StillChoice:
    file = find_file(given, folder)
    try:
        return StillChoice(given, file.path, load_still_design(file.path, given=given))
    except RunFileError as error:
        parts = tuple(f"{harmless(given)}, {fault}" for fault in error.faults)
        raise PydanticCustomError("stillfield", "{message}", {"message": parts[0], "faults": parts}) from None
    except StillfieldError as error:
        raise refuse(str(error)) from None


def _choice_schema(_source: Any, _handler: Any) -> core_schema.CoreSchema:
    return core_schema.with_info_after_validator_function(
        lambda given, info: _load_choice(given, folder_of(info)), core_schema.str_schema(strict=True)
    )


#: A key that names a still file.
StillKey = Annotated[
    StillChoice,
    GetPydanticSchema(_choice_schema),
    PlainSerializer(lambda choice: shown(choice.given), return_type=str),
    WithJsonSchema({"type": "string"}),
]


class Rule(Group):
    """Numbers of the constant-efficiency rule."""

    efficiency: float = Field(
        0.30, gt=0, le=0.6, description="Share of the sunshine carried off by the distillate [1]; 0.30 is usual"
    )


class PlaceColumns(Group):
    """Columns of the village table whose names are not recognised by themselves."""

    name: str | None = Field(None, description="Column with the name of the place")
    id: str | None = Field(None, description="Column with the identifier of the place")
    latitude: str | None = Field(None, description="Column with the latitude [deg north]")
    longitude: str | None = Field(None, description="Column with the longitude [deg east]")
    population: str | None = Field(None, description="Column with the number of people")
    households: str | None = Field(None, description="Column with the number of households")
    feed_salinity_g_kg: str | None = Field(None, description="Column with the salinity of the feed water [g kg-1]")
    distance_to_feed_km: str | None = Field(None, description="Column with the distance to the feed water [km]")
    elevation_m: str | None = Field(None, description="Column with the height above sea [m]")
    position: str | None = Field(None, description="Column with latitude and longitude together")
    note: str | None = Field(None, description="Column with a remark")

    def given(self) -> dict[str, str]:
        """Columns that were named: stillfield's name to the table's."""
        return self.model_dump(exclude_none=True)


class Places(Group):
    """The villages to rank."""

    table: FileKey = Field(
        description="Table of places with name, latitude and longitude: CSV, GeoJSON, GeoPackage or XLSX"
    )
    sheet: str | None = Field(None, description="Sheet of an XLSX table")
    layer: str | None = Field(None, description="Layer of a GeoPackage")
    max_cell_distance_km: float = Field(
        25.0, ge=0, le=1000, description="How far the next cell with weather may lie from a place [km]"
    )
    columns: Section[PlaceColumns] = Field(
        default_factory=PlaceColumns, description="Names of columns that are not recognised by themselves"
    )


class Missing(Group):
    """When there is too little weather for a figure."""

    min_valid_days_share: float = Field(
        0.8, gt=0, le=1, description="Share of the days of a month that must have weather [1]"
    )
    min_valid_hours: float = Field(20.0, ge=1, le=24, description="Hours of a day that must have weather [h]")
    fill_hours: float = Field(
        3.0, ge=0, le=6, description="Longest gap in temperature, humidity or wind that is bridged [h]; "
                                     "sunshine is never invented"
    )


def _as_bytes(value: Any) -> Any:
    """Bytes of a size such as '2 GB'."""
    found = re.fullmatch(r"\s*(\d+(?:\.\d+)?)\s*([kMGT]?)i?B\s*", value) if isinstance(value, str) else None
    if found is None:
        raise refuse(f"should be a size such as '2 GB' (got {harmless(value)!r})")
    return round(float(found[1]) * 1000 ** " kMGT".index(found[2] or " "))


_Size = Annotated[
    int, BeforeValidator(_as_bytes), PlainSerializer(lambda size: f"{size / 1e6:g} MB"),
    WithJsonSchema({"type": "string", "pattern": r"^\s*\d+(\.\d+)?\s*[kMGT]?i?B\s*$"}),
]


class Compute(Group):
    """What the run may use of the machine."""

    memory: _Size | None = Field(
        None, description="Memory that may be used, such as '2 GB'; no limit without it"
    )
    workers: int | None = Field(
        None, ge=1, le=1024, description="Blocks worked at the same time; one per processor without it"
    )
    scheduler: str | None = Field(
        None, min_length=1, description="Address of a dask.distributed scheduler, such as tcp://host:8786, or "
                                        "'processes' for a cluster on this machine; without it, threads of the run"
    )
    fast_inflate: bool = Field(
        True, description="Inflate chunks of NetCDF files past the NetCDF library where that can be done; the results "
                          "are the same"
    )


class Output(Group):
    """Where results go."""

    folder: str = Field(
        "outputs",
        description="Folder under which the run's own folder is made, from the working directory",
    )

    @field_serializer("folder")
    def _told(self, folder: str) -> str:
        return shown(folder)

    @field_validator("folder")
    @classmethod
    def _usable(cls, folder: str) -> str:
        if not folder.strip():
            raise refuse("should name a folder (got an empty text)")
        try:
            is_file = Path(folder).is_file()
        except (OSError, ValueError):
            raise refuse(f"cannot be used as a folder name (got '{harmless(folder)}')") from None
        if is_file:
            raise refuse(f"'{harmless(folder)}' is a file, not a folder")
        return folder


class Map(Group):
    """What the maps show beside the results."""

    land: FileKey | None = Field(None, description="GeoJSON outline of the land; the default is the shipped one")


def _as_list(value: Any) -> Any:
    return [value] if isinstance(value, str) else value


_Stills = Annotated[
    tuple[StillKey, ...],
    BeforeValidator(_as_list),
    WithJsonSchema({
        "anyOf": [{"type": "string"}, {"type": "array", "items": {"type": "string"}, "minItems": 1}],
    }),
]


class RunSettings(Group):
    """One run of the pipeline, checked."""

    name: str = Field(min_length=1, max_length=MAX_NAME, description="Name of the run and of its output folder")
    weather: Weather
    region: Region | None = Field(None, description="Keep only cells and sites in this region; all without it")
    still: _Stills = Field(
        strict=False, min_length=1, max_length=20, description="Still file, or a list of several to compare"
    )
    method: Annotated[str, OneOf(METHODS)] = Field("fitted", description="Yield method")
    rule: Section[Rule] = Field(default_factory=Rule, description="Numbers of the constant-efficiency rule")
    places: Places | None = Field(None, description="Villages to rank; no ranking without them")
    need: Section[Need] = Field(default_factory=Need, description="Water that people need")
    storage: Section[Storage] = Field(default_factory=Storage, description="How sure the water is to be")
    feed: Section[Feed] = Field(default_factory=Feed, description="Brine and blending")
    still_field_factor: FieldFactorKeys | None = Field(
        None, description="What a trial of this very still found; litres of places are multiplied by it"
    )
    rank: Section[Rank] = Field(default_factory=Rank, description="How the places are ordered")
    missing: Section[Missing] = Field(default_factory=Missing, description="When weather is too scarce")
    output: Section[Output] = Field(default_factory=Output, description="Where results go")
    compute: Section[Compute] = Field(
        default_factory=Compute, description="What the run may use of the machine")
    map: Section[Map] = Field(default_factory=Map, description="What the maps show beside the results")

    @field_validator("name")
    @classmethod
    def _makes_a_folder_name(cls, name: str) -> str:
        if not folder_name(name):
            raise refuse(f"should hold at least one letter or digit (got '{harmless(name)}')")
        return name

    @field_validator("still")
    @classmethod
    def _different_names(cls, choices: tuple[StillChoice, ...]) -> tuple[StillChoice, ...]:
        first: dict[str, str] = {}
        for choice in choices:
            name = choice.still.name
            if name in first:
                raise refuse(f"two stills are called '{name}' ('{first[name]}' and '{choice.given}')")
            first[name] = choice.given
        return choices

    @field_validator("still_field_factor")
    @classmethod
    def _of_one_still(cls, factor: FieldFactorKeys | None, info: ValidationInfo) -> FieldFactorKeys | None:
        if factor is not None and len(info.data.get("still", ())) > 1:
            raise refuse("belongs to one still; run the others apart, and see `stillfield compare`")
        return factor

    @property
    def stills(self) -> tuple[Still, ...]:
        """The still designs of the run."""
        return tuple(choice.still for choice in self.still)

    @property
    def designs(self) -> tuple[StillDesign, ...]:
        """The same with their prices."""
        return tuple(choice.design for choice in self.still)

    @property
    def folder(self) -> Path:
        """The run's own output folder."""
        return Path(self.output.folder).expanduser() / folder_name(self.name)

    def with_output(self, folder: str) -> RunSettings:
        """Return the same run with its results under another `folder`.

        Raises
        ------
        StillfieldError
            When `folder` cannot be one.
        """
        return self.model_copy(update={"output": output_in(folder)})


def output_in(folder: str) -> Output:
    """Output keys that name `folder`.

    Raises
    ------
    StillfieldError
        When `folder` cannot be one.
    """
    try:
        return Output(folder=folder)
    except ValidationError as error:
        said = error.errors(include_url=False)[0]["msg"]
        raise StillfieldError(f"the output folder {said}") from None
