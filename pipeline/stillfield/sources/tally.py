"""What was changed, dropped or found missing in the weather, counted cell by cell while it is computed.

Counts travel inside the weather as one variable, `COUNTS`, of dimensions ``count`` and space. They are cut
with the cells of a region and, on lazy weather, come out of the same pass over the files as the results.
"""

from __future__ import annotations

from collections.abc import Callable, Hashable, Mapping
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

#: Name of the variable, and of its dimension.
COUNTS, COUNT = "counts", "count"

#: Kinds of count and what is said of each: how many, of how many, of what. Kinds that are not told stand in
#: the manifest only. Counts are of values (a cell at a time), unless the sentence says otherwise.
SENTENCES = {
    "clipped": "{n} of {of} values of {name} were slightly negative and set to 0.",
    "missing": "{n} of {of} values of {name} are missing.",
    "sentinel": "{n} of {of} values of {name} were numbers that stand for missing, or lay outside the range the "
                "file states, and were taken out.",
    "repeated": "{n} values of {name} came twice with the same number and count once.",
    "filled": "{n} of {of} values of {name} were filled across short gaps.",
    "night": "{n} of {of} values of {name} were missing while the sun was down and set to 0.",
    "edge": "{n} of {of} cell-days were dropped: the record begins or ends within the local day.",
    "dull": "WARNING: at {n} of {of} cells the sunshine of the whole record is less than 0.2 of what arrives outside "
            "the atmosphere. No place is so dull: check the units and what the sunshine `means`.",
    "bright": "WARNING: at {n} of {of} cells the sunshine of the whole record is more than 0.85 of what arrives "
              "outside the atmosphere. No place is so bright: check the units and what the sunshine `means`.",
    "incomplete": "{n} of {of} cell-days have a gap in their sunshine and were dropped.",
}
_OF = "values"


def cell_counts(
    values: xr.DataArray, kernel: Callable[[NDArray[Any]], NDArray[Any]], kinds: tuple[str, ...]
) -> dict[str, xr.DataArray]:
    """Count something in every cell over all times.

    Parameters
    ----------
    values : DataArray
        Dims time first, then space; lazy or not.
    kernel : callable
        Block of `values` to an array of shape ``(len(kinds), *block.shape[1:])``.
    kinds : tuple of str
        What the rows of the kernel's result are.

    Returns
    -------
    dict of str to DataArray
        Counts by kind, on the space dims; lazy where `values` are.
    """
    if values.chunks is not None:
        import dask.array as da

        data = values.data
        counted = da.map_blocks(
            lambda block: kernel(block)[:, np.newaxis], data, new_axis=0, dtype=np.int64,
            meta=np.empty((0,) * (data.ndim + 1), np.int64),
            chunks=((len(kinds),), (1,) * data.numblocks[0], *data.chunks[1:]),
        ).sum(axis=1)
    else:
        counted = kernel(values.values)
    space = values.dims[1:]
    coords = {dim: values.indexes[dim] for dim in space if dim in values.indexes}
    return {kind: xr.DataArray(counted[row], dims=space, coords=coords) for row, kind in enumerate(kinds)}


def with_counts(weather: xr.Dataset, name: str, counts: Mapping[str, xr.DataArray | int]) -> xr.Dataset:
    """Add counts of one quantity to a dataset; a kind it already has for the quantity is kept.

    Parameters
    ----------
    weather : Dataset
        With dims latitude and longitude, or site.
    name : str
        Quantity, or 'days'.
    counts : mapping of str to DataArray or int
        By kind of `SENTENCES`, on the space dims, or one number for every cell.

    Returns
    -------
    Dataset
    """
    space = [dim for dim in ("latitude", "longitude", "site") if dim in weather.dims]
    had = set(weather[COUNT].values.tolist()) if COUNTS in weather else set()
    rows = {f"{name}:{kind}": _row(weather, space, row) for kind, row in counts.items() if f"{name}:{kind}" not in had}
    if not rows:
        return weather
    together = xr.concat(list(rows.values()), dim=COUNT, coords="minimal", compat="override", join="override")
    together = together.assign_coords({COUNT: list(rows)})
    if COUNTS in weather:
        together = xr.concat([weather[COUNTS].reset_coords(drop=True), together], dim=COUNT, join="override",
                             coords="minimal", compat="override")
    rest = weather.drop_vars(COUNTS, errors="ignore").drop_dims(COUNT, errors="ignore")
    return rest.assign({COUNTS: together.transpose(COUNT, *space)})


def _row(weather: xr.Dataset, space: list[str], row: xr.DataArray | int) -> xr.DataArray:
    indexes: dict[Hashable, Any] = {dim: weather[dim].values for dim in space if dim in weather.coords}
    if isinstance(row, int):
        shape = tuple(weather.sizes[dim] for dim in space)
        return xr.DataArray(np.full(shape, row, dtype=np.int64), dims=space, coords=indexes)
    return row.reset_coords(drop=True).transpose(*space).assign_coords(indexes).astype(np.int64)


def totals(labels: NDArray[Any], counts: NDArray[Any]) -> dict[str, dict[str, int]]:
    """Counts of all cells together.

    Parameters
    ----------
    labels : ndarray of str, shape (count,)
        'quantity:kind'.
    counts : ndarray, shape (count, ...)
        By cell.

    Returns
    -------
    dict
        Quantity to kind to number.

    Examples
    --------
    >>> totals(np.array(["ghi:clipped", "ghi:values"]), np.array([[2, 1], [50, 50]]))
    {'ghi': {'clipped': 3, 'values': 100}}
    """
    found: dict[str, dict[str, int]] = {}
    for label, row in zip(labels.tolist(), counts, strict=True):
        name, kind = label.split(":")
        found.setdefault(name, {})[kind] = int(row.sum())
    return found


def sentences(counted: Mapping[str, Mapping[str, int]]) -> list[str]:
    """Say in words what was counted, leaving out what never happened.

    Parameters
    ----------
    counted : mapping
        From `totals`.

    Returns
    -------
    list of str

    Examples
    --------
    >>> sentences({"ghi": {"clipped": 3, "missing": 0, "values": 100}})
    ['3 of 100 values of ghi were slightly negative and set to 0.']
    """
    told = []
    for name, kinds in counted.items():
        told += [text.format(n=kinds[kind], of=kinds.get(_OF, 0), name=name)
                 for kind, text in SENTENCES.items() if kinds.get(kind)]
    return told
