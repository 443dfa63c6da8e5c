"""Published outputs of real stills beside the model in their weather, as far as the source tells it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from stillfield.evidence.days import LATENT_MJ, household_still, made_day
from stillfield.evidence.row import MEMORY, PRACTICE, Row, between
from stillfield.evidence.sites import MIAMI, open_sites
from stillfield.methods import whole_record
from stillfield.methods.heat_balance import HeatBalance
from stillfield.physics.published_fits import NAFEY_2000
from stillfield.physics.still import CoverMaterial, Panel, Still
from stillfield.physics.sun import extraterrestrial_irradiation

#: What the literature supports on litres of a specified, maintained still. [1]
LITRES_WITHIN = 0.30
#: The same for a plant whose output is itself known to 25 %: root of the sum of squares. [1]
PLANT_WITHIN = 0.39
#: Days with less sun are left out of the line through daily litres. [MJ m-2]
LEAST_SUN_MJ = 8.0
#: What the comparison with the plants shows.
DEEP_IS_LOW = (
    "our deep basins come out low, perhaps because all heat that enters the ground counts as lost, while the ground "
    "under a large basin gives part of it back"
)
PRACTICAL_ACTION = (
    "Practical Action, Solar Distillation (technical brief), section on output; transcribed from a stored copy"
)
PLANTS = (
    "Talbert, Eibling & Löf 1970, Manual on Solar Distillation; United Nations 1970, Solar Distillation; "
    f"{MEMORY}, ±25 %, partly nominal"
)


def rows() -> list[Row]:
    """Outputs of single stills, ratios between stills, trade facts and large plants."""
    return [*_days(), *_efficiencies(), *_ratios(), *_silent(), *_trade(), *_year_and_plants()]


def _litres(condition: str, irradiation: float, temp_air: float) -> float:
    return float(made_day(household_still(condition), irradiation, temp_air=temp_air).litres[0])


def _days() -> list[Row]:
    middle, half = between(2.3, 3.0)
    found = [
        Row("measured yields", "plain still in a typical sunny country, 18 MJ/m2 a day; maintained, 27 °C",
            PRACTICAL_ACTION, middle, _litres("maintained", 18.0, 27.0), half + LITRES_WITHIN * middle, "L/m2/d",
            "printed: 2.3 to 3.0; air temperature taken as usual there"),
    ]
    for irradiation in (15.0, 20.0, 25.0):
        printed = float(NAFEY_2000.litres(np.array(irradiation), np.array(25.0), np.array(2.0), 15.0))
        found.append(Row(
            "measured yields", f"laboratory still on the Suez Gulf, {irradiation:g} MJ/m2, 25 °C, 2 m/s; new",
            f"{NAFEY_2000.citation}; regression of its measurements, {MEMORY}", printed,
            _litres("new", irradiation, 25.0), LITRES_WITHIN * printed, "L/m2/d"))
    return found


@dataclass(frozen=True)
class _Efficiency:
    printed: float
    what: str
    source: str
    still: Still


def _efficiencies() -> list[Row]:
    gable = Still("gable", (Panel(0.5, 35.0), Panel(0.5, 35.0, 180.0)), wall_gain=0.0,
                  cover=CoverMaterial(extinction_per_m=22.0), condition="new")
    published = (
        _Efficiency(0.45, "insulated 1 m2 gable still, 4 mm glass at 35°; new, 2 cm",
                    "Al-Hayek & Badran 2004, Desalination 169:121 (volume and page quoted from memory), overall "
                    "efficiency; transcribed from a stored digest of the paper", gable),
        _Efficiency(0.35, "conventional still with 30 L in the basin, Egypt; maintained, 3 cm",
                    "Omara, Hamed & Kabeel 2011, Desalination 277:281, abstract; transcribed from a stored copy",
                    household_still(depth_m=0.03)),
        _Efficiency(0.34, "single-effect still, largest efficiency of its series; maintained, 2 cm",
                    "Rubio, Fernández-Zayas & Porta-Gándara 2020, J. Mar. Sci. Eng. 8:94, introduction; transcribed "
                    "from a stored copy", household_still()),
    )
    note = "irradiation is not in the text at hand; a summer day of 25 MJ/m2, 28 °C, 2 m/s at 30° N is taken"
    found = []
    for one in published:
        day = made_day(one.still, 25.0, temp_air=28.0, latitude=30.0, day_of_year=172)
        found.append(Row("measured yields", f"efficiency: {one.what}", one.source, one.printed,
                         LATENT_MJ * float(day.litres[0]) / 25.0, LITRES_WITHIN * one.printed, "1", note))
    middle, half = between(0.12, 0.55)
    spread = f"spread of published efficiencies of plain stills, {MEMORY}"
    return found + [
        Row("measured yields", f"efficiency of a {condition} still at 20 MJ/m2, 25 °C", spread, middle,
            LATENT_MJ * _litres(condition, 20.0, 25.0) / 20.0, half, "1", "the conditions were set by this spread")
        for condition in ("new", "maintained", "weathered", "neglected")
    ]


def _ratios() -> list[Row]:
    source = ("Manser & Mihelcic 2013, J. Sustainable Development 6(6):48, abstract; transcribed from a stored copy; "
              "its unit is printed as L and must be mL")
    ours = _litres("neglected", 20.0, 22.0) / _litres("maintained", 20.0, 22.0)
    return [
        Row("measured yields", f"poor over good build: {material}; neglected over maintained", source, poor / 2100.0,
            ours, LITRES_WITHIN * poor / 2100.0, "1", "the good still of the source is estimated, not measured")
        for material, poor in (("adobe", 848.0), ("concrete", 979.0))
    ]


def _silent() -> list[Row]:
    """Outputs printed without the weather that made them, so far as the text at hand goes."""
    published = (
        (1.57, "single slope, Veracruz, mean of the trial",
         "Feria-Díaz et al. 2022, Water 14:1567, abstract; transcribed from a stored copy"),
        (1.90, "single slope, southern India, one day",
         "Sathyamurthy et al. 2016, Int. J. Heat & Technology 34:597, abstract; transcribed from a stored copy"),
        (2.38, "single slope with sea water, Bangladesh, mean of the trial",
         "Hoque, Abir & Shourov 2019, Applied Water Science 9:104, abstract; transcribed from a stored copy"),
        (3.84, "glass still with sand, Adrar, one day",
         "Nasri et al. 2019, Groundwater for Sustainable Development 9:100213, abstract; transcribed from a stored "
         "copy"),
    )
    low, high = _litres("neglected", 18.0, 25.0), _litres("new", 24.0, 25.0)
    note = (f"irradiation is not in the text at hand; ours run from {low:.1f} (neglected, 18 MJ/m2) to {high:.1f} "
            "(new, 24 MJ/m2)")
    return [
        Row("measured yields", what, source, litres, None, None, "L/m2/d", note) for litres, what, source in published
    ]


def _trade() -> list[Row]:
    day = made_day(household_still(), 20.0)
    nine_hours = float(day.litres[0] * day.share_of_hours(8, 17)[0])
    return [
        Row("trade facts", "1 m2 glass still, nine hours of a sunny day; maintained, 20 MJ/m2, 25 °C, 8 to 17 h",
            PRACTICE, 2.2, nine_hours, LITRES_WITHIN * 2.2, "L"),
        Row("trade facts", "the same still, mean of these nine hours", PRACTICE, 0.24, nine_hours / 9.0,
            LITRES_WITHIN * 0.24, "L/h"),
        Row("trade facts", "product of 35 000 ppm feed", PRACTICE, 150.0, None, None, "ppm",
            "purity of the product is outside the model, which knows no carry-over of brine"),
    ]


def plant_still(condition: str = "maintained") -> Still:
    """A large basin as the plants had: 15 cm of sea water in concrete under glass ridges.

    Parameters
    ----------
    condition : str
        Central condition.

    Returns
    -------
    Still
    """
    glass = CoverMaterial(extinction_per_m=22.0, thickness_m=0.003)
    return Still(
        "plant", (Panel(0.5, 12.0), Panel(0.5, 12.0, 180.0)), cover=glass, wall_gain=0.0, brine_depth_m=0.15,
        liner_heat_capacity_j_m2_k=40000.0, feed_salinity_g_kg=35.0, concentration_factor=2.0, condition=condition,
    )


def _sunny_coast(still: Still) -> float:
    """Mean daily litres on no coast in particular: 36° N, clearness 0.58, 19 °C and 7 K to either side."""
    total = 0.0
    for month in range(12):
        day = 15 + round(30.4 * month)
        outside = float(extraterrestrial_irradiation([36.0], [day])[0, 0])
        air = 19.0 - 7.0 * float(np.cos(2.0 * np.pi * (day - 21) / 365.0))
        made = made_day(still, 0.58 * outside, temp_air=air, wind_speed=3.0, latitude=36.0, day_of_year=day)
        total += float(made.litres[0])
    return total / 12.0


def _year_and_plants() -> list[Row]:
    miami = open_sites([MIAMI])
    sun = miami.by_days.weather["irradiation"][:, 0]

    def daily(still: Still) -> NDArray[np.floating[Any]]:
        return whole_record(HeatBalance(), miami.by_steps, still, [still.condition])[0].litres[:, 0]

    litres = daily(household_still())
    bright = sun > LEAST_SUN_MJ
    slope, intercept = np.polyfit(sun[bright], litres[bright], 1)
    middle, half = between(2.4, 3.7)
    weather = "typical year of Miami (TMY2 12839), maintained"
    plant, best = (float(daily(plant_still(condition)).mean()) for condition in ("maintained", "new"))
    note = f"another place on the same coast; with the losses of a new still {best:.1f}; {DEEP_IS_LOW}"
    return [
        Row("plants and years", f"litres of a year: {weather}", f"about 1 m3 per m2 and year: {PRACTICAL_ACTION}",
            1000.0, float(litres.sum()), LITRES_WITHIN * 1000.0, "L/m2"),
        Row("plants and years", f"irradiation at which the line through daily litres begins: {weather}",
            f"Malik, Tiwari, Kumar & Sodha 1982, Solar Distillation, threshold-linear form, {MEMORY}", middle,
            float(-intercept / slope), half, "MJ/m2"),
        Row("plants and years", f"Daytona Beach, annual mean; ours: 15 cm plant, {weather}", PLANTS, 2.4, plant,
            PLANT_WITHIN * 2.4, "L/m2/d", note),
        *_far_plants(),
    ]


def _far_plants() -> list[Row]:
    coast, best = (_sunny_coast(plant_still(condition)) for condition in ("maintained", "new"))
    note = (f"order of magnitude only: one made-up sunny coast for all, no weather of the place; with the losses of a "
            f"new still {best:.1f}; {DEEP_IS_LOW}")
    return [
        Row("plants and years", f"{place}, annual mean; ours: maintained 15 cm plant on a made-up sunny coast", PLANTS,
            litres_a_day, coast, None, "L/m2/d", note)
        for place, litres_a_day in (
            ("Patmos", 3.0), ("Symi", 2.8), ("Las Marinas", 3.0), ("Coober Pedy", 2.0), ("Gwadar", 3.0))
    ]
