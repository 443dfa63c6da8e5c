"""Upgrade: whether the modification in a still file pays at each place, over the year and month by month."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from stillfield.decisions.cost import MONTH_DAYS, StillCost
from stillfield.decisions.need import DAYS_OF_MONTHS
from stillfield.decisions.upgrade import (
    CANNOT_TELL,
    PAYS,
    PAYS_NOT,
    Comparison,
    Modification,
    compare_modification,
    verdict_in_words,
)
from stillfield.physics.rule import USUAL_EFFICIENCY, yield_from_efficiency
from stillfield.products.netcdf import MONTH_NAMES

Array = NDArray[np.floating[Any]]


@dataclass(frozen=True)
class Change:
    """A modification, and what tells the sunshine of the months that a panel for it would see.

    Attributes
    ----------
    modification : Modification
        Of the still file.
    rule_efficiency : float
        Efficiency with which the constant-efficiency rule of the run was worked. [1]
    """

    modification: Modification
    rule_efficiency: float = USUAL_EFFICIENCY


@dataclass(frozen=True)
class Upgraded:
    """What the change does at the places.

    Attributes
    ----------
    places : dict of str to ndarray
        Columns, one value per place; `stillfield.products.place_columns` explains them.
    months : dict of str to ndarray
        Columns, one value per place and month, months of a place together.
    notes : tuple of str
        The answer in sentences.
    """

    places: dict[str, NDArray[Any]]
    months: dict[str, NDArray[Any]]
    notes: tuple[str, ...]


def irradiation_of_rule(rule_litres: Array, rule_efficiency: float, *, typical: bool) -> Array:
    """Irradiation of the mean day of each month, from the litres of the constant-efficiency rule.

    The rule is a fixed share of the irradiation, so dividing it out again loses nothing.

    Parameters
    ----------
    rule_litres : ndarray, shape (12, place)
        [L m-2 month-1]
    rule_efficiency : float
        Of the run. [1]
    typical : bool
        Whether the year is a typical one, whose February has 28 days.

    Returns
    -------
    ndarray, shape (12, place)
        [MJ m-2 d-1]

    Examples
    --------
    >>> litres = np.full((12, 1), 0.30 * 23.0 / 2.3)  # 23 MJ m-2 in every month
    >>> irradiation_of_rule(litres, 0.30, typical=True)[:2, 0].round(3).tolist()
    [0.742, 0.821]
    """
    days = np.asarray(MONTH_DAYS if typical else DAYS_OF_MONTHS, dtype=float)[:, None]
    return np.asarray(rule_litres / days / float(yield_from_efficiency(1.0, rule_efficiency)))


def upgrade_places(
    table: pd.DataFrame, litres: Array, rule_litres: Array, *, cost: StillCost, change: Change, typical: bool
) -> Upgraded:
    """Compare the still with and without its modification at every place.

    Parameters
    ----------
    table : pandas.DataFrame
        Places with ``name`` and ``reason``, in the order of the litres.
    litres : ndarray, shape (12, place)
        Central litres without the change, every day worked; NaN for a place without any. [L m-2 month-1]
    rule_litres : ndarray, shape (12, place)
        By the constant-efficiency rule. [L m-2 month-1]
    cost : StillCost
        Of the still without the change.
    change : Change
        What is changed.
    typical : bool
        Whether the year is a typical one.

    Returns
    -------
    Upgraded
    """
    sunshine = irradiation_of_rule(rule_litres, change.rule_efficiency, typical=typical)
    found = compare_modification(cost, change.modification, litres, sunshine)
    reached = np.isfinite(litres).all(axis=0) & (litres.sum(axis=0) > 0.0)
    price = found.annual_cost_per_litre_with
    columns: dict[str, NDArray[Any]] = {
        "modification": np.full(reached.size, found.name, dtype=object),
        "modification_pays": np.where(reached, found.annual_verdict, ""),
        "modification_factor": found.annual_factor.central,
        "modification_factor_needed": found.break_even_factor.central,
        "modification_capital_to_break_even_per_m2": found.break_even_extra_capital.central,
        "annual_yield_modified_l_m2_year": (litres * found.monthly_factor.central).sum(axis=0),
        "cost_per_litre_modified": price.central, "cost_per_litre_modified_low": price.low,
        "cost_per_litre_modified_high": price.high,
    }
    if found.panel_wp is not None:
        columns["modification_panel_wp_per_m2"] = found.panel_wp
    columns = {name: values if values.dtype.kind != "f" else np.where(reached, values, np.nan)
               for name, values in columns.items()}
    return Upgraded(columns, _month_columns(found, litres, reached), _notes(table, found, litres, reached, cost))


def _month_columns(found: Comparison, litres: Array, reached: NDArray[np.bool_]) -> dict[str, NDArray[Any]]:
    price = found.monthly_cost_per_litre_with
    by_month = {
        "modification_pays": np.where(reached, found.monthly_verdict, ""),
        "yield_modified_l_m2_month": litres * found.monthly_factor.central,
        "cost_per_litre": found.monthly_cost_per_litre_without, "cost_per_litre_modified": price.central,
        "cost_per_litre_modified_low": price.low, "cost_per_litre_modified_high": price.high,
    }
    return {name: values.T.ravel() for name, values in by_month.items()}


def _notes(
    table: pd.DataFrame, found: Comparison, litres: Array, reached: NDArray[np.bool_], cost: StillCost
) -> tuple[str, ...]:
    """The answer at the place in the middle, then how many places agree with it."""
    if not reached.any():
        return (f"{found.name}: no place has litres, so whether it pays is not told.",)
    places = np.flatnonzero(reached)
    order = places[np.lexsort((table["id"].astype(str).to_numpy()[places], litres.sum(axis=0)[places]))]
    middle = int(order[(len(order) - 1) // 2])
    where = "At the place" if len(order) == 1 else "At the place in the middle by litres of a year"
    price, before = found.annual_cost_per_litre_with, found.annual_cost_per_litre_without
    said = [
        f"{where}, {table['name'].iloc[middle]}: {verdict_in_words(found, (middle,), currency=cost.currency)}",
        f"There a litre costs {price.central[middle]:.3g} {cost.currency} ({price.low[middle]:.3g} to "
        f"{price.high[middle]:.3g} over the interval of the factor) instead of {before[middle]:.3g}"
        f"{_dearest(found, middle)}. {_months_in_words(found.monthly_verdict[:, middle])}",
    ]
    if found.panel_wp is not None:
        said.append(f"Its panel there has {found.panel_wp[middle]:.3g} Wp per m2 of basin, enough in the month of "
                    "least sunshine.")
    if len(order) > 1:
        counted = [(word, int((found.annual_verdict[places] == word).sum())) for word in (PAYS, CANNOT_TELL, PAYS_NOT)]
        told = ", ".join(f"{word}: {count}" for word, count in counted if count)
        said.append(f"{found.name}, over all {len(order)} places with litres, {told}.")
    return tuple(said)


def _dearest(found: Comparison, place: int) -> str:
    """Cheapest and dearest month with the change, where both are known."""
    prices = found.monthly_cost_per_litre_with.central[:, place]
    if not np.isfinite(prices).all():
        return ""
    least, most = int(np.argmin(prices)), int(np.argmax(prices))
    return f", from {prices[least]:.3g} in {MONTH_NAMES[least]} to {prices[most]:.3g} in {MONTH_NAMES[most]}"


def _months_in_words(verdicts: NDArray[np.str_]) -> str:
    """Group the months by verdict.

    >>> _months_in_words(np.array(["pays"] * 12))
    'By month: pays in every month.'
    >>> _months_in_words(np.array(["does not pay"] * 10 + ["pays"] * 2))
    'By month: pays in November, December; does not pay in the other 10.'
    """
    groups = {word: [MONTH_NAMES[month] for month in np.flatnonzero(verdicts == word)]
              for word in (PAYS, CANNOT_TELL, PAYS_NOT) if (verdicts == word).any()}
    if len(groups) == 1:
        return f"By month: {next(iter(groups))} in every month."
    longest = max(groups, key=lambda word: len(groups[word]))
    told = [f"{word} in " + (f"the other {len(months)}" if word == longest else ", ".join(months))
            for word, months in sorted(groups.items(), key=lambda group: group[0] == longest)]
    return f"By month: {'; '.join(told)}."
