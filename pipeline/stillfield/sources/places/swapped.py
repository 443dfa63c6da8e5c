"""Places that lie where the weather is not, and would lie there if latitude and longitude changed places or sign."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from stillfield.errors import PlacesError

#: A place beside the outermost cell still has one; stations are points.
MARGIN_DEG = 1.0


def refuse_misplaced(places: pd.DataFrame, box: Mapping[str, float], *, where: str) -> None:
    """Refuse places of which most lie outside the weather, where a usual slip explains it.

    Parameters
    ----------
    places : pandas.DataFrame
        With ``latitude`` and ``longitude``. [deg]
    box : mapping of str to float
        ``south``, ``north``, ``west``, ``east`` of the weather; `east` may run beyond 180. [deg]
    where : str
        File of the places, for the message.

    Raises
    ------
    PlacesError
        If more than half of the places are outside, and more than half would be inside after the slip is mended.

    Examples
    --------
    >>> villages = pd.DataFrame({"latitude": [-41.0, -40.5], "longitude": [18.5, 19.0]})
    >>> box = {"south": 18, "north": 20, "west": -43, "east": -40}
    >>> refuse_misplaced(villages, box, where="v.csv")  # doctest: +IGNORE_EXCEPTION_DETAIL
    Traceback (most recent call last):
    PlacesError: 2 of 2 places lie outside the weather, but 2 would lie inside with latitude and longitude exchanged
    """
    latitude = places["latitude"].to_numpy(dtype=float)
    longitude = places["longitude"].to_numpy(dtype=float)
    outside = ~_inside(latitude, longitude, box)
    if 2 * int(outside.sum()) <= len(places):
        return
    slips = (
        ("with latitude and longitude exchanged", longitude, latitude),
        ("with longitude of the other sign (west is negative)", latitude, -longitude),
        ("with latitude of the other sign (south is negative)", -latitude, longitude),
    )
    counts = [int(_inside(north, east, box).sum()) for _, north, east in slips]
    best = int(np.argmax(counts))
    if 2 * counts[best] > len(places):
        raise PlacesError(
            f"{int(outside.sum())} of {len(places)} places lie outside the weather "
            f"({box['south']:g}..{box['north']:g} N, {box['west']:g}..{box['east']:g} E), "
            f"but {counts[best]} would lie inside {slips[best][0]}", where=where,
            cure="Did you mean that? Correct the table, or places.columns.",
        )


def _inside(
    latitude: NDArray[np.float64], longitude: NDArray[np.float64], box: Mapping[str, float]
) -> NDArray[np.bool_]:
    north = (latitude >= box["south"] - MARGIN_DEG) & (latitude <= box["north"] + MARGIN_DEG)
    width = box["east"] - box["west"] + 2 * MARGIN_DEG
    return np.asarray(north & ((longitude - box["west"] + MARGIN_DEG) % 360.0 <= width))
