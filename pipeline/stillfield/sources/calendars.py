"""Day of the year as the sun knows it, in every calendar of gridded files."""

from __future__ import annotations

import numpy as np
import xarray as xr
from numpy.typing import NDArray


def solar_day_of_year(time: xr.DataArray) -> NDArray[np.int64]:
    """Day of the year for formulas of the sun's position.

    A calendar of 360 days, or of 366 in every year, is stretched over the year of 365: the models that use them
    let the sun go round once in their year.

    Parameters
    ----------
    time : DataArray
        Dates of any CF calendar.

    Returns
    -------
    ndarray of int, shape of `time`
        1 to 366.

    Examples
    --------
    >>> year = xr.date_range("2001-01-01", periods=360, calendar="360_day", use_cftime=True)
    >>> solar_day_of_year(xr.DataArray(year, dims="time"))[[0, 179, 359]].tolist()
    [1, 182, 365]
    """
    day = np.asarray(time.dt.dayofyear.values, dtype=np.int64)
    length = {"360_day": 360, "all_leap": 366, "366_day": 366}.get(str(time.dt.calendar))
    if length is None:
        return day
    return np.clip(np.round((day - 0.5) * (365.0 / length) + 0.5), 1, 366).astype(np.int64)
