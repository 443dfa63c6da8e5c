"""Independent libraries asked the same questions; one that is not installed gives a line without a verdict."""

from __future__ import annotations

from collections.abc import Callable
from importlib.metadata import version
from importlib.util import find_spec
from typing import Any

import numpy as np
from numpy.typing import NDArray

from stillfield.evidence.row import Row
from stillfield.physics import brine, vapour
from stillfield.physics.cover import (
    REFERENCE_COVER,
    diffuse_transmittance_and_absorptance,
    surface_reflectance,
    transmittance_and_absorptance,
)
from stillfield.physics.sun import extraterrestrial_irradiation

_CELSIUS = np.linspace(1.0, 90.0, 60)


def rows() -> list[Row]:
    """Largest difference from each library, over the range the model works in."""
    asked: list[tuple[str, str, str, float, str, str, Callable[[], float]]] = [
        ("vapour", "saturation pressure, 1 to 90 °C", "CoolProp", 8e-5, "1", "CoolProp", _coolprop_pressure),
        ("vapour", "latent heat, 1 to 60 °C", "CoolProp", 1700.0, "J/kg", "CoolProp", _coolprop_latent),
        ("vapour", "saturation pressure, 1 to 90 °C", "PsychroLib", 4e-4, "1", "psychrolib", _psychrolib_pressure),
        ("brine", "water activity at 35 g/kg, 10 to 60 °C", "gsw", 6e-4, "1", "gsw", _gsw_activity),
        ("brine", "freezing point at 35 g/kg", "gsw", 0.03, "K", "gsw", _gsw_freezing),
        ("cover", "one glass face, 0 to 89°", "pvlib", 1e-9, "1", "pvlib", _pvlib_face),
        ("cover", "mean over an even sky, tilts of 10 to 60°", "pvlib", 1e-4, "1", "pvlib", _pvlib_sky),
        ("sun", "extraterrestrial irradiation, 35° S to 50° N", "pvlib", 0.008, "1", "pvlib", _pvlib_outside),
    ]
    return [_row(*question) for question in asked]


def _row(
    subject: str, what: str, package: str, tolerance: float, unit: str, module: str, difference: Callable[[], float]
) -> Row:
    there = find_spec(module) is not None
    source = f"{package} {version(package)}" if there else f"{package} (not installed)"
    kind = "relative" if unit == "1" else "absolute"
    return Row(subject, f"{what}: largest {kind} difference", source, 0.0, difference() if there else None, tolerance,
               unit)


def _largest(ours: object, theirs: object) -> float:
    return float(np.max(np.abs(np.asarray(ours) / np.asarray(theirs) - 1.0)))


def _coolprop_pressure() -> float:
    from CoolProp import CoolProp

    theirs = CoolProp.PropsSI("P", "T", _CELSIUS + 273.15, "Q", 0, "Water")
    return _largest(vapour.saturation_pressure(_CELSIUS), theirs)


def _coolprop_latent() -> float:
    from CoolProp import CoolProp

    celsius = _CELSIUS[_CELSIUS <= 60.0]
    steam, water = (CoolProp.PropsSI("H", "T", celsius + 273.15, "Q", q, "Water") for q in (1, 0))
    return float(np.max(np.abs(vapour.latent_heat(celsius) - (steam - water))))


def _psychrolib_pressure() -> float:
    import psychrolib

    psychrolib.SetUnitSystem(psychrolib.SI)
    theirs = [psychrolib.GetSatVapPres(float(celsius)) for celsius in _CELSIUS]
    return _largest(vapour.saturation_pressure(_CELSIUS), theirs)


def _gsw_activity() -> float:
    import gsw

    celsius = np.array([10.0, 25.0, 40.0, 60.0])
    potential = gsw.chem_potential_water_t_exact
    difference = 1000.0 * (potential(35.0, celsius, 0) - potential(0.0, celsius, 0))
    return _largest(brine.water_activity(35.0), np.exp(difference / (brine.GAS_CONSTANT_VAPOUR * (celsius + 273.15))))


def _gsw_freezing() -> float:
    import gsw

    return abs(float(brine.freezing_point(35.0)) - float(gsw.t_freezing(35.0, 0, 0)))


def _pvlib_face() -> float:
    from pvlib.iam import physical

    angle = np.linspace(0.0, 89.0, 90)
    perpendicular, parallel, _ = surface_reflectance(np.cos(np.radians(angle)), 1.526)
    through = 1.0 - (perpendicular + parallel) / 2.0
    return _largest(through / through[0], physical(angle, n=1.526, K=0.0, L=0.0))


def _pvlib_sky() -> float:
    from pvlib.iam import marion_integrate

    def beam(angle: NDArray[np.float64]) -> NDArray[np.floating[Any]]:
        return transmittance_and_absorptance(np.cos(np.radians(angle)), REFERENCE_COVER)[0]

    return max(
        abs(diffuse_transmittance_and_absorptance(REFERENCE_COVER, tilt)[0]
            - float(marion_integrate(beam, tilt, "sky")))
        for tilt in (10.0, 25.0, 60.0)
    )


def _pvlib_outside() -> float:
    """Against NREL's solar position algorithm (Reda & Andreas 2008) every ten minutes of every thirtieth day."""
    import pandas as pd
    from pvlib.solarposition import get_solarposition, nrel_earthsun_distance

    day = np.arange(5, 366, 30)
    starts = pd.Timestamp("2014-01-01", tz="UTC") + pd.to_timedelta(day - 1, unit="D")
    times = pd.DatetimeIndex([start + pd.Timedelta(minutes=5 + 10 * k) for start in starts for k in range(144)])
    distance = nrel_earthsun_distance(times).to_numpy()
    largest = 0.0
    for latitude in (-35.0, 0.0, 20.0, 50.0):
        zenith = get_solarposition(times, latitude, 0.0)["zenith"].to_numpy()
        power = 1366.1 / distance**2 * np.maximum(np.cos(np.radians(zenith)), 0.0)
        theirs = power.reshape(-1, 144).mean(axis=1) * 0.0864
        largest = max(largest, _largest(extraterrestrial_irradiation([latitude], day)[:, 0], theirs))
    return largest
