"""Maps of the yield: twelve months on one scale, and single maps of the year and of the worst month."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from stillfield.errors import OutputError
from stillfield.products.cartography import (
    ColourScale,
    View,
    draw_graticule,
    draw_map,
    draw_scale_bar,
    month_scale,
    name_months,
    view_of,
    visible,
    yield_scale,
)
from stillfield.products.coast import read_land
from stillfield.products.grid import Edges, cell_edges, is_grid
from stillfield.products.netcdf import MONTH_NAMES
from stillfield.products.page import (
    INK,
    LEFT_IN,
    MUTED,
    NO_VALUE,
    NO_VALUE_HATCH,
    RIGHT_IN,
    SEA,
    WIDTH_IN,
    Page,
    Words,
    house_style,
    new_page,
    save_png,
)

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

#: Land as callers give it: a GeoJSON file, shapely geometries, or None for the shipped coast.
Land = str | Path | Iterable[Any] | None

_COLUMNS, _ROWS = 4, 3
_GAP_IN, _HEAD_IN, _STRIP_IN = 0.13, 0.25, 0.86
_TALLEST_SINGLE_IN, _TALLEST_PANEL_IN = 6.6, 3.6
_BAR_IN = 4.75
_NUMBERED = 15
_DAYS_OF_MONTH = 365.25 / 12

_IN_WORDS = {
    "L m-2 month-1": "litres per m² of basin in the month",
    "L m-2 year-1": "litres per m² of basin in the year",
    "L m-2 d-1": "litres per m² of basin a day",
}


@dataclass(frozen=True)
class MapPlace:
    """A village on a map.

    Attributes
    ----------
    latitude, longitude : float
        [deg]
    rank : int or None
        Place in the ranked table; the first ranks are numbered on single maps.
    """

    latitude: float
    longitude: float
    rank: int | None = None


def write_map_twelve_months(
    monthly: xr.Dataset,
    path: str | Path,
    *,
    words: Words,
    variable: str = "monthly_yield",
    land: Land = None,
    places: Sequence[MapPlace] = (),
) -> None:
    """Write a PNG, 1600 px wide, of the twelve months in four columns, all on one colour scale.

    Parameters
    ----------
    monthly : Dataset
        Monthly result on a grid.
    path : str or Path
        File to write, exactly as named.
    words : Words
        Title, footer and caution; an empty subtitle is filled in.
    variable : str
        Variable with dimension month. [L m-2 month-1]
    land : path, geometries or None
        Land to draw instead of the shipped coast.
    places : sequence of MapPlace
        Villages to mark.

    Raises
    ------
    OutputError
        When there is no grid or no such variable.

    Examples
    --------
    >>> import tempfile
    >>> grid = xr.Dataset({"monthly_yield": (("month", "latitude", "longitude"), np.ones((12, 2, 2)))},
    ...                   coords={"month": range(1, 13), "latitude": [20.0, 21.0], "longitude": [-30.0, -29.0]})
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     write_map_twelve_months(grid, f"{folder}/a.png", words=Words("Two by two"))
    ...     Path(f"{folder}/a.png").stat().st_size > 10_000
    True
    """
    with house_style():
        save_png(draw_twelve_months(monthly, words=words, variable=variable, land=land, places=places), path)


def write_map_single(
    monthly: xr.Dataset,
    variable: str,
    path: str | Path,
    *,
    words: Words,
    land: Land = None,
    places: Sequence[MapPlace] = (),
) -> None:
    """Write a PNG, 1600 px wide, of one field, such as ``annual_yield`` or ``worst_month_yield``.

    ``worst_month`` gets a colour per month, round the year. The first ranks among the places are numbered.

    Parameters
    ----------
    monthly : Dataset
        Monthly result on a grid.
    variable : str
        Variable without dimension month.
    path, words, land, places
        As for `write_map_twelve_months`.

    Raises
    ------
    OutputError
        When there is no grid or no such variable.

    Examples
    --------
    >>> import tempfile
    >>> grid = xr.Dataset({"annual_yield": (("latitude", "longitude"), [[900.0, 950.0]], {"units": "L m-2 year-1"})},
    ...                   coords={"latitude": [20.0], "longitude": [-30.0, -29.0]})
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     write_map_single(grid, "annual_yield", f"{folder}/a.png", words=Words("Two cells"))
    ...     Path(f"{folder}/a.png").stat().st_size > 10_000
    True
    """
    with house_style():
        save_png(draw_single(monthly, variable, words=words, land=land, places=places), path)


def draw_twelve_months(
    monthly: xr.Dataset, *, words: Words, variable: str, land: Land, places: Sequence[MapPlace]
) -> Figure:
    """Draw what `write_map_twelve_months` writes; to be called within `page.house_style`."""
    field, edges, view = _ingredients(monthly, variable, land, grains=900)
    if "month" not in field.dims:
        raise OutputError("no twelve months to draw", where=variable, wanted="dimension month")
    scale = yield_scale(field.values)
    slot = (WIDTH_IN - LEFT_IN - RIGHT_IN - (_COLUMNS - 1) * _GAP_IN) / _COLUMNS
    height = min(slot * view.aspect, _TALLEST_PANEL_IN)
    width = height / view.aspect
    page = new_page(_with_subtitle(words, _subtitle(field, months=True)),
                    _ROWS * (height + _HEAD_IN) + 0.30 + _STRIP_IN)
    for number, month in enumerate(field["month"].values.astype(int).tolist()):
        row, column = divmod(number, _COLUMNS)
        left = LEFT_IN + column * (slot + _GAP_IN) + (slot - width) / 2
        axes = page.axes(left, page.body_top_in + row * (height + _HEAD_IN) + _HEAD_IN, width, height)
        panel = field.sel(month=month)
        draw_map(axes, panel, edges, view, scale)
        draw_graticule(axes, view, most=4, names=(row == _ROWS - 1, column == 0))
        _mark(axes, view, places, numbered=False)
        axes.set_title(MONTH_NAMES[month - 1], loc="left", size=9, weight="bold", pad=3, color=INK)
        axes.set_title(_median(panel), loc="right", size=7.2, pad=3.5, color=MUTED)
    _strip(page, view, scale, field, width_in=width, places=places)
    return page.figure


def draw_single(
    monthly: xr.Dataset, variable: str, *, words: Words, land: Land, places: Sequence[MapPlace]
) -> Figure:
    """Draw what `write_map_single` writes; to be called within `page.house_style`."""
    field, edges, view = _ingredients(monthly, variable, land, grains=2500)
    if field.ndim != 2:
        raise OutputError("not a single map", where=variable, got=", ".join(map(str, field.dims)))
    scale = month_scale() if variable == "worst_month" else yield_scale(field.values)
    slot = WIDTH_IN - LEFT_IN - RIGHT_IN
    height = min(slot * view.aspect, _TALLEST_SINGLE_IN)
    width = height / view.aspect
    page = new_page(_with_subtitle(words, _subtitle(field, months=False)), height + 0.30 + _STRIP_IN)
    axes = page.axes(LEFT_IN + (slot - width) / 2, page.body_top_in, width, height)
    draw_map(axes, field, edges, view, scale)
    draw_graticule(axes, view, most=7, names=(True, True))
    if variable == "worst_month":
        name_months(axes, field)
    _mark(axes, view, places, numbered=True)
    _strip(page, view, scale, field, width_in=width, places=places)
    return page.figure


def _ingredients(
    monthly: xr.Dataset, variable: str, land: Land, *, grains: int
) -> tuple[xr.DataArray, Edges, View]:
    if variable not in monthly or not is_grid(monthly[variable]):
        raise OutputError("no such variable on a grid", where=variable, cure="Sites have charts, no maps.")
    field = monthly[variable].load()
    edges = cell_edges(monthly)
    return field, edges, view_of(edges, None if land is None else read_land(land), grains=grains)


def _with_subtitle(words: Words, subtitle: str) -> Words:
    return words if words.subtitle else Words(words.title, words.footer, subtitle, words.caution)


def _subtitle(field: xr.DataArray, *, months: bool) -> str:
    if field.name == "worst_month":
        return "Month of the year with the fewest litres a day: the month to size for."
    text = f"Distillate, {_unit_in_words(field)}"
    text = "Daily distillate in the worst month, litres per m² of basin" if field.name == "worst_month_yield" else text
    return f"{text}. One colour scale for all months; upper right, the median cell." if months else f"{text}."


def _unit_in_words(field: xr.DataArray) -> str:
    unit = str(field.attrs.get("units", "unit not stated"))
    return _IN_WORDS.get(unit, unit)


def _median(panel: xr.DataArray) -> str:
    finite = panel.values[np.isfinite(panel.values)]
    return f"median {np.median(finite):.0f}" if finite.size else "no values"


def _mark(axes: Axes, view: View, places: Sequence[MapPlace], *, numbered: bool) -> None:
    spots = visible(view, [(place.longitude, place.latitude) for place in places])
    shown = [(spot, place.rank) for spot, place in zip(spots, places, strict=True) if spot]
    # The best rank is drawn last and lies on top.
    shown.sort(key=lambda item: -(item[1] or len(places) + 1))
    for (x, y), rank in shown:
        if numbered and rank is not None and rank <= _NUMBERED:
            axes.plot([x], [y], "o", markersize=10.5, color="white", markeredgecolor=INK, markeredgewidth=0.9, zorder=6)
            axes.text(x, y, str(rank), size=6.3, weight="bold", ha="center", va="center_baseline", zorder=7)
        else:
            size = 4.2 if numbered else 2.6
            axes.plot([x], [y], "o", markersize=size, color="white", markeredgecolor=INK, markeredgewidth=0.6, zorder=5)


def _strip(
    page: Page, view: View, scale: ColourScale, field: xr.DataArray, *, width_in: float, places: Sequence[MapPlace]
) -> None:
    """Colour bar, key and scale bar below the maps."""
    top = page.body_bottom_in - _STRIP_IN + 0.12
    _colour_bar(page, scale, field, top)
    left = LEFT_IN + 5.75
    axes = page.axes(left, top, WIDTH_IN - RIGHT_IN - left, 0.8)
    axes.set(xlim=(0.0, WIDTH_IN - RIGHT_IN - left), ylim=(-0.8, 0.0))
    axes.axis("off")
    _key(axes, field, places)
    bar = page.axes(left + 2.0, top + 0.25, 1.3, 0.2)
    bar.set(xlim=(0.0, 1.3), ylim=(-0.1, 0.1))
    bar.axis("off")
    draw_scale_bar(bar, view, width_in, 1.3)


def _colour_bar(page: Page, scale: ColourScale, field: xr.DataArray, top: float) -> None:
    from matplotlib.cm import ScalarMappable

    page.text(LEFT_IN, top + 0.08, _bar_title(field), size=7.6, va="baseline")
    axes = page.axes(LEFT_IN, top + 0.17, _BAR_IN, 0.17)
    bar = page.figure.colorbar(ScalarMappable(scale.norm, scale.colours), cax=axes, orientation="horizontal",
                               spacing="proportional")
    if field.name == "worst_month":
        bar.set_ticks((scale.levels[:-1] + 0.5).tolist(), labels=list(scale.labels))
        axes.tick_params(labelsize=7.4, length=0, labelcolor=INK, pad=3)
        return
    every = -(-len(scale.levels) // 12)
    bar.set_ticks(scale.levels[::every].tolist(), labels=list(scale.labels[::every]))
    axes.tick_params(labelsize=7.4, length=3, width=0.6, labelcolor=INK, pad=2)
    axes.minorticks_off()
    if field.attrs.get("units") == "L m-2 month-1":
        _daily_row(axes, scale.levels[::every], (float(scale.levels[0]), float(scale.levels[-1])))


def _daily_row(axes: Axes, levels: NDArray[np.float64], limits: tuple[float, float]) -> None:
    """Second row of figures below the colour bar: the month's litres as litres a day."""
    shares = (levels - limits[0]) / (limits[1] - limits[0])
    for level, share in zip((levels / _DAYS_OF_MONTH).tolist(), shares.tolist(), strict=True):
        axes.text(share, -1.55, f"{level:.1f}", size=6.8, color=MUTED, ha="center", va="top", transform=axes.transAxes)
    for height, text, colour in ((-0.32, "in the month", INK), (-1.55, "a day", MUTED)):
        axes.text(1.045, height, text, size=6.8, color=colour, va="top", transform=axes.transAxes)


def _bar_title(field: xr.DataArray) -> str:
    if field.name == "worst_month":
        return "month with the fewest litres a day"
    return _unit_in_words(field)


def _key(axes: Axes, field: xr.DataArray, places: Sequence[MapPlace]) -> None:
    from matplotlib.patches import Rectangle

    level = -0.05
    if places:
        axes.plot([0.11], [level], "o", markersize=4.2, color="white", markeredgecolor=INK, markeredgewidth=0.7,
                  clip_on=False)
        ranked = field.ndim == 2 and any(place.rank is not None for place in places)
        axes.text(0.30, level, "village (number: rank)" if ranked else "village", size=7.2, va="center_baseline")
        level -= 0.20
    entries = [("land, no value", NO_VALUE, "/////"), ("sea, no value", SEA, None)]
    for text, colour, hatch in entries:
        patch = Rectangle((0.0, level - 0.065), 0.22, 0.13, facecolor=colour, edgecolor=NO_VALUE_HATCH, hatch=hatch,
                          linewidth=0.5, clip_on=False)
        patch.set_hatch_linewidth(0.45)
        axes.add_patch(patch)
        axes.text(0.30, level, text, size=7.2, va="center_baseline")
        level -= 0.20
