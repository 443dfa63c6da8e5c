"""Yield methods by name. To add one: write its class, name it in `vocabulary.METHODS`, list it here."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

from stillfield.errors import MethodError
from stillfield.methods import Method
from stillfield.methods.baselines import ConstantEfficiency, PublishedLine
from stillfield.methods.fitted import Fitted
from stillfield.methods.heat_balance import HeatBalance
from stillfield.vocabulary import METHODS

_OTHERS: dict[str, Callable[[], Method]] = {
    "heat-balance": HeatBalance,
    "rule": ConstantEfficiency,
    "nafey-2000": PublishedLine,
}


def get_method(name: str, *, hourly: bool = False, fits_folder: Path | None = None) -> Method:
    """Return the method called `name`.

    Parameters
    ----------
    name : str
        One of `vocabulary.METHODS`.
    hourly : bool
        Whether the weather has steps within the day; 'fitted' then uses them.
    fits_folder : Path, optional
        Where 'fitted' keeps the fits of stills that are not shipped.

    Returns
    -------
    Method

    Raises
    ------
    MethodError
        If there is no such method.

    Examples
    --------
    >>> get_method("rule").needs
    ('irradiation',)
    """
    if name == Fitted.name:
        return Fitted("hourly" if hourly else "daily", fits_folder)
    if name not in _OTHERS:
        raise MethodError("no such yield method", got=repr(name), wanted=", ".join(METHODS))
    return _OTHERS[name]()
