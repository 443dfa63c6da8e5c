"""Tables that survive a spreadsheet: plain CSV with units in the column names, and notes beside it."""

from __future__ import annotations

import csv
import textwrap
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import NDArray

from stillfield.errors import OutputError
from stillfield.products.grid import GRID_DIMS, is_grid
from stillfield.products.netcdf import MONTH_NAMES
from stillfield.vocabulary import WATER_CAUTION

#: A spreadsheet takes text that starts with one of these for a formula or a command.
_DANGEROUS = ("=", "+", "-", "@", "\t", "\r", "\n")

#: Decimals by the unit at the end of a column name; the first that fits counts.
_DECIMALS: tuple[tuple[tuple[str, ...], int], ...] = (
    (("_deg",), 5),
    (("_l_m2_month", "_l_m2_year", "_l_m2_day", "_l_person_day", "_l_day", "_l_year", "_l", "_l_distillate"), 2),
    (("_kg_m2_month", "_kg_m2_year"), 2),
    (("_m2", "_km"), 2),
    (("_spell_days", "_wp_per_m2"), 0),
    (("_m", "_percent", "_days"), 1),
    (("_probability", "reliability", "_factor", "_factor_needed"), 2),
    (("score",), 4),
)
#: Shares, by how their name starts, get two decimals.
_SHARES = ("share_of_",)
#: Digits that count, by how the name starts: prices are known to three, what a whole village needs to four.
_DIGITS: tuple[tuple[tuple[str, ...], int], ...] = (
    (("cost_per_litre", "annual_cost", "capital_", "modification_capital"), 3),
    (("area_village", "need_l_day"), 4),
)
#: Numbers without a unit above (people, grams per kilogram) stand as they are, to at most so many decimals.
_MOST_DECIMALS = 4

_MONTH_KEYS = tuple(name[:3].lower() for name in MONTH_NAMES)


@dataclass(frozen=True)
class Column:
    """A column and what it means.

    Attributes
    ----------
    name : str
        Heading, with its unit.
    unit : str
        Unit; '' for text, '1' for numbers without one.
    meaning : str
        One sentence.
    """

    name: str
    unit: str
    meaning: str


#: Columns of the table of cells, in order; `site` leads where there are sites.
CELL_COLUMNS: tuple[Column, ...] = (
    Column("rank", "1", "1 is the best cell by the weights that cells know; equal cells share a rank."),
    Column("score", "1", "Weighted mean of what is known of cells (litres of the worst month, reliability, litres of a "
           "year), each scaled 0 to 1 over the cells of the region."),
    Column("latitude_deg", "deg north", "Latitude of the cell centre."),
    Column("longitude_deg", "deg east", "Longitude of the cell centre."),
    Column("worst_month", "", "Month with the fewest litres a day."),
    Column("worst_month_yield_l_m2_day", "L m-2 d-1", "Mean distillate of a day in the worst month."),
    Column("annual_yield_l_m2_year", "L m-2 year-1", "Distillate of a year, central value."),
    Column("annual_yield_low_l_m2_year", "L m-2 year-1", "Distillate of a year, low end of the band."),
    Column("annual_yield_high_l_m2_year", "L m-2 year-1", "Distillate of a year, high end of the band."),
    Column("annual_yield_rule_l_m2_year", "L m-2 year-1", "Distillate of a year by the constant-efficiency rule."),
    *(Column(f"yield_{key}_l_m2_month", "L m-2 month-1", f"Distillate of {name}, central value.")
      for key, name in zip(_MONTH_KEYS, MONTH_NAMES, strict=True)),
    Column("days_used_min", "d", "Valid days behind the month that has fewest, all years together."),
)
#: Variables the table of cells takes when they are there.
_OPTIONAL = ("annual_yield_low", "annual_yield_high", "annual_yield_rule", "monthly_yield_low", "monthly_yield_high",
             "monthly_yield_rule", "days_used", "cell_rank", "cell_score")
SITE_COLUMN = Column("site", "", "Identifier of the site.")


def cells_frame(monthly: xr.Dataset) -> pd.DataFrame:
    """One row per cell or site that has a value, best first.

    Parameters
    ----------
    monthly : Dataset
        Monthly result with monthly_yield, annual_yield, worst_month and worst_month_yield; band, rule, day counts
        and ``cell_rank`` with ``cell_score`` where there are any. Cells without a rank are ranked by their worst month.

    Returns
    -------
    DataFrame
        Columns of `CELL_COLUMNS`, always all of them, led by `SITE_COLUMN` for sites. Ties stand north
        before south and west before east, sites by id, so the order of the input does not matter. A cell
        with a missing month has no rank and stands last.

    Raises
    ------
    OutputError
        When a needed variable is missing.

    Examples
    --------
    >>> monthly = np.array([[60.0, 90.0], [31.0, 62.0]])[:, None, :]
    >>> grid = xr.Dataset(
    ...     {"monthly_yield": (("month", "latitude", "longitude"), monthly),
    ...      "annual_yield": (("latitude", "longitude"), [[91.0, 152.0]]),
    ...      "worst_month": (("latitude", "longitude"), [[2.0, 2.0]]),
    ...      "worst_month_yield": (("latitude", "longitude"), [[1.0, 2.0]])},
    ...     coords={"month": [1, 2], "latitude": [9.0], "longitude": [40.0, 41.0]})
    >>> cells_frame(grid)[["rank", "longitude_deg", "worst_month"]].to_dict("list")
    {'rank': [1, 2], 'longitude_deg': [41.0, 40.0], 'worst_month': ['February', 'February']}
    """
    needed = ("monthly_yield", "annual_yield", "worst_month", "worst_month_yield")
    absent = [name for name in needed if name not in monthly]
    if absent:
        raise OutputError("the table of cells lacks a variable", where=", ".join(absent))
    space = list(GRID_DIMS) if is_grid(monthly) else ["site"]
    wanted = [name for name in (*needed, *_OPTIONAL) if name in monthly]
    flat = monthly[wanted].stack(cell=space, create_index=False).transpose("month", "cell", ...).load()
    flat = flat.isel(cell=np.flatnonzero(np.isfinite(flat["monthly_yield"].values).any(axis=0)))
    frame = pd.DataFrame(_cell_values(flat, with_site=space == ["site"]))
    order = [column.name for column in CELL_COLUMNS]
    order = [SITE_COLUMN.name, *order] if "site" in frame else order
    if "rank" not in frame:
        frame["rank"] = frame["worst_month_yield_l_m2_day"].rank(method="min", ascending=False).astype("Int64")
    keys = ["rank", *(["site"] if "site" in frame else []), "latitude_deg", "longitude_deg"]
    rising = [key != "latitude_deg" for key in keys]
    return frame.sort_values(keys, ascending=rising, kind="stable", na_position="last")[order].reset_index(drop=True)


def _cell_values(flat: xr.Dataset, *, with_site: bool) -> dict[str, Any]:
    cells = flat.sizes["cell"]
    nothing = np.full(cells, np.nan)
    # Litres are rounded before they are ranked: what looks equal in the table has an equal rank.
    values: dict[str, Any] = {"site": flat["site"].values.astype(str)} if with_site else {}
    for name in GRID_DIMS:
        values[f"{name}_deg"] = np.asarray(flat[name].values, dtype=float) if name in flat.coords else nothing
    # A grid across the antimeridian runs on beyond 180; tables stay within -180..180.
    east = values["longitude_deg"]
    values["longitude_deg"] = np.where(east > 180.0, east - 360.0, east)
    worst = np.nan_to_num(np.asarray(flat["worst_month"].values, dtype=float), nan=0.0).astype(int)
    values["worst_month"] = [MONTH_NAMES[month - 1] if month else None for month in worst.tolist()]
    values["worst_month_yield_l_m2_day"] = _rounded(flat["worst_month_yield"].values)
    values["annual_yield_l_m2_year"] = _rounded(flat["annual_yield"].values)
    for end in ("low", "high", "rule"):
        values[f"annual_yield_{end}_l_m2_year"] = _annual(flat, end)
    by_month = {int(month): flat["monthly_yield"].values[row] for row, month in enumerate(flat["month"].values)}
    for number, key in enumerate(_MONTH_KEYS, start=1):
        values[f"yield_{key}_l_m2_month"] = _rounded(by_month.get(number, nothing))
    if "cell_rank" in flat:
        values["rank"] = pd.array(np.asarray(flat["cell_rank"].values, dtype=float)).astype("Int64")
    values["score"] = np.asarray(flat["cell_score"].values, dtype=float) if "cell_score" in flat else nothing
    used = flat["days_used"].values.min(axis=0) if "days_used" in flat else nothing
    values["days_used_min"] = pd.array(np.asarray(used, dtype=float)).astype("Int64")
    return values


def _annual(flat: xr.Dataset, end: str) -> NDArray[np.float64]:
    if f"annual_yield_{end}" in flat:
        return _rounded(flat[f"annual_yield_{end}"].values)
    if f"monthly_yield_{end}" in flat:
        return _rounded(flat[f"monthly_yield_{end}"].values.sum(axis=0))
    return np.full(flat.sizes["cell"], np.nan)


def _rounded(values: NDArray[Any]) -> NDArray[np.float64]:
    return np.asarray(values, dtype=np.float64).round(2)


def write_csv(frame: pd.DataFrame, path: str | Path, *, columns: Sequence[str] | None = None) -> None:
    """Write a table as plain CSV: UTF-8, commas, decimal points, one heading line.

    Numbers get the decimals their unit deserves (litres 2, degrees 5), money three digits that count, people and
    the like as many as they have; missing is empty; truth values are yes and no. Text that a spreadsheet would run as
    a formula gets an apostrophe in front; numbers stay numbers, negative ones too.

    Parameters
    ----------
    frame : DataFrame
        Its index is not written.
    path : str or Path
        File to write, exactly as named.
    columns : sequence of str, optional
        Columns to write, in this order; all of them by default.

    Raises
    ------
    OutputError
        When a column is not in the frame.

    Examples
    --------
    >>> import tempfile
    >>> frame = pd.DataFrame({"name": ["=1+1", "Ann"], "annual_yield_l_m2_year": [912.3456, -0.001]})
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     write_csv(frame, f"{folder}/a.csv")
    ...     print(Path(f"{folder}/a.csv").read_text(), end="")
    name,annual_yield_l_m2_year
    '=1+1,912.35
    Ann,0.00
    """
    names = list(frame.columns) if columns is None else list(columns)
    absent = [name for name in names if name not in frame]
    if absent:
        raise OutputError("the table lacks a column", where=", ".join(map(str, absent)))
    cells = [_text_cells(frame[name], str(name)) for name in names]
    with Path(path).open("w", encoding="utf-8", newline="") as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow([_harmless(str(name)) for name in names])
        writer.writerows(zip(*cells, strict=True))


def _text_cells(column: pd.Series[Any], name: str) -> list[str]:
    digits = next((count for starts, count in _DIGITS if name.startswith(starts)), None)
    if digits is not None:
        return [_cell(value, _decimals_of_digits(value, digits)) for value in column.tolist()]
    shares = 2 if name.startswith(_SHARES) else None
    decimals = next((count for ends, count in _DECIMALS if name.endswith(ends)), shares)
    return [_cell(value, decimals) for value in column.tolist()]


def _decimals_of_digits(value: object, digits: int) -> int | None:
    """Decimals that leave a number so many digits that count; below 0 for tens and hundreds."""
    if not isinstance(value, float | np.floating) or not np.isfinite(value) or value == 0.0:
        return None
    # The exponent is that of the rounded number: 0.0999 to two digits is 0.10.
    return digits - 1 - int(f"{float(value):.{digits - 1}e}".partition("e")[2])


def _cell(value: object, decimals: int | None) -> str:
    if value is None or value is pd.NA or value is pd.NaT:
        return ""
    if isinstance(value, bool | np.bool_):
        return "yes" if value else "no"
    if isinstance(value, int | np.integer):
        return str(int(value))
    if isinstance(value, float | np.floating):
        if not np.isfinite(value):
            return ""
        places = _MOST_DECIMALS if decimals is None else decimals
        text = f"{round(float(value), places):.{max(places, 0)}f}"
        text = text.rstrip("0").rstrip(".") if decimals is None else text
        # A loss too small to print is zero, not minus zero.
        return text.lstrip("-") if float(text) == 0.0 else text
    return _harmless(str(value))


def _harmless(text: str) -> str:
    safe = f"'{text}" if text.startswith(_DANGEROUS) else text
    # A lone carriage return would break the row: the csv writer quotes only its own line ends.
    return safe.replace("\r\n", "\n").replace("\r", "\n")


def write_notes(
    path: str | Path,
    columns: Iterable[Column] | Mapping[str, Iterable[Column]],
    *,
    title: str = "",
    caution: str = WATER_CAUTION,
    remarks: Sequence[str] = (),
) -> None:
    """Write the notes that travel with the tables: the caution first, then what every column means.

    Parameters
    ----------
    path : str or Path
        File to write, exactly as named; READ-ME-FIRST.txt beside the tables.
    columns : iterable of Column, or mapping of str to it
        Dictionary of the columns, in the order of the table; by name of the file where there are several.
    title : str
        Heading.
    caution : str
        Water-safety words.
    remarks : sequence of str
        Further paragraphs, such as the method and the still.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     write_notes(f"{folder}/n.txt", [Column("area_m2", "m2", "Basin area.")], caution="Test the water.")
    ...     print(Path(f"{folder}/n.txt").read_text(), end="")
    BEFORE ANYONE DRINKS
    Test the water.
    <BLANKLINE>
    COLUMNS
    area_m2 [m2]
        Basin area.
    """
    parts = [title] if title else []
    parts.append("BEFORE ANYONE DRINKS\n" + textwrap.fill(caution, 96))
    parts += [textwrap.fill(remark, 96) for remark in remarks]
    tables = {f"COLUMNS OF {name}": listed for name, listed in columns.items()} if isinstance(columns, Mapping) \
        else {"COLUMNS": columns}
    parts += ["\n".join([heading, *map(_entry, listed)]) for heading, listed in tables.items()]
    Path(path).write_text("\n\n".join(parts) + "\n", encoding="utf-8", newline="\n")


def _entry(column: Column) -> str:
    heading = f"{column.name} [{column.unit}]" if column.unit else column.name
    return f"{heading}\n{textwrap.fill(column.meaning, 96, initial_indent='    ', subsequent_indent='    ')}"
