"""Whether the sunshine of a whole record can be true: its share of what arrives outside the atmosphere.

A wrong unit or a misread meaning that makes too little of the sunshine passes every bound of a single day,
because any day may be dull. No place on land is dull for months.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from stillfield.physics.sun import extraterrestrial_irradiation

Array = NDArray[np.floating[Any]]

#: Mean clearness below or above which a record is doubted. Monthly means of land stations lie between about 0.25
#: and 0.75 (common practice, no source). [1]
DULLEST, BRIGHTEST = 0.2, 0.85
_LEAST_DAYS = 20
#: Middle of every month, which stands for its days. 1 to 365
MID_MONTH_DAYS = np.array([16, 45, 75, 105, 136, 166, 197, 228, 258, 289, 319, 350])
#: Mean irradiation outside the atmosphere below which the sun is too low to judge by. [MJ m-2]
_LEAST_OUTSIDE = 5.0


def count_doubtful(irradiation: Array, days: Array, latitude: Array) -> dict[str, int]:
    """Count the cells whose mean clearness over the record is out of range.

    Parameters
    ----------
    irradiation : ndarray, shape (12, cell)
        Irradiation over all used days of each month of the year. [MJ m-2]
    days : ndarray, shape (12, cell)
        Number of these days.
    latitude : ndarray, shape (cell,)
        [deg north]

    Returns
    -------
    dict of str to int
        Numbers of 'dull' and 'bright' cells and, as 'values', of all; cells with fewer than 20 days, or with too
        low a sun, are not judged.
    """
    distinct, row = np.unique(latitude, return_inverse=True)
    outside = extraterrestrial_irradiation(distinct, MID_MONTH_DAYS)[:, row]
    above = (outside * days).sum(axis=0)
    count = days.sum(axis=0)
    judged = (count >= _LEAST_DAYS) & (above > _LEAST_OUTSIDE * count)
    received = irradiation.sum(axis=0)
    return {
        "dull": int((judged & (received < DULLEST * above)).sum()),
        "bright": int((judged & (received > BRIGHTEST * above)).sum()),
        "values": latitude.size,
    }
