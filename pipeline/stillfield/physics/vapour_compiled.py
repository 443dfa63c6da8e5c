"""Dryness of the air from its humidity, compiled with numba; imported only when it is asked for."""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

_f = np.float32
_LOWEST, _HIGHEST, _ONE = _f(0.01), _f(1.0), _f(1.0)
_THIRD, _FIFTH, _SEVENTH = _f(1.0 / 3.0), _f(1.0 / 5.0), _f(1.0 / 7.0)


def _dryness(temp: Any, humidity: Any, out: Any) -> None:
    """Air temperature less dew point, FAO-56 eq. 11 and 54; twin of `stillfield.physics.vapour.dew_point`.

    The logarithm of the humidity is 16 times that of its 16th root, for which three terms of the series in
    (x - 1) / (x + 1) are enough: no call keeps the processor from taking several numbers at once.
    """
    for i in range(len(temp)):
        share = humidity[i] * _LOWEST
        share = _LOWEST if share < _LOWEST else share
        share = _HIGHEST if share > _HIGHEST else share
        root = np.sqrt(np.sqrt(np.sqrt(np.sqrt(share))))
        z = (root - _ONE) / (root + _ONE)
        zz = z * z
        logarithm = _f(32.0) * z * (_ONE + zz * (_THIRD + zz * (_FIFTH + zz * _SEVENTH)))
        exponent = logarithm + _f(17.27) * temp[i] / (temp[i] + _f(237.3))
        out[i] = temp[i] - _f(237.3) * exponent / (_f(17.27) - exponent)


try:
    dryness = njit(error_model="numpy", nogil=True, cache=True)(_dryness)
except RuntimeError:  # no folder to keep the cache in: compile anew in every process
    dryness = njit(error_model="numpy", nogil=True)(_dryness)
