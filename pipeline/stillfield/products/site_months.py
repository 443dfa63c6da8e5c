"""Charts of the twelve months for sites that make no grid: bars with the band and the rule beside them."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from stillfield.errors import OutputError
from stillfield.products.netcdf import MONTH_NAMES
from stillfield.products.page import (
    ACCENT,
    INK,
    LEFT_IN,
    MUTED,
    RIGHT_IN,
    RULE,
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

#: More sites than this make an unreadable page; the tables have them all.
MOST_SITES = 24

_COLUMNS = 4
_CHART_IN, _HEAD_IN, _GAP_IN, _FEET_IN, _KEY_IN = 1.32, 0.26, 0.16, 0.20, 0.42
_BAR = "#4f8fae"
_SUBTITLE = "Distillate, litres per m² of basin in the month. One scale for all sites."
#: Characters of a name that fit above a chart, per inch of its width, beside the worst month.
_CHARACTERS_PER_IN = 7.0
_WORST_IN = 0.85


def write_site_months(monthly: xr.Dataset, path: str | Path, *, words: Words, limit: int = MOST_SITES) -> None:
    """Write a PNG, 1600 px wide, with a small chart of the twelve months for every site.

    A bar is the central value, the thin line on it the band from low to high, the dash the
    constant-efficiency rule where there is one; the worst month stands out.

    Parameters
    ----------
    monthly : Dataset
        Monthly result with dimension site; coordinate ``name`` on site is used for the headings where it
        is there, else the site id. [L m-2 month-1]
    path : str or Path
        File to write, exactly as named.
    words : Words
        Title, footer and caution; an empty subtitle is filled in.
    limit : int
        Most sites drawn, in the order of the dataset; the subtitle says how many are left out.

    Raises
    ------
    OutputError
        When there are no sites.

    Examples
    --------
    >>> import tempfile
    >>> sites = xr.Dataset({"monthly_yield": (("month", "site"), np.full((12, 1), 90.0))},
    ...                    coords={"month": range(1, 13), "site": ["hill"]})
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     write_site_months(sites, f"{folder}/a.png", words=Words("One site"))
    ...     Path(f"{folder}/a.png").stat().st_size > 5_000
    True
    """
    with house_style():
        save_png(draw_site_months(monthly, words=words, limit=limit), path)


def draw_site_months(monthly: xr.Dataset, *, words: Words, limit: int) -> Figure:
    """Draw what `write_site_months` writes; to be called within `page.house_style`."""
    if "monthly_yield" not in monthly or "site" not in monthly["monthly_yield"].dims:
        raise OutputError("no sites to draw", where="monthly_yield", wanted="dimension site")
    total = monthly.sizes["site"]
    shown = monthly.isel(site=slice(0, limit)).load()
    count = shown.sizes["site"]
    rest = f" {count} of {total} sites; the tables have them all." if count < total else ""
    columns = min(_COLUMNS, max(count, 2))
    rows = -(-count // columns)
    row_in = _HEAD_IN + _CHART_IN + _FEET_IN
    page = new_page(Words(words.title, words.footer, words.subtitle or _SUBTITLE + rest, words.caution),
                    rows * row_in + _KEY_IN)
    width = (WIDTH_IN - LEFT_IN - RIGHT_IN - (columns - 1) * _GAP_IN) / columns
    top = _top_of_scale(shown)
    for number in range(count):
        row, column = divmod(number, columns)
        axes = page.axes(LEFT_IN + column * (width + _GAP_IN), page.body_top_in + row * row_in + _HEAD_IN, width,
                         _CHART_IN)
        _chart(axes, shown.isel(site=number))
        _dress(axes, top, figures=column == 0)
        name = _name(shown, number, round((width - _WORST_IN) * _CHARACTERS_PER_IN))
        axes.set_title(name, loc="left", size=8.4, weight="bold", pad=3, color=INK, parse_math=False)
        axes.set_title(_worst(shown.isel(site=number)), loc="right", size=6.8, pad=3.5, color=ACCENT)
    _key(page, has_band="monthly_yield_low" in shown, has_rule="monthly_yield_rule" in shown)
    return page.figure


def _top_of_scale(shown: xr.Dataset) -> float:
    drawn = [shown[name].values for name in ("monthly_yield", "monthly_yield_high", "monthly_yield_rule")
             if name in shown]
    finite = np.concatenate([values[np.isfinite(values)] for values in drawn])
    return 1.06 * float(finite.max()) if finite.size and finite.max() > 0.0 else 1.0


def _chart(axes: Axes, site: xr.Dataset) -> None:
    months = site["month"].values.astype(int)
    worst = int(site["worst_month"].fillna(0)) if "worst_month" in site else 0
    colours = [ACCENT if month == worst else _BAR for month in months.tolist()]
    axes.bar(months, _values(site, "monthly_yield"), width=0.72, color=colours, zorder=2)
    if "monthly_yield_low" in site and "monthly_yield_high" in site:
        low, high = _values(site, "monthly_yield_low"), _values(site, "monthly_yield_high")
        axes.vlines(months, low, high, color=INK, linewidth=0.9, zorder=3)
    if "monthly_yield_rule" in site:
        rule = _values(site, "monthly_yield_rule")
        axes.hlines(rule, months - 0.36, months + 0.36, color=INK, linewidth=0.8, linestyle=(0, (1.2, 1.2)), zorder=4)
    missing = months[~np.isfinite(_values(site, "monthly_yield"))]
    for month in missing.tolist():
        axes.text(month, 0.0, "–", size=8, color=MUTED, ha="center", va="bottom")


def _values(site: xr.Dataset, name: str) -> NDArray[np.float64]:
    return np.asarray(site[name].values, dtype=np.float64)


def _dress(axes: Axes, top: float, *, figures: bool) -> None:
    axes.set(xlim=(0.4, 12.6), ylim=(0.0, top))
    axes.set_xticks(range(1, 13), [name[0] for name in MONTH_NAMES])
    axes.tick_params(labelsize=6.8, length=0, pad=2, labelleft=figures)
    axes.locator_params(axis="y", nbins=4)
    axes.grid(visible=True, axis="y", color=RULE, linewidth=0.5, zorder=0)
    axes.set_axisbelow(True)
    for side in ("top", "left", "right"):
        axes.spines[side].set_visible(False)


def _name(shown: xr.Dataset, number: int, most: int) -> str:
    label = next((key for key in ("name", "site") if key in shown.coords), None)
    text = str(shown[label].values[number]) if label else f"site {number + 1}"
    return text if len(text) <= most else text[:most - 1] + "…"


def _worst(site: xr.Dataset) -> str:
    if "worst_month_yield" not in site or not np.isfinite(site["worst_month_yield"]):
        return ""
    month = MONTH_NAMES[int(site["worst_month"]) - 1][:3]
    return f"{month} {float(site['worst_month_yield']):.1f} a day"


def _key(page: Page, *, has_band: bool, has_rule: bool) -> None:
    from matplotlib.patches import Rectangle

    axes = page.axes(LEFT_IN, page.body_bottom_in - 0.24, WIDTH_IN - LEFT_IN - RIGHT_IN, 0.2)
    axes.set(xlim=(0.0, WIDTH_IN - LEFT_IN - RIGHT_IN), ylim=(-0.1, 0.1))
    axes.axis("off")
    left = 0.0
    entries = [("month", True), ("worst month, litres a day", True), ("band, low to high", has_band),
               ("constant-efficiency rule", has_rule)]
    for number, (text, wanted) in enumerate(entries):
        if not wanted:
            continue
        if number < 2:
            axes.add_patch(Rectangle((left, -0.06), 0.16, 0.12, color=ACCENT if number else _BAR))
        elif number == 2:
            axes.plot([left + 0.08] * 2, [-0.08, 0.08], color=INK, linewidth=0.9)
        else:
            axes.plot([left, left + 0.16], [0.0, 0.0], color=INK, linewidth=0.8, linestyle=(0, (1.2, 1.2)))
        axes.text(left + 0.24, 0.0, text, size=7.2, va="center_baseline")
        left += 0.60 + 0.062 * len(text)
