"""Where the stations of a table lie: from columns of the table, a second table, or the run file."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from stillfield.errors import Fault, WeatherError
from stillfield.sources.stations.station_columns import find_places, numbers, refuse_faults
from stillfield.sources.stations.station_rows import Rows, read_rows

_NUMBERS = {"latitude": (-90.0, 90.0), "longitude": (-180.0, 360.0), "elevation": (-500.0, 9000.0),
            "utc_offset_hours": (-12.0, 14.0)}


@dataclass(frozen=True)
class Site:
    """Position of one station; None where it is not known."""

    name: str = ""
    latitude: float | None = None
    longitude: float | None = None
    elevation: float | None = None
    utc_offset_hours: float | None = None


def site_of_rows(
    rows: Rows, places: Mapping[str, str], faults: list[Fault]
) -> tuple[NDArray[Any], dict[str, Site]]:
    """Site of every row, and the positions the table itself gives.

    A table without a column for the site is one site, called as its file.

    Parameters
    ----------
    rows : Rows
        One table.
    places : mapping of str to str
        Columns, from `station_columns.find_places`.
    faults : list of Fault
        Grows by impossible positions and by sites that move.

    Returns
    -------
    names : ndarray of str, shape (row,)
    sites : dict of str to Site
    """
    count = len(rows.cells)
    names = (rows.cells[places["site"]].to_numpy(dtype=object) if "site" in places
             else np.full(count, rows.path.stem, dtype=object))
    if "latitude" not in places and "elevation" not in places and "name" not in places:
        return names, {}
    columns = {word: numbers(rows, places[word], (), faults) for word in _NUMBERS if word in places}
    sites: dict[str, Site] = {}
    lines = rows.cells.index
    order, first = np.unique(names.astype(str), return_index=True)
    for name, at in zip(order, first, strict=True):
        here = names == name
        values: dict[str, Any] = {}
        for word, column in columns.items():
            low, high = _NUMBERS[word]
            value = column[at]
            if np.isfinite(value) and not low <= value <= high:
                message = f"should be between {low:g} and {high:g} (got {value:g})"
                faults.append(Fault(int(lines[at]), places[word], message))
            if np.any(column[here] != value) and np.isfinite(value):
                moved = int(lines[here][np.argmax(column[here] != value)])
                faults.append(Fault(moved, places[word], f"differs from line {lines[at]} for the same site '{name}'"))
            values[word] = float(value) if np.isfinite(value) else None
        label = str(rows.cells[places["name"]].iloc[at]) if "name" in places else ""
        sites[str(name)] = Site(name=label, **values)
    return names, sites


def positions(
    names: Sequence[str], known: Mapping[str, Site], stations: str | None, stated: Mapping[str, Any] | None, *,
    paths: Sequence[Path],
) -> dict[str, Site]:
    """Position of every site, put together from all that is known.

    Parameters
    ----------
    names : sequence of str
        Sites of the weather.
    known : mapping of str to Site
        From the tables of weather.
    stations : str or None
        A second table with positions.
    stated : mapping or None
        Position of a single site: ``latitude_deg``, ``longitude_deg``, ``elevation_m``, ``name``.
    paths : sequence of Path
        Tables of weather, for errors.

    Returns
    -------
    dict of str to Site

    Raises
    ------
    WeatherError
        If a site has no position.
    """
    listed = {} if stations is None else _listed(Path(stations))
    if stated is not None and len(names) > 1:
        raise WeatherError("table.site gives one position and there are several sites", where=str(paths[0]),
                           got=", ".join(names[:5]), cure="Give their positions in a table: table.stations.")
    placed = {}
    for name in names:
        site = known.get(name, Site())
        if name in listed:
            site = replace(site, **{key: value for key, value in vars(listed[name]).items() if value not in (None, "")})
        if stated is not None:
            site = replace(
                site, name=str(stated.get("name") or site.name), latitude=float(stated["latitude_deg"]),
                longitude=float(stated["longitude_deg"]), elevation=stated.get("elevation_m", site.elevation),
            )
        placed[name] = site
    lost = [name for name, site in placed.items() if site.latitude is None or site.longitude is None]
    if lost:
        where = stations if stations is not None else str(paths[0])
        raise WeatherError(
            "the position of a site is unknown", where=where, got=", ".join(lost[:5]),
            wanted="latitude and longitude" if stations is None else f"its row among {', '.join(list(listed)[:5])}",
            cure="Give columns latitude and longitude, a table of positions (table.stations), or table.site.",
        )
    return placed


def _listed(path: Path) -> dict[str, Site]:
    rows = read_rows(path)
    faults: list[Fault] = []
    places = find_places(rows, {})
    if "site" not in places and "name" in places:
        places["site"] = places["name"]
    if "site" not in places or "latitude" not in places or "longitude" not in places:
        raise WeatherError("this is no table of positions", where=str(path), got=", ".join(rows.headings),
                           wanted="columns site, latitude and longitude")
    _, sites = site_of_rows(rows, places, faults)
    refuse_faults(path, faults)
    return sites
