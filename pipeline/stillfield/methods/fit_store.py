"""Fits by the fingerprint of their still: shipped with the package, kept in a folder, or made now."""

from __future__ import annotations

import json
import logging
from collections.abc import Mapping
from dataclasses import asdict
from functools import lru_cache
from importlib import resources
from pathlib import Path
from threading import Lock, get_ident
from typing import Any, Literal

from stillfield.physics.correlation import DailyCorrelation
from stillfield.physics.fitting import FIT_VERSION, StillFit, fit_still
from stillfield.physics.still import Still

log = logging.getLogger(__name__)

SHIPPED = "shipped_fits.json"


def fit_for(still: Still, folder: Path | None = None) -> StillFit:
    """Return the fit of a still in its central condition.

    Taken from the package, from `folder`, or made: some seconds, then kept in `folder` where one is given.

    Parameters
    ----------
    still : Still
        Design and condition.
    folder : Path, optional
        Where fits of other runs are kept.

    Returns
    -------
    StillFit
    """
    fingerprint = still.fingerprint()
    shipped = _shipped()
    if fingerprint in shipped:
        return shipped[fingerprint]
    path = None if folder is None else _kept_in(folder, fingerprint)
    if path is not None and fingerprint in (kept := kept_fits(path)):
        return kept[fingerprint]
    fit = _made(still)
    if path is not None:
        path.parent.mkdir(parents=True, exist_ok=True)
        partial = path.with_suffix(f".{get_ident()}.partial")
        partial.write_text(fit_text([fit]), encoding="utf-8", newline="\n")
        partial.replace(path)
    return fit


def fit_state(still: Still, folder: Path | None = None) -> Literal["shipped", "kept", "to be made"]:
    """Tell where `fit_for` would take the fit from, without making it.

    Parameters
    ----------
    still : Still
        Design and condition.
    folder : Path, optional
        Where fits of other runs are kept.

    Returns
    -------
    {'shipped', 'kept', 'to be made'}
    """
    fingerprint = still.fingerprint()
    if fingerprint in _shipped():
        return "shipped"
    return "kept" if folder is not None and fingerprint in kept_fits(_kept_in(folder, fingerprint)) else "to be made"


def _kept_in(folder: Path, fingerprint: str) -> Path:
    return folder / f"fit-{fingerprint}.json"


def _made(still: Still) -> StillFit:
    """Fit made in this process, once, whichever thread asks first."""
    fingerprint = still.fingerprint()
    with _MAKING:
        if fingerprint not in _MADE:
            log.info("fitting %s, %s, to its hourly balance", still.name, still.condition)
            _MADE[fingerprint] = fit_still(still)
        return _MADE[fingerprint]


_MADE: dict[str, StillFit] = {}
_MAKING = Lock()


@lru_cache(maxsize=1)
def _shipped() -> Mapping[str, StillFit]:
    source = resources.files("stillfield.methods") / SHIPPED
    return _read(source.read_text(encoding="utf-8")) if source.is_file() else {}


def kept_fits(path: Path) -> dict[str, StillFit]:
    """Fits in a file, by fingerprint; none where the file is absent, torn or of another version.

    Parameters
    ----------
    path : Path
        A file written by `fit_text`.

    Returns
    -------
    dict of str to StillFit
    """
    try:
        state = path.stat()
        return _kept_as_it_is(path, state.st_mtime_ns, state.st_size)
    except (OSError, ValueError, KeyError, TypeError):
        return {}


@lru_cache(maxsize=64)
def _kept_as_it_is(path: Path, changed_ns: int, size: int) -> dict[str, StillFit]:
    """Fits in a file, read once as long as it stays the same: every piece of a region asks for them."""
    return _read(path.read_text(encoding="utf-8"))


def _read(text: str) -> dict[str, StillFit]:
    content = json.loads(text)
    if content["version"] != FIT_VERSION:
        return {}
    return {
        fingerprint: StillFit(fingerprint, {variant: _correlation(kept) for variant, kept in variants.items()})
        for fingerprint, variants in content["fits"].items()
    }


def _correlation(kept: dict[str, Any]) -> DailyCorrelation:
    return DailyCorrelation(**{
        **kept,
        "coefficients": tuple(kept["coefficients"]),
        "frost": tuple(kept["frost"]),
        "ranges": {name: (low, high) for name, (low, high) in kept["ranges"].items()},
    })


def fit_text(fits: list[StillFit]) -> str:
    """Text of a file of fits, numbers to nine significant digits."""
    def short(value: Any) -> Any:
        if isinstance(value, float):
            return float(f"{value:.9g}")
        if isinstance(value, dict):
            return {key: short(item) for key, item in value.items()}
        return [short(item) for item in value] if isinstance(value, list | tuple) else value

    content = {
        "version": FIT_VERSION,
        "fits": {
            fit.fingerprint: {
                variant: short(asdict(correlation)) for variant, correlation in fit.correlations.items()
            }
            for fit in fits
        },
    }
    return json.dumps(content, sort_keys=True, separators=(",", ":")) + "\n"
