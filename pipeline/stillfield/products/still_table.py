"""Several stills of one run side by side: one row per still."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import NDArray

from stillfield.physics.still import Still
from stillfield.products.netcdf import MONTH_NAMES
from stillfield.products.staging import all_or_none
from stillfield.products.tables import Column, write_csv, write_notes

#: Files of `write_stills`, below the folder of the run.
FILES = ("stills.csv", "stills_notes.txt")

_OVER = "median over the places (without places: over the cells or sites) that have it"

STILL_COLUMNS: tuple[Column, ...] = (
    Column("still", "", "Name of the still; its results stand in the folder of that name."),
    Column("condition", "", "Condition behind the central figures."),
    Column("condition_low", "", "Condition behind the lower figures."),
    Column("condition_high", "", "Condition behind the upper figures."),
    Column("method", "", "Yield method."),
    Column("over", "", "What the medians are taken over: places, cells or sites."),
    Column("count", "1", "How many of them have litres."),
    Column("annual_yield_l_m2_year", "L m-2 year-1", f"Distillate of a year, central condition; {_OVER}."),
    Column("annual_yield_low_l_m2_year", "L m-2 year-1", f"The same, low end of the band; {_OVER}."),
    Column("annual_yield_high_l_m2_year", "L m-2 year-1", f"The same, high end of the band; {_OVER}."),
    Column("least_yield_month", "", "Month that most often has the fewest litres a day."),
    Column("worst_month_yield_l_m2_day", "L m-2 d-1", f"Mean distillate of a day in the worst month of each; "
           f"{_OVER}."),
    Column("sizing_month", "", "Month that most places are sized for."),
    Column("sizing_yield_l_m2_day", "L m-2 d-1", f"Mean daily distillate in each place's sizing month; {_OVER}."),
    Column("sizing_yield_low_l_m2_day", "L m-2 d-1", f"The same, low end of the band; {_OVER}."),
    Column("sizing_yield_high_l_m2_day", "L m-2 d-1", f"The same, high end of the band; {_OVER}."),
    Column("area_per_person_m2", "m2", f"Basin area that gives one person's need in the sizing month; {_OVER}."),
    Column("area_per_person_at_low_yield_m2", "m2", f"The same at the low end of the band; {_OVER}."),
    Column("area_per_person_at_high_yield_m2", "m2", f"The same at the high end of the band; {_OVER}."),
    Column("area_with_tank_per_person_m2", "m2", f"Basin area of a person with the chosen tank; {_OVER}."),
    Column("tank_per_person_l", "L", f"That tank; {_OVER}."),
    Column("currency", "", "Currency of the prices; only like currencies can be compared."),
    Column("cost_per_litre", "currency L-1", f"Yearly cost over the litres of a mean year; {_OVER}."),
    Column("cost_per_litre_low", "currency L-1", f"The same, low; {_OVER}."),
    Column("cost_per_litre_high", "currency L-1", f"The same, high; {_OVER}."),
    Column("annual_cost_per_person", "currency year-1", f"Yearly cost of the stills of one person; {_OVER}."),
    *(Column(f"yield_{month[:3].lower()}_l_m2_month", "L m-2 month-1", f"Distillate of {month}, central; {_OVER}.")
      for month in MONTH_NAMES),
)

#: Figures of places whose medians are taken as they are.
_OF_PLACES = tuple(
    column.name for column in STILL_COLUMNS
    if column.name.startswith(("annual_", "sizing_yield", "area_", "tank_", "cost_", "yield_"))
)


def still_row(still: Still, monthly: xr.Dataset, places: pd.DataFrame | None, *, method: str) -> dict[str, Any]:
    """Sum up what a still gives, over the places of the run or without any over its cells.

    Parameters
    ----------
    still : Still
        The design.
    monthly : xarray.Dataset
        Its monthly result.
    places : pandas.DataFrame or None
        Its places, as `stages.rank` gives them; months by number.
    method : str
        Yield method.

    Returns
    -------
    dict
        Columns of `STILL_COLUMNS` that there are figures for.
    """
    row: dict[str, Any] = {
        "still": still.name, "condition": still.condition, "condition_low": still.condition_low,
        "condition_high": still.condition_high, "method": method,
    }
    return row | (_over_cells(monthly) if places is None else _over_places(places))


def _over_cells(monthly: xr.Dataset) -> dict[str, Any]:
    known = np.isfinite(monthly["annual_yield"].to_numpy().ravel())
    row: dict[str, Any] = {"over": "sites" if "site" in monthly.dims else "cells", "count": int(known.sum())}
    for end in ("", "_low", "_high"):
        if f"annual_yield{end}" in monthly:
            row[f"annual_yield{end}_l_m2_year"] = _median(monthly[f"annual_yield{end}"].to_numpy())
    row["worst_month_yield_l_m2_day"] = _median(monthly["worst_month_yield"].to_numpy())
    row["least_yield_month"] = _commonest(monthly["worst_month"].to_numpy().ravel())
    for number, month in enumerate(MONTH_NAMES):
        row[f"yield_{month[:3].lower()}_l_m2_month"] = _median(
            monthly["monthly_yield"].transpose("month", ...).to_numpy()[number])
    return row


def _over_places(places: pd.DataFrame) -> dict[str, Any]:
    row: dict[str, Any] = {"over": "places", "count": int(places["annual_yield_l_m2_year"].notna().sum())}
    row |= {name: _median(places[name].to_numpy(dtype=float)) for name in _OF_PLACES if name in places}
    row |= {name: _commonest(places[name].to_numpy(dtype=float)) for name in ("sizing_month", "least_yield_month")}
    if "currency" in places and len(places):
        row["currency"] = places["currency"].iloc[0]
    return row


def _median(values: NDArray[Any]) -> float:
    known = values[np.isfinite(values)]
    return float(np.median(known)) if known.size else float("nan")


def _commonest(months: NDArray[Any]) -> str | None:
    """Name of the month that stands most often; of equals the first of the year."""
    known = months[np.isfinite(months)].astype(np.int64)
    known = known[(known >= 1) & (known <= len(MONTH_NAMES))]
    return MONTH_NAMES[int(np.bincount(known).argmax()) - 1] if known.size else None


def write_stills(folder: Path, rows: Sequence[dict[str, Any]], *, title: str) -> tuple[Path, ...]:
    """Write the stills of a run side by side, in the order of the run file.

    Parameters
    ----------
    folder : Path
        Folder of the run, above those of its stills.
    rows : sequence of dict
        As `still_row` gives them.
    title : str
        Heading of the notes.

    Returns
    -------
    tuple of Path

    Raises
    ------
    OutputError
        If the folder cannot be written to.
    """
    table = pd.DataFrame(list(rows))
    present = [column for column in STILL_COLUMNS if column.name in table]
    with all_or_none(folder, "the table of stills") as stage:
        write_csv(table, stage / FILES[0], columns=[column.name for column in present])
        write_notes(stage / FILES[1], present, title=title)
    return tuple(folder / name for name in FILES)


def stills_text(rows: Sequence[dict[str, Any]], folder: Path) -> str:
    """Tell the stills of a run side by side.

    Parameters
    ----------
    rows : sequence of dict
        As `still_row` gives them.
    folder : Path
        Where the table is.

    Returns
    -------
    str
        One line per still; the caution stands with every still's own summary.

    Examples
    --------
    >>> print(stills_text([{"still": "ash", "over": "cells", "annual_yield_l_m2_year": 900.0}], Path("out")), end="")
    Stills side by side, medians over the cells
      ash   900 L/m2 a year
    The table: out/stills.csv
    """
    width = max(len(row["still"]) for row in rows)
    lines = [f"Stills side by side, medians over the {rows[0]['over']}"]
    parts = (("annual_yield_l_m2_year", "{:5.0f} L/m2 a year"),
             ("sizing_yield_l_m2_day", "{:.2f} L/m2 a day in the sizing month"),
             ("area_per_person_m2", "{:.1f} m2 a person"), ("cost_per_litre", "{:.3g} {} a litre"))
    for row in rows:
        told = [words.format(row[name], row.get("currency", "")) for name, words in parts
                if name in row and np.isfinite(row[name])]
        lines.append(f"  {row['still']:<{width}} {', '.join(told)}")
    return "\n".join([*lines, f"The table: {(folder / FILES[0]).as_posix()}"]) + "\n"
