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
    Column("rank", "1", "1 is to be visited first; equal scores share a rank; empty for a place that is left out."),
    Column("name", "", "Name of the place, as in the input."),
    Column("id", "", "Identifier of the place, as in the input."),
    Column("rank_low", "1", "Best rank in all but 5 of 100 draws of years, model, condition and weights."),
    Column("rank_high", "1", "Worst rank in all but 5 of 100 draws."),
    Column("top_probability", "1", "Share of the draws in which the place is among the first rank.top places."),
    Column("score", "1", "Weighted mean of the criteria, each scaled 0 to 1."),
    Column("drivers", "", "What lifts the place above the average place, or holds it below."),
    Column("sizing_month", "", "Month in which the need is largest beside the yield: the month to size for."),
    Column("sizing_yield_l_m2_day", "L m-2 d-1", "Mean daily distillate in that month, central condition."),
    Column("sizing_yield_low_l_m2_day", "L m-2 d-1", "The same for a still in the low condition of the band, or with "
           "the low end of the field factor."),
    Column("sizing_yield_high_l_m2_day", "L m-2 d-1", "The same in the high condition, or with the high end."),
    Column("sizing_yield_p50_l_m2_day", "L m-2 d-1", "Reached or passed in that month in 5 of 10 years."),
    Column("sizing_yield_p75_l_m2_day", "L m-2 d-1", "Reached or passed in that month in 3 of 4 years."),
    Column("sizing_yield_p90_l_m2_day", "L m-2 d-1", "Reached or passed in that month in 9 of 10 years."),
    Column("years_of_record", "1", "Years behind these; below 10 they are rough, and 0 for a typical year."),
    Column("reliability", "1", "sizing_yield_p90 over sizing_yield_p50: 1 where all years are alike."),
    Column("least_yield_month", "", "Month with the fewest litres a day, whatever the need."),
    Column("need_l_person_day", "L d-1", "Need of a person in the sizing month that the stills are to meet."),
    Column("area_per_person_m2", "m2", "Basin area that gives one person's need in the sizing month, days "
           "out of work counted (availability in the still file)."),
    Column("area_per_person_at_low_yield_m2", "m2", "The same at the low end of the band: the cautious size."),
    Column("area_per_person_at_high_yield_m2", "m2", "The same at the high end of the band."),
    Column("area_with_tank_per_person_m2", "m2", "Smallest basin area that, with the tank beside it, meets the need on "
           "the stated share of days (storage.share_of_days)."),
    Column("tank_per_person_l", "L", "Tank of a person that goes with it: the cheapest, or where the curve turns."),
    Column("longest_poor_spell_days", "d", "Longest run of days that give less than storage.poor_share of the need, "
           "from the area for the sizing month and without a tank."),
    Column("longest_poor_spell_start", "", "First day of that run."),
    Column("area_per_household_m2", "m2", "Basin area of a household of need.people_per_household people."),
    Column("area_village_m2", "m2", "Basin area for everyone in the place."),
    Column("stills_village", "1", "Whole stills for everyone in the place."),
    Column("need_l_day", "L d-1", "Water needed by everyone in the place in the sizing month."),
    Column("currency", "", "Currency of the prices, as the still file names it."),
    Column("capital_village", "currency", "Price of these stills; tanks are not in it."),
    Column("cost_per_litre", "currency L-1", "Yearly cost over the litres of a mean year, central figures."),
    Column("cost_per_litre_low", "currency L-1", "The same with low prices, long lives and the high yield."),
    Column("cost_per_litre_high", "currency L-1", "The same with high prices, short lives and the low yield."),
    Column("annual_cost_per_person", "currency year-1", "Yearly cost of the stills of one person: pay-off, upkeep, "
           "electricity."),
    Column("modification", "", "Change to the still that is compared with the still as it stands."),
    Column("modification_pays", "", "Whether it makes the litre of a year cheaper: pays, does not pay, or cannot tell "
           "where the intervals of factor and cost leave both open."),
    Column("modification_factor", "1", "Litres of a year with it over litres without it, central figure."),
    Column("modification_factor_needed", "1", "Such a factor from which on it pays, central cost."),
    Column("modification_capital_to_break_even_per_m2", "currency m-2", "What it may cost to buy before it stops "
           "paying; below 0 it would not pay even as a gift."),
    Column("modification_panel_wp_per_m2", "Wp m-2", "Panel that drives it in the month of least sunshine."),
    Column("annual_yield_modified_l_m2_year", "L m-2 year-1", "Distillate of a mean year with it."),
    Column("cost_per_litre_modified", "currency L-1", "Cost per litre with it, central cost and factor."),
    Column("cost_per_litre_modified_low", "currency L-1", "The same with the high end of its factor."),
    Column("cost_per_litre_modified_high", "currency L-1", "The same with the low end of its factor."),
    Column("feed_l_m2_day", "L m-2 d-1", "Feed water to bring per basin area in the sizing month."),
    Column("brine_l_m2_day", "L m-2 d-1", "Brine to get rid of per basin area in the sizing month."),
    Column("salt_kg_m2_year", "kg m-2 year-1", "Salt left over per basin area in a year."),
    Column("blend_l_per_l_distillate", "L L-1", "Litres a litre of distillate would make if raw water were mixed in up "
           "to the taste limit (feed.taste_limit): information only, and only where the raw water is otherwise safe."),
    Column("annual_yield_l_m2_year", "L m-2 year-1", "Distillate of a mean year, central condition."),
    Column("annual_yield_low_l_m2_year", "L m-2 year-1", "The same, low end of the band."),
    Column("annual_yield_high_l_m2_year", "L m-2 year-1", "The same, high end of the band."),
    Column("annual_yield_p50_l_m2_year", "L m-2 year-1", "Reached or passed in 5 of 10 years."),
    Column("annual_yield_p75_l_m2_year", "L m-2 year-1", "Reached or passed in 3 of 4 years."),
    Column("annual_yield_p90_l_m2_year", "L m-2 year-1", "Reached or passed in 9 of 10 years."),
    Column("annual_yield_rule_l_m2_year", "L m-2 year-1", "Mean year by the constant-efficiency rule, for comparison."),
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
    Column("cell_height_difference_m", "m", "Height of the cell above the place; below 0 where it lies lower."),
    Column("nearest_cell_missing", "", "yes where the nearest cell had no weather and another was taken."),
    Column("days_used_min", "d", "Valid days behind the month with the fewest, all years together."),
    Column("remark", "", "Rank, certainty and neighbours in words."),
    Column("reason", "", "Why the place is not ranked; empty for a ranked one."),
    Column("note", "", "Remark, as in the input."),
    Column("row", "1", "Row of the input table."),
)

#: Columns of the table of places and months.
MONTH_COLUMNS: tuple[Column, ...] = (
    Column("name", "", "Name of the place, as in the input."),
    Column("id", "", "Identifier of the place, as in the input."),
    Column("month", "", "Month of the year."),
    Column("yield_l_m2_month", "L m-2 month-1", "Distillate of the month, mean of the years, central condition."),
    Column("yield_low_l_m2_month", "L m-2 month-1", "The same, low end of the band."),
    Column("yield_high_l_m2_month", "L m-2 month-1", "The same, high end of the band."),
    Column("yield_p50_l_m2_month", "L m-2 month-1", "Reached or passed in 5 of 10 years."),
    Column("yield_p75_l_m2_month", "L m-2 month-1", "Reached or passed in 3 of 4 years."),
    Column("yield_p90_l_m2_month", "L m-2 month-1", "Reached or passed in 9 of 10 years."),
    Column("years_of_record", "1", "Years behind these."),
    Column("need_l_person_day", "L d-1", "Need of a person that the stills are to meet."),
    Column("share_of_need_at_sized_area", "1", "What the area for the sizing month gives of that need."),
    Column("feed_l_m2_month", "L m-2 month-1", "Feed water to bring per basin area."),
    Column("brine_l_m2_month", "L m-2 month-1", "Brine to get rid of per basin area."),
    Column("salt_kg_m2_month", "kg m-2 month-1", "Salt left over per basin area."),
    Column("modification_pays", "", "Whether the change makes the litre of the month cheaper, where a month bears its "
           "share of the days of the year's cost: pays, does not pay, or cannot tell."),
    Column("yield_modified_l_m2_month", "L m-2 month-1", "Distillate of the month with the change."),
    Column("cost_per_litre", "currency L-1", "The month's share of the yearly cost over its litres, central figures."),
    Column("cost_per_litre_modified", "currency L-1", "The same with the change."),
    Column("cost_per_litre_modified_low", "currency L-1", "The same with the high end of its factor."),
    Column("cost_per_litre_modified_high", "currency L-1", "The same with the low end of its factor."),
)

#: Columns of the table of places and tanks.
STORAGE_COLUMNS: tuple[Column, ...] = (
    Column("name", "", "Name of the place, as in the input."),
    Column("id", "", "Identifier of the place, as in the input."),
    Column("tank_days", "d", "Size of the tank in days of a person's mean need."),
    Column("tank_per_person_l", "L", "Size of the tank of a person."),
    Column("area_per_person_m2", "m2", "Smallest basin area of a person that meets the need on the share of days."),
    Column("share_of_days_served", "1", "Share of days on which area and tank meet the whole need, full at first."),
    Column("share_of_water_served", "1", "Share of the water that they supply."),
    Column("share_of_days_served_carried_over", "1", "Share of days if the tank begins as the last year leaves it."),
    Column("reason", "", "Why there is no area."),
)
