"""What every column of the ranked table of places means, with its unit."""

from __future__ import annotations

from stillfield.products.netcdf import MONTH_NAMES
from stillfield.products.tables import Column


def _monthly() -> tuple[Column, ...]:
    return tuple(
        Column(f"yield_{month[:3].lower()}_l_m2_month", "L m-2 month-1", f"Mean distillate of {month} per basin area.")
        for month in MONTH_NAMES
    )


#: Columns in the order in which they are written; a table has those its input allows.
PLACE_COLUMNS: tuple[Column, ...] = (
    Column("rank", "1", "1 is to be visited first; equal scores share a rank; empty without litres."),
    Column("name", "", "Name of the place, as in the input."),
    Column("id", "", "Identifier of the place, as in the input."),
    Column("score", "1", "Weighted mean of the criteria, each scaled 0 to 1 over the places of this run."),
    Column("worst_month", "", "Month with the fewest litres a day: the month to size for."),
    Column("worst_month_yield_l_m2_day", "L m-2 d-1", "Mean daily distillate in that month, central condition."),
    Column("worst_month_yield_low_l_m2_day", "L m-2 d-1", "The same for a still in the low condition of the band."),
    Column("worst_month_yield_high_l_m2_day", "L m-2 d-1", "The same for a still in the high condition."),
    Column("area_per_person_m2", "m2", "Basin area that gives one person's need in the worst month."),
    Column("area_per_person_at_low_yield_m2", "m2", "The same at the low end of the band: the cautious size."),
    Column("area_per_person_at_high_yield_m2", "m2", "The same at the high end of the band."),
    Column("area_village_m2", "m2", "Basin area for everyone in the place."),
    Column("need_l_day", "L d-1", "Water needed by everyone in the place."),
    Column("litres_per_person_day_l", "L d-1", "Need per person on which the areas rest."),
    Column("annual_yield_l_m2_year", "L m-2 year-1", "Distillate of a mean year, central condition."),
    Column("annual_yield_low_l_m2_year", "L m-2 year-1", "The same, low end of the condition band."),
    Column("annual_yield_high_l_m2_year", "L m-2 year-1", "The same, high end of the condition band."),
    Column("annual_yield_rule_l_m2_year", "L m-2 year-1", "The same by the constant-efficiency rule, for comparison."),
    *_monthly(),
    Column("population", "1", "People, as in the input."),
    Column("households", "1", "Households, as in the input."),
    Column("feed_salinity_g_kg", "g kg-1", "Salinity of today's source, as in the input."),
    Column("distance_to_feed_km", "km", "Distance to the feed water, as in the input."),
    Column("latitude_deg", "deg north", "Latitude, as in the input."),
    Column("longitude_deg", "deg east", "Longitude, as in the input."),
    Column("elevation_m", "m", "Height, as in the input."),
    Column("cell_latitude_deg", "deg north", "Centre of the weather cell or station used."),
    Column("cell_longitude_deg", "deg east", "Centre of the weather cell or station used."),
    Column("cell_distance_km", "km", "Great-circle distance from the place to it."),
    Column("cell_height_difference_m", "m", "Height of the cell above the place."),
    Column("nearest_cell_missing", "", "yes where the nearest cell had no weather and another was taken."),
    Column("days_used_min", "d", "Valid days behind the month with the fewest, all years together."),
    Column("reason", "", "Why there are no litres."),
    Column("note", "", "Remark, as in the input."),
    Column("row", "1", "Row of the input table."),
)
