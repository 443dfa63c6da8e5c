"""Audit: the hourly balance on a sample of the run's own cells and days, against what the run said there."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from stillfield.methods import Block, Method, whole_record
from stillfield.methods.heat_balance import HeatBalance
from stillfield.physics.irradiance import disaggregate_day
from stillfield.physics.still import Still

Array = NDArray[np.floating[Any]]

CELLS = 12
MOST_DAYS = 730
#: Mean monthly error above which the run warns. [1]
WARN_ABOVE = 0.05
#: Months with fewer litres per square metre than this are left out: a share of next to nothing says nothing.
LEAST_MONTH_L_M2 = 3.0
USUAL_BROKENNESS = 1.2
SEED = 7


@dataclass(frozen=True)
class Audit:
    """How far the method was from the hourly balance on a sample of its own cells and days.

    Attributes
    ----------
    cells, days, months : int
        Size of the sample; months without frost that were compared.
    mean_error, p95_error : float
        Mean and 95th percentile of the relative error of a month. [1]
    bias : float
        Relative error of all compared months together. [1]
    hours : str
        Where the hours of the balance came from: 'the weather' or 'daily values spread over the day'.
    """

    cells: int
    days: int
    months: int
    mean_error: float
    p95_error: float
    bias: float
    hours: str

    @property
    def passed(self) -> bool:
        """Whether the mean error is within what the run tolerates; True where nothing could be compared."""
        return not self.mean_error > WARN_ABOVE

    def sentence(self) -> str:
        """The audit in words."""
        if self.months == 0:
            return "Self-audit: no month without frost and gaps to compare with the hourly balance."
        text = (
            f"Self-audit against the hourly balance, {self.cells} cells, {self.days} days, {self.months} months, "
            f"hours from {self.hours}: monthly error {100 * self.mean_error:.1f} % on average, "
            f"{100 * self.p95_error:.1f} % at the 95th percentile, bias {100 * self.bias:+.1f} %."
        )
        return text if self.passed else f"WARNING: {text} The correlation does not fit this weather well."


@dataclass(frozen=True)
class Sample:
    """Weather of some cells over the first days of a record, kept while the run went by.

    Attributes
    ----------
    cells : ndarray of int, shape (cell,)
        Numbers of the cells in the region.
    block : Block
        Their weather, as the method took it.
    month : ndarray of int, shape (day,)
        A number that rises by one from month to month.
    """

    cells: NDArray[np.int64]
    block: Block
    month: NDArray[np.int64]


def audit(method: Method, annual: Array, sample: Sample, still: Still) -> Audit:
    """Run the hourly balance on a sample and compare the months.

    The sample is spread over the cells from the least to the most productive and takes the first two years of
    the record. Daily weather is spread over the hours with the cloudiness of broken skies.

    Parameters
    ----------
    method : Method
        The method to audit.
    annual : ndarray, shape (cell,)
        The run's annual yields of all cells of the region, which tell the productive cells from the others.
    sample : Sample
        Weather to choose from.
    still : Still
        The design in its central condition.

    Returns
    -------
    Audit
    """
    by_days = sample.block.steps_per_day == 1
    hours = "daily values spread over the day" if by_days else "the weather"
    picked = _spread(annual[sample.cells])
    if picked.size == 0:
        return Audit(0, 0, 0, float("nan"), float("nan"), float("nan"), hours)
    given = _some_cells(sample.block, picked)
    by_steps = _spread_over_hours(given) if by_days else given
    said = whole_record(method, given, still, [still.condition])[0].litres
    truth = whole_record(HeatBalance(), by_steps, still, [still.condition])[0]
    frost = np.zeros_like(truth.litres, dtype=bool) if truth.frost is None else truth.frost
    months = _months(truth.litres, said, frost, sample.month)
    return _compared(*months, picked.size, len(truth.litres), hours)


def _some_cells(block: Block, picked: NDArray[np.intp]) -> Block:
    return Block(
        {name: values[:, picked].astype(np.float64) for name, values in block.weather.items()},
        block.latitude[picked], block.day_of_year, block.steps_per_day, block.clock_to_solar_hours[picked],
    )


def _spread(annual: Array) -> NDArray[np.intp]:
    """Cells evenly spread by rank of their annual yield, of those that have one."""
    order: NDArray[np.intp] = np.argsort(annual, kind="stable")
    order = order[np.isfinite(annual[order])]
    if order.size <= CELLS:
        return order
    return np.asarray(order[np.round(np.linspace(0, order.size - 1, CELLS)).astype(int)])


def _spread_over_hours(days: Block) -> Block:
    """Spread daily weather over the hours of local solar days."""
    from stillfield.physics.climates import hours_of_broken_sky

    sample = days.weather
    span = None
    if "temp_air_min" in sample and "temp_air_max" in sample:
        span = sample["temp_air_max"] - sample["temp_air_min"]
    smooth = disaggregate_day(
        sample["irradiation"], days.latitude, days.day_of_year, temp_air=sample["temp_air"],
        wind_speed=sample["wind_speed"], temp_air_range=span,
    )
    ghi = hours_of_broken_sky(
        days.latitude, days.day_of_year, sample["irradiation"], brokenness=USUAL_BROKENNESS,
        random=np.random.default_rng(SEED),
    )
    weather = {"ghi": ghi, "temp_air": smooth.temp_air, "wind_speed": smooth.wind_speed}
    for name in ("temp_dew", "relative_humidity"):
        if name in sample:
            weather[name] = np.repeat(sample[name], 24, axis=0)
    return Block(weather, days.latitude, days.day_of_year, steps_per_day=24)


def _months(true: Array, said: Array, frost: NDArray[np.bool_], month: NDArray[Any]) -> tuple[Array, Array]:
    """Sums of the months that have every day in both and no frost."""
    starts = np.concatenate([[0], np.flatnonzero(np.diff(month)) + 1])
    whole = np.isfinite(true) & np.isfinite(said) & ~frost
    fine = np.logical_and.reduceat(whole, starts, axis=0)
    sums = [np.add.reduceat(np.where(whole, values, 0.0), starts, axis=0) for values in (true, said)]
    fine &= sums[0] > LEAST_MONTH_L_M2
    return sums[0][fine], sums[1][fine]


def _compared(true: Array, said: Array, cells: int, days: int, hours: str) -> Audit:
    if true.size == 0:
        return Audit(cells, days, 0, float("nan"), float("nan"), float("nan"), hours)
    error = np.abs(said / true - 1.0)
    bias = float(said.sum() / true.sum() - 1.0)
    return Audit(cells, days, true.size, float(error.mean()), float(np.quantile(error, 0.95)), bias, hours)
