"""The constant-efficiency rule: the transparent baseline printed beside every result."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

#: Usual overall efficiency of a plain basin still. [1] Technical briefs on solar distillation, quoted from memory.
USUAL_EFFICIENCY = 0.30

#: Heat that evaporates a kilogram of water, rounded as the rule rounds it. [MJ kg-1]
RULE_LATENT_HEAT_MJ_KG = 2.3


def yield_from_efficiency(
    irradiation: NDArray[np.floating[Any]] | float,
    efficiency: float = USUAL_EFFICIENCY,
    latent_heat: float = RULE_LATENT_HEAT_MJ_KG,
) -> NDArray[np.floating[Any]] | float:
    """Distillate of a day when a fixed share of the sunshine evaporates water.

    Q = E·G·A / 2.3 with G the daily global irradiation; knows neither temperature nor the still, so it
    over-predicts on poor days and under-predicts on good ones.

    Parameters
    ----------
    irradiation : float or ndarray
        Global horizontal irradiation of the day. [MJ m-2]
    efficiency : float
        Share of `irradiation` carried off by the distillate, in (0, 1). [1]
    latent_heat : float
        Heat that evaporates a kilogram. [MJ kg-1]

    Returns
    -------
    float or ndarray, shape of `irradiation`
        Distillate per basin area, 1 kg of water taken as 1 L. [L m-2]

    Examples
    --------
    >>> round(yield_from_efficiency(18.0, efficiency=0.30), 2)
    2.35
    """
    return efficiency * irradiation / latent_heat
