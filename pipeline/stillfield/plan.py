"""What a run would do, found out without doing it: the same opening and checks, then labels and sizes only."""

from __future__ import annotations

from dataclasses import asdict
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import NDArray

from stillfield import __version__
from stillfield.decisions.nearest import great_circle_km
from stillfield.engine.job import Prepared
from stillfield.methods import Method
from stillfield.methods.fit_store import fit_state
from stillfield.methods.fitted import Fitted
from stillfield.opening import Opened, fits_folder, open_run
from stillfield.physics.still import Still
from stillfield.products.still_table import FILES as STILLS_FILES
from stillfield.settings.model import RunSettings
from stillfield.stages.forecast import Job, forecast
from stillfield.stages.survey import outside_box, survey_places, survey_space, survey_time, survey_variables
from stillfield.stages.write import file_names, makes_rasters

#: Changes when a key of the plan is renamed or removed; new keys may come without.
PLAN_VERSION = 1


def plan(settings: RunSettings, *, run_file: str | Path) -> dict[str, Any]:
    """Tell what a run would read, assume, compute and write, and roughly what it would cost.

    Nothing is written. Of gridded weather only headers, axes and, where the sunshine has to be understood, some
    values of a few cells are read; typical years are small and are read whole.

    Parameters
    ----------
    settings : RunSettings
        A checked run.
    run_file : path
        The file it came from.

    Returns
    -------
    dict
        Text, numbers, lists and dicts only, ready for JSON. A key that does not apply is None.

        - ``plan_version``, ``stillfield`` (version), ``name``, ``run_file``;
        - ``weather``: ``kind``, ``origin``, ``files``, ``bytes``, ``variables`` (list of ``name``, ``units``,
          ``quantity``, ``unit``, ``recognised_by``), ``conventions`` (list of sentences), ``time`` (``record``,
          ``clock``, ``step_hours``, ``first``, ``last``, ``first_day``, ``last_day``, ``days``, ``years``,
          ``calendar``), ``space`` (``kind``, ``cells``, ``land_cells``, ``rows``, ``columns``,
          ``resolution_deg``, ``sites``, ``box``), ``region`` (in words);
        - ``method``: ``name``, ``resolution``, ``variables`` it takes, ``variant`` of the correlation, ``has_band``;
        - ``stills``: list of ``name``, ``condition``, ``condition_low``, ``condition_high``, ``fits`` (condition
          to 'shipped', 'kept' or 'to be made'), ``folder``;
        - ``places``: ``table``, ``count``, ``outside``, ``outside_names``, ``max_cell_distance_km``;
        - ``work``: ``blocks``, ``cells`` and ``windows`` of the largest, ``records`` of the longest window, ``spans``
          in which the years are shared out, ``at_once``, ``scheduler``, ``by`` (how files are read, in words);
        - ``outputs``: every file, as paths from the working directory;
        - ``estimate``: ``bytes_to_read``, ``memory_bytes``, ``disk_bytes``, ``seconds``, ``basis``.

    Raises
    ------
    StillfieldError
        What a run would raise before it computes, in the same words.
    """
    opened = open_run(settings)
    prepared = opened.prepared
    weather, method, taken = prepared.weather, prepared.method, list(prepared.names)
    space, time = survey_space(weather), survey_time(weather, prepared.local.time.to_index())
    stills = [_still(settings, still, opened, folder)
              for still, folder in zip(settings.stills, opened.folders, strict=True)]
    files = tuple(getattr(settings.weather, "paths", ()))
    cost = forecast(Job(
        method.name, prepared.local.steps_per_day > 1, sum(path.stat().st_size for path in files),
        prepared.plan.memory_bytes, space["land_cells"] or space["cells"], time["days"], time["years"],
        len(stills), sum(state == "to be made" for told in stills for state in (told["fits"] or {}).values()),
        space["kind"] == "grid",
    ))
    return {
        "plan_version": PLAN_VERSION, "stillfield": __version__, "name": settings.name, "run_file": str(run_file),
        "weather": {
            "kind": settings.weather.kind, "origin": str(weather.attrs.get("origin", "")),
            "files": len(files), "bytes": cost.bytes_to_read, "variables": survey_variables(weather),
            "conventions": [str(said) for said in weather.attrs.get("conventions", [])],
            "time": time, "space": space,
            "region": None if settings.region is None else settings.region.told(),
        },
        "method": {
            "name": method.name, "resolution": method.resolution, "variables": taken,
            "variant": _variant(method, taken, settings.stills[0]), "has_band": method.knows_condition,
        },
        "stills": stills,
        "places": _places(settings, opened, space),
        "work": _work(prepared),
        "outputs": _outputs(settings, opened, stills, grid=space["kind"] == "grid"),
        "estimate": asdict(cost),
    }


def _work(prepared: Prepared) -> dict[str, Any]:
    blocks = prepared.plan.blocks
    return {
        "blocks": len({(block.rows.start, block.columns.start) for block in blocks}),
        "cells": max(block.cells for block in blocks), "windows": max(len(block.windows) for block in blocks),
        "records": max(block.longest for block in blocks), "spans": len({block.span for block in blocks}),
        "at_once": prepared.plan.workers, "scheduler": prepared.means.scheduler, "by": prepared.reader.told,
    }


def _variant(method: Method, taken: list[str], still: Still) -> str | None:
    return method.variant(taken, still) if isinstance(method, Fitted) else None


def _still(settings: RunSettings, still: Still, opened: Opened, folder: Path) -> dict[str, Any]:
    fits = None
    if isinstance(opened.prepared.method, Fitted):
        conditions = dict.fromkeys((still.condition, still.condition_low, still.condition_high))
        fits = {
            condition: fit_state(still.in_condition(condition), fits_folder(settings)) for condition in conditions
        }
    return {
        "name": still.name, "condition": still.condition, "condition_low": still.condition_low,
        "condition_high": still.condition_high, "fits": fits, "folder": folder.as_posix(),
    }


def _places(settings: RunSettings, opened: Opened, space: dict[str, Any]) -> dict[str, Any] | None:
    if opened.places is None or settings.places is None:
        return None
    farthest = settings.places.max_cell_distance_km
    outside = (
        outside_box(opened.places, space["box"]) if space["kind"] == "grid"
        else _nearest_site_km(opened.places, opened.prepared.weather) > farthest
    )
    return {"table": settings.places.table.given, **survey_places(opened.places, outside, farthest)}


def _nearest_site_km(places: pd.DataFrame, sites: xr.Dataset) -> NDArray[np.float64]:
    distance = great_circle_km(
        places["latitude"].to_numpy()[:, np.newaxis], places["longitude"].to_numpy()[:, np.newaxis],
        sites["latitude"].to_numpy()[np.newaxis], sites["longitude"].to_numpy()[np.newaxis],
    )
    return np.asarray(distance.min(axis=1))


def _outputs(settings: RunSettings, opened: Opened, stills: list[dict[str, Any]], *, grid: bool) -> list[str]:
    names = file_names(grid=grid, ranked=opened.places is not None, rasters=makes_rasters(opened.prepared.weather),
                       stored=bool(opened.followed) and opened.prepared.weather.attrs.get("record") != "typical-year")
    outputs = [(folder / name).as_posix() for folder in opened.folders for name in names]
    outputs += [(settings.folder / name).as_posix() for name in STILLS_FILES] if len(stills) > 1 else []
    for still, told in zip(settings.stills, stills, strict=True):
        made = [condition for condition, state in (told["fits"] or {}).items() if state == "to be made"]
        outputs += [
            (fits_folder(settings) / f"fit-{still.in_condition(condition).fingerprint()}.json").as_posix()
            for condition in made
        ]
    return outputs
