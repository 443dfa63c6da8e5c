"""From irradiance over the still to what passes the cover and falls on the basin.

Everything is per square metre of basin. A panel of tilt b over a piece of basin takes in the beam on
1 / cos(b) of its area. Seen along the sun's rays the cover can light no more than the whole basin, so of
the beam through all panels at most the horizontal beam falls on the basin; the rest lands on walls and counts
by `Still.wall_gain`. Two opposite sunlit slopes light the basin exactly: what one takes in over its own half
beyond the horizontal beam falls on the other half.

The sky is that of Hay & Davies 1980: a share of the diffuse light equal to dni / E0n comes from the sun's
direction and goes the way of the beam, the rest comes evenly from the sky. Light from the ground rises, so
it can reach a wall only.

Left out: shadows of side walls, light that leaves through the opposite slope, and the reflectance of the
water at low sun; all are small and belong to the lumped absorptance.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from stillfield.physics.cover import (
    REFERENCE_COVER,
    CoverTable,
    cover_table,
    diffuse_transmittance_and_absorptance,
    normal_transmittance,
)
from stillfield.physics.still import Panel, Still
from stillfield.physics.sun import SunSteps

Array = NDArray[np.floating[Any]]

#: Reflectance of the ground around the still. Duffie & Beckman section 2.15: 0.2 without snow.
GROUND_ALBEDO = 0.2

#: Least cosine of the zenith angle by which circumsolar light is divided (89 deg), as pvlib has it.
LEAST_COS_ZENITH = 0.01745

# Tiwari's five bands of the solar spectrum in water (quoted from memory): share of the energy and extinction.
_BAND_SHARE = np.array([0.237, 0.193, 0.167, 0.179, 0.224])
_BAND_EXTINCTION_PER_M = np.array([0.032, 0.45, 3.0, 35.0, 255.0])


@dataclass(frozen=True)
class BasinGain:
    """Sunshine caught by a still.

    Attributes
    ----------
    transmitted : ndarray, shape (time, cell)
        S: what passes the cover and counts, on the basin or as a share on walls. [W m-2 of basin]
    cover_absorbed : ndarray, shape (time, cell)
        Sunshine absorbed in the cover. [W m-2 of basin]
    """

    transmitted: Array
    cover_absorbed: Array


@dataclass(frozen=True)
class DiffuseGain:
    """Share of even diffuse light that a still catches, per square metre of basin.

    Attributes
    ----------
    sky, ground : float
        Of the diffuse irradiance from the sky and of the global irradiance on the ground: transmitted and
        counted. [1]
    sky_absorbed, ground_absorbed : float
        The same for absorption in the cover. [1]
    """

    sky: float
    ground: float
    sky_absorbed: float
    ground_absorbed: float


def diffuse_gain(still: Still, albedo: float = GROUND_ALBEDO) -> DiffuseGain:
    """Gain of a still from an evenly bright sky and from the ground.

    A panel sees (1 + cos b) / 2 of the sky with 1 / cos(b) of area for each square metre of basin; what is
    beyond 1 lands on walls.

    Parameters
    ----------
    still : Still
        The design.
    albedo : float
        Reflectance of the ground. [1]

    Returns
    -------
    DiffuseGain
        Sums over the panels.

    Examples
    --------
    >>> round(diffuse_gain(Still("flat", (Panel(1.0, 0.0),))).sky, 2)
    0.83
    """
    sky = ground = sky_absorbed = ground_absorbed = 0.0
    for panel in still.panels:
        flatness = np.cos(np.radians(panel.tilt_deg))
        from_sky = panel.share * (1.0 + flatness) / (2.0 * flatness)
        from_ground = panel.share * albedo * (1.0 - flatness) / (2.0 * flatness)
        passed, absorbed = diffuse_transmittance_and_absorptance(still.cover, panel.tilt_deg, "sky")
        sky += passed * (panel.share + still.wall_gain * (from_sky - panel.share))
        sky_absorbed += absorbed * from_sky
        passed, absorbed = diffuse_transmittance_and_absorptance(still.cover, panel.tilt_deg, "ground")
        ground += passed * still.wall_gain * from_ground
        ground_absorbed += absorbed * from_ground
    return DiffuseGain(float(sky), float(ground), float(sky_absorbed), float(ground_absorbed))


def panel_direction(panel: Panel, latitude: ArrayLike) -> tuple[Array, Array]:
    """East and north component of the direction a panel faces, times the tangent of its tilt.

    With it the projection of the sun vector on the panel, per area of basin, is
    up + east * east_component + north * north_component.

    Parameters
    ----------
    panel : Panel
        One plane of the cover.
    latitude : array_like, shape (cell,)
        Decides where the equator is; 0 counts as north. [deg north]

    Returns
    -------
    east, north : ndarray, shape (cell,)
        [1]

    Examples
    --------
    >>> panel_direction(Panel(1.0, 45.0), [30.0, -30.0])[1].round(3)
    array([-1.,  1.])
    """
    azimuth = np.radians(panel.azimuth_deg)
    steepness = np.tan(np.radians(panel.tilt_deg))
    if panel.azimuth_from == "north":
        turn = np.ones_like(np.asarray(latitude, dtype=float))
    else:
        turn = np.where(np.asarray(latitude) >= 0.0, -1.0, 1.0)
    return turn * (steepness * np.sin(azimuth)), turn * (steepness * np.cos(azimuth))


def beam_gain(still: Still, sun: SunSteps, latitude: ArrayLike) -> tuple[Array, Array]:
    """Gain of a still from a beam of 1 W m-2 on a plane facing the sun.

    Parameters
    ----------
    still : Still
        The design.
    sun : SunSteps
        The sun over the steps.
    latitude : array_like, shape (cell,)
        [deg north]

    Returns
    -------
    transmitted, cover_absorbed : ndarray, shape (time, cell)
        Per irradiance of the beam; 0 without sun. [m2 of beam per m2 of basin]
    """
    table = cover_table(still.cover)
    shorten = 1.0 / sun.length
    intake = np.zeros_like(sun.up)
    passed = np.zeros_like(sun.up)
    absorbed = np.zeros_like(sun.up)
    for panel in still.panels:
        _add_panel(panel, sun, shorten, panel_direction(panel, latitude), (table, intake, passed, absorbed))
    # What the whole cover takes in beyond the horizontal beam misses the basin.
    np.maximum(intake, sun.up, out=intake)
    np.maximum(intake, 1e-12, out=intake)
    on_basin = sun.up / intake
    on_basin *= 1.0 - still.wall_gain
    on_basin += still.wall_gain
    passed *= on_basin
    return passed, absorbed


def _add_panel(
    panel: Panel, sun: SunSteps, shorten: Array, direction: tuple[Array, Array],
    sums: tuple[CoverTable, Array, Array, Array],
) -> None:
    """Add what one panel takes in, passes and absorbs of a unit beam to the running sums."""
    table, intake, passed, absorbed = sums
    east, north = direction
    share = sun.north * north
    if np.any(east):
        share += sun.east * east
    share += sun.up
    np.maximum(share, 0.0, out=share)
    through, kept = table.look_up(share * shorten * np.cos(np.radians(panel.tilt_deg)))
    share *= panel.share
    intake += share
    through *= share
    passed += through
    kept *= share
    absorbed += kept


def basin_gain(
    still: Still,
    sun: SunSteps,
    latitude: ArrayLike,
    *,
    ghi: Array,
    dni: Array,
    dhi: Array,
    albedo: float = GROUND_ALBEDO,
) -> BasinGain:
    """Sunshine that passes the cover, per square metre of basin.

    Parameters
    ----------
    still : Still
        The design.
    sun : SunSteps
        The sun over the steps, arrays of shape (time, cell).
    latitude : array_like, shape (cell,)
        [deg north]
    ghi, dni, dhi : ndarray, shape (time, cell)
        Global horizontal, direct normal and diffuse horizontal irradiance, means of the steps. [W m-2]
    albedo : float
        Reflectance of the ground. [1]

    Returns
    -------
    BasinGain
        NaN where the irradiance is.

    References
    ----------
    Hay & Davies 1980, as in `pvlib.irradiance.haydavies`; Duffie & Beckman section 2.16.

    Examples
    --------
    >>> from stillfield.physics.sun import sun_over_steps
    >>> still = Still("flat", (Panel(1.0, 0.0),))
    >>> sun = sun_over_steps([0.0], [80])
    >>> beam = np.where(sun.up > 0.0, 800.0, 0.0)
    >>> gain = basin_gain(still, sun, [0.0], ghi=beam * sun.up, dni=beam, dhi=0.0 * beam)
    >>> round(float(gain.transmitted.max() / (beam * sun.up).max()), 3)
    0.902
    """
    diffuse = diffuse_gain(still, albedo)
    even = np.array(dhi, dtype=float)
    passed = diffuse.ground * ghi
    kept = diffuse.ground_absorbed * ghi
    # Half of all steps are night in every cell; the beam is worked out for the others only.
    day = np.flatnonzero(sun.up.any(axis=1))
    by_day = sun.take(day)
    beam, circumsolar = _beam_and_circumsolar(by_day, dni[day], even[day])
    even[day] -= circumsolar
    beam_passed, beam_kept = beam_gain(still, by_day, latitude)
    beam_passed *= beam
    beam_kept *= beam
    passed[day] += beam_passed
    kept[day] += beam_kept
    passed += diffuse.sky * even
    kept += diffuse.sky_absorbed * even
    return BasinGain(passed, kept)


def _beam_and_circumsolar(sun: SunSteps, dni: Array, dhi: Array) -> tuple[Array, Array]:
    """Irradiance of the whole beam on a plane facing the sun, and its circumsolar part on the horizontal."""
    anisotropy = np.clip(dni / sun.normal_outside, 0.0, 1.0)
    # Without sun there is no direction to put the circumsolar light in: it stays with the even sky.
    anisotropy *= sun.up > 0.0
    anisotropy *= dhi
    beam = anisotropy / np.maximum(sun.up, LEAST_COS_ZENITH)
    beam += dni
    return beam, anisotropy


def absorbed(transmitted: Array, still: Still) -> Array:
    """Sunshine that ends up in water and liner.

    `Condition.absorptance` is lumped for a clear low-iron pane at normal incidence; any other cover, angle
    or diffuse light changes it by what it lets through against that pane.

    Parameters
    ----------
    transmitted : ndarray
        S of `basin_gain`, or its daily sum. [any unit of energy per area of basin]
    still : Still
        Design in its central condition.

    Returns
    -------
    ndarray, shape of `transmitted`
        In the unit of `transmitted`.

    Examples
    --------
    >>> still = Still("flat", (Panel(1.0, 0.0),))
    >>> round(float(absorbed(np.array(902.3), still)))
    700
    """
    return np.asarray(still.state.absorptance / normal_transmittance(REFERENCE_COVER) * transmitted)


def share_reaching_liner(brine_depth_m: ArrayLike) -> Array:
    """Share of the sunshine entering clear water that is left at a depth.

    Parameters
    ----------
    brine_depth_m : array_like
        [m]

    Returns
    -------
    ndarray, shape of `brine_depth_m`
        The rest is absorbed on the way. [1]

    References
    ----------
    Tiwari's five bands, sum of share_j exp(-extinction_j depth) (quoted from memory).

    Examples
    --------
    >>> share_reaching_liner([0.0, 0.02, 0.10]).round(2)
    array([1.  , 0.68, 0.55])
    """
    depth = np.asarray(brine_depth_m, dtype=float)[..., None]
    return np.asarray((_BAND_SHARE * np.exp(-_BAND_EXTINCTION_PER_M * depth)).sum(axis=-1))
