"""Dryness of the air from its humidity, a part of compiled functions; imported only when it is asked for."""

from __future__ import annotations

from typing import Any

import numpy as np
from numba.extending import register_jitable

_f = np.float32
_LOWEST, _HIGHEST, _ONE = _f(0.01), _f(1.0), _f(1.0)
_THIRD, _FIFTH, _SEVENTH, _NINTH = _f(1.0 / 3.0), _f(1.0 / 5.0), _f(1.0 / 7.0), _f(1.0 / 9.0)


@register_jitable
def dryness(temp: Any, humidity: Any, out: Any, count: Any) -> None:
    """Air temperature less dew point, FAO-56 eq. 11 and 54; twin of `stillfield.physics.vapour.dew_point`.

    The logarithm of the humidity is 8 times that of its 8th root, for which five terms of the series in
    (x - 1) / (x + 1) are enough: no call keeps the processor from taking several numbers at once.

    Parameters
    ----------
    temp : ndarray of float32, shape (cell,)
        Air temperature. [degC]
    humidity : ndarray of float32, shape (cell,)
        Relative humidity, held within 1 and 100. [%]
    out : ndarray of float32, shape (cell,)
        Filled with the difference. [K]
    count : int
        How many cells to fill, from the first on.
    """
    for i in range(count):
        share = humidity[i] * _LOWEST
        share = _LOWEST if share < _LOWEST else share
        share = _HIGHEST if share > _HIGHEST else share
        root = np.sqrt(np.sqrt(np.sqrt(share)))
        z = (root - _ONE) / (root + _ONE)
        zz = z * z
        logarithm = _f(16.0) * z * (_ONE + zz * (_THIRD + zz * (_FIFTH + zz * (_SEVENTH + zz * _NINTH))))
        warm = temp[i] + _f(237.3)
        less = logarithm * warm
        out[i] = temp[i] - _f(237.3) * (less + _f(17.27) * temp[i]) / (_f(17.27 * 237.3) - less)
