"""A plan in words, for the person who decides whether to start the run."""

from __future__ import annotations

import textwrap
from collections.abc import Iterable, Mapping
from typing import Any

_WIDTH = 100
_INDENT = 14
_BYTE_UNITS = ("B", "kB", "MB", "GB", "TB")
_STEP = 1000.0
_RECOGNISED_BY = {"mapped": "the run file", "alias": "its usual name", "standard_name": "its standard_name"}
_CLOCKS = {
    "UTC": "UTC in the files; days are cut at local solar midnight of each cell",
    "local-standard": "local standard time of each site; days are its own",
    "own-days": "daily weather; days are the source's own",
}


def plan_text(facts: Mapping[str, Any]) -> str:
    """Write a plan as plain text.

    Parameters
    ----------
    facts : mapping
        As `stillfield.plan.plan` gives it.

    Returns
    -------
    str
        Lines of at most 100 signs, except for names that are longer.
    """
    lines = [f"Plan of {facts['name']} ({facts['run_file']}); nothing was computed or written.", ""]
    lines += [*_weather(facts["weather"]), *_time(facts["weather"]["time"]), *_space(facts["weather"])]
    lines += [*_method(facts["method"]), *_stills(facts["stills"])]
    if facts["places"] is not None:
        lines += _places(facts["places"])
    lines += [*_outputs(facts["outputs"]), *_work(facts["work"]), *_estimate(facts["estimate"])]
    return "\n".join(lines) + "\n"


def _entry(label: str, *sentences: str) -> list[str]:
    """Sentences one below the other, the label before the first."""
    lines: list[str] = []
    for sentence in sentences:
        first = f"{'' if lines else label:<{_INDENT}}"
        lines += textwrap.wrap(
            sentence, _WIDTH, initial_indent=first, subsequent_indent=" " * (_INDENT + 2),
            break_long_words=False, break_on_hyphens=False,
        )
    return lines


def _weather(weather: Mapping[str, Any]) -> list[str]:
    count = weather["files"]
    size = f"{count} file{'' if count == 1 else 's'}, {size_words(weather['bytes'])}" if count else "no weather file"
    lines = _entry("Weather", f"{weather['kind']}: {size}", weather["origin"])
    lines += _entry("  recognised", *_variables(weather["variables"]))
    return lines + _entry("  assumed", *(weather["conventions"] or ["nothing"]))


def _variables(variables: Iterable[Mapping[str, Any]]) -> list[str]:
    """One sentence a variable of a file; those that come with a format stand in one sentence."""
    sentences, together = [], dict[str, list[str]]()
    for one in variables:
        quantity = f"{one['quantity']} [{one['unit']}]" if one["unit"] else one["quantity"]
        if one["name"] is None:
            together.setdefault(one["recognised_by"], []).append(quantity)
            continue
        units = "no units" if one["units"] is None else f"'{one['units']}'"
        by = _RECOGNISED_BY.get(one["recognised_by"], one["recognised_by"])
        sentences.append(f"{one['name']} ({units}) -> {quantity}, by {by}")
    return sentences + [f"from {source}: {', '.join(quantities)}" for source, quantities in together.items()]


def _time(time: Mapping[str, Any]) -> list[str]:
    step = "daily" if time["step_hours"] >= 24.0 else f"every {time['step_hours']:g} h"
    if time["record"] == "typical-year":
        span = f"a typical year of {time['days']} days, {step}"
    else:
        span = f"{time['first_day']} to {time['last_day']}, {time['days']} days, {step}, calendar {time['calendar']}"
    return _entry("Time", span, f"clock: {_CLOCKS.get(time['clock'], time['clock'])}")


def _space(weather: Mapping[str, Any]) -> list[str]:
    space = weather["space"]
    box = _box(space["box"])
    if space["kind"] == "sites":
        more = space["cells"] - len(space["sites"])
        named = ", ".join(space["sites"]) + (f" and {more} more" if more else "")
        lines = _entry("Sites", f"{space['cells']}: {named}", box)
    else:
        height, width = space["resolution_deg"]
        land = "" if space["land_cells"] is None else f", {space['land_cells']} of them on land"
        lines = _entry("Grid", f"{space['rows']} x {space['columns']} = {space['cells']} cells{land}",
                       f"{box}; cells of {height:g} x {width:g} deg")
    region = weather["region"]
    return lines + _entry("  region", "everything" if region is None else f"cut to {region}")


def _box(box: Mapping[str, float]) -> str:
    return f"{box['south']:g} to {box['north']:g} N, {box['west']:g} to {box['east']:g} E"


def _method(method: Mapping[str, Any]) -> list[str]:
    variant = "" if method["variant"] is None else f", correlation '{method['variant']}'"
    band = "a band over the still's condition" if method["has_band"] else "no band, it knows no condition of the still"
    return _entry("Method", f"{method['name']}{variant}; {band}", f"takes {', '.join(method['variables'])}")


def _stills(stills: Iterable[Mapping[str, Any]]) -> list[str]:
    sentences = []
    for still in stills:
        fits = "" if still["fits"] is None else "; fits: " + ", ".join(
            f"{condition} {state}" for condition, state in still["fits"].items()
        )
        ends = f"{still['condition_low']} to {still['condition_high']}"
        sentences.append(f"{still['name']}, {still['condition']} (band {ends}){fits}")
    return _entry("Stills" if len(sentences) > 1 else "Still", *sentences)


def _places(places: Mapping[str, Any]) -> list[str]:
    said = f"{places['count']} in {places['table']}"
    if not places["outside"]:
        return _entry("Places", f"{said}, all within the weather")
    more = places["outside"] - len(places["outside_names"])
    named = ", ".join(places["outside_names"]) + (f" and {more} more" if more else "")
    return _entry("Places", f"{said}; {places['outside']} outside the weather: {named}",
                  f"a place without a cell within {places['max_cell_distance_km']:g} km gets no litres")


def _outputs(outputs: Iterable[str]) -> list[str]:
    folders: dict[str, list[str]] = {}
    for path in outputs:
        folder, _, name = path.rpartition("/")
        folders.setdefault(folder, []).append(name)
    return _entry("Writes", *(f"{folder or '.'}/: {', '.join(names)}" for folder, names in sorted(folders.items())))


def _work(work: Mapping[str, Any]) -> list[str]:
    where = "threads of this process" if work["scheduler"] is None else f"workers of {work['scheduler']}"
    said = f"{work['blocks']} block{'s' if work['blocks'] != 1 else ''} of up to {work['cells']} cells"
    if work["spans"] > 1:
        said += f", the years shared out in {work['spans']} parts"
    return _entry(
        "Works", f"{said}; each in {work['windows']} window{'s' if work['windows'] != 1 else ''} of up to "
        f"{work['records']} times, so that every stored chunk is read once",
        f"{work['at_once']} at a time, by {where}" + ("" if work["by"] is None else f"; {work['by']}"),
    )


def _estimate(cost: Mapping[str, Any]) -> list[str]:
    return _entry(
        "Costs", f"read {size_words(cost['bytes_to_read'])}, memory up to {size_words(cost['memory_bytes'])}, "
        f"disk {size_words(cost['disk_bytes'])}, about {duration_words(cost['seconds'])}", cost["basis"],
    )


def size_words(count: float) -> str:
    """Bytes in words, two figures.

    Examples
    --------
    >>> size_words(0), size_words(999), size_words(123_456), size_words(9.9e9)
    ('0 B', '999 B', '120 kB', '9.9 GB')
    """
    unit = 0
    size = float(count)
    while size >= _STEP and unit < len(_BYTE_UNITS) - 1:
        size, unit = size / _STEP, unit + 1
    if unit == 0:
        return f"{size:.0f} B"
    return f"{float(f'{size:.2g}'):g} {_BYTE_UNITS[unit]}"


def duration_words(seconds: float) -> str:
    """Duration in words, no finer than a rough estimate is.

    Examples
    --------
    >>> duration_words(8.0), duration_words(140.0), duration_words(20_000.0), duration_words(400_000.0)
    ('10 seconds', '2 minutes', '6 hours', '5 days')
    """
    for unit, length in (("day", 86400.0), ("hour", 3600.0), ("minute", 60.0)):
        if seconds >= 1.5 * length:
            count = round(seconds / length)
            return f"{count} {unit}s"
    return f"{max(10 * round(seconds / 10.0), 10)} seconds"
