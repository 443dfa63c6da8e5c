"""The quantities stillfield speaks of: one name, one unit, physical bounds and meaning for each.

Weather variables are converted to these names and units once, in the readers. Bounds are gross-error
bounds: a value outside them is refused or counted, never bent into range.
"""

from __future__ import annotations

from dataclasses import dataclass

STEP_HOURS_DAILY = 24.0


@dataclass(frozen=True)
class Quantity:
    """One named quantity.

    Attributes
    ----------
    name : str
        Name in every dataset and table.
    unit : str
        Unit in UDUNITS spelling.
    low, high : float
        Gross-error bounds, in `unit`.
    meaning : str
        One sentence for metadata and documentation.
    standard_name : str or None
        CF standard name, where the CF table has one for exactly this quantity.
    """

    name: str
    unit: str
    low: float
    high: float
    meaning: str
    standard_name: str | None = None


def _table(*quantities: Quantity) -> dict[str, Quantity]:
    return {quantity.name: quantity for quantity in quantities}


#: Weather of a step shorter than a day; the time mark is the start of the interval.
STEP_WEATHER = _table(
    Quantity("ghi", "W m-2", -20.0, 1600.0, "Global horizontal irradiance, mean of the step",
             "surface_downwelling_shortwave_flux_in_air"),
    Quantity("dni", "W m-2", -20.0, 1400.0, "Direct normal irradiance, mean of the step",
             "direct_downwelling_shortwave_flux_in_air"),
    Quantity("dhi", "W m-2", -20.0, 1200.0, "Diffuse horizontal irradiance, mean of the step",
             "surface_diffuse_downwelling_shortwave_flux_in_air"),
    Quantity("temp_air", "degC", -70.0, 60.0, "Air temperature at 2 m", "air_temperature"),
    Quantity("temp_dew", "degC", -90.0, 40.0, "Dew-point temperature at 2 m", "dew_point_temperature"),
    Quantity("relative_humidity", "%", 0.0, 105.0, "Relative humidity at 2 m", "relative_humidity"),
    Quantity("wind_speed", "m s-1", 0.0, 75.0, "Wind speed brought to 2 m above ground", "wind_speed"),
)

#: Weather of a day, as the daily methods take it.
DAY_WEATHER = _table(
    Quantity("irradiation", "MJ m-2", 0.0, 50.0, "Global horizontal irradiation of the day"),
    Quantity("temp_air", "degC", -70.0, 60.0, "Air temperature at 2 m, mean of the day", "air_temperature"),
    Quantity("temp_air_min", "degC", -80.0, 60.0, "Lowest air temperature of the day", "air_temperature"),
    Quantity("temp_air_max", "degC", -70.0, 65.0, "Highest air temperature of the day", "air_temperature"),
    Quantity("temp_dew", "degC", -90.0, 40.0, "Dew-point temperature at 2 m, mean of the day",
             "dew_point_temperature"),
    Quantity("relative_humidity", "%", 0.0, 105.0, "Relative humidity at 2 m, mean of the day",
             "relative_humidity"),
    Quantity("wind_speed", "m s-1", 0.0, 75.0, "Wind speed brought to 2 m, mean of the day", "wind_speed"),
    Quantity("valid_hours", "h", 0.0, 24.0, "Hours of the day with valid weather"),
)

#: What the methods and stages produce. All litres are per square metre of basin.
YIELD = _table(
    Quantity("daily_yield", "L m-2", 0.0, 20.0, "Distillate of a day per basin area"),
    Quantity("monthly_yield", "L m-2 month-1", 0.0, 620.0, "Distillate of a calendar month per basin area"),
    Quantity("annual_yield", "L m-2 year-1", 0.0, 7300.0, "Distillate of a year per basin area"),
)

#: Conditions of a still, best first; results carry a central value between `low` and `high`.
CONDITIONS = ("new", "maintained", "weathered", "neglected")

#: Names of the yield methods, in the order in which they are listed to users.
METHODS = ("fitted", "heat-balance", "rule", "nafey-2000")

#: Water-safety words that stand wherever litres are shown.
WATER_CAUTION = (
    "A solar still is no barrier to volatile contaminants (fuels, solvents, some pesticides). Distillate needs "
    "materials that are safe for drinking water, disinfection and clean storage against recontamination, and "
    "remineralisation where it is the main drinking water. It must be tested before and while people drink it; "
    "local codes and licensed practice decide."
)
