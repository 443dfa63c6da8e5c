"""From weather and stills to the months of every cell: the whole of a run's arithmetic behind one function."""

from __future__ import annotations

import json
import os
import threading
from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import dataclass, field

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from stillfield.engine.block import BlockResult, Work, conditions_of
from stillfield.engine.embedded import work_embedded
from stillfield.engine.gathering import Gathering
from stillfield.engine.planning import BlockPlan, Plan, plan_blocks, split_in_time
from stillfield.engine.readers import LazyReader, Reader
from stillfield.engine.steps import Counts
from stillfield.engine.stored_reader import stored_reader
from stillfield.errors import MethodError
from stillfield.methods import Block, Cells, Method
from stillfield.physics.rule import USUAL_EFFICIENCY, yield_from_efficiency
from stillfield.physics.still import Still
from stillfield.sources.plausible import count_doubtful
from stillfield.sources.tally import COUNT, COUNTS, sentences, totals
from stillfield.stages.aggregate import Months, aggregate
from stillfield.stages.audit import MOST_DAYS, Sample
from stillfield.stages.prepare import LocalDays, count_days, local_days, space_of
from stillfield.stages.read import is_as_stored
from stillfield.vocabulary import STEP_HOURS_DAILY

#: Told again and again which share of the work is done. [1]
Progress = Callable[[float], None]

#: Cells whose weather is kept for the audit to choose from.
AUDIT_CANDIDATES = 48


@dataclass(frozen=True)
class Missing:
    """When there is too little weather for a figure.

    Attributes
    ----------
    min_valid_hours : float
        Hours of a day that its mean temperature, wind and humidity need. [h]
    fill_hours : float
        Longest gap in temperature, humidity or wind that is bridged. [h]
    min_valid_days_share : float
        Share of its days that a month needs. [1]
    """

    min_valid_hours: float = 20.0
    fill_hours: float = 3.0
    min_valid_days_share: float = 0.8


@dataclass(frozen=True)
class Means:
    """What a run may use.

    Attributes
    ----------
    workers : int or None
        Blocks worked at the same time; one per processor without it.
    memory_bytes : int or None
        Memory that may be used; no limit without it. [bytes]
    scheduler : str or None
        Where the blocks are worked: in this process without it, else as `engine.cluster` takes it.
    fast : bool
        Whether to inflate chunks past the NetCDF library where that can be done.
    """

    workers: int | None = None
    memory_bytes: int | None = None
    scheduler: str | None = None
    fast: bool = True

    @property
    def at_once(self) -> int:
        """Blocks worked at the same time."""
        return self.workers or len(os.sched_getaffinity(0) if hasattr(os, "sched_getaffinity") else [0])


@dataclass(frozen=True)
class Prepared:
    """Everything a run needs to know before it computes, worked out from labels alone.

    Attributes
    ----------
    weather : xarray.Dataset
        As a source gives it, cut to the region.
    local : LocalDays
        How its records fall into local days.
    method : Method
        Yield method.
    names : tuple of str
        Variables that are read.
    reader : Reader
        How they are read.
    plan : Plan
        Blocks and windows.
    means : Means
        What the run may use.
    """

    weather: xr.Dataset
    local: LocalDays
    method: Method
    names: tuple[str, ...]
    reader: Reader
    plan: Plan
    means: Means = field(default_factory=Means)

    def kept(self) -> NDArray[np.bool_]:
        """Which cells belong to the region, shape (cell,)."""
        _, rows, columns = self.reader.layout.shape
        return self.reader.kept(BlockPlan(slice(0, rows), slice(0, columns), ())).ravel()

    @property
    def months(self) -> Months:
        """Calendar of the days."""
        return Months.of(self.local.time, typical=self.weather.attrs.get("record") == "typical-year")


@dataclass(frozen=True)
class Outcome:
    """What a run found.

    Attributes
    ----------
    monthly : list of xarray.Dataset
        For each still, as `stages.aggregate.aggregate` gives it; attribute ``counts`` (JSON: quantity, kind,
        number; see `stillfield.sources.tally`) says what was clipped, filled, missing or dropped in the weather.
    followed : dict
        Number of a followed cell to its daily litres, shape (still, day). [L m-2]
    sample : Sample
        Weather for the audit.
    """

    monthly: list[xr.Dataset]
    followed: dict[int, NDArray[np.floating]]
    sample: Sample


def prepare(
    weather: xr.Dataset, method: Method, *, stills: int = 1, means: Means | None = None
) -> Prepared:
    """Find out how a run would go; nothing of the weather is read.

    Parameters
    ----------
    weather : xarray.Dataset
        As a source gives it.
    method : Method
        Yield method.
    stills : int
        Number of designs.
    means : Means, optional
        What the run may use.

    Returns
    -------
    Prepared

    Raises
    ------
    WeatherError, MethodError, MemoryLimitError
        If the steps do not make days, the weather lacks what the method needs, or memory is too small.
    """
    local = local_days(weather)
    names = names_for(method, weather)
    used = means or Means()
    inside = _inside(weather)
    reader: Reader = (stored_reader(weather, names, inside, fast=used.fast)
                      or LazyReader(_bare(_ungated(weather, names), names), inside))
    typical = weather.attrs.get("record") == "typical-year"
    months = Months.of(local.time, typical=typical)
    plan = plan_blocks(
        reader.layout, variables=len(names), years=months.years.size, stills=stills, workers=used.at_once,
        memory_bytes=used.memory_bytes, whole_record=typical,
    )
    if used.scheduler is not None:
        plan = split_in_time(plan, months, local, workers=used.at_once)
    return Prepared(weather, local, method, names, reader, plan, used)


def _ungated(weather: xr.Dataset, names: Sequence[str]) -> xr.Dataset:
    """Weather with its lazy variables as they were before they were checked, for the engine checks and counts itself.

    Those that were changed since stay as they are.
    """
    before = weather.encoding.get("ungated")
    if before is None:
        return weather
    return weather.assign({name: before[name].variable for name in names if is_as_stored(weather, [name])})


def _bare(weather: xr.Dataset, names: Sequence[str]) -> xr.Dataset:
    """Variables to read, with nothing beside them that would travel to workers."""
    kept = weather[list(names)]
    kept.attrs = {key: value for key, value in kept.attrs.items() if key in ("step_hours", "files")}
    return kept.drop_vars([name for name in kept.coords if name not in kept.dims])


def _inside(weather: xr.Dataset) -> NDArray[np.bool_] | None:
    if "inside" not in weather.coords:
        return None
    space = space_of(weather)
    inside = weather["inside"].transpose(*space).to_numpy()
    return inside if inside.ndim == 2 else inside[None]


def names_for(method: Method, weather: xr.Dataset) -> tuple[str, ...]:
    """Variables of weather that a method takes, and the sunshine.

    Raises
    ------
    MethodError
        If the weather lacks what the method needs.
    """
    daily = float(weather.attrs["step_hours"]) >= STEP_HOURS_DAILY
    if method.resolution == "hourly" and daily:
        raise MethodError(
            f"method '{method.name}' works on steps of at most 6 h, and the weather is daily",
            cure="Give hourly weather, or choose method 'fitted'.",
        )
    sunshine = "irradiation" if daily else "ghi"
    of_steps = {"irradiation": "ghi", "temp_air_min": "temp_air", "temp_air_max": "temp_air"}
    wanted = [name if daily or method.resolution == "hourly" else of_steps.get(name, name)
              for name in (*method.needs, *method.uses)]
    needed = wanted[:len(method.needs)]
    missing = [name for name in needed if name not in weather]
    if missing:
        raise MethodError(
            f"the weather lacks what method '{method.name}' needs",
            where=str(weather.attrs.get("origin", "weather")),
            got=", ".join(str(name) for name in weather.data_vars if name != COUNTS) or "no variable",
            wanted=", ".join(missing),
            cure="Map the variable in the run file (weather.variables) or choose another method.",
        )
    return tuple(dict.fromkeys([sunshine, *(name for name in wanted if name in weather)]))


def months_of(
    prepared: Prepared, stills: Sequence[Still], *, rule_efficiency: float = USUAL_EFFICIENCY,
    missing: Missing | None = None, followed: Iterable[int] = (), progress: Progress | None = None,
) -> Outcome:
    """Work all blocks of a run.

    Parameters
    ----------
    prepared : Prepared
        From `prepare`.
    stills : sequence of Still
        Designs; all are worked in one pass over the weather.
    rule_efficiency : float
        Efficiency of the rule printed beside every result. [1]
    missing : Missing, optional
        When there is too little weather.
    followed : iterable of int
        Cells whose daily litres are wanted.
    progress : callable, optional
        Told after every window, or on a cluster after every block, which share of the work is done.

    Returns
    -------
    Outcome

    Raises
    ------
    WeatherError
        If weather cannot be read or cannot be true.
    """
    needs = missing or Missing()
    local, months = prepared.local, prepared.months
    for still in stills:  # makes the fits that are not kept yet, once and here
        prepared.method.begin(Cells(np.zeros(1), np.zeros(1)), still, conditions_of(still))
    work = Work(
        prepared.reader, prepared.names, local, months, prepared.method, tuple(stills),
        float(yield_from_efficiency(1.0, rule_efficiency)), needs.min_valid_hours, needs.fill_hours,
        needs.min_valid_days_share, np.array(sorted(set(followed)), dtype=np.int64),
        _candidates(prepared), MOST_DAYS,
    )
    share = _Share(sum(block.size for block in prepared.plan.blocks), progress)
    return _gathered(prepared, work, _results(prepared, work, share))


class _Share:
    """Which share of the work is done; told from several threads."""

    def __init__(self, whole: int, progress: Progress | None) -> None:
        self._whole, self._progress, self._done, self._lock = whole, progress, 0, threading.Lock()

    def tell(self, done: int) -> None:
        with self._lock:
            self._done += done
            if self._progress is not None:
                self._progress(self._done / self._whole)


def _results(prepared: Prepared, work: Work, share: _Share) -> Iterator[BlockResult]:
    if prepared.means.scheduler is None:
        yield from work_embedded(work, prepared.plan, share.tell)
        return
    from stillfield.engine.cluster import work_on_cluster

    for result in work_on_cluster(work, prepared.plan, scheduler=prepared.means.scheduler):
        share.tell(result.size)
        yield result


def _candidates(prepared: Prepared) -> NDArray[np.int64]:
    """Cells spread evenly over those of the region, on land where the weather tells."""
    weather = prepared.weather
    keep = prepared.kept()
    space = space_of(weather)
    if "elevation" in weather.coords and set(weather["elevation"].dims) == set(space):
        keep = keep & np.isfinite(weather["elevation"].transpose(*space).to_numpy().ravel())
    cells = np.flatnonzero(keep)
    spots = np.linspace(0, cells.size - 1, min(AUDIT_CANDIDATES, cells.size))
    return cells[np.unique(np.round(spots).astype(np.int64))] if cells.size else cells


def _gathered(prepared: Prepared, work: Work, results: Iterator[BlockResult]) -> Outcome:
    gathering = Gathering(work, prepared.plan)
    for result in results:
        gathering.take(result)
    counted = _all_counts(prepared, gathering)
    said = [*prepared.weather.attrs.get("conventions", []), *sentences(counted)]
    weather = prepared.weather.copy(deep=False)
    weather.attrs.pop("files", None)  # only for messages
    weather = weather.assign_attrs(counts=json.dumps(counted, sort_keys=True), conventions=list(dict.fromkeys(said)))
    space = space_of(weather)
    monthly = [
        aggregate(values, work.months, weather, space).assign_attrs(
            still=still.name, condition=still.condition, method=work.method.name)
        for still, values in zip(work.stills, gathering.whole(), strict=True)
    ]
    return Outcome(monthly, gathering.followed, _sample(work, gathering))


def _all_counts(prepared: Prepared, gathering: Gathering) -> Counts:
    """Counts of the source, of the engine and of doubtful sunshine; what a source has counted is not counted twice."""
    weather = prepared.weather
    taken = {*prepared.names, "days", "clearness", *(("wind_u", "wind_v") if "wind_speed" in prepared.names else ())}
    counts: Counts = {}
    if COUNTS in weather:
        counts = {name: kinds for name, kinds in totals(weather[COUNT].to_numpy(), weather[COUNTS].to_numpy()).items()
                  if name in taken}
    kept = prepared.kept()
    cells = int(kept.sum())
    for name in prepared.names:
        kinds = {**gathering.counts.get(name, {}), "values": cells * int(weather.sizes["time"])}
        counts[name] = {**kinds, **counts.get(name, {})}
    if prepared.local.steps_per_day > 1:
        grid = (-1, prepared.local.start.size)
        counts["days"] = count_days(
            prepared.local, slice(None), kept.reshape(grid), gathering.missing_days.reshape(grid))
    if "latitude" in weather.coords:
        counts["clearness"] = count_doubtful(*gathering.irradiation, prepared.local.latitude)
    return counts


def _sample(work: Work, gathering: Gathering) -> Sample:
    weather = gathering.weather_of_sample()
    cells = np.array(sorted(gathering.sampled), dtype=np.int64)
    days = min(work.sampled_days, work.local.days)
    block = Block(
        weather, work.local.latitude[cells], work.day_of_year[:days], work.steps_taken,
        work.local.clock_to_solar_hours[cells],
    )
    return Sample(cells, block, work.months.of_day[:days])
