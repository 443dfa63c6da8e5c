"""Whether the sunshine of a whole record can be true: its share of what arrives outside the atmosphere.

A wrong unit or a misread meaning that makes too little of the sunshine passes every bound of a single day,
because any day may be dull. No place on land is dull for months.
"""

from __future__ import annotations

import numpy as np
import xarray as xr

from stillfield.physics.sun import extraterrestrial_irradiation
from stillfield.sources.calendars import solar_day_of_year
from stillfield.sources.tally import with_counts

#: Mean clearness below or above which a record is doubted. Monthly means of land stations lie between about 0.25
#: and 0.75 (common practice, no source). [1]
DULLEST, BRIGHTEST = 0.2, 0.85
_LEAST_DAYS = 20
#: Mean irradiation outside the atmosphere below which the sun is too low to judge by. [MJ m-2]
_LEAST_OUTSIDE = 5.0


def count_doubtful(daily: xr.Dataset) -> xr.Dataset:
    """Count the cells whose mean clearness over the record is out of range; lazy where `daily` is.

    Parameters
    ----------
    daily : Dataset
        ``irradiation`` [MJ m-2] with dims time and space, coordinate ``latitude``.

    Returns
    -------
    Dataset
        With counts 'dull' and 'bright' of quantity 'clearness'; cells with fewer than 20 valid days are not judged.
    """
    if "irradiation" not in daily or "latitude" not in daily.coords:
        return daily
    sun = daily["irradiation"]
    cells = daily["latitude"].dims[0] if daily["latitude"].dims else None
    if cells is None:
        return daily
    outside = xr.DataArray(
        extraterrestrial_irradiation(daily["latitude"].values, solar_day_of_year(daily["time"])).astype(np.float32),
        dims=("time", cells),
    )
    valid = sun.notnull()
    days = valid.sum("time")
    above = outside.where(valid).sum("time")
    judged = (days >= _LEAST_DAYS) & (above > _LEAST_OUTSIDE * days)
    received = sun.sum("time")
    return with_counts(daily, "clearness", {
        "dull": judged & (received < DULLEST * above), "bright": judged & (received > BRIGHTEST * above), "values": 1,
    })
