"""stillfield: where passive solar stills can supply drinking water, and how large they must be.

The notebook interface, with the same power as the command line::

    import stillfield as sf

    weather = sf.open_weather("12839.tm2")
    still = sf.load_still("config/stills/single-slope-glass.yaml")
    monthly = sf.monthly_yield(weather, still, method="rule")

Names are imported when first used, so that importing the package costs next to nothing.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from stillfield.api import Box, Mask, Region, load_places, load_still, monthly_yield, open_weather, rank_places

__version__ = "0.1.0"

__all__ = [
    "Box", "Mask", "Region", "__version__", "load_places", "load_still", "monthly_yield", "open_weather", "rank_places",
]


def __getattr__(name: str) -> Any:
    if name in __all__:
        return getattr(import_module("stillfield.api"), name)
    raise AttributeError(f"module 'stillfield' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(__all__)
