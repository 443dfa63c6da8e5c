"""The order of the stages, and nothing else."""

from __future__ import annotations

import json
import logging
import time
from collections.abc import Sequence
from dataclasses import asdict
from pathlib import Path
from typing import Any

import xarray as xr

from stillfield.decide import Days, decide
from stillfield.engine.job import Missing, months_of
from stillfield.methods import Method
from stillfield.opening import Opened, open_run, preferences_of, wishes_of
from stillfield.products.plan_text import duration_words
from stillfield.products.still_table import still_row, stills_text, write_stills
from stillfield.products.summary import Summary, summarise
from stillfield.settings.load import resolved_yaml
from stillfield.settings.model import RunSettings
from stillfield.settings.still_file import StillDesign
from stillfield.stages.audit import Audit, Sample, audit
from stillfield.stages.rank import rank_region
from stillfield.stages.read import describe_inputs
from stillfield.stages.upgrade import Change
from stillfield.stages.write import Results, write_results

log = logging.getLogger(__name__)

#: Progress is told no more often. [s]
SECONDS_BETWEEN_WORDS = 10.0


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
    said = len(opened.prepared.weather.attrs.get("conventions", []))
    log.info("estimating by method %s", settings.method)
    outcome = months_of(
        opened.prepared, settings.stills, rule_efficiency=settings.rule.efficiency,
        missing=Missing(**settings.missing.model_dump()), followed=opened.followed, progress=_Telling(),
    )
    for sentence in outcome.monthly[0].attrs.get("conventions", [])[said:]:
        log.info("%s", sentence)  # what was counted on the way
    told = [
        _one_still(settings, design, opened, monthly, outcome.sample, inputs=inputs, folder=folder,
                   days=Days(outcome.followed, opened.prepared.local.time, number))
        for number, (design, monthly, folder) in enumerate(
            zip(settings.designs, outcome.monthly, opened.folders, strict=True))
    ]
    return _together(settings, [summary for summary, _ in told], [row for _, row in told])


def _together(settings: RunSettings, summaries: Sequence[Summary], rows: Sequence[dict[str, Any]]) -> Summary:
    """One summary of all stills, several of them side by side in a table of their own."""
    texts, files = [summary.text for summary in summaries], [file for one in summaries for file in one.files]
    if len(rows) > 1:
        files += write_stills(settings.folder, rows, title=f"Stills side by side, {settings.name}")
        texts.append(stills_text(rows, settings.folder))
    return Summary("\n".join(texts), tuple(files))


class _Telling:
    """Says every now and then how far a run is and how long it will take."""

    def __init__(self) -> None:
        self._began = self._told = time.monotonic()

    def __call__(self, share: float) -> None:
        now = time.monotonic()
        if now - self._told < SECONDS_BETWEEN_WORDS or share <= 0.0:
            return
        self._told = now
        log.info("%.0f %% done, %s left", 100.0 * share, duration_words((now - self._began) * (1.0 / share - 1.0)))


def _one_still(
    settings: RunSettings, design: StillDesign, opened: Opened, monthly: xr.Dataset, sample: Sample, *,
    inputs: dict[str, dict[str, Any]], folder: Path, days: Days,
) -> tuple[Summary, dict[str, Any]]:
    """Decide and write for one still; also its row beside the others."""
    still = design.still
    method, places = opened.prepared.method, opened.places
    counts = json.loads(monthly.attrs.get("counts", "{}"))
    decision = None
    if places is not None and settings.places is not None:
        decision = decide(
            monthly, places, still=design.still, cost=design.cost, wishes=wishes_of(settings),
            preferences=preferences_of(settings), days=days,
            change=None if design.modification is None else Change(design.modification, settings.rule.efficiency),
        )
        for note in decision.notes:
            log.info("%s", note)
    audited = None
    if method.name == "fitted":
        audited = audit(method, monthly["annual_yield"].to_numpy().ravel(), sample, still)
        log.log(logging.INFO if audited.passed else logging.WARNING, "%s", audited.sentence())
    title = f"Solar still yield, {settings.name}"
    condition = f", {still.condition}" if method.knows_condition else ""
    line = f"Still {still.name}{condition}; method {method.name}."
    cells = rank_region(monthly, settings.rank.weights.by_criterion())
    remarks = (*_remarks(monthly, method, audited), *(() if decision is None else decision.notes), cells.attrs["note"])
    log.info("writing to %s", folder)
    files = write_results(
        folder,
        Results(
            monthly, decision, title, line, resolved_yaml(settings), settings.model_dump(mode="json", by_alias=True),
            inputs, land=None if settings.map.land is None else settings.map.land.path, remarks=remarks,
            facts={"counts": {"weather": counts}, "audit": None if audited is None else asdict(audited),
                   "design": asdict(design)},
            cells=cells,
        ),
    )
    ranked = None if decision is None else decision.places
    return summarise(
        monthly, ranked, title=title, method_line=line, folder=folder, files=files,
        remarks=[remark for remark in remarks if "WARNING" in remark or "udit" in remark],
    ), still_row(still, monthly, ranked, method=method.name)


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
