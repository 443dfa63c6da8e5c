"""What a run opens and checks before it computes anything; a plan does the same and stops there.

Because both go through here, a plan finds the faults a run would find, in the same order and words.
"""

from __future__ import annotations

import logging
from dataclasses import dataclass
from pathlib import Path

import pandas as pd

from stillfield.decide import Preferences
from stillfield.decisions.need import need_of
from stillfield.decisions.ranking_score import Screen
from stillfield.decisions.ranking_uncertainty import Uncertainty
from stillfield.decisions.trial import FieldFactor
from stillfield.engine.job import Means, Prepared, prepare
from stillfield.methods.registry import get_method
from stillfield.settings.model import RunSettings
from stillfield.settings.region import Region as RegionKeys
from stillfield.sources.places import refuse_misplaced
from stillfield.stages.rank import refuse_blind
from stillfield.stages.reach import cells_to_follow
from stillfield.stages.read import Box, Mask, Region, read_places, read_weather
from stillfield.stages.size import Wishes
from stillfield.stages.survey import survey_space
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
    followed : tuple of int
        Cells near them, whose daily litres are kept.
    prepared : Prepared
        Weather, method, and how the region will be worked.
    """

    folders: tuple[Path, ...]
    places: pd.DataFrame | None
    followed: tuple[int, ...]
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
        places = read_places(settings.places.table.path, settings.places.columns.given(),
                             sheet=settings.places.sheet, layer=settings.places.layer)
        for remark in places.attrs.get("remarks", []):
            log.info("%s", remark)
        priced = all(design.cost is not None for design in settings.designs)
        refuse_blind(places, settings.rank.weights.by_criterion(), preferences_of(settings).screens, priced=priced)
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
    prepared = prepare(weather, method, stills=len(settings.stills), means=means)
    followed = () if places is None else _followed(places, prepared, len(settings.stills))
    return Opened(folders, places, followed, prepared)


def _followed(places: pd.DataFrame, prepared: Prepared, stills: int) -> tuple[int, ...]:
    """Cells to follow; places whose latitude and longitude are exchanged are refused first."""
    box = survey_space(prepared.weather)["box"]
    refuse_misplaced(places, box, where="places")
    values = stills * prepared.local.days
    return tuple(cells_to_follow(places, prepared.weather, prepared.kept(), values_per_cell=values))


def wishes_of(settings: RunSettings) -> Wishes:
    """What the people need, as the stages take it."""
    need, storage, factor = settings.need, settings.storage, settings.still_field_factor
    litres = need.figure if need.litres_per_person_day is None else need.litres_per_person_day
    return Wishes(
        need_of(litres, month_factors=need.season, people_per_household=need.people_per_household, share=need.share),
        storage.share_of_days, storage.tank_days, storage.poor_share, storage.tank_price_per_litre,
        settings.feed.flushing, settings.feed.taste_limit,
        None if factor is None else FieldFactor(**factor.model_dump()),
    )


def preferences_of(settings: RunSettings) -> Preferences:
    """How the places are ordered, as the stages take it."""
    rank = settings.rank
    screens = tuple(
        Screen(one.column, "at most" if one.at_least is None else "at least",
               float(one.at_most if one.at_least is None else one.at_least), one.because)  # type: ignore[arg-type]
        for one in rank.screens
    )
    farthest = 25.0 if settings.places is None else settings.places.max_cell_distance_km
    varied = Uncertainty(**rank.uncertainty.model_dump())
    return Preferences(rank.weights.by_criterion(), screens, varied, rank.top, farthest)
