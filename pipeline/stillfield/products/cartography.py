"""Parts of a map: view, colour scale, land, graticule and scale bar."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from math import cos, floor, log10, radians
from typing import TYPE_CHECKING, Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from stillfield.products.coast import Box, Polygon, Ring, coastline, land_in
from stillfield.products.grid import Edges
from stillfield.products.netcdf import MONTH_NAMES
from stillfield.products.page import INK, MUTED, NO_VALUE, NO_VALUE_HATCH, SEA

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.colors import Colormap, Normalize

#: Kilometres of a degree of latitude on the sphere of 6371 km.
KM_PER_DEGREE = 111.19
_ASPECTS = (0.40, 2.2)
_TICK_STEPS = (0.05, 0.1, 0.2, 0.5, 1.0, 2.0, 5.0, 10.0, 15.0, 30.0, 45.0, 60.0)
# Twelve hues 30 deg apart in OKLCH (Ottosson 2020), lightness 0.66 and 0.83 in turn, January blue.
_MONTH_COLOURS = ["#6095d7", "#7ad5f8", "#00a8a8", "#86dcb7", "#73a258", "#d1cb7d", "#bb8736", "#feb391",
                  "#cf737b", "#f7add6", "#ad7cc2", "#c0bfff"]


@dataclass(frozen=True)
class ColourScale:
    """Colours for numbers, in steps that can be read off.

    Attributes
    ----------
    norm, colours : Normalize, Colormap
        As matplotlib takes them.
    levels : ndarray
        Limits of the steps, in the unit of the values.
    labels : tuple of str
        One label per limit, or one per step for months.
    """

    norm: Normalize
    colours: Colormap
    levels: NDArray[np.float64]
    labels: tuple[str, ...]


def yield_scale(values: NDArray[Any]) -> ColourScale:
    """One scale for all values: round steps over their whole range, in a perceptually uniform map.

    Parameters
    ----------
    values : ndarray
        Everything that is to share the scale; NaN is missing.

    Returns
    -------
    ColourScale
        A dozen steps of viridis, which stays ordered in grey and for colour-blind readers.

    Examples
    --------
    >>> scale = yield_scale(np.array([62.0, 148.0, float("nan")]))
    >>> scale.labels[0], scale.labels[-1]
    ('60', '150')
    """
    from matplotlib import colormaps
    from matplotlib.colors import BoundaryNorm
    from matplotlib.ticker import MaxNLocator

    finite = values[np.isfinite(values)]
    low, high = (float(finite.min()), float(finite.max())) if finite.size else (0.0, 1.0)
    if high - low < 1e-6 * max(abs(high), 1.0):
        low, high = low - 0.5, high + 0.5
    levels = np.asarray(MaxNLocator(nbins=16, steps=[1, 2, 2.5, 5, 10]).tick_values(low, high))
    first, last = np.searchsorted(levels, low, side="right") - 1, np.searchsorted(levels, high, side="left")
    levels = levels[max(first, 0):last + 1]
    decimals = max(0, -floor(log10(levels[1] - levels[0]) + 1e-9))
    decimals += int(bool(np.any(np.abs(levels - np.round(levels, decimals)) > 1e-9)))
    colours = colormaps["viridis"].resampled(len(levels) - 1)
    norm = BoundaryNorm(levels.tolist(), colours.N)
    return ColourScale(norm, colours, levels, tuple(f"{level:.{decimals}f}" for level in levels))


def month_scale() -> ColourScale:
    """Twelve colours round the year, every second one lighter, so that neighbours differ in grey too.

    Twelve hues cannot all be told apart by every reader; `name_months` writes the months on the map.

    Examples
    --------
    >>> month_scale().labels[6]
    'Jul'
    """
    from matplotlib.colors import BoundaryNorm, ListedColormap

    colours = ListedColormap(_MONTH_COLOURS)
    levels = np.linspace(0.5, 12.5, 13)
    return ColourScale(BoundaryNorm(levels.tolist(), 12), colours, levels, tuple(name[:3] for name in MONTH_NAMES))


@dataclass(frozen=True)
class View:
    """The piece of the Earth a map shows, and the land in it.

    Attributes
    ----------
    box : tuple of float
        West, south, east, north. [deg]
    shores : list of ndarray
        Coast as lines. [deg]
    land : list of polygon
        Land areas. [deg]
    """

    box: Box
    shores: list[Ring]
    land: list[Polygon]

    @property
    def shrink(self) -> float:
        """Length of a degree of longitude per degree of latitude at mid-height [1]."""
        return max(cos(radians((self.box[1] + self.box[3]) / 2)), 0.05)

    @property
    def aspect(self) -> float:
        """Height per width on paper [1]."""
        west, south, east, north = self.box
        return (north - south) / ((east - west) * self.shrink)

    @property
    def width_km(self) -> float:
        """Width at mid-height [km]."""
        return (self.box[2] - self.box[0]) * KM_PER_DEGREE * self.shrink


def view_of(edges: Edges, land: Iterable[Polygon] | None, *, grains: int = 2500) -> View:
    """View that holds a grid; long thin grids get surroundings, so that the map stays a map.

    Parameters
    ----------
    edges : Edges
        Of the grid.
    land : iterable of polygon, optional
        Land to draw; the shipped land by default.
    grains : int
        Grains across the map; land is thinned to them. A page is 1600 pixels wide.

    Returns
    -------
    View
        At least the box of the grid.

    Examples
    --------
    >>> row = xr.Dataset(coords={"latitude": [0.0], "longitude": np.arange(40.0, 60.0)})
    >>> from stillfield.products.grid import cell_edges
    >>> round(view_of(cell_edges(row), []).aspect, 2)
    0.4
    """
    west, south, east, north = edges.box
    bare = View((west, south, east, north), [], [])
    if bare.aspect < _ASPECTS[0]:
        grow = (north - south) * (_ASPECTS[0] / bare.aspect - 1.0) / 2
        south, north = south - grow, north + grow
    elif bare.aspect > _ASPECTS[1]:
        grow = (east - west) * (bare.aspect / _ASPECTS[1] - 1.0) / 2
        west, east = west - grow, east + grow
    box = (west, south, east, north)
    grain = max(east - west, north - south) / grains
    thinned = (tuple(_thinned(ring, grain) for ring in polygon) for polygon in land_in(box, land))
    polygons = [tuple(ring for ring in polygon if len(ring) > 3) for polygon in thinned if len(polygon[0]) > 3]
    return View(box, coastline(box, polygons) if polygons else [], polygons)


def _thinned(ring: Ring, grain: float) -> Ring:
    """Drop vertices that fall on the same grain as the one before: too fine to be seen."""
    cells = np.round(ring / grain)
    keep = np.concatenate([[True], np.any(np.diff(cells, axis=0) != 0.0, axis=1)])
    keep[-1] = True
    kept: Ring = ring[keep]
    return kept


def draw_map(axes: Axes, field: xr.DataArray, edges: Edges, view: View, scale: ColourScale) -> None:
    """Draw one field: sea, land without value hatched, cells, shore.

    Parameters
    ----------
    axes : Axes
        To draw on; limits and aspect are set.
    field : DataArray, dims (latitude, longitude)
        NaN is left open.
    edges, view, scale
        Cell edges, piece of Earth and colours.
    """
    from matplotlib.collections import LineCollection
    from matplotlib.patches import PathPatch

    axes.set_facecolor(SEA)
    if view.land:
        # One patch for all land: hatching is drawn per patch.
        patch = PathPatch(_outlines(view.land), facecolor=NO_VALUE, edgecolor=NO_VALUE_HATCH, hatch="/////",
                          linewidth=0.0, zorder=1)
        patch.set_hatch_linewidth(0.45)
        axes.add_patch(patch)
    values = np.ma.masked_invalid(field.transpose("latitude", "longitude").values)
    axes.pcolorfast(*_rising(edges.longitude, edges.latitude, values), cmap=scale.colours, norm=scale.norm, zorder=2)
    lines = [line.tolist() for line in view.shores]
    axes.add_collection(LineCollection(lines, colors="white", linewidths=1.5, alpha=0.55, zorder=3), autolim=False)
    axes.add_collection(LineCollection(lines, colors=INK, linewidths=0.65, zorder=4), autolim=False)
    west, south, east, north = view.box
    axes.set(xlim=(west, east), ylim=(south, north))
    axes.set_aspect(1.0 / view.shrink)


def name_months(axes: Axes, field: xr.DataArray) -> None:
    """Write the month in the middle of every large area that has it.

    Parameters
    ----------
    axes : Axes
        With the map of the months on it.
    field : DataArray, dims (latitude, longitude)
        Month numbers, NaN where missing.
    """
    from scipy import ndimage

    field = field.transpose("latitude", "longitude")
    months = np.nan_to_num(field.values, nan=0.0).astype(int)
    longitude = np.unwrap(field["longitude"].values.astype(float), period=360.0)
    for month in np.unique(months[months > 0]).tolist():
        areas, count = ndimage.label(months == month)
        sizes = np.bincount(areas.ravel(), minlength=count + 1)[1:]
        for area in np.flatnonzero(sizes >= max(4, 0.012 * months.size)) + 1:
            # The cell farthest from the rim of its area.
            depth = ndimage.distance_transform_edt(np.pad(areas == area, 1))[1:-1, 1:-1]
            row, column = np.unravel_index(int(np.argmax(depth)), depth.shape)
            axes.text(longitude[column], float(field["latitude"].values[row]), MONTH_NAMES[month - 1][:3], size=9,
                      weight="bold", ha="center", va="center", color=INK, zorder=8,
                      bbox={"boxstyle": "round,pad=0.2", "facecolor": "white", "edgecolor": "none", "alpha": 0.7})


def _rising(longitude: NDArray[Any], latitude: NDArray[Any], values: Any) -> tuple[Any, Any, Any]:
    if longitude[0] > longitude[-1]:
        longitude, values = longitude[::-1], values[:, ::-1]
    if latitude[0] > latitude[-1]:
        latitude, values = latitude[::-1], values[::-1]
    return longitude, latitude, values


def _outlines(polygons: Iterable[Polygon]) -> Any:
    from matplotlib.path import Path

    return Path.make_compound_path(*[Path(ring, closed=True) for polygon in polygons for ring in polygon])


def degree_label(value: float, positive: str, negative: str) -> str:
    """Write a degree with its side of the Earth.

    Examples
    --------
    >>> degree_label(-42.5, "E", "W"), degree_label(190.0, "E", "W"), degree_label(0.0, "N", "S")
    ('42.5°W', '170°W', '0°')
    """
    if positive == "E":
        value = (value + 180.0) % 360.0 - 180.0
    value = round(value, 6)
    side = "" if value in (0.0, -180.0) else positive if value > 0 else negative
    return f"{abs(value):g}°{side}"


def tick_values(low: float, high: float, most: int) -> NDArray[np.float64]:
    """Round degrees between two limits.

    Examples
    --------
    >>> tick_values(17.1, 22.9, 4).tolist()
    [18.0, 20.0, 22.0]
    """
    step = next((step for step in _TICK_STEPS if floor(high / step) - floor(low / step) <= most), 90.0)
    return np.asarray(np.arange(np.ceil(low / step), floor(high / step) + 1) * step)


def draw_graticule(axes: Axes, view: View, *, most: int, names: tuple[bool, bool]) -> None:
    """Ticks at round degrees, faint lines, and labels below and at the left where wanted.

    Parameters
    ----------
    axes : Axes
        Of the map.
    view : View
        What it shows.
    most : int
        Most ticks on an axis.
    names : tuple of bool
        Whether longitudes and latitudes are written.
    """
    west, south, east, north = view.box
    x, y = tick_values(west, east, most), tick_values(south, north, most)
    axes.set_xticks(x, [degree_label(v, "E", "W") for v in x] if names[0] else [""] * len(x))
    axes.set_yticks(y, [degree_label(v, "N", "S") for v in y] if names[1] else [""] * len(y))
    axes.tick_params(length=2.5, width=0.6, labelsize=7, pad=2)
    axes.grid(visible=True, color="white", linewidth=0.35, alpha=0.35, zorder=2.5)
    axes.set_axisbelow(False)


def scale_bar_km(view: View, share: float) -> float:
    """Round length that fits into a share of the width of the map.

    Examples
    --------
    >>> scale_bar_km(View((40.0, -3.0, 46.0, 3.0), [], []), 0.35)
    200.0
    """
    room = view.width_km * share
    power = 10.0 ** floor(log10(room))
    return float(max(step for step in (1.0, 2.0, 5.0) if step * power <= room) * power)


def draw_scale_bar(axes: Axes, view: View, width_in: float, room_in: float) -> None:
    """Scale bar on axes whose unit is the inch.

    Parameters
    ----------
    axes : Axes
        Bare axes of the strip below the maps.
    view : View
        What the maps show.
    width_in, room_in : float
        Width of a map, and of the room for the bar. [in]
    """
    length_km = scale_bar_km(view, min(room_in / width_in, 0.6))
    length = length_km / view.width_km * width_in
    axes.plot([0.0, length], [0.0, 0.0], color=INK, linewidth=1.4, solid_capstyle="butt", clip_on=False)
    for x in (0.0, length):
        axes.plot([x, x], [-0.035, 0.035], color=INK, linewidth=1.0, clip_on=False)
    middle = (view.box[1] + view.box[3]) / 2
    axes.text(0.0, 0.075, f"{length_km:g} km", size=7.2, va="bottom")
    axes.text(0.0, -0.075, f"at {degree_label(round(middle, 1), 'N', 'S')}", size=6.4, color=MUTED, va="top")


def visible(view: View, positions: Sequence[tuple[float, float]]) -> list[tuple[float, float] | None]:
    """Positions brought into the turn of the view; None where they lie outside.

    Parameters
    ----------
    view : View
        What the map shows.
    positions : sequence of (longitude, latitude)
        [deg]

    Examples
    --------
    >>> visible(View((170.0, -5.0, 190.0, 5.0), [], []), [(-175.0, 0.0), (20.0, 0.0)])
    [(185.0, 0.0), None]
    """
    west, south, east, north = view.box
    found: list[tuple[float, float] | None] = []
    for longitude, latitude in positions:
        turned = west + (longitude - west) % 360.0
        inside = turned <= east and south <= latitude <= north
        found.append((turned, latitude) if inside else None)
    return found
