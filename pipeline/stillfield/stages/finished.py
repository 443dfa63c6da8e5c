"""Finished: read back what a run left in its folder, refused where it is not whole."""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pandas as pd
import xarray as xr

from stillfield.errors import StillfieldError
from stillfield.products.manifest import MANIFEST_FORMAT, digest_file
from stillfield.products.place_columns import MONTH_COLUMNS, PLACE_COLUMNS

_MANIFEST = "manifest.json"
_MONTHLY = "monthly_yield.nc"
_AGAIN = "Run it again."
#: What is read of the months of the cells.
_OF_CELLS = ("monthly_yield", "annual_yield", "worst_month_yield")
#: Sections without which a manifest is none, and what they are.
_SECTIONS: Mapping[str, type] = {"settings": dict, "inputs": dict, "versions": dict, "files": list, "digests": dict}


@dataclass(frozen=True)
class Finished:
    """What a run left.

    Attributes
    ----------
    given : str
        Its folder, as it was named.
    manifest : mapping
        Settings, inputs, versions, design of the still.
    places, months : pandas.DataFrame or None
        Tables of places, of places and months; None where the run had no places.
    monthly : xarray.Dataset
        Litres of cells or sites.
    """

    given: str
    manifest: Mapping[str, Any]
    places: pd.DataFrame | None
    months: pd.DataFrame | None
    monthly: xr.Dataset


def read_finished(given: str | Path) -> Finished:
    """Read the folder of a finished run.

    Parameters
    ----------
    given : str or Path
        Folder with a manifest.json.

    Returns
    -------
    Finished

    Raises
    ------
    StillfieldError
        If there is no such folder or no finished run in it, if another version wrote it, or if a file is gone, cannot
        be read, or is no longer the one the run wrote.
    """
    folder = Path(given)
    manifest = _manifest(folder)
    absent = [name for name in manifest["files"] if not (folder / str(name)).is_file()]
    if absent:
        raise StillfieldError("files of the run are gone", where=str(given), got=", ".join(map(str, absent[:5])),
                              cure=_AGAIN)
    return Finished(
        str(given), manifest, _table(folder, "places.csv", manifest, {one.name: one.unit for one in PLACE_COLUMNS}),
        _table(folder, "places_months.csv", manifest, {one.name: one.unit for one in MONTH_COLUMNS}),
        _monthly(folder / _MONTHLY),
    )


def _manifest(folder: Path) -> dict[str, Any]:
    path = folder / _MANIFEST
    if not folder.exists():
        raise StillfieldError("no such folder", where=str(folder), wanted="the folder of a finished run")
    if not folder.is_dir():
        raise StillfieldError("is a file", where=str(folder), wanted="the folder of a finished run")
    if not path.is_file():
        raise _no_run_in(folder)
    try:
        manifest = json.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError) as error:
        raise StillfieldError("the manifest cannot be read", where=str(path), got=str(error), cure=_AGAIN) from None
    version = manifest.get("format") if isinstance(manifest, dict) else None
    if version is not None and version != MANIFEST_FORMAT:
        raise StillfieldError("the manifest is of another version", where=str(path), got=f"format {version}",
                              wanted=f"format {MANIFEST_FORMAT}", cure="Run it again with this stillfield.")
    lacks = [name for name, kind in _SECTIONS.items()
             if version is None or not isinstance(manifest.get(name), kind)]
    if lacks:
        raise StillfieldError("this is no manifest of a run, or a damaged one", where=str(path),
                              wanted=", ".join(lacks), cure=_AGAIN)
    return dict(manifest)


def _no_run_in(folder: Path) -> StillfieldError:
    below = sorted(path.parent.name for path in folder.glob(f"*/{_MANIFEST}"))
    if below:
        return StillfieldError("holds no run itself but folders that do", where=str(folder), got=", ".join(below),
                               cure="Name one of them; of several stills each has its own.")
    return StillfieldError("holds no finished run: there is no manifest.json", where=str(folder))


def _table(folder: Path, name: str, manifest: Mapping[str, Any], units: Mapping[str, str]) -> pd.DataFrame | None:
    """A table as numbers and texts, None where the run wrote none."""
    path = folder / name
    if name not in manifest["files"]:
        return None
    if digest_file(path) != manifest["digests"].get(name):
        raise StillfieldError("is not what the run wrote", where=str(path),
                              cure="It was changed or cut off since; run it again, or put the original back.")
    text = {column: str for column, unit in units.items() if unit == ""}
    empty = {column: [""] for column in units if column not in text}
    return pd.read_csv(path, dtype=text, keep_default_na=False, na_values=empty)


def _monthly(path: Path) -> xr.Dataset:
    try:
        with xr.open_dataset(path, engine="netcdf4") as stored:
            lacks = [name for name in _OF_CELLS if name not in stored]
            if not lacks:
                return stored[list(_OF_CELLS)].load()
    except (OSError, ValueError, RuntimeError) as error:
        raise StillfieldError("cannot be read as NetCDF", where=str(path), got=str(error), cure=_AGAIN) from None
    raise StillfieldError("lacks variables", where=str(path), wanted=", ".join(lacks), cure=_AGAIN)
