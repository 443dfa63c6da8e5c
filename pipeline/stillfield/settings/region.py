"""The region of a run: a box, polygons from a file, a mask of land."""

from __future__ import annotations

from typing import Any

from pydantic import Field, ValidationError, model_validator

from stillfield.settings.base import Box, Group
from stillfield.settings.paths import FileKey, refuse

_EDGES = ("south", "north", "west", "east")


class Mask(Group):
    """Land and sea from a NetCDF file; cells at sea stay without weather."""

    file: FileKey = Field(description="NetCDF file with the share of land of each cell, 0 to 1 or in %")
    variable: str | None = Field(
        None, min_length=1, description="Variable of the file, where more than one lies on its grid"
    )
    at_least: float = Field(0.5, gt=0, le=1, description="Least share of land of a cell that is kept [1]")


class Region(Group):
    """What to keep of the weather: any of a box, polygons and a mask of land; all that are given count."""

    south: float | None = Field(None, ge=-90, le=90, description="Southern edge [deg north]")
    north: float | None = Field(None, ge=-90, le=90, description="Northern edge [deg north]")
    west: float | None = Field(None, ge=-180, le=360, description="Western edge [deg east]; west of 180 while east "
                                                                  "is beyond it crosses the antimeridian")
    east: float | None = Field(None, ge=-180, le=360, description="Eastern edge [deg east]")
    polygon: FileKey | None = Field(
        None, description="GeoJSON file of polygons; cells and sites whose centre lies inside are kept"
    )
    mask: Mask | None = Field(None, description="Land and sea of each cell")

    @model_validator(mode="after")
    def _whole(self) -> Region:
        given = [edge for edge in _EDGES if getattr(self, edge) is not None]
        lacking = [edge for edge in _EDGES if edge not in given]
        if given and lacking:
            raise refuse(f"a box has four edges; {', '.join(lacking)} is missing" if len(lacking) == 1
                         else f"a box has four edges; {', '.join(lacking)} are missing")
        if not given and self.polygon is None and self.mask is None:
            raise refuse("should hold the edges of a box, a polygon or a mask")
        try:
            _ = self.box
        except ValidationError as error:
            raise refuse(error.errors(include_url=False)[0]["msg"]) from None
        return self

    @property
    def box(self) -> Box | None:
        """The box, where there is one."""
        return None if self.south is None else Box(**{edge: getattr(self, edge) for edge in _EDGES})

    @property
    def files(self) -> tuple[Any, ...]:
        """Input files the region is read from."""
        return tuple(file for file in (self.polygon, self.mask and self.mask.file) if file)

    def told(self) -> str:
        """The region in words.

        Examples
        --------
        >>> Region(south=1.0, north=2.0, west=170.0, east=-170.0).told()
        '1 to 2 N, 170 to -170 E'
        """
        box = self.box
        parts = [] if box is None else [f"{box.south:g} to {box.north:g} N, {box.west:g} to {box.east:g} E"]
        parts += [] if self.polygon is None else [f"the polygons of {self.polygon.given}"]
        parts += [] if self.mask is None else [f"land by {self.mask.file.given} (at least {self.mask.at_least:g})"]
        return "; ".join(parts)
