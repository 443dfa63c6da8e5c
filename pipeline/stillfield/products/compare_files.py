"""The tables of two runs beside each other, and what their columns mean."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

import pandas as pd

from stillfield.products.place_columns import MONTH_COLUMNS, PLACE_COLUMNS
from stillfield.products.staging import all_or_none
from stillfield.products.tables import Column, write_csv, write_notes

NOTES = "compare_notes.txt"


@dataclass(frozen=True)
class Figure:
    """A figure that is compared.

    Attributes
    ----------
    column : str
        Its column in the tables of a run.
    stem, end : str
        The column's name without and with its unit at the end, for the names of what differs.
    said : str
        What it is, in a few words.
    """

    column: str
    stem: str
    end: str
    said: str

    @property
    def difference(self) -> str:
        """Column with the difference."""
        return f"{self.stem}_difference{self.end}"

    @property
    def change(self) -> str:
        """Column with the change in per cent."""
        return f"{self.stem}_change_percent"


def _figure(column: str, end: str, said: str) -> Figure:
    return Figure(column, column.removesuffix(end) if end else column, end, said)


#: What is compared of places, in the order in which it is told.
PLACE_FIGURES = (
    _figure("sizing_yield_l_m2_day", "_l_m2_day", "L m-2 a day in the sizing month"),
    _figure("annual_yield_l_m2_year", "_l_m2_year", "L m-2 a year"),
    _figure("area_per_person_m2", "_m2", "m2 of basin a person"),
    _figure("area_with_tank_per_person_m2", "_m2", "m2 a person, with a tank"),
    _figure("tank_per_person_l", "_l", "L of that tank"),
    _figure("cost_per_litre", "", "cost of a litre"),
    _figure("annual_cost_per_person", "", "cost of a year, a person"),
)
LITRES, YEAR, AREA, COST = PLACE_FIGURES[0], PLACE_FIGURES[1], PLACE_FIGURES[2], PLACE_FIGURES[5]

#: What is compared of places and months.
MONTH_FIGURES = (_figure("yield_l_m2_month", "_l_m2_month", "L m-2 a month"),)
#: What stands beside it from both runs.
PLACE_BESIDE = ("rank", "rank_low", "rank_high", "sizing_month", "need_l_person_day", "currency")
MONTH_BESIDE = ("need_l_person_day",)

_BOTH = Column("in_runs", "", "both, or the one run in which the row stands.")

SETTING_COLUMNS: tuple[Column, ...] = (
    Column("what", "", "setting of the run file, key of the still file, input file, or version of a package."),
    Column("key", "", "Path of the key, or name of the file or package."),
    Column("unit", "", "Unit of the values, where the run file has one beside the key's name."),
    Column("a_value", "", "In run A; empty where it has none."),
    Column("b_value", "", "In run B; empty where it has none."),
    Column("moves_figures", "", "no for names, folders, the use of the machine and the look of maps."),
)


def columns_of(figures: Sequence[Figure], beside: Sequence[str], known: Sequence[Column]) -> list[Column]:
    """Columns of a table of differences.

    Parameters
    ----------
    figures : sequence of Figure
        What is compared.
    beside : sequence of str
        What stands beside it from both runs.
    known : sequence of Column
        Columns of the tables of a run.

    Returns
    -------
    list of Column
    """
    told = {column.name: column for column in known}
    columns = [Column(f"{run}_{name}", told[name].unit, f"Run {run.upper()}: {told[name].meaning}")
               for name in beside for run in "ab"]
    for figure in figures:
        source = told[figure.column]
        columns += [Column(f"{run}_{figure.column}", source.unit, f"Run {run.upper()}: {source.meaning}")
                    for run in "ab"]
        columns += [Column(figure.difference, source.unit, "Run B less run A."),
                    Column(figure.change, "%", "The same in per cent of run A; empty where that is 0.")]
    return columns


PLACE_DIFFERENCES: tuple[Column, ...] = (
    Column("id", "", "Identifier of the place; run A's where both have the place."),
    Column("name", "", "Name of the place; run A's where both have it."), _BOTH,
    Column("rank_change", "1", "Rank in B less rank in A, among the places that both rank; negative is towards the "
           "top."),
    *columns_of(PLACE_FIGURES, PLACE_BESIDE, PLACE_COLUMNS),
)
MONTH_DIFFERENCES: tuple[Column, ...] = (
    Column("id", "", "Identifier of the place; run A's where both have the place."),
    Column("name", "", "Name of the place; run A's where both have it."),
    Column("month", "", "Month of the year."), _BOTH,
    *columns_of(MONTH_FIGURES, MONTH_BESIDE, MONTH_COLUMNS),
)


def write_comparison(folder: Path, tables: Mapping[str, pd.DataFrame | None], *, title: str,
                     sentences: Sequence[str]) -> tuple[Path, ...]:
    """Write the differences as CSV, with notes beside them.

    Parameters
    ----------
    folder : Path
        Made if need be; files of an earlier comparison are replaced.
    tables : mapping
        ``settings``, ``places`` and ``months``; a table that is None is not written.
    title : str
        Heading of the notes.
    sentences : sequence of str
        What was found.

    Returns
    -------
    tuple of Path

    Raises
    ------
    OutputError
        If the folder cannot be written to.
    """
    known = {"settings": SETTING_COLUMNS, "places": PLACE_DIFFERENCES, "months": MONTH_DIFFERENCES}
    explained: list[Column] = []
    written = [NOTES]
    with all_or_none(folder, "the comparison") as stage:
        for name, columns in known.items():
            table = tables.get(name)
            if table is None:
                continue
            present = [column for column in columns if column.name in table]
            write_csv(table, stage / f"compare_{name}.csv", columns=[column.name for column in present])
            explained += present
            written.append(f"compare_{name}.csv")
        unique = list({column.name: column for column in reversed(explained)}.values())[::-1]
        write_notes(stage / NOTES, unique, title=title, remarks=sentences)
        for name in known:  # of an earlier comparison that had more tables
            if f"compare_{name}.csv" not in written:
                (folder / f"compare_{name}.csv").unlink(missing_ok=True)
    return tuple(folder / name for name in written)
