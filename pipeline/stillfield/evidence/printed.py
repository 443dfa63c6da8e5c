"""Printed numbers: tables, worked examples and closed forms for vapour, sun, cover, transfer and the rule."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from stillfield.evidence.row import CLOSED_FORM, MEMORY, Row
from stillfield.physics import convection, vapour
from stillfield.physics.brine import water_activity
from stillfield.physics.cover import (
    MATERIALS,
    normal_transmittance,
    surface_reflectance,
    transmittance_and_absorptance,
)
from stillfield.physics.rule import yield_from_efficiency
from stillfield.physics.still import CoverMaterial
from stillfield.physics.sun import horizontal_irradiation, sunset_hour_angle
from stillfield.physics.wind import wind_speed_at_2m

Field = float | NDArray[np.floating[Any]]

FAO = "Allen et al. 1998, FAO Irrigation and Drainage Paper 56"
BECKMAN = "Duffie & Beckman, Solar Engineering of Thermal Processes, 4th ed."
#: Solar constant of FAO-56 eq. 21. [W m-2]
FAO_SOLAR_CONSTANT = 0.0820e6 / 60.0
#: FAO-56 Annex 2 Table 2.6: latitude, day (the 15th of January, April, July, October), MJ m-2.
FAO_TABLE_2_6 = (
    (0.0, 15, 36.2), (0.0, 196, 33.9), (-20.0, 15, 41.9), (-20.0, 196, 25.0),
    (40.0, 15, 15.0), (40.0, 105, 34.7), (40.0, 196, 40.8), (40.0, 288, 22.5),
)
#: IAPWS saturation line: degC, Pa.
IAPWS_POINTS = ((20.0, 2339.0), (40.0, 7385.0), (55.0, 15763.0), (60.0, 19947.0), (70.0, 31202.0))
ANGLES_DEG = (0, 30, 45, 60, 70, 80)
#: Beam transmittance of a 4 mm pane by extinction [m-1], worked out in the design paper from Fresnel's equations and
#: Bouguer's law over all inner reflections, before this code was written.
PANE_TABLE = {4.0: (0.902, 0.899, 0.885, 0.825, 0.708, 0.443), 32.0: (0.806, 0.798, 0.779, 0.718, 0.608, 0.367)}


def book_pressure(celsius: Field) -> Field:
    """Vapour pressure by the cubic that textbooks on stills print: for their worked example only.

    Source: Kalogirou, Solar Energy Engineering, eq. 5.21. 4 % too low at 55 degC, 10 % at 70; the tool never uses it.

    Parameters
    ----------
    celsius : float or ndarray
        [degC]

    Returns
    -------
    float or ndarray
        [Pa]

    Examples
    --------
    >>> round(float(book_pressure(55.0)))
    15151
    """
    return 1e5 * (0.004516 + 7.178e-4 * celsius - 2.649e-6 * celsius**2 + 6.944e-7 * celsius**3)


def paper_pressure(celsius: Field) -> Field:
    """Vapour pressure by exp(25.317 - 5144/T), as many papers on stills print it: for comparison only.

    Parameters
    ----------
    celsius : float or ndarray
        [degC]

    Returns
    -------
    float or ndarray
        [Pa]
    """
    pressure: Field = np.exp(25.317 - 5144.0 / (np.asarray(celsius) + 273.15))
    return pressure


def rows() -> list[Row]:
    """Every printed number, in the order of the chain from sun to litres."""
    return [*_vapour(), *_sun(), *_cover(), *_transfer(), *_rule()]


def _vapour() -> list[Row]:
    iapws = "IAPWS SR1-86(1992) and steam tables (IAPWS-IF97), saturation line"
    found = [
        Row("vapour", f"saturation pressure at {t:g} °C", iapws, p,
            float(vapour.saturation_pressure(t)), 2e-4 * p, "Pa")
        for t, p in IAPWS_POINTS
    ]
    found += [
        Row("vapour", f"saturation pressure at {t:g} °C, form used in the balance", iapws, p,
            float(vapour.saturation_pressure_fast(t)), 2e-4 * p, "Pa")
        for t, p in IAPWS_POINTS
    ]
    found += [
        Row("vapour", f"saturation pressure at {t:g} °C, FAO form", f"{FAO}, Examples 3 to 5 and Annex 2 Table 2.3", p,
            float(vapour.saturation_pressure_fao56(t)) / 1000.0, 1e-3, "kPa")
        for t, p in ((15.0, 1.705), (24.5, 3.075), (25.0, 3.168))
    ]
    heat = "latent heat"
    return [
        *found,
        Row("vapour", f"{heat} at 20 °C", f"{FAO}, Annex 3 eq. 3-1 and text", 2.45,
            float(vapour.latent_heat(20.0)) / 1e6, 0.005, "MJ/kg"),
        Row("vapour", f"{heat} at 55 °C", "steam tables as quoted in Kalogirou, Solar Energy Engineering, ch. 8, still "
            "example (2370.1 kJ/kg; transcribed from a reprint of the example)", 2370.1,
            float(vapour.latent_heat(55.0)) / 1e3, 1.5, "kJ/kg"),
        Row("vapour", "water activity of sea water, 35 g/kg", f"usual figure of oceanography, {MEMORY}", 0.981,
            float(water_activity(35.0)), 1e-3, "1"),
    ]


def _fao_outside(latitude: float, day: int) -> float:
    declination = 0.409 * np.sin(2.0 * np.pi * day / 365.0 - 1.39)  # FAO-56 eq. 24
    normal = FAO_SOLAR_CONSTANT * (1.0 + 0.033 * np.cos(2.0 * np.pi * day / 365.0))  # FAO-56 eq. 23
    return float(horizontal_irradiation(latitude, declination, normal))


def _sun() -> list[Row]:
    example = f"{FAO}, Example 8 (20° S, 3 September)"
    declination = 0.409 * np.sin(2.0 * np.pi * 246 / 365.0 - 1.39)
    found = [
        Row("sun", "sunset hour angle", example, 1.527, float(sunset_hour_angle(-20.0, declination)), 5e-4, "rad"),
        Row("sun", "extraterrestrial irradiation", example, 32.2, _fao_outside(-20.0, 246), 0.05, "MJ/m2"),
    ]
    note = "with the declination and solar constant of that paper; stillfield's own declination is finer"
    return found + [
        Row("sun", f"extraterrestrial irradiation, {abs(latitude):g}° {'S' if latitude < 0.0 else 'N'}, day {day}",
            f"{FAO}, Annex 2 Table 2.6", printed, _fao_outside(latitude, day), 0.1, "MJ/m2", note)
        for latitude, day, printed in FAO_TABLE_2_6
    ]


def _cover() -> list[Row]:
    faces = f"{BECKMAN}, Example 5.1.1, {MEMORY}"
    perpendicular, parallel, _ = surface_reflectance(np.array([1.0, 0.5]), 1.526)
    face = (perpendicular + parallel) / 2.0
    pane = CoverMaterial(1.526, 32.0, 0.0023)
    passed, kept = transmittance_and_absorptance(0.5, pane)
    found = [
        Row("cover", "reflectance of one glass face at 0°", faces, 0.0434, float(face[0]), 5e-4, "1"),
        Row("cover", "reflectance of one glass face at 60°", faces, 0.093, float(face[1]), 5e-4, "1"),
        Row("cover", "transmittance of a 2.3 mm pane at 60°", f"{BECKMAN}, Example 5.3.1, {MEMORY}", 0.768,
            float(passed), 2e-3, "1"),
        Row("cover", "absorptance of a 2.3 mm pane at 60°", f"{BECKMAN}, Example 5.3.1, {MEMORY}", 0.085,
            float(kept), 1e-3, "1"),
    ]
    for extinction, printed in PANE_TABLE.items():
        made = transmittance_and_absorptance(
            np.cos(np.radians(ANGLES_DEG)), CoverMaterial(1.526, extinction, 0.004))[0]
        found += [
            Row("cover", f"transmittance of a 4 mm pane, K {extinction:g} /m, at {angle}°",
                f"{CLOSED_FORM}: Fresnel and Bouguer over all inner reflections, worked out beforehand", value,
                float(ours), 6e-4, "1")
            for angle, value, ours in zip(ANGLES_DEG, printed, made, strict=True)
        ]
    return found + [
        Row("cover", f"{name}, new, at normal incidence", "MIL-HDBK-1003/13A Table 2-3", (low + high) / 2.0,
            normal_transmittance(MATERIALS[name]) / MATERIALS[name].ageing, (high - low) / 2.0 + 1e-9, "1",
            "the extinction was set from this range, so the line shows consistency, not proof")
        for name, low, high in (("glass", 0.835, 0.85), ("polycarbonate", 0.82, 0.90), ("acrylic", 0.88, 0.92))
    ]


def _transfer() -> list[Row]:
    book = ("Kalogirou, Solar Energy Engineering, ch. 8, still example: water 55 °C, glass 45 °C, h_c 2.48 W/m2/K; "
            "transcribed from a reprint of the example")
    evaporated = float(
        convection.DUNKLE_EVAPORATION * 2.48 * (float(book_pressure(55.0)) - float(book_pressure(45.0))))
    hand = ("Dunkle 1961, Int. Developments in Heat Transfer V:895, relation by hand with the steam tables' "
            "19 947 and 12 352 Pa")
    result = convection.exchange(60.0, 50.0)
    cubic = "with the book's cubic for the vapour pressure, which the tool never uses"
    return [
        Row("transfer", "evaporative heat", book, 229.6, evaporated, 0.7, "W/m2", cubic),
        Row("transfer", "distillate", book, 0.349, evaporated * 3600.0 / float(vapour.latent_heat(55.0)), 1.4e-3,
            "kg/m2/h", f"{cubic}; the last line of the example, 3600 · 229.6 / 2 370 100, worked out here"),
        Row("transfer", "evaporative heat with true vapour pressure", book, 229.6,
            float(convection.DUNKLE_EVAPORATION * 2.48 * (
                float(vapour.saturation_pressure(55.0)) - float(vapour.saturation_pressure(45.0)))), None, "W/m2",
            "what the cubic costs: it is no reference"),
        Row("transfer", "h of Dunkle, water 60 °C, cover 50 °C", hand, 2.406, float(result.coefficient), 1e-3,
            "W/m2/K"),
        Row("transfer", "evaporative heat, water 60 °C, cover 50 °C", hand, 297.4, float(result.evaporated), 0.2,
            "W/m2"),
        Row("transfer", "wind of 3.2 m/s at 10 m brought to 2 m", f"{FAO}, Example 14", 2.4,
            float(wind_speed_at_2m(3.2, 10.0)), 0.05, "m/s"),
    ]


def _rule() -> list[Row]:
    brief = "Practical Action, Solar Distillation (technical brief), section on output; transcribed from a stored copy"
    return [
        Row("rule", "E 0.30, G 18 MJ/m2, A 1 m2", brief, 2.34, float(yield_from_efficiency(18.0)), 0.02, "L/d",
            "the brief prints 2.34 beside a latent heat of 2.26 MJ/kg, with which it would be 2.39; 2.3 MJ/kg gives "
            "the printed number"),
    ]
