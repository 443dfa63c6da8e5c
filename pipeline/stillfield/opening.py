"""What a run opens and checks before it computes anything; a plan does the same and stops there.

Because both go through here, a plan finds the faults a run would find, in the same order and words.
"""

from __future__ import annotations

import logging
from dataclasses import dataclass
from pathlib import Path

import pandas as pd

from stillfield.engine.job import Means, Prepared, prepare
from stillfield.methods.registry import get_method
from stillfield.settings.model import RunSettings
from stillfield.settings.region import Region as RegionKeys
from stillfield.stages.read import Box, Mask, Region, read_places, read_weather
from stillfield.stages.write import check_outputs, check_raster
from stillfield.vocabulary import STEP_HOURS_DAILY

log = logging.getLogger(__name__)


@dataclass(frozen=True)
class Opened:
    """Everything a run needs, opened and found fit.

    Attributes
    ----------
    folders : tuple of Path
        Output folder of each still, in the order of the settings.
    places : pandas.DataFrame or None
        The villages.
    prepared : Prepared
        Weather, method, and how the region will be worked.
    """

    folders: tuple[Path, ...]
    places: pd.DataFrame | None
    prepared: Prepared


def fits_folder(settings: RunSettings) -> Path:
    """Folder in which fits of stills that are not shipped are kept."""
    return Path(settings.output.folder).expanduser() / "fits"


def region_of(keys: RegionKeys) -> Region:
    """The region of a run file as the stages take it."""
    mask = None if keys.mask is None else Mask(keys.mask.file.path, keys.mask.variable, keys.mask.at_least)
    return Region(
        None if keys.box is None else Box(**keys.box.model_dump()),
        None if keys.polygon is None else keys.polygon.path, mask,
    )


def open_run(settings: RunSettings) -> Opened:
    """Open and check what a run needs; nothing is written, and of lazy weather next to nothing is read.

    Parameters
    ----------
    settings : RunSettings
        A checked run.

    Returns
    -------
    Opened

    Raises
    ------
    StillfieldError
        If an output could not be written, the table of places or the weather cannot be used, or the weather
        lacks what the method needs.
    """
    folders = tuple(
        settings.folder if len(settings.stills) == 1 else settings.folder / still.name for still in settings.stills
    )
    check_outputs(folders, land=None if settings.map.land is None else settings.map.land.path)
    if settings.compute.scheduler is not None:
        from stillfield.engine.cluster import check_scheduler

        check_scheduler(settings.compute.scheduler)
    places = None
    if settings.places is not None:
        places = read_places(settings.places.table.path, settings.places.columns.given())
    log.info("reading the weather")
    region = None if settings.region is None else region_of(settings.region)
    weather = read_weather(
        settings.weather.kind, settings.weather.names, region=region, **settings.weather.options()
    )
    log.info("%s", weather.attrs.get("origin", ""))
    hourly = float(weather.attrs["step_hours"]) < STEP_HOURS_DAILY
    method = get_method(settings.method, hourly=hourly, fits_folder=fits_folder(settings).absolute())
    check_raster(weather)
    asked = settings.compute
    means = Means(asked.workers, asked.memory, asked.scheduler, asked.fast_inflate)
    return Opened(folders, places, prepare(weather, method, stills=len(settings.stills), means=means))
