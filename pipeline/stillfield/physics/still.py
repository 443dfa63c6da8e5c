"""What a still is: geometry, cover, basin and condition, as frozen records of numbers.

A design is always a geometry **and** a condition, because build quality moves the yield more than the
climate does between sunny sites.
"""

from __future__ import annotations

import hashlib
import json
from dataclasses import dataclass, field, is_dataclass, replace
from math import cos, radians
from typing import Literal

AzimuthReference = Literal["equator", "north"]
HeatTransfer = Literal["dunkle", "moist-air"]


@dataclass(frozen=True)
class Panel:
    """One plane of the cover.

    Attributes
    ----------
    share : float
        Share of the basin area under this panel; the shares of a still add up to 1.
    tilt_deg : float
        Tilt from horizontal. [deg]
    azimuth_deg : float
        Direction the panel faces: degrees clockwise from `azimuth_from`. [deg]
    azimuth_from : {'equator', 'north'}
        'equator': 0 faces the equator in either hemisphere and 180 the pole; clockwise from there, 90 is
        west north of the equator and east south of it. 'north': compass degrees.
    """

    share: float
    tilt_deg: float
    azimuth_deg: float = 0.0
    azimuth_from: AzimuthReference = "equator"


@dataclass(frozen=True)
class CoverMaterial:
    """Optical and thermal numbers of one cover sheet.

    Attributes
    ----------
    refractive_index : float
        For the solar spectrum. [1]
    extinction_per_m : float
        Extinction coefficient K. [m-1]
    thickness_m : float
        Sheet thickness. [m]
    emittance : float
        Long-wave emittance of the outer face. [1]
    ageing : float
        Factor of the transmittance for yellowing and scratches; dirt belongs to the condition. [1]
    """

    refractive_index: float = 1.526
    extinction_per_m: float = 4.0
    thickness_m: float = 0.004
    emittance: float = 0.90
    ageing: float = 1.0


@dataclass(frozen=True)
class Condition:
    """How well a still is built and kept.

    Attributes
    ----------
    absorptance : float
        Lumped absorptance: share of the sunshine falling on a clear low-iron cover at normal incidence that
        ends up in water and liner; cover transmittance and dirt included. [1]
    loss_w_m2_k : float
        Heat loss coefficient U_b from the water through base and sides, per basin area. [W m-2 K-1]
    leak : float
        Share of the vapour or distillate that is lost. [1]
    """

    absorptance: float
    loss_w_m2_k: float
    leak: float


#: Lumped absorptance, base loss and leak of the four conditions (project numbers, calibrated so that the
#: efficiency at 20 MJ m-2 and 25 degC spans the 12 to 55 % of published plain stills; see DEVELOPERS.md).
STANDARD_CONDITIONS = {
    "new": Condition(0.74, 1.0, 0.0),
    "maintained": Condition(0.70, 2.5, 0.05),
    "weathered": Condition(0.65, 4.0, 0.10),
    "neglected": Condition(0.60, 8.0, 0.20),
}


@dataclass(frozen=True)
class Still:
    """A still design: everything the physics needs to know of it.

    Attributes
    ----------
    name : str
        Short name, also used in file names.
    panels : tuple of Panel
        Cover planes.
    cover : CoverMaterial
        Sheet of which all panels are made.
    wall_gain : float
        Share counted of the sunshine that misses the basin and lands on the back wall. [1]
    brine_depth_m : float
        Depth of the brine. [m]
    liner_heat_capacity_j_m2_k : float
        Heat capacity of liner and basin that follows the water. [J m-2 K-1]
    water_emittance : float
        Long-wave emittance of the water surface. [1]
    feed_salinity_g_kg : float
        Salt in the feed water. [g kg-1]
    concentration_factor : float
        Mean basin concentration over feed concentration. [1]
    condition : str
        Central condition.
    condition_low, condition_high : str
        Conditions that give the lower and the upper end of the band.
    conditions : dict of str to Condition
        Numbers of every named condition.
    heat_transfer : {'dunkle', 'moist-air'}
        Relation for heat and vapour between water and cover.
    """

    name: str
    panels: tuple[Panel, ...]
    cover: CoverMaterial = CoverMaterial()
    wall_gain: float = 0.5
    brine_depth_m: float = 0.02
    liner_heat_capacity_j_m2_k: float = 8000.0
    water_emittance: float = 0.95
    feed_salinity_g_kg: float = 0.0
    concentration_factor: float = 1.5
    condition: str = "maintained"
    condition_low: str = "weathered"
    condition_high: str = "new"
    conditions: dict[str, Condition] = field(default_factory=lambda: dict(STANDARD_CONDITIONS))
    heat_transfer: HeatTransfer = "dunkle"

    @property
    def cover_area_ratio(self) -> float:
        """Cover area per basin area, R_A [1]."""
        return sum(panel.share / cos(radians(panel.tilt_deg)) for panel in self.panels)

    @property
    def basin_salinity_g_kg(self) -> float:
        """Salinity of the brine in the basin [g kg-1]."""
        return self.feed_salinity_g_kg * self.concentration_factor

    @property
    def state(self) -> Condition:
        """Numbers of the central condition."""
        return self.conditions[self.condition]

    def in_condition(self, condition: str) -> Still:
        """Return the same design with `condition` as its central condition."""
        return replace(self, condition=condition)

    def fingerprint(self) -> str:
        """Digest of everything that moves the yield in the central condition; the name does not.

        Examples
        --------
        >>> still = Still("a", (Panel(1.0, 15.0),))
        >>> still.fingerprint() == replace(still, name="b").fingerprint()
        True
        >>> still.fingerprint() == still.in_condition("new").fingerprint()
        False
        """
        labels = ("name", "condition", "condition_low", "condition_high", "conditions")
        numbers = {name: value for name, value in vars(self).items() if name not in labels}
        numbers["state"] = self.state
        text = json.dumps(numbers, sort_keys=True, default=_plain)
        return hashlib.sha256(text.encode()).hexdigest()[:16]


def _plain(value: object) -> object:
    """Form of a record or number that json knows."""
    return vars(value) if is_dataclass(value) else float(value)  # type: ignore[arg-type]
