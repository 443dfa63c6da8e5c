"""The order of the stages, and nothing else."""

from __future__ import annotations

import json
import logging
from dataclasses import asdict
from pathlib import Path
from typing import Any

import xarray as xr

from stillfield.methods import Method
from stillfield.methods.baselines import ConstantEfficiency
from stillfield.opening import Opened, open_run
from stillfield.physics.still import Still
from stillfield.products.summary import Summary, summarise
from stillfield.settings.load import resolved_yaml
from stillfield.settings.model import RunSettings
from stillfield.stages.aggregate import aggregate
from stillfield.stages.audit import Audit, audit
from stillfield.stages.estimate import estimate
from stillfield.stages.rank import rank_places
from stillfield.stages.read import describe_inputs
from stillfield.stages.write import Results, write_results

log = logging.getLogger(__name__)


def run(settings: RunSettings, *, run_file: str | Path) -> Summary:
    """Do everything a run file asks for.

    Parameters
    ----------
    settings : RunSettings
        A checked run.
    run_file : path
        The file it came from; inputs are named relative to its folder.

    Returns
    -------
    Summary
        What to tell the person who waits. With several stills each has its own folder below the run's.

    Raises
    ------
    StillfieldError
        With what, where, got, wanted and cure.
    """
    opened = open_run(settings)
    files = [*settings.weather.names, *settings.weather.further]
    files += [str(named.path) for named in (settings.places and settings.places.table, settings.map.land) if named]
    files += [] if settings.region is None else [str(named.path) for named in settings.region.files]
    files += [str(choice.path) for choice in settings.still]
    inputs = describe_inputs(dict.fromkeys(files), Path(run_file).parent)
    summaries = []
    for still, folder in zip(settings.stills, opened.folders, strict=True):
        summaries.append(_one_still(settings, still, opened, inputs=inputs, folder=folder))
    return Summary(
        "\n".join(summary.text for summary in summaries),
        tuple(file for summary in summaries for file in summary.files),
    )


def _one_still(
    settings: RunSettings, still: Still, opened: Opened, *, inputs: dict[str, dict[str, Any]], folder: Path
) -> Summary:
    log.info("estimating %s by method %s", still.name, settings.method)
    method, prepared, places = opened.method, opened.prepared, opened.places
    daily = estimate(
        prepared.daily, still, method, rule=ConstantEfficiency(settings.rule.efficiency),
        steps=prepared.steps,
    )
    monthly = aggregate(daily, min_valid_days_share=settings.missing.min_valid_days_share)
    counts = json.loads(monthly.attrs.get("counts", "{}"))
    for sentence in monthly.attrs.get("conventions", [])[len(prepared.daily.attrs.get("conventions", [])):]:
        log.info("%s", sentence)  # what was counted on the way
    ranked = None
    if places is not None and settings.places is not None:
        ranked = rank_places(
            monthly, places, litres_per_person_day=settings.need.litres_per_person_day,
            max_cell_distance_km=settings.places.max_cell_distance_km,
            weights=settings.rank.weights.by_criterion(),
        )
    audited = None
    if method.name == "fitted":
        audited = audit(method, monthly, prepared.daily, still, steps=prepared.steps)
        log.log(logging.INFO if audited.passed else logging.WARNING, "%s", audited.sentence())
    title = f"Solar still yield, {settings.name}"
    condition = f", {still.condition}" if method.knows_condition else ""
    line = f"Still {still.name}{condition}; method {method.name}."
    remarks = _remarks(monthly, method, audited)
    log.info("writing to %s", folder)
    files = write_results(
        folder,
        Results(
            monthly, ranked, title, line, resolved_yaml(settings), settings.model_dump(mode="json", by_alias=True),
            inputs, land=None if settings.map.land is None else settings.map.land.path, remarks=remarks,
            facts={"counts": {"weather": counts}, "audit": None if audited is None else asdict(audited)},
        ),
    )
    return summarise(
        monthly, ranked, title=title, method_line=line, folder=folder, files=files,
        remarks=[remark for remark in remarks if "WARNING" in remark or "udit" in remark],
    )


def _remarks(monthly: xr.Dataset, method: Method, audited: Audit | None) -> tuple[str, ...]:
    """Sentences that travel with the results: where they come from, what was assumed, what they cannot tell."""
    remarks = [str(monthly.attrs.get("origin", "")), *map(str, monthly.attrs.get("conventions", []))]
    if audited is not None:
        remarks.append(audited.sentence())
    if not method.knows_condition:
        remarks.append(f"Method {method.name} knows no condition of the still: low and high equal the central figures.")
    if monthly.attrs.get("record") == "typical-year":
        remarks.append("A typical year holds no poor year, so these figures do not tell how low one falls.")
    return tuple(filter(None, remarks))
