"""The files of a trial: figures for programs, days for a spreadsheet, and words for people."""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import pandas as pd

from stillfield.products.staging import all_or_none
from stillfield.products.tables import Column, write_csv, write_notes

#: Files of a trial, in the order in which a reader wants them.
FILES = ("READ-ME-FIRST.txt", "trial.csv", "trial.json")

DAY_COLUMNS: tuple[Column, ...] = (
    Column("still", "", "Name of the still in the trial file."),
    Column("date", "", "Day whose sunshine made the litres."),
    Column("log_row", "1", "Row of the log, as a spreadsheet numbers it."),
    Column("collected_l", "L", "Litres collected, as logged."),
    Column("measured_l_m2_day", "L m-2 d-1", "Litres collected per square metre of basin."),
    Column("modelled_l_m2_day", "L m-2 d-1", "Litres the model gives this still in the weather of the day."),
    Column("irradiation_mj_m2", "MJ m-2", "Sunshine of the day."),
    Column("used", "", "Whether the day stands behind the factor."),
)


def write_trial(
    folder: Path, days: pd.DataFrame, figures: Mapping[str, Any], *, title: str, sentences: Sequence[str]
) -> tuple[Path, ...]:
    """Write the files of a trial into its folder, all or none.

    Parameters
    ----------
    folder : Path
        Made if need be; files of an earlier trial are replaced.
    days : pandas.DataFrame
        `DAY_COLUMNS`.
    figures : mapping
        What goes into trial.json; no NaN.
    title : str
        Heading of the words.
    sentences : sequence of str
        What was found and what to heed.

    Returns
    -------
    tuple of Path

    Raises
    ------
    OutputError
        If the folder cannot be written to.
    """
    text = json.dumps(figures, indent=2, ensure_ascii=False, allow_nan=False) + "\n"
    with all_or_none(folder, "the results of the trial") as stage:
        write_notes(stage / FILES[0], DAY_COLUMNS, title=title, remarks=sentences)
        write_csv(days, stage / FILES[1], columns=[column.name for column in DAY_COLUMNS])
        (stage / FILES[2]).write_text(text, encoding="utf-8", newline="\n")
    return tuple(folder / name for name in FILES)
