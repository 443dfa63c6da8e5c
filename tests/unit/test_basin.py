"""Geometry of the basin: shares that must add up, and agreement with pvlib's tilted planes."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from pvlib.irradiance import get_total_irradiance

from stillfield.physics.basin import (
    GROUND_ALBEDO,
    absorbed,
    basin_gain,
    beam_gain,
    diffuse_gain,
    panel_direction,
    share_reaching_liner,
)
from stillfield.physics.cover import REFERENCE_COVER, normal_transmittance
from stillfield.physics.still import CoverMaterial, Panel, Still
from stillfield.physics.sun import SunSteps, sun_over_steps

#: A cover that is not there: no reflection, no absorption.
NOTHING = CoverMaterial(refractive_index=1.0, extinction_per_m=0.0)
DAYS = np.array([20, 80, 172, 265, 355])


def single(tilt: float, wall_gain: float = 0.5, cover: CoverMaterial = NOTHING, azimuth: float = 0.0) -> Still:
    return Still("single", (Panel(1.0, tilt, azimuth),), cover=cover, wall_gain=wall_gain)


def double(tilt: float, wall_gain: float = 0.0, azimuth: float = 90.0) -> Still:
    panels = (Panel(0.5, tilt, azimuth), Panel(0.5, tilt, azimuth + 180.0))
    return Still("double", panels, cover=NOTHING, wall_gain=wall_gain)


def projections(still: Still, sun: SunSteps, latitude: np.ndarray) -> list[np.ndarray]:
    """Per panel: intake of a unit beam per area of basin under it, from angles in degrees."""
    zenith = np.arccos(sun.cos_zenith)
    results = []
    for panel in still.panels:
        tilt = np.radians(panel.tilt_deg)
        facing = panel.azimuth_deg + np.where(latitude >= 0, 180.0, 0.0)
        turn = np.radians(sun.azimuth_deg - facing)
        cosine = np.cos(zenith) * np.cos(tilt) + np.sin(zenith) * np.sin(tilt) * np.cos(turn)
        results.append(np.maximum(cosine, 0.0) * sun.length / np.cos(tilt) * (sun.up > 0.0))
    return results


@pytest.mark.parametrize("azimuth", [0.0, 35.0, 90.0])
def test_opposite_slopes_both_in_the_sun_light_the_basin_exactly(azimuth):
    latitude = np.array([-33.0, 0.0, 12.0, 50.0])
    sun = sun_over_steps(latitude, DAYS)
    still = double(20.0, azimuth=azimuth)
    both = np.logical_and.reduce([intake > 1e-9 for intake in projections(still, sun, latitude)])
    assert both.sum() > 100
    passed, _ = beam_gain(still, sun, latitude)
    np.testing.assert_allclose(passed[both], sun.up[both], rtol=1e-9)


@pytest.mark.parametrize("tilt", [10.0, 35.0, 60.0])
@pytest.mark.parametrize("wall_gain", [0.0, 0.5])
def test_single_slope_is_the_lesser_of_basin_and_panel_plus_the_wall(tilt, wall_gain):
    latitude = np.array([-41.0, 3.0, 28.0, 60.0])
    sun = sun_over_steps(latitude, DAYS)
    still = single(tilt, wall_gain, azimuth=20.0)
    (intake,) = projections(still, sun, latitude)
    basin = np.minimum(intake, sun.up)
    passed, _ = beam_gain(still, sun, latitude)
    np.testing.assert_allclose(passed, basin + wall_gain * (intake - basin), atol=1e-9)


def test_sun_from_behind_lights_part_of_the_basin_or_none():
    latitude = np.array([30.0])
    sun = sun_over_steps(latitude, np.array([172]))
    behind = (sun.azimuth_deg < 90.0) & (sun.up > 0.05)  # morning sun north of east, the panel faces south
    assert behind.any()
    steep, _ = beam_gain(single(70.0), sun, latitude)
    gentle, _ = beam_gain(single(10.0), sun, latitude)
    assert np.all(gentle[behind] < sun.up[behind])
    assert np.any(steep[behind] == 0.0)


def test_direct_share_on_the_basin_never_exceeds_the_horizontal_beam():
    latitude = np.linspace(-66.0, 66.0, 23)
    sun = sun_over_steps(latitude, DAYS, 48, 0.4)
    for still in (single(45.0, 0.0), double(30.0), double(30.0, azimuth=0.0)):
        passed, _ = beam_gain(still, sun, latitude)
        assert np.all(passed <= sun.up + 1e-12)


@pytest.mark.parametrize("latitude", [-25.0, 38.0])
@pytest.mark.parametrize("tilt", [5.0, 30.0, 55.0])
def test_the_whole_cover_takes_in_what_pvlib_gives_the_plane(latitude, tilt):
    """`pvlib.irradiance.get_total_irradiance(model='haydavies')` is the outside truth."""
    sun = sun_over_steps([latitude], DAYS)
    sun = replace(  # pvlib knows an instant, not a mean over a step
        sun, east=sun.east / sun.length, north=sun.north / sun.length, up=sun.cos_zenith
    )
    random = np.random.default_rng(1)
    day = sun.up > 0.02
    dni = random.uniform(0.0, 900.0, sun.up.shape) * day
    dhi = random.uniform(20.0, 300.0, sun.up.shape) * day
    ghi = dni * sun.up + dhi
    still = single(tilt, wall_gain=1.0, azimuth=25.0)
    gain = basin_gain(still, sun, [latitude], ghi=ghi, dni=dni, dhi=dhi)
    facing = 25.0 + (180.0 if latitude > 0 else 0.0)
    plane = get_total_irradiance(
        tilt, facing, np.degrees(np.arccos(sun.up)), sun.azimuth_deg, dni, ghi, dhi,
        dni_extra=sun.normal_outside, albedo=GROUND_ALBEDO, model="haydavies",
    )["poa_global"]
    # The first cell of the look-up table cuts the corner of a cover that has no surfaces.
    np.testing.assert_allclose(gain.transmitted * np.cos(np.radians(tilt)), plane, rtol=1e-5, atol=1e-3)


def test_panels_that_face_the_equator_turn_round_with_the_hemisphere():
    days = np.array([100, 283])
    opposite = np.array([283, 100])  # the sun mirrored, nearly: compare within the declination's asymmetry
    north = beam_gain(single(30.0), sun_over_steps([35.0], days), [35.0])[0].reshape(2, 24)
    south = beam_gain(single(30.0), sun_over_steps([-35.0], opposite), [-35.0])[0].reshape(2, 24)
    np.testing.assert_allclose(north.sum(axis=1), south.sum(axis=1), rtol=0.02)


def test_compass_azimuth_ignores_the_hemisphere():
    panel = Panel(1.0, 20.0, 90.0, "north")
    east, north = panel_direction(panel, [50.0, -50.0])
    np.testing.assert_allclose(east, np.tan(np.radians(20.0)))
    np.testing.assert_allclose(north, 0.0, atol=1e-12)


@pytest.mark.parametrize("still", [single(20.0, 1.0), double(35.0, 1.0)], ids=["single", "double"])
def test_what_a_tinted_film_does_not_pass_it_absorbs(still):
    """Without reflection and with all walls counted, passed plus absorbed is what the cover takes in."""
    sun = sun_over_steps([30.0, -10.0], DAYS)
    dni, dhi = 700.0 * (sun.up > 0.0), 150.0 * (sun.up > 0.0)
    light = {"ghi": dni * sun.up + dhi, "dni": dni, "dhi": dhi}
    clear = basin_gain(still, sun, [30.0, -10.0], **light)
    tinted = replace(still, cover=CoverMaterial(refractive_index=1.0, extinction_per_m=200.0))
    dark = basin_gain(tinted, sun, [30.0, -10.0], **light)
    assert dark.cover_absorbed.max() > 300.0
    np.testing.assert_allclose(dark.transmitted + dark.cover_absorbed, clear.transmitted, rtol=1e-4, atol=1e-3)


def test_light_without_a_sun_is_kept():
    sun = sun_over_steps([20.0], np.array([10]))
    night = int(np.flatnonzero(sun.up[:, 0] == 0.0)[0])
    dhi = np.zeros((24, 1))
    dhi[night] = 30.0
    gain = basin_gain(single(0.0), sun, [20.0], ghi=dhi, dni=np.full((24, 1), 500.0), dhi=dhi)
    assert gain.transmitted[night, 0] == pytest.approx(30.0, rel=1e-6)


def test_missing_irradiance_stays_missing_and_does_not_spread():
    sun = sun_over_steps([20.0], np.array([10]))
    ghi = np.full((24, 1), 400.0)
    ghi[12] = np.nan
    gain = basin_gain(single(15.0), sun, [20.0], ghi=ghi, dni=ghi, dhi=0.2 * ghi)
    assert np.flatnonzero(np.isnan(gain.transmitted)).tolist() == [12]


def test_flat_still_under_an_even_sky_passes_the_hemispherical_transmittance():
    gain = diffuse_gain(Still("flat", (Panel(1.0, 0.0),)))
    assert gain.ground == 0.0
    assert gain.sky + gain.sky_absorbed < 1.0


def test_absorbed_follows_the_condition_and_the_reference_pane():
    still = single(15.0, cover=REFERENCE_COVER)
    transmitted = np.array([normal_transmittance(REFERENCE_COVER)])
    for name, condition in still.conditions.items():
        assert absorbed(transmitted, still.in_condition(name))[0] == pytest.approx(condition.absorptance)


def test_bands_of_water_add_up_and_die_out():
    assert share_reaching_liner(0.0) == pytest.approx(1.0, abs=1e-12)
    depths = np.array([0.0, 0.01, 0.1, 1.0, 300.0])
    assert np.all(np.diff(share_reaching_liner(depths)) < 0.0)
    assert share_reaching_liner(300.0) < 1e-4
