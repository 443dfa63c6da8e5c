"""How weather variables are found and what their values mean: keys of the run file and of description files."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Annotated, Any

from pydantic import (
    BeforeValidator,
    Field,
    GetPydanticSchema,
    PlainSerializer,
    WithJsonSchema,
    model_validator,
)
from pydantic_core import PydanticCustomError, core_schema

from stillfield.errors import RunFileError, StillfieldError
from stillfield.settings.base import Group, OneOf
from stillfield.settings.faults import check
from stillfield.settings.paths import find_file, folder_of, refuse, shown
from stillfield.settings.text import harmless, read_text

#: What a value of the sunshine stands for; needed where the unit alone does not say it.
MEANS = (
    "daily-total", "daily-mean", "daylight-mean", "step-mean", "hour-ending accumulation", "hour-starting accumulation",
    "since-00-UTC", "monthly-total",
)

#: Where in its interval the time of a value lies.
STAMPS = ("start", "middle", "end")

#: Quantities that can be looked up in grid files: the sunshine under either name, and the wind by components.
VARIABLES = (
    "irradiation", "ghi", "dni", "dhi", "temp_air", "temp_air_min", "temp_air_max", "temp_dew",
    "relative_humidity", "specific_humidity", "vapour_pressure", "wind_speed", "wind_u", "wind_v",
)
WINDS = ("wind_speed", "wind_u", "wind_v")
#: Two names of the same sunshine.
SUNS = ("irradiation", "ghi")


class VariableKey(Group):
    """How one weather variable is found in grid files and what its values stand for."""

    name: str | None = Field(None, min_length=1, description="Name of the variable in the files")
    units: str | None = Field(
        None, min_length=1, description="Unit of the values, where the files state none or a wrong one"
    )
    means: Annotated[str, OneOf(MEANS)] | None = Field(
        None, description="What a value stands for, where the unit does not say it, for example 'daily-mean'"
    )
    stamp: Annotated[str, OneOf(STAMPS)] | None = Field(
        None, description="Where in its interval the time of a value lies"
    )
    height_m: float | None = Field(
        None, ge=0.5, le=200, description="Height of a wind speed above ground [m]; 2 m is what the models take"
    )


def _name_alone(value: Any) -> Any:
    """The name of the variable may stand in place of the group."""
    return {"name": value} if isinstance(value, str) else value


_Variable = Annotated[
    VariableKey,
    BeforeValidator(_name_alone, json_schema_input_type=str | VariableKey),
]

#: Quantities by stillfield's names.
Variables = dict[Annotated[str, OneOf(VARIABLES)], _Variable]


def check_variables(variables: Mapping[str, VariableKey]) -> None:
    """Refuse a mapping that contradicts itself.

    Raises
    ------
    PydanticCustomError
        When sunshine is stated twice, or something else than wind has a height.
    """
    if set(SUNS) <= set(variables):
        raise refuse("variables: irradiation and ghi are two names of the same sunshine; state one of them")
    for name, variable in variables.items():
        if variable.height_m is not None and name not in WINDS:
            raise refuse(f"variables.{name}.height_m has no meaning; only {', '.join(WINDS)} have a height")


class DescriptionKeys(Group):
    """A description file: what the variables of one kind of weather file mean, whoever runs it where."""

    about: str = Field(min_length=1, description="Which files it is for, and where the convention is written down")
    variables: Variables = Field(min_length=1, description="Quantities by stillfield's names, and what they mean")

    @model_validator(mode="after")
    def _consistent(self) -> DescriptionKeys:
        check_variables(self.variables)
        return self


@dataclass(frozen=True)
class Description:
    """A description file named in a run file, and the mapping it holds."""

    given: str
    path: Path
    variables: Mapping[str, Mapping[str, Any]]


def _load(given: str, folder: Path) -> Description:
    file = find_file(given, folder)
    try:
        keys, faults = check(DescriptionKeys, read_text(file.path, given), {"folder": file.path.parent})
        if keys is None:
            raise RunFileError(given, faults)
    except RunFileError as error:
        parts = tuple(f"{harmless(given)}, {fault}" for fault in error.faults)
        raise PydanticCustomError("stillfield", "{message}", {"message": parts[0], "faults": parts}) from None
    except StillfieldError as error:
        raise refuse(str(error)) from None
    mapping = {name: key.model_dump(exclude_none=True) for name, key in keys.variables.items()}
    return Description(given, file.path, mapping)


def _description_schema(_source: Any, _handler: Any) -> core_schema.CoreSchema:
    return core_schema.with_info_after_validator_function(
        lambda given, info: _load(given, folder_of(info)), core_schema.str_schema(strict=True)
    )


#: A run-file key that names a description file.
DescriptionKey = Annotated[
    Description,
    GetPydanticSchema(_description_schema),
    PlainSerializer(lambda description: shown(description.given), return_type=str),
    WithJsonSchema({"type": "string"}),
]
