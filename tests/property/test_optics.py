"""What must hold for any sun, sheet, still and day."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from stillfield.physics.basin import basin_gain
from stillfield.physics.cover import diffuse_transmittance_and_absorptance, transmittance_and_absorptance
from stillfield.physics.irradiance import disaggregate_day, split_global
from stillfield.physics.still import CoverMaterial, Panel, Still
from stillfield.physics.sun import extraterrestrial_irradiation, sun_over_steps

FEW = settings(max_examples=40, deadline=None)

latitudes = st.floats(-66.0, 66.0)
days = st.integers(1, 366)
covers = st.builds(
    CoverMaterial,
    refractive_index=st.floats(1.2, 1.8),
    extinction_per_m=st.floats(0.0, 400.0),
    thickness_m=st.floats(0.0001, 0.008),
)
tilts = st.floats(0.0, 60.0)
shifts = st.floats(-12.0, 12.0)


@FEW
@given(covers)
def test_sheet_keeps_energy_and_dims_with_the_angle(cover):
    cosine = np.linspace(0.0, 1.0, 301)
    passed, absorbed = transmittance_and_absorptance(cosine, cover)
    assert np.all(passed >= 0.0)
    assert np.all(absorbed >= 0.0)
    assert np.all(passed + absorbed <= 1.0)
    assert passed[-1] + absorbed[-1] > 0.8  # at normal incidence two faces of n = 1.8 throw back 0.16
    grazing = cosine < 0.5
    assert np.all(np.diff(passed[grazing]) >= -1e-12)


@FEW
@given(covers, st.floats(0.5, 1.0), tilts)
def test_diffuse_values_lie_within_the_beam_values(cover, ageing, tilt):
    aged = replace(cover, ageing=ageing)
    best = transmittance_and_absorptance(np.linspace(0.0, 1.0, 301), aged)[0].max()
    passed, absorbed = diffuse_transmittance_and_absorptance(aged, tilt)
    assert 0.0 < passed <= best + 1e-9
    assert passed + absorbed <= 1.0


@FEW
@given(latitudes, days, shifts, st.sampled_from([4, 8, 24, 48]))
def test_steps_add_up_to_the_day(latitude, day, shift, steps):
    """FAO-56 eq. 21 is the closed form of what the steps integrate.

    Beyond 58 deg the summer sun may be up at both ends of a long step across solar midnight; the night
    between them is then cut at the wrong place and up to 0.3 % of the day is lost.
    """
    sun = sun_over_steps([latitude], [day], steps, shift)
    summed = (sun.step_mean_cos_zenith * sun.normal_outside).mean() * 0.0864
    whole = extraterrestrial_irradiation([latitude], [day])[0, 0]
    assert abs(summed - whole) <= (1e-4 if abs(latitude) < 58.0 else 3e-3 * whole + 1e-4)
    assert np.all(sun.length <= 1.0 + 1e-12)
    assert np.all((sun.sunlit >= 0.0) & (sun.sunlit <= 1.0 + 1e-12))


@FEW
@given(latitudes, days, st.floats(0.02, 0.85), shifts)
def test_disaggregation_keeps_every_daily_value(latitude, day, clearness, shift):
    irradiation = clearness * extraterrestrial_irradiation([latitude], [day])
    temperature, wind = np.array([[21.0]]), np.array([[3.0]])
    steps = disaggregate_day(
        irradiation, [latitude], [day], temp_air=temperature, wind_speed=wind, clock_to_solar_hours=shift
    )
    sun = sun_over_steps([latitude], [day], 24, shift)
    assert np.isclose(steps.ghi.mean() * 0.0864, irradiation[0, 0], rtol=1e-12)
    assert np.isclose(steps.temp_air.mean(), 21.0, atol=1e-9)
    assert np.all(steps.wind_speed == 3.0)
    assert np.all(steps.dni >= 0.0)
    assert np.all(steps.dhi >= -1e-9)
    np.testing.assert_allclose(steps.dni * sun.up + steps.dhi, steps.ghi, atol=1e-9)
    assert np.all(steps.ghi[sun.sunlit == 0.0] == 0.0)


@FEW
@given(latitudes, days, st.integers(0, 2**32 - 1))
def test_split_closes_and_stays_positive(latitude, day, seed):
    sun = sun_over_steps([latitude], [day])
    ghi = np.random.default_rng(seed).uniform(0.0, 1.1, sun.up.shape) * 1361.0 * sun.step_mean_cos_zenith
    dni, dhi = split_global(ghi, sun)
    assert np.all(dni >= 0.0)
    assert np.all(dhi >= -1e-9)
    np.testing.assert_allclose(dni * sun.up + dhi, ghi, atol=1e-9)


@FEW
@given(covers, tilts, st.floats(0.0, 360.0), latitudes, days, st.floats(0.0, 1.0))
def test_basin_gain_grows_with_transmittance_and_walls(cover, tilt, azimuth, latitude, day, wall_gain):
    still = Still("any", (Panel(1.0, tilt, azimuth),), cover=cover, wall_gain=wall_gain)
    sun = sun_over_steps([latitude], [day])
    dni, dhi = np.where(sun.up > 0.0, 700.0, 0.0), np.where(sun.up > 0.0, 90.0, 0.0)
    ghi = dni * sun.up + dhi

    def caught(design: Still) -> np.ndarray:
        return basin_gain(design, sun, [latitude], ghi=ghi, dni=dni, dhi=dhi).transmitted

    central = caught(still)
    assert np.all(central >= 0.0)
    assert np.all(caught(replace(still, cover=replace(cover, ageing=0.8))) <= central + 1e-9)
    darker = replace(cover, extinction_per_m=cover.extinction_per_m + 50.0)
    assert np.all(caught(replace(still, cover=darker)) <= central + 1e-9)
    assert np.all(caught(replace(still, wall_gain=1.0)) >= central - 1e-9)
    basin_only = caught(replace(still, wall_gain=0.0))
    # The circumsolar share is divided by no less than LEAST_COS_ZENITH, so it can only lose.
    assert np.all(basin_only <= ghi + 1e-9)
