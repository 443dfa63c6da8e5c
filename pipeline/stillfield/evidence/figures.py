"""Pictures of the evidence: vapour, cover, a day, the correlation against the balance, litres against sunshine."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from stillfield.evidence.days import LATENT_MJ, MadeDay, household_still, made_day
from stillfield.evidence.measured import plant_still
from stillfield.evidence.printed import ANGLES_DEG, IAPWS_POINTS, PANE_TABLE, book_pressure, paper_pressure
from stillfield.evidence.sites import Sites
from stillfield.methods.fitted import Fitted
from stillfield.methods.heat_balance import HeatBalance
from stillfield.physics import vapour
from stillfield.physics.cover import MATERIALS, transmittance_and_absorptance
from stillfield.physics.published_fits import NAFEY_2000
from stillfield.physics.rule import yield_from_efficiency
from stillfield.physics.still import Still
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
from stillfield.vocabulary import CONDITIONS

if TYPE_CHECKING:
    from matplotlib.axes import Axes

_BLUE, _GREEN, _SAND, _VIOLET = "#2f6f92", "#4d8b6a", "#b98a3a", "#7b5f92"
_COLOURS = (_BLUE, ACCENT, _GREEN, _SAND, _VIOLET, "#8c5a44", "#5d6b76")
_ROOM_LEFT, _ROOM_BELOW, _GAP = 0.52, 0.50, 0.75


def write_figures(folder: Path, sites: Sites, still: Still) -> list[Path]:
    """Write every picture as PNG, 1600 px wide.

    Parameters
    ----------
    folder : Path
        Where to.
    sites : Sites
        Typical years for the comparison of months.
    still : Still
        Design for the comparison of months.

    Returns
    -------
    list of Path
    """
    pages: dict[str, Callable[[], Page]] = {
        "vapour-pressure-error.png": draw_vapour, "cover-transmittance.png": draw_cover, "clear-day.png": draw_day,
        "litres-against-irradiation.png": draw_litres,
        "fitted-against-balance.png": lambda: draw_months(sites, still),
    }
    written = []
    for name, draw in pages.items():
        with house_style():
            save_png(draw().figure, folder / name)
        written.append(folder / name)
    return written


def _panels(page: Page, count: int, height_in: float, top_in: float = 0.12) -> list[Axes]:
    """Panels side by side in the house's grid."""
    width = (WIDTH_IN - LEFT_IN - RIGHT_IN - _ROOM_LEFT - (count - 1) * _GAP) / count
    found = []
    for number in range(count):
        axes = page.axes(LEFT_IN + _ROOM_LEFT + number * (width + _GAP), page.body_top_in + top_in, width, height_in)
        axes.grid(visible=True, color=RULE, linewidth=0.5)
        axes.set_axisbelow(True)
        axes.tick_params(labelsize=7.6, length=0, pad=4)
        for side in ("top", "right"):
            axes.spines[side].set_visible(False)
        found.append(axes)
    return found


def _label(axes: Axes, x: str, y: str, title: str = "") -> None:
    axes.set_xlabel(x, size=8.4)
    axes.set_ylabel(y, size=8.4)
    if title:
        axes.set_title(title, loc="left", size=9.0, weight="bold", color=INK, pad=6)


def _key(axes: Axes, **style: Any) -> None:
    axes.legend(fontsize=7.6, labelcolor=INK, facecolor="white", edgecolor="none", framealpha=0.92, fancybox=False,
                **style)


def draw_vapour() -> Page:
    """Error of four formulas for the saturation pressure."""
    page = new_page(Words(
        "Vapour pressure: what the balance uses, and what still papers print", caution="",
        subtitle="Difference from Wagner & Pruss 1993, the international reference for water.",
        footer="The two printed fits are drawn to show their error; nothing in stillfield computes with them.",
    ), 3.75)
    celsius = np.linspace(1.0, 90.0, 400)
    truth = np.asarray(vapour.saturation_pressure(celsius))

    def error(pressure: Any) -> Any:
        return 100.0 * (np.asarray(pressure) / truth - 1.0)

    left, right = _panels(page, 2, 2.95, 0.28)
    left.axhline(0.0, color=MUTED, linewidth=0.8)
    left.plot(celsius, error(book_pressure(celsius)), color=ACCENT, linewidth=1.8, label="textbook cubic (Kalogirou)")
    left.plot(celsius, error(paper_pressure(celsius)), color=_SAND, linewidth=1.8, label="exp(25.317 − 5144/T)")
    left.plot(celsius, error(vapour.saturation_pressure_fast(celsius)), color=_BLUE, linewidth=1.8,
              label="form in the balance")
    left.set(xlim=(0.0, 90.0), ylim=(-15.0, 6.0))
    _label(left, "water temperature, °C", "error, %", "Printed fits")
    _key(left, loc="lower left")
    right.plot(celsius, np.abs(error(vapour.saturation_pressure_fast(celsius))), color=_BLUE, linewidth=1.4,
               label="form in the balance")
    right.plot(celsius, np.abs(error(vapour.saturation_pressure_fao56(celsius))), color=_GREEN, linewidth=1.4,
               label="FAO-56 eq. 11, for humidity only")
    points = np.array(IAPWS_POINTS)
    ours = np.asarray(vapour.saturation_pressure_fast(points[:, 0]))
    right.plot(points[:, 0], np.abs(100.0 * (ours / points[:, 1] - 1.0)), "o", color=INK, markersize=3.6,
               label="form in the balance, against steam tables\n(printed to 1 Pa)")
    right.set(xlim=(0.0, 90.0), ylim=(1e-6, 10.0), yscale="log")
    _label(right, "water temperature, °C", "size of the error, % (log scale)", "What stillfield uses")
    _key(right, loc="upper left")
    return page


def draw_cover() -> Page:
    """Transmittance of the named sheets over the angle of incidence."""
    page = new_page(Words(
        "What a cover lets through", caution="",
        subtitle="Share of a beam that passes the sheet, by angle from its normal; plastics with their ageing.",
        footer="Lines: Fresnel and Bouguer over all inner reflections. Dots: 4 mm panes worked out before the code was "
               "written.",
    ), 3.95)
    axes = _panels(page, 1, 3.35)[0]
    angle = np.linspace(0.0, 90.0, 361)
    names = ("low-iron-glass", "glass", "greenish-glass", "acrylic", "polycarbonate", "polyethylene-film")
    for name, colour in zip(names, _COLOURS, strict=False):
        passed, _ = transmittance_and_absorptance(np.cos(np.radians(angle)), MATERIALS[name])
        axes.plot(angle, passed, color=colour, linewidth=1.8, label=name.replace("-", " "),
                  linestyle="-" if "glass" in name else (0, (4, 1.4)))
    for number, table in enumerate(PANE_TABLE.values()):
        axes.plot(ANGLES_DEG, table, "o", color=INK, markersize=4.2, zorder=4,
                  label=None if number else "worked out beforehand, K 4 and 32 per m")
    axes.set(xlim=(0.0, 90.0), ylim=(0.0, 1.0), xticks=range(0, 91, 15))
    _label(axes, "angle of incidence, °", "transmittance")
    _key(axes, loc="lower left")
    return page


def draw_day() -> Page:
    """Temperatures and litres of a clear day in a shallow and a deep basin."""
    page = new_page(Words(
        "A clear day in a shallow and in a deep basin",
        subtitle="Maintained stills; 22 MJ/m² of sunshine, air at 27 °C on average, wind 2 m/s; the same day again "
                 "and again.",
        footer="Hourly heat balance. The litres between 6 and 6 o'clock belong to the day that warmed the water.",
    ), 5.12)
    days = [made_day(still, 22.0, temp_air=27.0) for still in (household_still(), plant_still())]
    above = _panels(page, 2, 2.35, 0.28)
    below = _panels(page, 2, 1.45, 3.12)
    warmest = max(float(day.record.water.max()) for day in days)
    most = max(float(day.record.distillate.max()) for day in days)
    titles = ("2 cm of fresh water under one pane", "15 cm of sea water under glass ridges")
    for day, title, upper, lower in zip(days, titles, above, below, strict=True):
        _temperatures(upper, day, title, warmest)
        _hours(lower, day, most)
    _key(above[0], loc="upper left")
    return page


def _temperatures(axes: Axes, day: MadeDay, title: str, warmest: float) -> None:
    hour = np.arange(24) + 0.5
    water = day.record.water[:, 0]
    axes.plot(np.arange(25), np.append(water[-1], water), color=_BLUE, linewidth=2.0, label="water")
    axes.plot(hour, day.record.cover[:, 0], color=ACCENT, linewidth=1.8, label="cover")
    axes.plot(hour, day.temp_air[:, 0], color=MUTED, linewidth=1.4, label="air")
    axes.set(xlim=(0.0, 24.0), xticks=range(0, 25, 3), ylim=(15.0, 5.0 * np.ceil((warmest + 3.0) / 5.0)))
    _label(axes, "", "temperature, °C", title)


def _hours(axes: Axes, day: MadeDay, most: float) -> None:
    litres = day.record.distillate[:, 0]
    axes.bar(np.arange(24) + 0.5, litres, width=0.8, color=_BLUE)
    axes.set(xlim=(0.0, 24.0), xticks=range(0, 25, 3), ylim=(0.0, 1.15 * most))
    _label(axes, "hour of solar time", "L/m² in the hour")
    night = float(1.0 - day.share_of_hours(6, 18)[0])
    words = f"{float(day.litres[0]):.1f} L/m² a day, {100.0 * night:.0f} % from 18 to 6 h"
    axes.set_title(words, loc="right", size=7.8, color=INK, pad=3)


def draw_litres() -> Page:
    """Daily litres over irradiation: four conditions, the rule, a published line, the ceiling."""
    page = new_page(Words(
        "A day's litres against its sunshine",
        subtitle="One pane of ordinary glass over 2 cm of fresh water; air at 25 °C, wind 2 m/s, 25° N in March.",
        footer="Solid: hourly heat balance in four conditions. Dashed: records for comparison. Day values are shown to "
               "compare models; plan with months.",
    ), 4.4)
    axes = _panels(page, 1, 3.75)[0]
    sun = np.linspace(3.0, 28.0, 26)
    for condition, colour in zip(CONDITIONS, (_BLUE, _GREEN, _SAND, ACCENT), strict=True):
        axes.plot(sun, made_day(household_still(condition), sun).litres, color=colour, linewidth=2.1, label=condition)
    axes.plot(sun, yield_from_efficiency(sun), color=INK, linewidth=1.2, linestyle=(0, (1.3, 1.3)),
              label="rule: 30 % of the sunshine over 2.3 MJ/kg")
    within = sun[sun >= NAFEY_2000.irradiation_range[0]]
    printed = NAFEY_2000.litres(within, np.array(25.0), np.array(2.0), 15.0)
    axes.plot(within, printed, color=_VIOLET, linewidth=1.4, linestyle=(0, (5, 1.6)),
              label="Nafey et al. 2000, regression of a laboratory still")
    axes.plot(sun, 0.6 * sun / LATENT_MJ, color=MUTED, linewidth=1.0, linestyle=(0, (6, 2, 1, 2)),
              label="ceiling: 60 % (Cooper 1973)")
    axes.errorbar([18.0], [2.65], yerr=0.35, color=INK, linewidth=1.4, capsize=3.5, fmt="none",
                  label="typical output at 18 MJ/m² (Practical Action)")
    axes.set(xlim=(3.0, 28.0), ylim=(0.0, 7.2))
    _label(axes, "irradiation of the day on the horizontal, MJ/m²", "L/m² of basin in the day")
    _key(axes, loc="upper left")
    return page


def draw_months(sites: Sites, still: Still) -> Page:
    """Months by the correlation against months by the balance."""
    page = new_page(Words(
        "The daily correlation against the hourly balance, month by month",
        subtitle=f"{still.name}, {still.condition}. Sunshine, temperature and wind of each day known, nothing else.",
        footer="Typical years the fit never saw: " + ", ".join(sites.names).title() + ". Hollow: months with frost.",
    ), 4.25)
    truth, frost = sites.monthly(HeatBalance(), still)
    said, _ = sites.monthly(Fitted("daily"), still, ("temp_air_min", "temp_air_max", "temp_dew", "relative_humidity"))
    left, right = _panels(page, 2, 3.4, 0.28)
    top = 1.08 * float(np.nanmax([truth, said]))
    left.plot([0.0, top], [0.0, top], color=MUTED, linewidth=0.9)
    right.axhspan(-2.0, 2.0, color=RULE, alpha=0.55, linewidth=0, label="±2 %")
    right.axhline(0.0, color=MUTED, linewidth=0.9)
    error = 100.0 * (said / np.maximum(truth, 1e-6) - 1.0)
    for number, name in enumerate(sites.names):
        colour = _COLOURS[number % len(_COLOURS)]
        face = np.where(frost[:, number], "white", colour)
        for axes, values in ((left, said), (right, error)):
            axes.scatter(truth[:, number], values[:, number], s=17, facecolors=face.tolist(), edgecolors=colour,
                         linewidths=0.9, zorder=3)
        if len(sites.names) <= len(_COLOURS):
            left.scatter([], [], s=17, color=colour, label=name.title())
    left.set(xlim=(0.0, top), ylim=(0.0, top), aspect="equal")
    right.set(xlim=(0.0, top), ylim=(-12.0, 12.0))
    _label(left, "hourly balance, L/m² in the month", "correlation, L/m² in the month", "Litres")
    _label(right, "hourly balance, L/m² in the month", "correlation less balance, %", "Difference")
    if len(sites.names) <= len(_COLOURS):
        _key(left, loc="upper left")
    _key(right, loc="upper right")
    beyond = int((np.abs(error) > 12.0).sum())
    if beyond:
        right.text(0.98, 0.03, f"{beyond} month{'s' if beyond > 1 else ''} beyond the scale", size=7.2, color=MUTED,
                   transform=right.transAxes, ha="right")
    return page
