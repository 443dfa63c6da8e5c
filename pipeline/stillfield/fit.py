"""Fit stills on request and tell how well the correlation follows the hourly balance."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path

from stillfield.methods.fit_store import fit_text, kept_fits
from stillfield.physics.fitting import StillFit, fit_still
from stillfield.settings.still_file import load_still_file


def fit(still_files: Sequence[str], *, into: str | None = None) -> str:
    """Fit every condition of some still designs.

    Parameters
    ----------
    still_files : sequence of str
        Still files.
    into : str, optional
        File of fits to write; fits of other stills it holds are kept.

    Returns
    -------
    str
        A table: still, condition, variant, error of a month's and a day's litres on the climates of the fit.
    """
    made: dict[str, StillFit] = {}
    lines = [f"{'still':<22} {'condition':<11} {'predictors':<21} {'month, mean error':>17} {'day, rms':>12}"]
    for name in still_files:
        still = load_still_file(name)
        for condition in still.conditions:
            one = fit_still(replace(still, condition=condition))
            made[one.fingerprint] = one
            lines += [
                f"{still.name:<22} {condition:<11} {variant:<21} {100 * found.monthly_error:>15.1f} % "
                f"{found.daily_rms:>7.3f} L m-2"
                for variant, found in one.correlations.items()
            ]
    if into is not None:
        path = Path(into)
        everything = {**kept_fits(path), **made}
        path.write_text(fit_text([everything[key] for key in sorted(everything)]), encoding="utf-8", newline="\n")
    return "\n".join(lines) + "\n"
