"""How far the fitted correlation is from the hourly balance on typical years that the fit never saw."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from stillfield.errors import WeatherError
from stillfield.evidence.sites import Sites
from stillfield.methods.fitted import Fitted
from stillfield.methods.heat_balance import HeatBalance
from stillfield.physics.still import Still
from stillfield.stages.audit import LEAST_MONTH_L_M2

Array = NDArray[np.floating[Any]]

#: Sites farther from the equator are left out: stills there stand in frost and dark for months. [deg]
HIGHEST_LATITUDE = 45.0
_RANGE = ("temp_air_min", "temp_air_max")
_HUMIDITY = ("temp_dew", "relative_humidity")
#: What the correlation knew: method and the weather kept from it.
PREDICTORS: dict[str, tuple[Fitted, tuple[str, ...]]] = {
    "daily H, T, u": (Fitted("daily"), _RANGE + _HUMIDITY),
    "with humidity": (Fitted("daily"), _RANGE),
    "with range": (Fitted("daily"), _HUMIDITY),
    "with both": (Fitted("daily"), ()),
    "hourly": (Fitted("hourly"), ()),
}


@dataclass(frozen=True)
class Accuracy:
    """Errors of the correlation for one still, condition and set of predictors. All in percent.

    Attributes
    ----------
    still, condition, predictors : str
        What was compared.
    sites : int
        Sites within 45 degrees of the equator.
    frost_free_months : int
        Months without frost, of ``12 * sites``.
    annual_mean, annual_max : float
        Absolute error of a site's year: mean and largest over the sites.
    annual_bias : float
        Mean signed error of a site's year.
    month_mean, month_p95 : float
        Absolute error of a month without frost: mean and 95th percentile.
    all_month_mean, all_month_p95 : float
        The same over all months of at least `LEAST_MONTH_L_M2`, frost or not.
    """

    still: str
    condition: str
    predictors: str
    sites: int
    frost_free_months: int
    annual_mean: float
    annual_max: float
    annual_bias: float
    month_mean: float
    month_p95: float
    all_month_mean: float
    all_month_p95: float


def accuracy(sites: Sites, stills: Sequence[Still]) -> list[Accuracy]:
    """Compare every still in every condition with every set of predictors.

    Parameters
    ----------
    sites : Sites
        Typical years.
    stills : sequence of Still
        Designs; all their conditions are taken.

    Returns
    -------
    list of Accuracy

    Raises
    ------
    WeatherError
        If no site lies within 45 degrees of the equator.
    """
    near = np.abs(sites.by_days.latitude) <= HIGHEST_LATITUDE
    if not near.any():
        raise WeatherError("no site to judge the correlation by", where=", ".join(sites.names),
                           wanted=f"a latitude of at most {HIGHEST_LATITUDE:g} degrees")
    found = []
    for still in stills:
        for condition in still.conditions:
            one = still.in_condition(condition)
            truth, frost = sites.monthly(HeatBalance(), one)
            for name, (method, without) in PREDICTORS.items():
                said, _ = sites.monthly(method, one, without)
                label = (still.name, condition, name)
                found.append(_compared(label, truth[:, near], said[:, near], frost[:, near]))
    return found


def _compared(label: tuple[str, str, str], truth: Array, said: Array, frost: NDArray[np.bool_]) -> Accuracy:
    error = 100.0 * np.abs(said / np.maximum(truth, 1e-6) - 1.0)
    month, warm = error[truth > LEAST_MONTH_L_M2], error[~frost]
    year = 100.0 * (said.sum(axis=0) / truth.sum(axis=0) - 1.0)
    return Accuracy(
        *label, sites=truth.shape[1], frost_free_months=warm.size,
        annual_mean=float(np.abs(year).mean()), annual_max=float(np.abs(year).max()), annual_bias=float(year.mean()),
        month_mean=float(warm.mean()), month_p95=float(np.percentile(warm, 95)),
        all_month_mean=float(month.mean()), all_month_p95=float(np.percentile(month, 95)),
    )
