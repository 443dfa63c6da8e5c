"""Blend: how far distillate would reach if raw water were mixed in up to a taste limit; for information only."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from stillfield.errors import DecisionError
from stillfield.physics.brine import density

Array = NDArray[np.float64]


@dataclass(frozen=True)
class TasteLimit:
    """A concentration from which water begins to taste.

    Attributes
    ----------
    name : str
        Name in a run file.
    limit_mg_l : float
        [mg L-1]
    meaning, source : str
        What it says of the water, and where it is printed.
    """

    name: str
    limit_mg_l: float
    meaning: str
    source: str


_WHO = "WHO, Guidelines for Drinking-water Quality, acceptability aspects; quoted from memory"

#: Taste, not health: no health-based value is set for either.
TASTE_LIMITS = {
    limit.name: limit
    for limit in (
        TasteLimit("dissolved-solids-good", 600.0, "taste generally considered good below", _WHO),
        TasteLimit("dissolved-solids-poor", 1000.0, "increasingly unpalatable above", _WHO),
        TasteLimit("chloride", 250.0, "chloride increasingly likely to be tasted above", _WHO),
    )
}

#: Chloride in sea salt, by mass: 19.35 of 35.17 g in a kilogram of reference seawater.
#: (Millero et al. 2008, Deep-Sea Res. I 55:50, reference composition; quoted from memory)
CHLORIDE_SHARE_OF_SEA_SALT = 0.550

BLEND_CAUTION = (
    "For information only: blending holds only if the raw water is otherwise safe to drink. What a still removes "
    "besides salt (germs, arsenic, fluoride, nitrate, metals) comes back with every litre of raw water; have the "
    "raw water and the blend tested."
)


@dataclass(frozen=True)
class Blend:
    """How far distillate would reach if raw water were mixed in up to a taste limit.

    Attributes
    ----------
    limit_mg_l : float
        [mg L-1]
    raw_share : ndarray
        Largest share of raw water in the blend by volume; 1 where raw water alone keeps the limit. [1]
    litres_per_litre : ndarray
        Litres of blend from a litre of distillate; infinite where raw water alone keeps the limit. [L L-1]
    caution : str
        To be shown with the figures.
    """

    limit_mg_l: float
    raw_share: Array
    litres_per_litre: Array
    caution: str = BLEND_CAUTION


def salinity_mg_l(salinity_g_kg: ArrayLike, temperature_c: float = 25.0) -> Array:
    """Dissolved salt of a litre from that of a kilogram.

    Parameters
    ----------
    salinity_g_kg : float or array_like
        Sea salt or sodium chloride. [g kg-1]
    temperature_c : float
        [degC]

    Returns
    -------
    ndarray
        [mg L-1]

    Examples
    --------
    Seawater of 35 g/kg weighs 1.023 kg a litre at 25 °C:

    >>> round(float(salinity_mg_l(35.0)), -2)
    35800.0
    """
    salinity = np.asarray(salinity_g_kg, dtype=np.float64)
    known = np.where(np.isnan(salinity), 0.0, salinity)
    return np.asarray(salinity * np.asarray(density(temperature_c, known)))


def blend_under(limit: str | float, raw_mg_l: ArrayLike, *, distillate_mg_l: float = 0.0) -> Blend:
    """Raw water that could be mixed with distillate before the blend passes a taste limit.

    With volumes that add up, a share x of raw water gives x s + (1 - x) d, hence x = (L - d) / (s - d) and
    1 / (1 - x) litres of blend from a litre of distillate. Nothing but the mass balance of the salt; whether the
    raw water may be drunk at all is another matter, see `BLEND_CAUTION`.

    Parameters
    ----------
    limit : str or float
        A name of `TASTE_LIMITS`, or a concentration L. [mg L-1]
    raw_mg_l : float or array_like
        Concentration s of the same substance in the raw water; NaN where unknown. [mg L-1]
    distillate_mg_l : float
        Concentration d in the distillate. [mg L-1]

    Returns
    -------
    Blend
        Arrays of the shape of `raw_mg_l`, NaN where it is.

    Raises
    ------
    DecisionError
        For an unknown limit, a negative concentration, or distillate that passes the limit itself.

    Examples
    --------
    Well water of 3 g/L and distillate of 20 mg/L, to 600 mg/L:

    >>> round(float(blend_under("dissolved-solids-good", 3000.0, distillate_mg_l=20.0).litres_per_litre), 3)
    1.242
    """
    if isinstance(limit, str):
        if limit not in TASTE_LIMITS:
            raise DecisionError("no such taste limit", where="blend", got=limit, wanted=", ".join(TASTE_LIMITS))
        limit = TASTE_LIMITS[limit].limit_mg_l
    raw = np.asarray(raw_mg_l, dtype=np.float64)
    if (raw < 0.0).any() or not 0.0 <= distillate_mg_l < limit:
        raise DecisionError(
            "concentrations cannot be blended", where="blend", got=f"distillate {distillate_mg_l:g}, limit {limit:g}",
            wanted="raw water of 0 mg/L or more, and distillate below the limit",
        )
    within = raw <= limit
    share = np.where(within, 1.0, (limit - distillate_mg_l) / np.where(within, np.inf, raw - distillate_mg_l))
    litres = np.where(within, np.inf, 1.0 / np.where(within, 1.0, 1.0 - share))
    return Blend(float(limit), np.asarray(share), np.asarray(litres))
