"""The fitted correlation on typical years that nobody looked at while its terms and climates were chosen.

The eleven years of test_fitted_accuracy.py gave no coefficient, but the form of the correlation was chosen with
their errors in view. These three (satellite-derived typical years shipped with pvdeg 0.7.4) were not: Miami, and
Golden and New York, a dry upland and a humid coast. Truth is the hourly balance.
"""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
import xarray as xr

import stillfield as sf
from data.fetch import fetched
from stillfield.engine.labelled import on_local_days
from whole_runs import CONFIG

#: Name, latitude, longitude, zone: from the metadata beside the files.
SITES = (("miami", 25.77, -80.18, -5.0), ("golden", 39.73, -105.18, -7.0), ("nyc", 40.73, -74.02, -5.0))
COLUMNS = {"ghi": "ghi", "dni": "dni", "dhi": "dhi", "temp_air": "temp_air", "temp_dew": "dew_point",
           "wind_speed": "wind_speed"}


@pytest.fixture(scope="module")
def weather() -> xr.Dataset:
    tables = [pd.read_csv(fetched(f"psm4_{name}.csv")) for name, *_ in SITES]
    data = {name: (("time", "site"), np.stack([table[column] for table in tables], axis=1).astype(float))
            for name, column in COLUMNS.items()}
    place = {name: ("site", [site[row] for site in SITES])
             for row, name in enumerate(("site", "latitude", "longitude", "utc_offset_hours"))}
    time = pd.date_range("2001-01-01", periods=8760, freq="h")
    return xr.Dataset(
        data, coords={**place, "time": time},
        attrs={"record": "typical-year", "step_hours": 1.0, "clock": "local-standard", "origin": "pvdeg 0.7.4"},
    )


def compared(weather: xr.Dataset, still: str, condition: str, keep: tuple[str, ...] | None) -> np.ndarray:
    """Relative errors of the months without frost."""
    design = sf.load_still(CONFIG / "stills" / f"{still}.yaml").in_condition(condition)
    truth = sf.monthly_yield(weather, design, "heat-balance")
    given = weather
    if keep is not None:
        daily = on_local_days(weather).daily[list(keep)]
        given = daily.assign_attrs(record="typical-year", step_hours=24.0, clock="own-days")
    ours = sf.monthly_yield(given, design, "fitted")["monthly_yield"]
    fine = (truth["frost_share"] == 0) & (truth["monthly_yield"] > 3.0)
    return np.abs(ours / truth["monthly_yield"] - 1.0).to_numpy()[fine.to_numpy()] * 100.0


# Measured: 1.2 to 1.6 % on average (deep basin 1.7 to 2.0), 2.1 to 3.3 % at the 95th percentile (deep basin 7 to 9:
# two months of the dry upland, near freezing, in which it yields little).
@pytest.mark.parametrize("condition", ["new", "maintained"])
@pytest.mark.parametrize("still", ["single-slope-glass", "double-slope-glass", "low-cost-film", "deep-basin"])
def test_months_from_daily_sun_warmth_and_wind(weather: xr.Dataset, still: str, condition: str) -> None:
    errors = compared(weather, still, condition, ("irradiation", "temp_air", "wind_speed"))
    assert errors.size >= 24
    assert errors.mean() <= 2.1
    assert np.percentile(errors, 95) <= (9.0 if still == "deep-basin" else 4.0)


# Measured: 0.8 to 1.4 % on average, but a deep basin 3.0 %, twice what the eleven years showed: its hourly form is
# fitted too closely to them. For deep basins with hourly weather the balance itself is the better method.
@pytest.mark.parametrize("still", ["single-slope-glass", "double-slope-glass", "low-cost-film", "deep-basin"])
def test_months_from_hours(weather: xr.Dataset, still: str) -> None:
    errors = compared(weather, still, "maintained", None)
    assert errors.mean() <= (3.2 if still == "deep-basin" else 1.5)
