"""Yield methods by name. To add one: write its class, name it in `vocabulary.METHODS`, list it here."""

from __future__ import annotations

from collections.abc import Callable

from stillfield.errors import MethodError
from stillfield.methods import Method
from stillfield.methods.baselines import ConstantEfficiency, PublishedLine
from stillfield.vocabulary import METHODS

_MAKERS: dict[str, Callable[[], Method]] = {
    "rule": ConstantEfficiency,
    "nafey-2000": PublishedLine,
}


def get_method(name: str) -> Method:
    """Return the method called `name`.

    Raises
    ------
    MethodError
        If there is no such method.

    Examples
    --------
    >>> get_method("rule").needs
    ('irradiation',)
    """
    if name not in _MAKERS:
        raise MethodError("no such yield method", got=repr(name), wanted=", ".join(METHODS))
    return _MAKERS[name]()
