"""Write: results to files, each whole or not at all, the manifest last.

Everything is first written beside its final place under a temporary name; only when all of it is there are
the files moved in, the manifest last. A folder with a manifest is therefore a finished run.
"""

from __future__ import annotations

import json
import os
import shutil
from collections.abc import Iterable, Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, Protocol

import pandas as pd
import xarray as xr

from stillfield.errors import OutputError
from stillfield.products.grid import cell_edges, is_even, is_grid
from stillfield.products.manifest import digest_dataset, digest_file, write_manifest
from stillfield.products.netcdf import MONTH_NAMES, write_netcdf
from stillfield.products.place_columns import MONTH_COLUMNS, PLACE_COLUMNS, STORAGE_COLUMNS
from stillfield.products.tables import CELL_COLUMNS, cells_frame, write_csv, write_notes
from stillfield.vocabulary import WATER_CAUTION

MANIFEST = "manifest.json"

_CURE = "Free the disk or the permissions, or choose another output.folder."

_NO_RASTERS = (
    "The cells are unevenly spaced (Gaussian latitudes, for example), which a GeoTIFF cannot hold: there is none. "
    "monthly_yield.nc has the true edges of every cell, and the maps show them."
)

#: Variables that get a GeoTIFF of their own.
RASTERS = ("monthly_yield", "monthly_yield_low", "monthly_yield_high", "annual_yield", "worst_month_yield")
#: Variables that get a map of their own.
SINGLE_MAPS = ("annual_yield", "worst_month_yield", "worst_month")


class Tables(Protocol):
    """Tables about places."""

    @property
    def places(self) -> pd.DataFrame:
        """One row per place, in the order to visit."""
        ...

    @property
    def months(self) -> pd.DataFrame:
        """One row per place and month."""
        ...

    @property
    def storage(self) -> pd.DataFrame:
        """One row per place and tank; may be empty."""
        ...


@dataclass(frozen=True)
class Results:
    """What a run found, and the words that travel with it.

    Attributes
    ----------
    monthly : xarray.Dataset
        As `aggregate` gives it.
    decision : Tables or None
        What was decided about places.
    title, method_line : str
        Heading of the products, and one line on method and still.
    resolved : str
        Text of the resolved run file.
    settings : object
        The settings, for the manifest.
    inputs : mapping
        Identity of the input files.
    land : path or None
        Outline of the land for the maps; the shipped one without it.
    remarks : list of str
        Sentences on assumptions and warnings.
    facts : mapping
        Further sections of the manifest.
    cells : xarray.Dataset or None
        Rank and score of the cells; ranked by the worst month without them.
    """

    monthly: xr.Dataset
    decision: Tables | None
    title: str
    method_line: str
    resolved: str
    settings: object
    inputs: Mapping[str, Mapping[str, Any]]
    land: Path | None = None
    remarks: tuple[str, ...] = ()
    facts: Mapping[str, Any] = field(default_factory=dict)
    cells: xr.Dataset | None = None


def check_outputs(folders: Iterable[Path], *, land: Path | None = None) -> None:
    """Find out before any weather is read whether the outputs could be written; writes nothing itself.

    Parameters
    ----------
    folders : iterable of Path
        Output folders; they need not exist.
    land : Path, optional
        Outline of the land for the maps.

    Raises
    ------
    OutputError
        If a folder could not be made or written to.
    StillfieldError
        If the outline cannot be read.
    """
    for folder in folders:
        nearest = next(path for path in (folder, *folder.absolute().parents) if path.exists())
        if not nearest.is_dir() or not os.access(nearest, os.W_OK | os.X_OK):
            got = "no permission to write" if nearest.is_dir() else "a file, not a folder"
            raise OutputError("cannot write the results", where=str(folder), got=f"{nearest}: {got}", cure=_CURE)
    if land is not None:
        from stillfield.products.coast import read_land

        read_land(land)


def check_raster(weather: xr.Dataset) -> None:
    """Find out before any yield is computed whether the cells make a map; sites always pass.

    Parameters
    ----------
    weather : xarray.Dataset
        On the cells of the result.

    Raises
    ------
    OutputError
        If the size of the cells is unknown.
    """
    if is_grid(weather):
        cell_edges(weather)


def makes_rasters(weather: xr.Dataset) -> bool:
    """Whether `write_results` writes GeoTIFF files of these cells: a grid of even spacing.

    Parameters
    ----------
    weather : xarray.Dataset
        Weather or results on cells or sites.

    Returns
    -------
    bool
    """
    return is_grid(weather) and is_even(weather)


def file_names(*, grid: bool, ranked: bool, rasters: bool = True, stored: bool = True) -> tuple[str, ...]:
    """Files `write_results` writes into a run's folder, as paths below it, in the order it gives them.

    Parameters
    ----------
    grid : bool
        Cells of a grid; sites otherwise.
    ranked : bool
        Whether there are places.
    rasters : bool
        Whether a grid makes GeoTIFF files (`makes_rasters`).
    stored : bool
        Whether tanks are sized, which needs the days of a real record.

    Returns
    -------
    tuple of str

    Examples
    --------
    >>> file_names(grid=False, ranked=False)
    ('READ-ME-FIRST.txt', 'cells.csv', 'maps/site_months.png', 'monthly_yield.nc', 'run.yaml', 'manifest.json')
    """
    maps = ["monthly_yield", *SINGLE_MAPS] if grid else ["site_months"]
    names = ["READ-ME-FIRST.txt", "cells.csv", "monthly_yield.nc", "run.yaml", *(f"maps/{name}.png" for name in maps)]
    names += [f"{name}.tif" for name in RASTERS] if grid and rasters else []
    names += ["places.csv", "places_months.csv"] if ranked else []
    names += ["places_storage.csv"] if ranked and stored else []
    return (*(path.as_posix() for path in sorted(map(Path, names))), MANIFEST)


def write_results(folder: Path, results: Results) -> list[Path]:
    """Write every product of a run into its folder.

    Parameters
    ----------
    folder : Path
        The run's own folder; made if need be. Files of an earlier run, known by its manifest, are replaced
        or removed; others stay.
    results : Results
        What to write.

    Returns
    -------
    list of Path
        The files, in the order in which a reader wants them.

    Raises
    ------
    OutputError
        If the folder cannot be written to.
    """
    with _staged(folder) as stage:
        _write_rasters(stage, results)
        _write_maps(stage, results)
        _write_tables(stage, results)
        (stage / "run.yaml").write_text(results.resolved, encoding="utf-8", newline="\n")
        files = sorted(path.relative_to(stage) for path in stage.rglob("*") if path.is_file())
        write_manifest(
            stage / MANIFEST,
            settings=results.settings,
            inputs=results.inputs,
            conventions=results.remarks,
            digests=_digests(stage, files, results),
            caution=WATER_CAUTION,
            files=[path.as_posix() for path in files],
            **results.facts,
        )
    return [folder / path for path in (*files, Path(MANIFEST))]


@contextmanager
def _staged(folder: Path) -> Iterator[Path]:
    """Give a temporary folder inside `folder` whose files are moved in when the block ends well."""
    stage = folder / ".unfinished"
    made = [path for path in (folder, *folder.absolute().parents) if not path.exists()]
    try:
        folder.mkdir(parents=True, exist_ok=True)
        shutil.rmtree(stage, ignore_errors=True)
        stage.mkdir()
        try:
            yield stage
            _move_in(stage, folder)
        finally:
            shutil.rmtree(stage, ignore_errors=True)
            for path in made:  # a run that wrote nothing leaves no empty folder
                if not any(path.iterdir()):
                    path.rmdir()
    except OSError as error:
        raise OutputError(
            "cannot write the results", where=str(folder), got=error.strerror or str(error), cure=_CURE
        ) from error


def _move_in(stage: Path, folder: Path) -> None:
    earlier = _listed(folder / MANIFEST)
    (folder / MANIFEST).unlink(missing_ok=True)
    for name in earlier:
        if (folder / name).is_file() and not (stage / name).exists():
            (folder / name).unlink()
    paths = sorted(path for path in stage.rglob("*") if path.is_file() and path.name != MANIFEST)
    for path in (*paths, stage / MANIFEST):
        target = folder / path.relative_to(stage)
        target.parent.mkdir(parents=True, exist_ok=True)
        path.replace(target)


def _listed(manifest: Path) -> list[str]:
    """Files an earlier run left in the folder of its manifest; none where there is no manifest to be trusted."""
    try:
        names = list(json.loads(manifest.read_text(encoding="utf-8"))["files"])
    except (OSError, ValueError, KeyError, TypeError):
        return []
    return [str(name) for name in names if not Path(str(name)).is_absolute() and ".." not in Path(str(name)).parts]


def _write_rasters(stage: Path, results: Results) -> None:
    monthly = results.monthly
    write_netcdf(
        monthly, stage / "monthly_yield.nc", title=results.title, history=results.method_line
    )
    if makes_rasters(monthly):
        from stillfield.products.geotiff import write_geotiff

        for name in RASTERS:
            write_geotiff(monthly, name, stage / f"{name}.tif")


def _write_maps(stage: Path, results: Results) -> None:
    from stillfield.products.page import Words

    words = Words(results.title, results.method_line)
    maps = stage / "maps"
    maps.mkdir()
    if not is_grid(results.monthly):
        from stillfield.products.site_months import write_site_months

        write_site_months(results.monthly, maps / "site_months.png", words=words)
        return
    from stillfield.products.maps import MapPlace, write_map_single, write_map_twelve_months

    places: list[MapPlace] = []
    if results.decision is not None:
        spots = results.decision.places[["latitude_deg", "longitude_deg", "rank"]]
        for latitude, longitude, rank in spots.itertuples(index=False):
            places.append(MapPlace(latitude, longitude, None if pd.isna(rank) else int(rank)))
    write_map_twelve_months(
        results.monthly, maps / "monthly_yield.png", words=words, land=results.land, places=places
    )
    for name in SINGLE_MAPS:
        write_map_single(
            results.monthly, name, maps / f"{name}.png", words=words, land=results.land, places=places
        )


def _write_tables(stage: Path, results: Results) -> None:
    cells = results.monthly if results.cells is None else results.monthly.assign(results.cells)
    write_csv(cells_frame(cells), stage / "cells.csv")
    columns = {"cells.csv": list(CELL_COLUMNS)}
    if results.decision is not None:
        tables = {"places": (results.decision.places, PLACE_COLUMNS), "places_months": (results.decision.months,
                  MONTH_COLUMNS), "places_storage": (results.decision.storage, STORAGE_COLUMNS)}
        for name, (table, known) in tables.items():
            if table.empty:
                continue
            present = [column for column in known if column.name in table]
            write_csv(_in_words(table), stage / f"{name}.csv", columns=[column.name for column in present])
            columns[f"{name}.csv"] = present
    uneven = (_NO_RASTERS,) if is_grid(results.monthly) and not makes_rasters(results.monthly) else ()
    write_notes(
        stage / "READ-ME-FIRST.txt", columns, title=results.title,
        remarks=(results.method_line, *results.remarks, *uneven),
    )


def _in_words(table: pd.DataFrame) -> pd.DataFrame:
    """The table with months by name."""
    made = table.copy()
    for name in ("sizing_month", "least_yield_month", "month"):
        if name in made:
            made[name] = [None if pd.isna(month) else MONTH_NAMES[int(month) - 1] for month in made[name]]
    return made


def _digests(stage: Path, files: Iterable[Path], results: Results) -> dict[str, str]:
    digests = {str(path.as_posix()): digest_file(stage / path) for path in files if path.suffix in (".csv", ".tif")}
    digests["monthly"] = digest_dataset(results.monthly)
    return digests
