"""What all groups of keys have in common: nothing unknown, nothing reinterpreted, nothing changed later."""

from __future__ import annotations

import re
import unicodedata
from dataclasses import dataclass
from typing import Annotated, Any, TypeVar

from pydantic import (
    BaseModel,
    BeforeValidator,
    ConfigDict,
    Field,
    GetCoreSchemaHandler,
    GetJsonSchemaHandler,
)
from pydantic_core import CoreSchema, PydanticCustomError, core_schema

from stillfield.settings.faults import not_a_choice
from stillfield.settings.paths import refuse

T = TypeVar("T")


class Group(BaseModel):
    """A group of keys of a run file or still file."""

    model_config = ConfigDict(frozen=True, extra="forbid", strict=True, allow_inf_nan=False, validate_default=True)


def _empty_as_default(value: Any) -> Any:
    """A group whose keys are all commented out reads as nothing; its defaults are meant."""
    return {} if value is None else value


#: A group of keys that may be left empty.
Section = Annotated[T, BeforeValidator(_empty_as_default)]


@dataclass(frozen=True)
class OneOf:
    """Marks text that is one of `choices`; a near miss is told what was probably meant."""

    choices: tuple[str, ...]

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        """Check the text after pydantic found it to be text."""
        return core_schema.no_info_after_validator_function(self._check, handler(source))

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: GetJsonSchemaHandler) -> dict[str, Any]:
        """List the choices for editors."""
        return {**handler(schema), "enum": list(self.choices)}

    def _check(self, value: str) -> str:
        if value not in self.choices:
            raise refuse(not_a_choice(value, self.choices))
        return value


class Box(Group):
    """A region on the map; `west` greater than `east` crosses the antimeridian."""

    south: float = Field(ge=-90, le=90, description="Southern edge [deg north]")
    north: float = Field(ge=-90, le=90, description="Northern edge [deg north]")
    west: float = Field(ge=-180, le=360, description="Western edge [deg east]")
    east: float = Field(ge=-180, le=360, description="Eastern edge [deg east]")

    def model_post_init(self, _context: Any) -> None:
        """Refuse a box without area and one whose edges were swapped."""
        if self.south >= self.north:
            raise _swapped("south", "north", self.south, self.north)
        if self.width_deg > 180 and self.west > self.east:
            raise _swapped("west", "east", self.west, self.east)
        if self.west == self.east:
            raise refuse(f"west and east should differ (both {self.west:g})")

    @property
    def width_deg(self) -> float:
        """Extent in longitude in degrees."""
        return (self.east - self.west) % 360 or (360.0 if self.east != self.west else 0.0)


def _swapped(first: str, second: str, low: float, high: float) -> PydanticCustomError:
    return refuse(f"{first} should lie {first} of {second} (got {first} {low:g}, {second} {high:g}; swapped?)")


#: Longest name, in signs; four bytes each still make a legal file name.
MAX_NAME = 60
#: Names some systems keep for devices; nothing may be called so.
_DEVICE = re.compile(r"(con|prn|aux|nul|com[0-9]|lpt[0-9])")


def folder_name(name: str) -> str:
    """Make a file name of any text: letters, digits and single hyphens, safe on every system.

    Examples
    --------
    >>> folder_name("North Hook, 3 years"), folder_name("../../etc/passwd"), folder_name("CON")
    ('north-hook-3-years', 'etc-passwd', 'run-con')
    """
    plain = unicodedata.normalize("NFKC", name).lower()
    words = "".join(sign if sign.isalnum() else " " for sign in plain).split()
    slug = "-".join(words)[:MAX_NAME].rstrip("-")
    return f"run-{slug}" if _DEVICE.fullmatch(slug) else slug
