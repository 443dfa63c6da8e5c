"""Whether a calculation runs compiled or in numpy."""

from __future__ import annotations

from importlib.util import find_spec
from typing import Literal

from stillfield.errors import MethodError

Engine = Literal["auto", "compiled", "numpy"]


def is_compiled(engine: Engine, what: str) -> bool:
    """Tell whether numba does the work; nothing is imported for the answer.

    Parameters
    ----------
    engine : {'auto', 'compiled', 'numpy'}
        'auto' is compiled where numba is installed.
    what : str
        What is worked out, for the message.

    Returns
    -------
    bool

    Raises
    ------
    MethodError
        If 'compiled' is asked for and numba is missing.

    Examples
    --------
    >>> is_compiled("numpy", "the correlation")
    False
    """
    there = find_spec("numba") is not None
    if engine == "compiled" and not there:
        raise MethodError(
            f"{what} compiled needs numba, which is not installed",
            got=f"engine {engine!r}",
            cure="Install stillfield[speed], or use the engine 'numpy' or 'auto'.",
        )
    return there and engine != "numpy"
