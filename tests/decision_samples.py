"""Six cells with daily litres, and places on them, for tests of what is decided about places."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr

from month_samples import months_of_days
from stillfield.physics.still import Panel, Still

STILL = Still("sample", (Panel(1.0, 15.0),), concentration_factor=1.5)
#: Days of the months of a mean year, as FAO-56 and every calendar have them. [d]
DAYS = np.array([31, 28.25, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31])
#: Mean litres of a day in cells at 10 and 11 N, 40 to 42 E; the cell at 10 N, 41 E is sea. [L m-2 d-1]
LITRES = np.array([[3.0, np.nan, 4.0], [5.0, 3.5, 2.0]])
#: Share of the mean in each month, least in January.
SEASON = np.array([0.6, 0.7, 0.9, 1.0, 1.2, 1.4, 1.4, 1.3, 1.1, 0.9, 0.8, 0.7])


def daily(
    years: Sequence[float] = (1.0,), *, record: str = "series", litres: Any = LITRES, noise: float = 0.0
) -> xr.Dataset:
    """Days from 2001 on; `years` are shares of the litres, year by year, `noise` a spread from day to day."""
    litres = np.asarray(litres, dtype=float)
    time = pd.date_range("2001-01-01", f"{2000 + len(years)}-12-31", freq="D")
    share = SEASON[time.month - 1] * np.asarray(years)[time.year - 2001]
    share = share * (1.0 + noise * np.random.default_rng(5).uniform(-1.0, 1.0, len(time)))
    coords = {"time": time, "latitude": 10.0 + np.arange(len(litres)), "longitude": 40.0 + np.arange(litres.shape[1])}
    values = share[:, None, None] * litres
    return xr.Dataset({"daily_yield": (("time", "latitude", "longitude"), values)}, coords, {"record": record})


def monthly_of(days: xr.Dataset) -> xr.Dataset:
    """Their months, the band from three quarters to five quarters of the litres."""
    return months_of_days(days, band=(0.75, 1.25))


def places(spots: Sequence[tuple[float, float]], **columns: Any) -> pd.DataFrame:
    """Places v0, v1, ... at latitude and longitude."""
    count = len(spots)
    given: Mapping[str, Any] = {
        "name": [f"v{number}" for number in range(count)], "id": [str(number) for number in range(count)],
        "latitude": [spot[0] for spot in spots], "longitude": [spot[1] for spot in spots], **columns,
    }
    return pd.DataFrame(given)
