"""Daily litres made months of, by the sums that the engine keeps, for tests of what comes after."""

from __future__ import annotations

import numpy as np
import xarray as xr

from stillfield.stages.aggregate import Months, MonthSums, aggregate, climatology


def months_of_days(
    daily: xr.Dataset, *, window: int = 50, min_valid_days_share: float = 0.8, band: tuple[float, float] = (0.8, 1.2)
) -> xr.Dataset:
    """Months of ``daily_yield`` (dims time and space), low and high ends at shares of it, rule 0.9 of it."""
    values = daily["daily_yield"]
    space = [dim for dim in values.dims if dim != "time"]
    litres = values.transpose("time", *space).to_numpy().reshape(values.sizes["time"], -1)
    months = Months.of(daily["time"], typical=daily.attrs.get("record") == "typical-year")
    sums = MonthSums.begin(months, litres.shape[1], min_valid_days_share=min_valid_days_share)
    no_flags = np.zeros(litres.shape, dtype=bool)
    for start in range(0, len(litres), window):
        some = slice(start, start + window)
        sums.add(start, [factor * litres[some] for factor in (1.0, *band, 9.0)], [no_flags[some], None])
    return aggregate(climatology(sums, rule_litres_per_mj=0.1), months, daily, space)
