"""The cover sheet: what passes, what is absorbed and what is thrown back.

A sheet has two faces, and light goes to and fro between them; both polarisations are followed to the end of
the series (Duffie & Beckman eqs. 5.3.1 to 5.3.3). `pvlib.iam.physical` describes one face only, since the
back of a photovoltaic glass touches the cell; it is right for modules and 4 % off for a still.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Any, Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from stillfield.physics.still import CoverMaterial

Array = NDArray[np.floating[Any]]
Part = Literal["sky", "ground"]

#: Named cover sheets.
#:
#: Refractive index: Duffie & Beckman 4th ed. Table 5.1.1 (glass 1.526, polycarbonate 1.60, polymethyl
#: methacrylate 1.49, polyvinyl fluoride 1.45; quoted from memory). Polyethylene: 1.51, handbook value of the
#: plain polymer (quoted from memory; MIL-HDBK-1003/13A Table 2-3 prints 1.64).
#: Extinction: 4 m-1 for 'water white' glass and 32 m-1 for glass greenish at its edge, Duffie & Beckman
#: section 5.2 (quoted from memory). The others are set so that the new sheet passes at normal incidence what
#: MIL-HDBK-1003/13A Table 2-3 prints: float glass 0.843, polycarbonate 0.82 to 0.90, acrylic 0.88 to 0.92,
#: polyethylene film 0.88; polyvinyl fluoride 0.92 (quoted from memory).
#: Ageing: note of the same table, plastic covers lose 5 to 13 % in 24 months, glass 0 to 2 %.
#: Emittance: 0.90 of glass within the usual 0.88 to 0.94; of plastics common practice, no source (water that
#: condenses under a thin film makes it opaque to heat).
MATERIALS = {
    "low-iron-glass": CoverMaterial(1.526, 4.0, 0.004, 0.90),
    "glass": CoverMaterial(1.526, 22.0, 0.004, 0.90),
    "greenish-glass": CoverMaterial(1.526, 32.0, 0.004, 0.90),
    "polycarbonate": CoverMaterial(1.60, 15.0, 0.003, 0.90, 0.91),
    "acrylic": CoverMaterial(1.49, 7.0, 0.003, 0.90, 0.95),
    "polyvinyl-fluoride-film": CoverMaterial(1.45, 160.0, 0.0001, 0.85, 0.95),
    "polyethylene-film": CoverMaterial(1.51, 300.0, 0.00015, 0.85, 0.91),
}

#: The clear low-iron pane to which `Condition.absorptance` refers.
REFERENCE_COVER = MATERIALS["low-iron-glass"]

#: Cells of the look-up table in the square root of cos(theta); the transmittance is within 1e-5.
TABLE_CELLS = 512

_QUADRATURE_POINTS = 4000


def surface_reflectance(cos_theta: ArrayLike, refractive_index: float) -> tuple[Array, Array, Array]:
    """Reflectance of one surface between air and the sheet.

    Parameters
    ----------
    cos_theta : array_like
        Cosine of the angle of incidence, 0 to 1. [1]
    refractive_index : float
        Of the sheet against air, above 1. [1]

    Returns
    -------
    perpendicular, parallel : ndarray, shape of `cos_theta`
        Reflectance for light polarised perpendicular and parallel to the plane of incidence. [1]
    cos_inside : ndarray, same shape
        Cosine of the angle of refraction. [1]

    References
    ----------
    Fresnel; Duffie & Beckman eqs. 5.1.1 to 5.1.4.

    Examples
    --------
    Duffie & Beckman, Example 5.1.1 (quoted from memory): glass at normal incidence and at 60 deg.

    >>> perpendicular, parallel, _ = surface_reflectance([1.0, 0.5], 1.526)
    >>> ((perpendicular + parallel) / 2).round(3)
    array([0.043, 0.093])
    """
    outside = np.asarray(cos_theta, dtype=float)
    inside = np.sqrt(refractive_index**2 - 1.0 + outside**2) / refractive_index
    perpendicular = ((outside - refractive_index * inside) / (outside + refractive_index * inside)) ** 2
    parallel = ((refractive_index * outside - inside) / (refractive_index * outside + inside)) ** 2
    return perpendicular, parallel, inside


def transmittance_and_absorptance(cos_theta: ArrayLike, cover: CoverMaterial) -> tuple[Array, Array]:
    """Transmittance and absorptance of the sheet for an unpolarised beam.

    Light that ageing takes from the transmitted beam counts as thrown back, not as absorbed.

    Parameters
    ----------
    cos_theta : array_like
        Cosine of the angle of incidence; 0 and below gives nothing. [1]
    cover : CoverMaterial
        The sheet.

    Returns
    -------
    transmittance, absorptance : ndarray, shape of `cos_theta`
        The rest is reflected. [1]

    References
    ----------
    Duffie & Beckman eqs. 5.2.2 and 5.3.1 to 5.3.3, averaged over both polarisations.

    Examples
    --------
    >>> cosines = np.cos(np.radians([0.0, 60.0, 80.0]))
    >>> transmittance_and_absorptance(cosines, REFERENCE_COVER)[0].round(3)
    array([0.902, 0.825, 0.443])
    """
    cosine = np.asarray(cos_theta, dtype=float)
    # Just off grazing incidence, where a sheet that absorbs or refracts nothing would give 0/0.
    *polarised, inside = surface_reflectance(np.maximum(cosine, 1e-9), cover.refractive_index)
    passed_once = np.exp(-cover.extinction_per_m * cover.thickness_m / inside)
    transmittance = np.zeros_like(passed_once)
    absorptance = np.zeros_like(passed_once)
    for reflectance in polarised:
        returned = reflectance * passed_once
        transmittance += 0.5 * passed_once * (1.0 - reflectance) ** 2 / (1.0 - returned**2)
        absorptance += 0.5 * (1.0 - passed_once) * (1.0 - reflectance) / (1.0 - returned)
    lit = cosine > 0.0
    return np.where(lit, cover.ageing * transmittance, 0.0), np.where(lit, absorptance, 0.0)


def normal_transmittance(cover: CoverMaterial) -> float:
    """Transmittance at normal incidence.

    Parameters
    ----------
    cover : CoverMaterial
        The sheet.

    Returns
    -------
    float
        [1]

    Examples
    --------
    >>> round(normal_transmittance(REFERENCE_COVER), 3)
    0.902
    """
    return float(transmittance_and_absorptance(1.0, cover)[0])


@lru_cache(maxsize=256)
def diffuse_transmittance_and_absorptance(
    cover: CoverMaterial, tilt_deg: float, part: Part = "sky"
) -> tuple[float, float]:
    """Transmittance and absorptance for light from an evenly bright sky or ground.

    The beam values are averaged over the directions from which the light comes, weighted with the energy
    they bring. In the ring at angle theta from the normal of the sheet, the part above the horizon is
    arccos(-cot(tilt) cot(theta)) / pi, so one integral over theta does it. The customary beam value at
    60 deg is 0.5 % below the sky value of a flat low-iron pane and 3 % below at a tilt of 40 deg. The integral
    also holds for plastics and for the ground, and costs nothing as it is made once for a design.

    Parameters
    ----------
    cover : CoverMaterial
        The sheet.
    tilt_deg : float
        Tilt from horizontal, 0 to 90. [deg]
    part : {'sky', 'ground'}
        Where the light comes from.

    Returns
    -------
    transmittance, absorptance : float
        Share of the diffuse light that reaches the sheet; 0 for the ground below a horizontal sheet. [1]

    Examples
    --------
    >>> round(diffuse_transmittance_and_absorptance(REFERENCE_COVER, 15.0)[0], 2)
    0.84
    """
    cosine = (np.arange(_QUADRATURE_POINTS) + 0.5) / _QUADRATURE_POINTS
    sine = np.sqrt(1.0 - cosine**2)
    tilt = np.radians(tilt_deg)
    # cos(tilt) cos(theta) + sin(tilt) sin(theta) cos(around) is the height of the direction.
    edge = np.cos(tilt) * cosine / np.maximum(np.sin(tilt) * sine, 1e-12)
    weight = np.arccos(np.clip(-edge, -1.0, 1.0)) / np.pi
    if part == "ground":
        weight = 1.0 - weight
    weight = weight * cosine
    total = weight.sum()
    if total < 1e-12 * _QUADRATURE_POINTS:
        return 0.0, 0.0
    passed, absorbed = transmittance_and_absorptance(cosine, cover)
    return float((passed * weight).sum() / total), float((absorbed * weight).sum() / total)


@dataclass(frozen=True)
class CoverTable:
    """Transmittance and absorptance of a sheet, tabulated for millions of angles.

    Knots are even in the square root of cos(theta): a clear sheet changes fast near grazing incidence, where
    the light trapped between its faces grows long paths.

    Attributes
    ----------
    transmittance, absorptance : ndarray, shape (TABLE_CELLS + 2,)
        Values at cos(theta) = (k / TABLE_CELLS)**2; the last is repeated. [1]
    """

    transmittance: Array
    absorptance: Array

    def look_up(self, cos_theta: Array) -> tuple[Array, Array]:
        """Interpolate both, for cosines of at most 1; 0 and below gives 0.

        Parameters
        ----------
        cos_theta : ndarray
            [1]

        Returns
        -------
        transmittance, absorptance : ndarray, shape of `cos_theta`
            Within 1e-5 of `transmittance_and_absorptance`. [1]
        """
        position = np.sqrt(np.maximum(cos_theta, 0.0))
        position *= TABLE_CELLS
        cell = position.astype(np.int32)
        np.minimum(cell, TABLE_CELLS, out=cell)
        position -= cell
        above = cell + 1
        values = []
        for table in (self.transmittance, self.absorptance):
            low = table.take(cell)
            value = table.take(above)
            value -= low
            value *= position
            value += low
            values.append(value)
        return values[0], values[1]


@lru_cache(maxsize=64)
def cover_table(cover: CoverMaterial) -> CoverTable:
    """Tabulate a sheet; made once for each material.

    Parameters
    ----------
    cover : CoverMaterial
        The sheet.

    Returns
    -------
    CoverTable
        The same object for the same sheet.

    Examples
    --------
    >>> passed, _ = cover_table(REFERENCE_COVER).look_up(np.array([1.0, 0.5, -0.2]))
    >>> passed.round(3)
    array([0.902, 0.825, 0.   ])
    """
    knots = (np.arange(TABLE_CELLS + 1) / TABLE_CELLS) ** 2
    passed, absorbed = transmittance_and_absorptance(knots, cover)
    return CoverTable(np.append(passed, passed[-1]), np.append(absorbed, absorbed[-1]))
