"""Small monthly results for the tests of the products; every number is invented."""

from __future__ import annotations

import numpy as np
import xarray as xr

DAYS = np.array([31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31], dtype=float)


def monthly_grid(latitude, longitude, *, missing=(), seed=0) -> xr.Dataset:
    """Monthly result on a grid; `missing` lists (row, column) without value."""
    latitude, longitude = np.asarray(latitude, dtype=float), np.asarray(longitude, dtype=float)
    shape = (12, latitude.size, longitude.size)
    month = np.arange(12)[:, None, None]
    noise = np.random.default_rng(seed).uniform(-5.0, 5.0, shape)
    values = 90.0 + 30.0 * np.sin(2 * np.pi * (month - 2.5) / 12.0) + noise
    for row, column in missing:
        values[:, row, column] = np.nan
    return _result(values, ("latitude", "longitude"), {"latitude": latitude, "longitude": longitude})


def monthly_sites(names, *, seed=0) -> xr.Dataset:
    """Monthly result at named sites."""
    count = len(names)
    values = monthly_grid([0.0], np.arange(count) + 0.5, seed=seed)["monthly_yield"].values[:, 0, :]
    return _result(values, ("site",), {
        "site": [f"s{number:03d}" for number in range(count)],
        "name": ("site", list(names)),
        "latitude": ("site", np.linspace(10.0, 12.0, count)),
        "longitude": ("site", np.linspace(-31.0, -30.0, count)),
        "elevation": ("site", np.full(count, 12.0)),
    })


def _result(values, space, coords) -> xr.Dataset:
    days = DAYS.reshape(-1, *[1] * len(space))
    per_day = values / days
    known = np.isfinite(per_day).all(axis=0)
    worst = np.argmin(np.where(known, per_day, np.inf), axis=0)
    lowest = np.where(known, np.take_along_axis(per_day, worst[None], axis=0)[0], np.nan)
    monthly = ("month", *space)
    litres, year = {"units": "L m-2 month-1"}, {"units": "L m-2 year-1"}
    return xr.Dataset(
        {
            "monthly_yield": (monthly, values, litres),
            "monthly_yield_low": (monthly, 0.8 * values, litres),
            "monthly_yield_high": (monthly, 1.15 * values, litres),
            "monthly_yield_rule": (monthly, 0.9 * values + 4.0, litres),
            "annual_yield": (space, values.sum(axis=0), year),
            "worst_month": (space, np.where(known, worst + 1.0, np.nan), {"units": "1"}),
            "worst_month_yield": (space, lowest, {"units": "L m-2 d-1"}),
            "days_used": (monthly, np.where(np.isfinite(values), days, 0.0), {"units": "d"}),
            "days_expected": (monthly, np.broadcast_to(days, values.shape).copy(), {"units": "d"}),
        },
        coords={"month": np.arange(1, 13), **coords},
        attrs={"origin": "invented weather", "record": "typical-year", "conventions": ["Months are typical."]},
    )
