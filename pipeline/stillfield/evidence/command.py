"""Work the evidence out and write it down."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import numpy as np

from stillfield.api import load_still
from stillfield.errors import OutputError, StillfieldError
from stillfield.evidence import directions, measured, numerical, oracles, printed
from stillfield.evidence.accuracy import HIGHEST_LATITUDE, accuracy
from stillfield.evidence.figures import write_figures
from stillfield.evidence.report import accuracy_csv, accuracy_markdown, evidence_csv, evidence_markdown
from stillfield.evidence.row import Row
from stillfield.evidence.sites import DEFAULT_WEATHER, open_sites

DEFAULT_FOLDER = "outputs/evidence"
DEFAULT_STILLS = "config/stills"


def all_rows() -> list[Row]:
    """Every line of evidence, in the order of the chain from sun to litres."""
    return [
        row for source in (printed, oracles, numerical, directions, measured) for row in source.rows()
    ]


def evidence(
    into: str | None = None, weather: Sequence[str] | None = None, stills: Sequence[str] | None = None
) -> str:
    """Write evidence.csv, evidence.md, accuracy.csv, accuracy.md and the pictures.

    Parameters
    ----------
    into : str, optional
        Folder to write to; made where it is missing.
    weather : sequence of str, optional
        Typical years on which the correlation is compared with the balance; those that come with pvlib without it.
    stills : sequence of str, optional
        Still files to compare; those in `DEFAULT_STILLS` without it.

    Returns
    -------
    str
        What was found, in a few lines.

    Raises
    ------
    StillfieldError
        If there is no still file.
    OutputError
        If the folder cannot be written.
    """
    files = list(stills) if stills else sorted(map(str, Path(DEFAULT_STILLS).glob("*.yaml")))
    if not files:
        raise StillfieldError("no still files to compare", where=DEFAULT_STILLS, cure="Name them with --still.")
    designs = [load_still(name) for name in files]
    sites = open_sites(list(weather or DEFAULT_WEATHER))
    rows = all_rows()
    found = accuracy(sites, designs)
    near = np.abs(sites.by_days.latitude) <= HIGHEST_LATITUDE
    tables = accuracy_markdown(found, [name for name, kept in zip(sites.names, near, strict=True) if kept])
    folder = Path(into or DEFAULT_FOLDER)
    try:
        folder.mkdir(parents=True, exist_ok=True)
        figures = write_figures(folder, sites, designs[-1])
        texts = {
            "evidence.csv": evidence_csv(rows),
            "evidence.md": evidence_markdown(rows, tables, [path.name for path in figures]),
            "accuracy.csv": accuracy_csv(found),
            "accuracy.md": tables,
        }
        for name, text in texts.items():
            (folder / name).write_text(text, encoding="utf-8", newline="\n")
    except OSError as error:
        raise OutputError("the evidence cannot be written", where=str(folder), got=error.strerror) from None
    return _summary(rows, len(found), folder)


def _summary(rows: Sequence[Row], compared: int, folder: Path) -> str:
    verdicts = [row.verdict for row in rows]
    lines = [
        f"{len(rows)} lines of evidence: {verdicts.count('within')} within, {verdicts.count('outside')} outside, "
        f"{verdicts.count('no comparison')} without comparison; correlation against balance: {compared} comparisons.",
        *(f"  outside: {row.what}: expected {row.expected:.4g}, got {row.got:.4g} {row.unit}"
          for row in rows if row.verdict == "outside"),
        f"Written to {folder}",
    ]
    return "\n".join(lines) + "\n"
