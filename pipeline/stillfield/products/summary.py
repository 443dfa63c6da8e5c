"""What a person reads when a run ends: the answer, how sure it is, and where the files are."""

from __future__ import annotations

import textwrap
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr

from stillfield.products.netcdf import MONTH_NAMES
from stillfield.vocabulary import WATER_CAUTION

_WIDTH = 100
_BEST = 5


@dataclass(frozen=True)
class Summary:
    """The end of a run in words.

    Attributes
    ----------
    text : str
        What is printed.
    files : tuple of Path
        Everything written, in reading order.
    """

    text: str
    files: tuple[Path, ...]

    def __str__(self) -> str:
        """Text for a terminal."""
        return self.text


def summarise(
    monthly: xr.Dataset, ranked: pd.DataFrame | None, *, title: str, method_line: str,
    folder: Path, files: Sequence[Path], remarks: Sequence[str] = (),
) -> Summary:
    """Put the outcome of a run in words.

    Parameters
    ----------
    monthly : xarray.Dataset
        Monthly result.
    ranked : pandas.DataFrame or None
        Ranked places.
    title, method_line : str
        Name of the run; one line on method and still.
    folder : Path
        Where the files are.
    files : sequence of Path
        What was written.
    remarks : sequence of str
        Warnings and assumptions to repeat here.

    Returns
    -------
    Summary
    """
    lines = [title, method_line, "", *_litres(monthly)]
    if ranked is not None:
        lines += ["", *_places(ranked)]
    if remarks:
        lines += ["", *[line for remark in remarks for line in textwrap.wrap(remark, _WIDTH, subsequent_indent="  ")]]
    lines += ["", *textwrap.wrap(WATER_CAUTION, _WIDTH), "", f"{len(files)} files in {folder}"]
    return Summary("\n".join(lines) + "\n", tuple(files))


def _litres(monthly: xr.Dataset) -> list[str]:
    annual = monthly["annual_yield"].to_numpy().ravel()
    known = np.isfinite(annual)
    if not known.any():
        return ["No cell has litres for all twelve months; days_used in monthly_yield.nc tells which months lack days."]
    worst = monthly["worst_month_yield"].to_numpy().ravel()[known]
    low = monthly["annual_yield_low"].to_numpy().ravel()[known]
    high = monthly["annual_yield_high"].to_numpy().ravel()[known]
    rule = monthly["monthly_yield_rule"].sum("month", skipna=False).to_numpy().ravel()[known]
    what = "site" if "site" in monthly.dims else "cell"
    over = f"median of {len(worst)} {what}s (range over them)" if len(worst) > 1 else f"1 {what}"
    # A method that knows no condition gives the same at both ends; that is no band.
    band = f"   condition band {np.median(low):.0f} to {np.median(high):.0f}" if (low < high).any() else ""
    return [
        f"Litres per m2 of basin, {over}:",
        f"  a year        {_middle(annual[known])}{band}",
        f"  worst month   {_middle(worst, 2)} a day",
        f"  rule, a year  {_middle(rule)}   constant efficiency, for comparison",
    ]


def _middle(values: np.ndarray, decimals: int = 0) -> str:
    spread = f" ({values.min():.{decimals}f} to {values.max():.{decimals}f})" if len(values) > 1 else ""
    return f"{np.median(values):.{decimals}f}{spread}"


def _places(ranked: pd.DataFrame) -> list[str]:
    first = ranked[ranked["rank"].notna()].head(_BEST)
    lines = [f"First to visit, of {len(ranked)} places:" if len(first) else f"None of {len(ranked)} places is ranked:"]
    width = max([len(str(name)) for name in first["name"]] + [5])
    for row in first.to_dict("records"):
        month = MONTH_NAMES[int(row["sizing_month"]) - 1]
        least, most = row["area_per_person_at_high_yield_m2"], row["area_per_person_at_low_yield_m2"]
        band = f" ({least:.1f} to {most:.1f})" if least < most else ""
        lines.append(
            f"  {row['rank']:>2}  {row['name']:<{width}}  "
            f"{row['sizing_yield_l_m2_day']:.2f} L/m2 a day in {month}: "
            f"{row['area_per_person_m2']:.1f} m2 a person{band}{_sureness(row)}"
        )
    without = int(ranked["rank"].isna().sum())
    if without:
        lines.append(f"  {without} left out; the reasons stand in places.csv.")
    return lines


def _sureness(row: Mapping[Any, Any]) -> str:
    """Rank interval of a place, where it was drawn."""
    low, high = row.get("rank_low"), row.get("rank_high")
    return "" if pd.isna(low) or pd.isna(high) or low == high else f"; rank {low} to {high}"
