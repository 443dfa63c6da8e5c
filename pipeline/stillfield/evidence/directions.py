"""Which way the litres must move, and by how much, when one thing changes; worked out now."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from stillfield.evidence.days import LATENT_MJ, household_still, made_day, scaled_days
from stillfield.evidence.row import CLOSED_FORM, MEMORY, Row, between
from stillfield.physics import convection
from stillfield.physics.cover import REFERENCE_COVER
from stillfield.physics.still import Still

STUDIES = f"common finding of studies of basin stills, {MEMORY}"
COOPER = f"Cooper 1973, Solar Energy 15:205: no single-effect basin still passes 60 % over a day ({MEMORY})"


def rows() -> list[Row]:
    """Directions, sizes and ceilings of the heat balance on made days of 20 MJ m-2, 25 °C, 2 m/s."""
    return [*_sun_and_air(), *_basin(), *_relation(), *_ceilings()]


def _exponent(still: Still, irradiation: NDArray[np.float64]) -> float:
    return float(np.polyfit(np.log(irradiation), np.log(made_day(still, irradiation).litres), 1)[0])


def _sun_and_air() -> list[Row]:
    middle, half = between(1.1, 1.4)
    good, all_days = np.linspace(22.0, 28.0, 7), np.linspace(16.0, 28.0, 7)
    note = ("made at one latitude and season, where less sun is also a duller sky: less beam through the cover and a "
            "smaller swing of the air; with the sun alone scaled the exponent keeps to the range")
    factors = np.linspace(0.75, 1.25, 7)
    scaled = float(np.polyfit(np.log(factors), np.log(scaled_days(household_still(), 22.0, factors).litres), 1)[0])
    found = [
        Row("directions", "exponent of the litres in the sunshine alone, maintained still, 16 to 28 MJ/m2", STUDIES,
            middle, scaled, half, "1"),
        Row("directions", "exponent of the litres in irradiation, new still, 22 to 28 MJ/m2", STUDIES, middle,
            _exponent(household_still("new"), good), half, "1", note),
        Row("directions", "exponent of the litres in irradiation, maintained still, 22 to 28 MJ/m2", STUDIES, middle,
            _exponent(household_still(), good), half, "1", note),
        Row("directions", "exponent of the litres in irradiation, maintained still, 16 to 28 MJ/m2", STUDIES, middle,
            _exponent(household_still(), all_days), half, "1", note),
    ]
    middle, half = between(1.0, 1.5)
    for air in (20.0, 25.0, 30.0):
        cool, warm = made_day(household_still(), 20.0, temp_air=[air - 1.0, air + 1.0]).litres
        found.append(Row("directions", f"gain per kelvin of air temperature at {air:g} °C", STUDIES, middle,
                         50.0 * float(np.log(warm / cool)), half, "%/K"))
    windy = made_day(household_still(), 20.0, wind_speed=np.linspace(0.0, 8.0, 9)).litres
    span = 100.0 * float((windy.max() - windy.min()) / (windy.max() + windy.min()))
    note = "studies disagree about the sign of the wind's effect; all find it small"
    wind = Row("directions", "half span of the litres over winds of 0 to 8 m/s", STUDIES, 4.0, span, 0.0, "%", note,
               bound="at most")
    return [*found, wind]


def _basin() -> list[Row]:
    shallow, deep = (made_day(household_still(depth_m=depth), 20.0) for depth in (0.02, 0.15))
    night = [float(1.0 - day.share_of_hours(6, 18)[0]) for day in (shallow, deep)]
    fresh, sea = (
        float(made_day(replace(household_still(), feed_salinity_g_kg=salt), 20.0).litres[0]) for salt in (0.0, 35.0)
    )
    tight, leaky = (float(made_day(_with_loss(loss), 20.0).litres[0]) for loss in (1.0, 4.0))
    middle, half = between(2.0, 6.0)
    return [
        Row("directions", "15 cm of water over 2 cm, litres of a day", STUDIES, 1.0,
            float(deep.litres[0] / shallow.litres[0]), 0.0, "1", "deeper water gives less", bound="at most"),
        Row("directions", "15 cm of water over 2 cm, share made by night", STUDIES, 1.0, night[1] / night[0], 0.0, "1",
            "and more of it by night", bound="at least"),
        Row("directions", "loss by sea water, basin at 1.5 times 35 g/kg", STUDIES, middle,
            100.0 * (1.0 - sea / fresh), half, "%"),
        Row("directions", "base loss of 1 over 4 W/m2/K, litres of a day", STUDIES, 1.0, tight / leaky, 0.0, "1",
            "better insulation always helps", bound="at least"),
    ]


def _with_loss(loss_w_m2_k: float) -> Still:
    still = household_still()
    return replace(still, conditions={"maintained": replace(still.state, loss_w_m2_k=loss_w_m2_k)})


def _relation() -> list[Row]:
    farid = ("Shawaqfeh & Farid 1995, Solar Energy 55:527, abstract: Dunkle's relation over-predicts evaporation; "
             "transcribed from a stored copy")
    hot = [float(convection.exchange(70.0, 60.0, name).evaporated) for name in ("dunkle", "moist-air")]
    day = [
        float(made_day(replace(household_still(), heat_transfer=name), 20.0).litres[0])
        for name in ("dunkle", "moist-air")
    ]
    note = ("the moist-air relation counts the flow of the vapour itself, which Dunkle's leaves out and which adds to "
            "the evaporation; what was measured to be less must lie in the convection of a real still")
    return [
        Row("directions", "moist-air over Dunkle, evaporation at 70 and 60 °C", farid, 1.0, hot[1] / hot[0], 0.0, "1",
            note, bound="at most"),
        Row("directions", "change of a day's litres by the moist-air relation", STUDIES, 0.0,
            100.0 * (day[1] / day[0] - 1.0), 7.0, "%"),
    ]


def _ceilings() -> list[Row]:
    sun = np.array([10.0, 20.0, 28.0])
    best = replace(household_still("new"), cover=REFERENCE_COVER)
    litres = made_day(best, sun, temp_air=35.0).litres
    best_share = float((LATENT_MJ * litres / sun).max())
    return [
        Row("ceilings", "efficiency of the best still, 35 °C, up to 28 MJ/m2", COOPER, 0.60, best_share, 0.0, "1",
            bound="at most"),
        Row("ceilings", "litres over H/2.4, the best still", f"{CLOSED_FORM}: a litre takes 2.4 MJ", 1.0, best_share,
            0.0, "1", bound="at most"),
    ]
