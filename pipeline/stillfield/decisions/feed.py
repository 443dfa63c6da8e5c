"""Feed and brine of a still: water to carry in, brine to flush out, salt left over.

Whatever salt comes in with the feed leaves with the brine, since distillate carries none. With the draw-off factor
CF = salinity of the brine that leaves / salinity of the feed, the balance of water and salt by mass is

    feed = distillate x CF / (CF - 1),    brine = distillate / (CF - 1),    flushed share of the feed = 1 / CF.

Litres follow from the masses by density. How salty the basin is meanwhile depends on how it is flushed: fed and
drawn off all the time, the basin is as salty as what leaves; filled, left to dry down and emptied, it begins as feed
and ends as CF, and its mean is lower.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from stillfield.decisions.cost import MONTH_DAYS
from stillfield.errors import StillfieldError

Array = NDArray[np.float64]
Flushing = Literal["continuous", "batch"]

#: Sodium chloride in a saturated solution at 25 degC, by mass: 36.0 g per 100 g of water (CRC Handbook of Chemistry
#: and Physics, quoted from memory) are 26.5 %; `physics.brine` has 264 as well. It changes by 0.3 % from 20 to
#: 40 degC (table of the Salt Institute: 26.45 % at 21.1 degC, 26.68 % at 37.8 degC). [g kg-1]
SATURATION_G_KG = 264.0
#: Density of sodium chloride solutions at 20 degC: percent by mass, kg m-3. Source: Poradnik fizykochemiczny, WNT,
#: Warszawa 1974; water and saturation completed at either end.
_PERCENT = (0.0, 1.0, 2.0, 4.0, 6.0, 8.0, 10.0, 12.0, 14.0, 16.0, 18.0, 20.0, 22.0, 24.0, 26.0, 26.4)
_DENSITY = (998.2, 1005.3, 1012.2, 1026.8, 1041.3, 1055.9, 1070.7, 1085.7, 1100.9, 1116.2, 1131.9, 1147.8, 1164.0,
            1180.4, 1197.2, 1200.6)  # fmt: skip


@dataclass(frozen=True)
class FeedAndBrine:
    """Water and salt that go with some distillate: of the same time, area and shape as the distillate.

    Attributes
    ----------
    feed_litres : ndarray
        Feed to bring. [L]
    brine_litres : ndarray
        Brine to get rid of, without crystals. [L]
    flushed_share : ndarray
        Share of the feed, by mass, that leaves as brine. [1]
    brine_salinity_g_kg : ndarray or None
        Salinity the brine would have if all salt stayed dissolved. [g kg-1]
    salt_kg : ndarray or None
        Salt left over, dissolved and as crystals. [kg]
    crystals_kg : ndarray or None
        Of it, what cannot stay dissolved and is left in the basin. [kg]
    saturated : ndarray of bool or None
        Whether the brine passes the saturation of sodium chloride.

    The last four are None where the salinity of the feed is not given; in an array of salinities NaN means the same
    for one place, `saturated` is then False.
    """

    feed_litres: Array
    brine_litres: Array
    flushed_share: Array
    brine_salinity_g_kg: Array | None
    salt_kg: Array | None
    crystals_kg: Array | None
    saturated: NDArray[np.bool_] | None


def feed_and_brine(
    distillate_litres: ArrayLike, concentration_factor: ArrayLike, feed_salinity_g_kg: ArrayLike | None = None
) -> FeedAndBrine:
    """Feed, brine and salt for some distillate.

    Feed of unknown salinity is taken as fresh for its litres; sea water needs 2.5 % fewer.

    Parameters
    ----------
    distillate_litres : float or ndarray
        Distillate of a day, month or year, per square metre or of a whole village. [L]
    concentration_factor : float or ndarray
        Salinity of the brine that leaves over that of the feed, above 1. [1]
    feed_salinity_g_kg : float or ndarray, optional
        Salt in the feed. [g kg-1]

    Returns
    -------
    FeedAndBrine

    Raises
    ------
    StillfieldError
        When a factor is not above 1 (no feed would be enough) or a salinity is impossible.

    Examples
    --------
    >>> month = feed_and_brine(100.0, 2.0, 35.0)
    >>> round(float(month.feed_litres), 1), round(float(month.brine_litres), 1), round(float(month.salt_kg), 2)
    (195.1, 95.2, 6.99)
    >>> round(float(feed_and_brine(100.0, 2.0).feed_litres), 1), feed_and_brine(100.0, 2.0).salt_kg
    (200.0, None)
    """
    factor = _checked_factor(concentration_factor)
    salinity = _checked_salinity(np.nan if feed_salinity_g_kg is None else feed_salinity_g_kg)
    water_kg = np.asarray(distillate_litres, np.float64) * _DENSITY[0] / 1000.0
    brine_kg = water_kg / (factor - 1.0)
    feed_kg = brine_kg * factor
    known = np.where(np.isnan(salinity), 0.0, salinity)
    feed_litres = feed_kg / solution_density(known) * 1000.0
    salt_kg = feed_kg * known / 1000.0
    dissolvable_kg = np.maximum(brine_kg - salt_kg, 0.0) * SATURATION_G_KG / (1000.0 - SATURATION_G_KG)
    crystals_kg = np.maximum(salt_kg - dissolvable_kg, 0.0)
    liquor_kg = np.maximum(brine_kg - crystals_kg, 0.0)
    brine_litres = liquor_kg / solution_density(known * factor) * 1000.0
    share = np.broadcast_to(1.0 / factor, feed_kg.shape)
    if feed_salinity_g_kg is None:
        return FeedAndBrine(feed_litres, brine_litres, share, None, None, None, None)
    unknown = np.broadcast_to(np.isnan(salinity), feed_kg.shape)
    return FeedAndBrine(
        feed_litres, brine_litres, share, np.broadcast_to(salinity * factor, feed_kg.shape),
        np.where(unknown, np.nan, salt_kg), np.where(unknown, np.nan, crystals_kg),
        np.broadcast_to(salinity * factor > SATURATION_G_KG, feed_kg.shape),
    )


def per_day(monthly: ArrayLike) -> Array:
    """Mean of a day from totals of the twelve months.

    Parameters
    ----------
    monthly : ndarray, (12, ...)
        Totals of the months, January first: litres of feed, kilograms of salt, watt-hours.

    Returns
    -------
    ndarray, (12, ...)
        The same per day of each month.

    Examples
    --------
    >>> per_day([31.0, 56.0] + [0.0] * 10)[:2]
    array([1., 2.])
    """
    totals = np.asarray(monthly, np.float64)
    if totals.ndim == 0 or totals.shape[0] != len(MONTH_DAYS):
        raise StillfieldError("months should stand first", got=f"shape {totals.shape}", wanted="(12, ...)")
    days: Array = np.asarray(MONTH_DAYS, np.float64).reshape(-1, *[1] * (totals.ndim - 1))
    return totals / days


def mean_basin_factor(draw_off_factor: ArrayLike, flushing: Flushing = "continuous") -> Array:
    """Mean basin concentration over feed concentration.

    continuous: the draw-off factor itself. batch: water leaves at an even rate while the salt stays, so that the
    concentration is 1/(1 - x) at the share x evaporated, and its mean up to the end is CF ln CF / (CF - 1).

    Parameters
    ----------
    draw_off_factor : float or ndarray
        Salinity of the brine that leaves over that of the feed, above 1. [1]
    flushing : {'continuous', 'batch'}
        How the basin is flushed.

    Returns
    -------
    ndarray, shape of `draw_off_factor`
        [1]

    Raises
    ------
    StillfieldError
        When a factor is not above 1.

    Examples
    --------
    >>> float(mean_basin_factor(2.0)), round(float(mean_basin_factor(2.0, "batch")), 3)
    (2.0, 1.386)
    """
    factor = _checked_factor(draw_off_factor)
    return factor if flushing == "continuous" else factor * np.log(factor) / (factor - 1.0)


def draw_off_factor(mean_factor: ArrayLike, flushing: Flushing = "continuous") -> Array:
    """Draw-off factor that gives a mean basin concentration, such as a still's `concentration_factor`.

    batch: the inverse of CF ln CF / (CF - 1) = m, which is CF = -m / W(-m exp(-m)) with Lambert's W.

    Parameters
    ----------
    mean_factor : float or ndarray
        Mean basin concentration over feed concentration, above 1. [1]
    flushing : {'continuous', 'batch'}
        How the basin is flushed.

    Returns
    -------
    ndarray, shape of `mean_factor`
        [1]

    Raises
    ------
    StillfieldError
        When a factor is not above 1.

    Examples
    --------
    >>> round(float(draw_off_factor(1.5, "batch")), 3)
    2.397
    """
    mean = _checked_factor(mean_factor)
    if flushing == "continuous":
        return mean
    from scipy.special import lambertw

    branch = lambertw(np.asarray(-mean * np.exp(-mean), np.complex128), np.zeros(mean.shape, np.int64))
    return np.asarray(-mean / branch.real, np.float64)


def brine_warnings(
    feed_salinity_g_kg: ArrayLike | None,
    concentration_factor: float,
    *,
    basin_salinity_g_kg: float,
    flushing: Flushing = "continuous",
    tolerance_g_kg: float = 10.0,
) -> tuple[str, ...]:
    """Sentences about brine that is too salty, or not the brine whose litres were worked out.

    Parameters
    ----------
    feed_salinity_g_kg : float or ndarray, optional
        Salt in the feed, of one or several places; NaN where it is not known. [g kg-1]
    concentration_factor : float
        Draw-off factor, above 1. [1]
    basin_salinity_g_kg : float
        Salinity for which the yield was worked out (`Still.basin_salinity_g_kg`). [g kg-1]
    flushing : {'continuous', 'batch'}
        How the basin is flushed.
    tolerance_g_kg : float
        Difference that is not worth a word: 10 g/kg lower the vapour pressure by 0.5 % and the yield by
        0.5 to 1 %. [g kg-1]

    Returns
    -------
    tuple of str
        One sentence for each kind of fault; none when all is well or no salinity is known.

    Examples
    --------
    >>> brine_warnings(35.0, 1.5, basin_salinity_g_kg=52.5)
    ()
    >>> print(*brine_warnings(100.0, 3.0, basin_salinity_g_kg=290.0), sep="; ")
    Brine of up to 300 g/kg passes the saturation of salt (264 g/kg): salt will settle in the basin; flush it to a \
factor of at most 2.6
    """
    salinity = _checked_salinity(np.nan if feed_salinity_g_kg is None else feed_salinity_g_kg)
    known = np.atleast_1d(salinity)[~np.isnan(np.atleast_1d(salinity))]
    if known.size == 0:
        return ()
    said = []
    saltiest = float(known.max())
    if saltiest * float(_checked_factor(concentration_factor)) > SATURATION_G_KG:
        room = np.floor(10.0 * SATURATION_G_KG / saltiest) / 10.0
        cure = f"flush it to a factor of at most {room:g}" if room > 1.0 else "such feed is no use in a still"
        said.append(
            f"Brine of up to {saltiest * concentration_factor:.0f} g/kg passes the saturation of salt "
            f"({SATURATION_G_KG:.0f} g/kg): salt will settle in the basin; {cure}"
        )
    basin = known * float(mean_basin_factor(concentration_factor, flushing))
    off = basin - basin_salinity_g_kg
    if np.abs(off).max() > tolerance_g_kg:
        worst = float(basin[np.abs(off).argmax()])
        said.append(
            f"The litres hold for a basin of {basin_salinity_g_kg:.0f} g/kg, but this feed and flushing give "
            f"{worst:.0f} g/kg: {'saltier, so fewer litres' if worst > basin_salinity_g_kg else 'fresher, so more'}"
        )
    return tuple(said)


def solution_density(salinity_g_kg: ArrayLike) -> Array:
    """Density of a solution of sodium chloride at 20 degC; sea salt is within 0.5 % of it.

    Valid from 0 to saturation; saltier mixtures are taken as saturated liquor. Source: Poradnik fizykochemiczny,
    WNT, Warszawa 1974, table of sodium chloride solutions.

    Parameters
    ----------
    salinity_g_kg : float or ndarray
        [g kg-1]

    Returns
    -------
    ndarray, shape of `salinity_g_kg`
        [kg m-3]

    Examples
    --------
    >>> round(float(solution_density(200.0)), 1)
    1147.8
    """
    return np.asarray(np.interp(np.asarray(salinity_g_kg, np.float64) / 10.0, _PERCENT, _DENSITY), np.float64)


def _checked_factor(factor: ArrayLike) -> Array:
    values = np.asarray(factor, np.float64)
    if not bool(np.all((values > 1.0) & np.isfinite(values))):
        raise StillfieldError(
            "a concentration factor of 1 or less would need endless feed",
            got=f"{np.atleast_1d(values).min():g}", wanted="above 1",
            cure="1.5 to 2 is usual for sea water.",
        )
    return values


def _checked_salinity(salinity: ArrayLike) -> Array:
    values = np.asarray(salinity, np.float64)
    if bool(np.any((values < 0.0) | (values > SATURATION_G_KG))):
        raise StillfieldError(
            "salinity of the feed is impossible", got=f"{np.nanmin(values):g} to {np.nanmax(values):g} g/kg",
            wanted=f"0 to {SATURATION_G_KG:g} g/kg",
        )
    return values
