"""Two finished runs beside each other: what was set differently, and what differs in consequence."""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import NDArray

from stillfield.decisions.run_differences import (
    Change,
    Pairs,
    PlaceList,
    change_over,
    change_percent,
    pair_places,
    rank_among,
)
from stillfield.products.compare_facts import Beside, Cells, Places
from stillfield.products.compare_files import (
    AREA,
    COST,
    LITRES,
    MONTH_BESIDE,
    MONTH_FIGURES,
    PLACE_BESIDE,
    PLACE_FIGURES,
    Figure,
    write_comparison,
)
from stillfield.products.compare_text import SAME_PERCENT, compare_text, headline
from stillfield.products.netcdf import MONTH_NAMES
from stillfield.products.summary import Summary
from stillfield.settings.differing import differing_keys
from stillfield.stages.finished import Finished, read_finished

_MONEY = ("cost_per_litre", "annual_cost_per_person")
_CELL_FIGURES = (("annual_yield", "L m-2 a year"), ("worst_month_yield", "L m-2 a day in the worst month"))


def compare(given_a: str, given_b: str, *, into: str | None = None) -> Summary:
    """Set two finished runs beside each other.

    Parameters
    ----------
    given_a, given_b : str
        Folders of the runs; of several stills each has its own.
    into : str, optional
        Folder for the tables of differences; nothing is written without it.

    Returns
    -------
    Summary

    Raises
    ------
    StillfieldError
        If a folder holds no finished run, a damaged one, or one of another version.
    OutputError
        If the tables cannot be written.
    """
    a, b = read_finished(given_a), read_finished(given_b)
    settings = _settings(a.manifest, b.manifest)
    places, place_table, month_table = _places(a, b)
    beside = Beside(
        (_told(a), _told(b)), settings, places, _cells(a.monthly, b.monthly),
        designs_known="design" in a.manifest and "design" in b.manifest,
    )
    files: tuple[Path, ...] = ()
    if into is not None:
        files = write_comparison(
            Path(into), {"settings": settings, "places": place_table, "months": month_table},
            title="Two runs of stillfield beside each other", sentences=headline(beside),
        )
    return Summary(compare_text(beside, written=None if into is None else (into, len(files))), files)


def _told(run: Finished) -> str:
    said = ". ".join(filter(None, (run.monthly.attrs.get("title"), run.monthly.attrs.get("history"))))
    return f"{run.given}: {said}" if said else run.given


def _settings(a: Mapping[str, Any], b: Mapping[str, Any]) -> pd.DataFrame:
    """One row per setting, key of the still, input and version that differs."""
    rows = [("setting", one.key, one.unit, _value(one.a), _value(one.b), one.moves_figures)
            for one in differing_keys(a["settings"], b["settings"])]
    if "design" in a and "design" in b:
        rows += [("still", one.key, one.unit, _value(one.a), _value(one.b), one.moves_figures)
                 for one in differing_keys(_design(a["design"]), _design(b["design"]), kind="still")]
    rows += [("input", name, "", first, second, True) for name, first, second in _inputs(a["inputs"], b["inputs"])]
    versions = sorted(a["versions"].keys() | b["versions"].keys(), key=lambda name: (name != "stillfield", name))
    rows += [("version", name, "", _value(a["versions"].get(name)), _value(b["versions"].get(name)), True)
             for name in versions if a["versions"].get(name) != b["versions"].get(name)]
    table = pd.DataFrame(rows, columns=["what", "key", "unit", "a_value", "b_value", "moves_figures"])
    return table.astype({"moves_figures": object})


def _design(design: Mapping[str, Any]) -> dict[str, Any]:
    """Keys of a still as its file has them: those of the still itself at the top."""
    return {**design["still"], **{name: part for name, part in design.items() if name != "still"}}


def _inputs(a: Mapping[str, Any], b: Mapping[str, Any]) -> list[tuple[str, str, str]]:
    """Inputs that differ in what they hold; a file that only has another name is the same input."""
    found = [(name, _identity(a[name]), _identity(b[name])) for name in sorted(a.keys() & b.keys())
             if a[name] != b[name]]
    only_a, only_b = (sorted(one.keys() - other.keys()) for one, other in ((a, b), (b, a)))
    for name in only_a:
        same = next((other for other in only_b if b[other] == a[name]), None)
        if same is None:
            found.append((name, _identity(a[name]), ""))
        else:
            only_b.remove(same)
    return found + [(name, "", _identity(b[name])) for name in only_b]


def _identity(told: Mapping[str, Any]) -> str:
    digest = str(told.get("sha256", told.get("sha256_of_samples", "")))
    return f"{told.get('bytes')} bytes, {digest[:12]}"


def _value(value: Any) -> str:
    """A value on one line: numbers without idle decimals, nothing where there is none."""
    if value is None:
        return ""
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, int | float):
        return f"{value:.10g}"
    if isinstance(value, list):
        return ", ".join(map(_value, value)) or "none"
    return value if isinstance(value, str) else json.dumps(value, sort_keys=True)


def _places(a: Finished, b: Finished) -> tuple[Places | None, pd.DataFrame | None, pd.DataFrame | None]:
    if a.places is None or b.places is None:
        return None, None, None
    pairs = pair_places(_list(a.places), _list(b.places))
    table = _beside(a.places, b.places, pairs, labels=("id", "name"), beside=PLACE_BESIDE, figures=PLACE_FIGURES)
    ranks = [np.where(table["in_runs"] == "both", table[f"{run}_rank"].astype(float), np.nan) for run in "ab"]
    ranked = np.isfinite(ranks[0]) & np.isfinite(ranks[1])
    table["a_among"], table["b_among"] = (rank_among(np.where(ranked, rank, np.nan)) for rank in ranks)
    table.insert(3, "rank_change", table["b_among"] - table["a_among"])
    both = table.iloc[:len(pairs.a)]
    changes = _changes(both, PLACE_FIGURES)
    months = None
    if a.months is not None and b.months is not None:
        months = _months(a, b, pairs)
    return Places(table, months, changes, {} if months is None else _by_month(months), pairs.by_position,
                  pairs.other_place, pairs.moved), _sorted(table), months


def _list(places: pd.DataFrame) -> PlaceList:
    return PlaceList(places["id"].tolist(), places["name"].tolist(), places["latitude_deg"].to_numpy(dtype=float),
                     places["longitude_deg"].to_numpy(dtype=float))


def _beside(
    a: pd.DataFrame, b: pd.DataFrame, pairs: Pairs, *, labels: Sequence[str], beside: Sequence[str],
    figures: Sequence[Figure],
) -> pd.DataFrame:
    """Pairs first, in the order of A, then the rows of A alone and of B alone."""
    rows_a = np.concatenate([pairs.a, pairs.only_a, np.full(len(pairs.only_b), -1)]).astype(np.int64)
    rows_b = np.concatenate([pairs.b, np.full(len(pairs.only_a), -1), pairs.only_b]).astype(np.int64)
    table = pd.DataFrame({name: np.where(rows_a >= 0, _taken(a, name, rows_a), _taken(b, name, rows_b))
                          for name in labels})
    table["in_runs"] = np.where(rows_a < 0, "B only", np.where(rows_b < 0, "A only", "both"))
    for name in beside:
        if name in a or name in b:
            table[f"a_{name}"], table[f"b_{name}"] = _taken(a, name, rows_a), _taken(b, name, rows_b)
    one_money = not {"a_currency", "b_currency"} <= set(table) or len(
        {value for run in "ab" for value in table[f"{run}_currency"] if value}) == 1
    for figure in figures:
        if figure.column not in a and figure.column not in b:
            continue
        first, second = (_taken(frame, figure.column, rows).astype(float)
                         for frame, rows in ((a, rows_a), (b, rows_b)))
        table[f"a_{figure.column}"], table[f"b_{figure.column}"] = first, second
        comparable = one_money or figure.column not in _MONEY
        table[figure.difference] = second - first if comparable else np.nan
        table[figure.change] = change_percent(first, second) if comparable else np.nan
    return table


def _taken(frame: pd.DataFrame, name: str, rows: NDArray[np.int64]) -> NDArray[Any]:
    """Values of a column in some rows; nothing for row -1 or where the run has no such column."""
    if name not in frame:
        return np.full(len(rows), np.nan)
    values = frame[name].to_numpy()
    nothing: Any = np.nan if np.issubdtype(values.dtype, np.number) else ""
    if not len(values):
        return np.full(len(rows), nothing)
    return np.where(rows >= 0, values[np.maximum(rows, 0)], nothing)


def _changes(both: pd.DataFrame, figures: Sequence[Figure]) -> dict[str, Change]:
    found = {figure.column: change_over(both[f"a_{figure.column}"].to_numpy(), both[f"b_{figure.column}"].to_numpy())
             for figure in figures if figure.change in both and both[figure.change].notna().any()}
    return {column: change for column, change in found.items() if change is not None}


def _sorted(table: pd.DataFrame) -> pd.DataFrame:
    """Places by the first figure that differs."""
    by = next((figure.change for figure in (LITRES, AREA, COST)
               if figure.change in table and table[figure.change].abs().gt(SAME_PERCENT).any()), None)
    return table if by is None else _largest_first(table, by)


def _largest_first(table: pd.DataFrame, by: str) -> pd.DataFrame:
    """Rows by the size of a change; what cannot be compared stands last."""
    return table.iloc[np.argsort(-table[by].abs().fillna(-1.0).to_numpy(), kind="stable")].reset_index(drop=True)


def _months(a: Finished, b: Finished, pairs: Pairs) -> pd.DataFrame:
    """One row per place and month, largest changes first; a month without litres in one run is unpaired."""
    months_a, keys_a = _known_months(a, pairs.a)
    months_b, keys_b = _known_months(b, pairs.b)
    spot_b = {key: row for row, key in enumerate(keys_b)}
    partner = np.array([spot_b.get(key, -1) for key in keys_a], dtype=np.int64)
    there = np.flatnonzero(partner >= 0)
    only_b = np.setdiff1d(np.arange(len(keys_b)), partner[there])
    same = Pairs(there, partner[there], np.flatnonzero(partner < 0), only_b, 0, (), ())
    table = _beside(months_a, months_b, same, labels=("id", "name", "month"), beside=MONTH_BESIDE,
                    figures=MONTH_FIGURES)
    return _largest_first(table, MONTH_FIGURES[0].change)


def _known_months(run: Finished, rows: NDArray[np.int64]) -> tuple[pd.DataFrame, list[tuple[object, str]]]:
    """Months with litres, and who they are: number of the pair (of a place alone, run and id) and month."""
    assert run.places is not None
    assert run.months is not None
    known = run.months[run.months["yield_l_m2_month"].notna()].reset_index(drop=True)
    pair = {identity: number for number, identity in enumerate(run.places["id"].to_numpy()[rows])}
    return known, [(pair.get(identity, (run.given, identity)), month)
                   for identity, month in zip(known["id"], known["month"], strict=True)]


def _by_month(months: pd.DataFrame) -> dict[str, Change]:
    both = months[months["in_runs"] == "both"]
    column = MONTH_FIGURES[0].column
    found = {}
    for name in MONTH_NAMES:
        rows = both[both["month"] == name]
        change = change_over(rows[f"a_{column}"].to_numpy(dtype=float), rows[f"b_{column}"].to_numpy(dtype=float))
        if change is not None:
            found[name] = change
    return found


def _cells(a: xr.Dataset, b: xr.Dataset) -> Cells:
    """Changes over cells of the same grid, or over the sites that both runs have."""
    if ("site" in a.dims) != ("site" in b.dims):
        return Cells("", differ="one run has the cells of a grid, the other has sites")
    if "site" in a.dims:
        common = [name for name in a["site"].to_numpy() if name in set(b["site"].to_numpy())]
        if not common:
            return Cells("site", differ="no site stands in both runs")
        only = a.sizes["site"] + b.sizes["site"] - 2 * len(common)
        return _cells_of(a.sel(site=common), b.sel(site=common), "site", only=only)
    a, b = a.sortby("latitude"), b.sortby("latitude")
    if a.sizes != b.sizes or not all(_same_axis(a[name].to_numpy(), b[name].to_numpy())
                                     for name in ("latitude", "longitude")):
        return Cells("cell", differ=f"the grids differ ({_grid(a)}; {_grid(b)})")
    return _cells_of(a, b, "cell")


def _same_axis(a: NDArray[Any], b: NDArray[Any]) -> bool:
    return bool(np.all(np.abs((a - b + 180.0) % 360.0 - 180.0) < 1e-4))


def _grid(cells: xr.Dataset) -> str:
    south, north, west, east = (float(value) for name in ("latitude", "longitude")
                                for value in (cells[name].min(), cells[name].max()))
    return (f"{cells.sizes['latitude']} by {cells.sizes['longitude']} cells from {south:g} to {north:g} N, "
            f"{west:g} to {east:g} E")


def _cells_of(a: xr.Dataset, b: xr.Dataset, what: str, *, only: int = 0) -> Cells:
    space = ["site"] if what == "site" else ["latitude", "longitude"]
    flat = [run.stack(cell=space, create_index=False).transpose("month", "cell", ...) for run in (a, b)]
    changes: dict[str, Change] = {}
    for name, said in _CELL_FIGURES:
        found = change_over(*(run[name].to_numpy().astype(float) for run in flat))
        if found is not None:
            changes[said] = found
    for number, month in enumerate(MONTH_NAMES):
        found = change_over(*(run["monthly_yield"].to_numpy()[number].astype(float) for run in flat))
        if found is not None:
            changes[f"L m-2 in {month}"] = found
    known = [np.isfinite(run["annual_yield"].to_numpy()) for run in flat]
    only += int((known[0] != known[1]).sum())
    return Cells(what, changes=changes, only_in_one=only, where={said: _spot(flat[0], found.largest)
                                                                for said, found in changes.items()})


def _spot(flat: xr.Dataset, cell: int) -> str:
    one = flat.isel(cell=cell)
    if "site" in one.coords:
        return str(one["site"].item())
    return f"{float(one['latitude']):.4g} N, {float(one['longitude']):.4g} E"
