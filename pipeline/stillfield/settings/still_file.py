"""Still files: a design and its condition as keys with units, turned into a `Still`, with its money beside it."""

from __future__ import annotations

from dataclasses import dataclass, replace
from pathlib import Path
from typing import Annotated, Any, Literal

from pydantic import Field, ValidationInfo, field_validator, model_validator

from stillfield.decisions.cost import StillCost
from stillfield.decisions.upgrade import Modification
from stillfield.errors import RunFileError
from stillfield.physics.brine import MAX_SALINITY_G_KG
from stillfield.physics.cover import MATERIALS
from stillfield.physics.still import STANDARD_CONDITIONS, Condition, CoverMaterial, Panel, Still
from stillfield.settings.base import Group, OneOf, Section, folder_name
from stillfield.settings.economy import CostKeys, ModificationKeys
from stillfield.settings.faults import check
from stillfield.settings.paths import refuse
from stillfield.settings.text import harmless, read_text
from stillfield.vocabulary import CONDITIONS

#: Cover whose four numbers are all written out.
CUSTOM = "custom"
#: Numbers such a cover needs; ageing is 1 unless stated.
_NUMBERS = ("refractive_index", "extinction_per_m", "thickness_m", "emittance")
_SHARES_ADD_UP_TO = 1e-6

_ConditionName = Annotated[str, OneOf(CONDITIONS)]


@dataclass(frozen=True)
class StillDesign:
    """A still file: the still as the physics takes it, and beside it what the decisions take.

    Attributes
    ----------
    still : Still
        The design; it knows no money.
    cost : StillCost or None
        What it costs, where the file says so.
    modification : Modification or None
        A change to compare it with, where the file has one.
    """

    still: Still
    cost: StillCost | None = None
    modification: Modification | None = None


class PanelKeys(Group):
    """One plane of the cover."""

    share: float = Field(gt=0, le=1, description="Share of the basin area under this panel [1]")
    tilt_deg: float = Field(ge=0, le=80, description="Tilt from horizontal [deg]; below 10 drops fall back")
    azimuth_deg: float = Field(
        0.0, ge=-180, le=360, description="Direction the panel faces, clockwise from azimuth_from [deg]"
    )
    azimuth_from: Literal["equator", "north"] = Field(
        "equator", description="'equator': 0 faces the equator in either hemisphere; 'north': compass degrees"
    )


class CoverKeys(Group):
    """The sheet of which all panels are made: a named material, its numbers changed where stated."""

    material: Annotated[str, OneOf((*MATERIALS, CUSTOM))] = Field(
        description=f"Name of the sheet, or '{CUSTOM}' with all four numbers written out"
    )
    refractive_index: float | None = Field(None, ge=1, le=2.5, description="For the solar spectrum [1]")
    extinction_per_m: float | None = Field(None, ge=0, le=5000, description="Extinction coefficient [m-1]")
    thickness_m: float | None = Field(None, ge=0.00001, le=0.05, description="Thickness of the sheet [m]")
    emittance: float | None = Field(None, ge=0.05, le=1, description="Long-wave emittance of the outer face [1]")

    ageing: float | None = Field(
        None, ge=0.3, le=1, description="Factor of the transmittance for yellowing and scratches [1]"
    )

    @model_validator(mode="after")
    def _custom_is_complete(self) -> CoverKeys:
        absent = [key for key in _NUMBERS if getattr(self, key) is None]
        if self.material == CUSTOM and absent:
            raise refuse(f"material '{CUSTOM}' also needs {', '.join(absent)}")
        return self

    def build(self) -> CoverMaterial:
        """Numbers of the sheet."""
        stated = self.model_dump(exclude={"material"}, exclude_none=True)
        if self.material == CUSTOM:
            return CoverMaterial(**stated)
        return replace(MATERIALS[self.material], **stated)


class ConditionKeys(Group):
    """Numbers of a condition; what is left out keeps its standard value."""

    absorptance: float | None = Field(
        None, ge=0.2, le=0.95, description="Share of the sunshine on a clear cover that ends in the water [1]"
    )
    loss_w_m2_k: float | None = Field(
        None, ge=0, le=50, description="Heat loss through base and sides per basin area [W m-2 K-1]"
    )
    leak: float | None = Field(None, ge=0, lt=1, description="Share of vapour or distillate that is lost [1]")

    def build(self, standard: Condition) -> Condition:
        """Numbers of the condition, `standard` where nothing is stated."""
        return replace(standard, **self.model_dump(exclude_none=True))


class StillKeys(Group):
    """A still file."""

    name: str = Field(
        description="Short name, also used in file names: small letters, digits and hyphens",
    )
    panels: tuple[PanelKeys, ...] = Field(
        strict=False, min_length=1, max_length=12, description="Planes of the cover; their shares add up to 1"
    )
    cover: CoverKeys = Field(description="Sheet of which all panels are made")
    wall_gain: float = Field(
        0.5, ge=0, le=1, description="Share counted of the sunshine that lands on the back wall [1]"
    )
    brine_depth_m: float = Field(0.02, ge=0.005, le=0.5, description="Depth of the brine [m]")
    liner_heat_capacity_j_m2_k: float = Field(
        8000.0, ge=0, le=1e6, description="Heat capacity of liner and basin that follows the water [J m-2 K-1]"
    )
    water_emittance: float = Field(0.95, ge=0.5, le=1, description="Long-wave emittance of the water [1]")
    feed_salinity_g_kg: float = Field(0.0, ge=0, le=200, description="Salt in the feed water [g kg-1]")
    concentration_factor: float = Field(
        1.5, ge=1, le=10, description="Mean basin concentration over feed concentration [1]"
    )
    condition: _ConditionName = Field("maintained", description="Condition behind the central figures")
    band: tuple[_ConditionName, _ConditionName] | None = Field(
        None, strict=False,
        description="Conditions behind the lower and the upper figures; [weathered, new] without it",
    )
    conditions: Section[dict[_ConditionName, Section[ConditionKeys]]] = Field(
        default_factory=dict, description="Own numbers for conditions of this design"
    )
    heat_transfer: Literal["dunkle", "moist-air"] = Field(
        "dunkle", description="Relation for heat and vapour between water and cover"
    )
    cost: CostKeys | None = Field(None, description="What the still costs; no cost per litre without it")
    modification: ModificationKeys | None = Field(
        None, description="A change to the still, compared with the still as it stands here; needs cost"
    )

    @field_validator("panels")
    @classmethod
    def _cover_the_basin(cls, panels: tuple[PanelKeys, ...]) -> tuple[PanelKeys, ...]:
        total = sum(panel.share for panel in panels)
        if abs(total - 1.0) > _SHARES_ADD_UP_TO:
            raise refuse(f"the shares should add up to 1 (got {total:g})")
        return panels

    @field_validator("name")
    @classmethod
    def _fit_for_a_file_name(cls, name: str) -> str:
        if name != folder_name(name) or not name.isascii():
            better = folder_name(name.encode("ascii", "ignore").decode())
            hint = f"; write '{better}'" if better else ""
            raise refuse(f"should be small letters, digits and single hyphens (got '{harmless(name)}'{hint})")
        return name

    @field_validator("concentration_factor")
    @classmethod
    def _known_brine(cls, factor: float, info: ValidationInfo) -> float:
        salinity = info.data.get("feed_salinity_g_kg", 0.0) * factor
        if salinity > MAX_SALINITY_G_KG:
            raise refuse(
                f"times feed_salinity_g_kg should be at most {MAX_SALINITY_G_KG:g}, the saltiest brine whose "
                f"properties are known (got {salinity:g})"
            )
        return factor

    @field_validator("band")
    @classmethod
    def _around_the_condition(cls, band: tuple[str, str] | None, info: ValidationInfo) -> tuple[str, str] | None:
        central = info.data.get("condition")
        if band is None or central is None:
            return band
        worst, middle, best = (CONDITIONS.index(name) for name in (band[0], central, band[1]))
        if not best <= middle <= worst:
            raise refuse(
                f"should run from a worse to a better condition around '{central}' (got [{', '.join(band)}]; "
                f"from worst to best: {', '.join(reversed(CONDITIONS))})"
            )
        return band

    @field_validator("modification")
    @classmethod
    def _has_a_cost(cls, modification: ModificationKeys | None, info: ValidationInfo) -> ModificationKeys | None:
        if modification is not None and "cost" in info.data and info.data["cost"] is None:
            raise refuse("also needs 'cost' of the still, against which it is compared")
        return modification

    def ends(self) -> tuple[str, str]:
        """Conditions behind the lower and the upper figures."""
        if self.band is not None:
            return self.band
        return ("neglected" if self.condition == "neglected" else "weathered"), "new"

    def design(self) -> StillDesign:
        """The still and its money."""
        return StillDesign(
            self.build(),
            cost=self.cost.build() if self.cost is not None else None,
            modification=self.modification.build() if self.modification is not None else None,
        )

    def build(self) -> Still:
        """The still as the physics takes it."""
        low, high = self.ends()
        numbers: dict[str, Any] = self.model_dump(
            exclude={"panels", "cover", "band", "conditions", "cost", "modification"}
        )
        own = self.conditions
        return Still(
            **numbers,
            panels=tuple(Panel(**panel.model_dump()) for panel in self.panels),
            cover=self.cover.build(),
            condition_low=low,
            condition_high=high,
            conditions={
                name: own[name].build(standard) if name in own else standard
                for name, standard in STANDARD_CONDITIONS.items()
            },
        )


def load_still_design(path: str | Path, *, given: str | None = None) -> StillDesign:
    """Read a still file with its cost and modification.

    Parameters
    ----------
    path : path
        The file.
    given : str, optional
        Its name in messages; the default is `path` itself.

    Returns
    -------
    StillDesign

    Raises
    ------
    RunFileError
        With every fault of the file at once.
    """
    path = Path(path)
    source = given if given is not None else str(path)
    keys, faults = check(StillKeys, read_text(path, source), {"folder": path.parent})
    if keys is None:
        raise RunFileError(source, faults)
    return keys.design()


def load_still_file(path: str | Path, *, given: str | None = None) -> Still:
    """Read a still file; its cost and modification are checked and left out.

    Parameters
    ----------
    path : path
        The file.
    given : str, optional
        Its name in messages; the default is `path` itself.

    Returns
    -------
    Still

    Raises
    ------
    RunFileError
        With every fault of the file at once.
    """
    return load_still_design(path, given=given).still
