"""What two runs are told by when they are set beside each other."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Protocol

import pandas as pd


class Change(Protocol):
    """How far a figure of B lies from that of A, over places or cells."""

    @property
    def count(self) -> int:
        """Places or cells behind it."""
        ...

    @property
    def median_a(self) -> float:
        """Median in A."""
        ...

    @property
    def median_b(self) -> float:
        """Median in B."""
        ...

    @property
    def percent(self) -> float:
        """Median of the changes, in per cent."""
        ...

    @property
    def percent_low(self) -> float:
        """Least change, in per cent."""
        ...

    @property
    def percent_high(self) -> float:
        """Greatest change, in per cent."""
        ...


@dataclass(frozen=True)
class Places:
    """What is known of the places of both runs.

    Attributes
    ----------
    table, months : pandas.DataFrame
        `compare_files.PLACE_DIFFERENCES`, pairs first in A's order, and ``a_among``, ``b_among``, the ranks among the
        places that both rank; `compare_files.MONTH_DIFFERENCES` or None.
    changes : mapping of str to Change
        By column of `compare_files.PLACE_FIGURES`.
    by_month : mapping of str to Change
        By name of the month.
    by_position : int
        Pairs known by name and position, their ids being different.
    other_place : tuple of str
        Ids that mean another place in the other run.
    moved : tuple of str
        Ids of pairs whose position differs.
    """

    table: pd.DataFrame
    months: pd.DataFrame | None
    changes: Mapping[str, Change]
    by_month: Mapping[str, Change]
    by_position: int = 0
    other_place: tuple[str, ...] = ()
    moved: tuple[str, ...] = ()

    @property
    def both(self) -> pd.DataFrame:
        """Places that stand in both runs."""
        return self.table[self.table["in_runs"] == "both"]


@dataclass(frozen=True)
class Cells:
    """What is known of the cells or sites of both runs.

    Attributes
    ----------
    what : str
        'cell' or 'site'.
    changes : mapping of str to Change
        By figure in words, the year first.
    where : mapping of str to str
        Where each changes most.
    only_in_one : int
        Cells or sites with a year's litres in one run only.
    differ : str
        Why nothing can be compared; empty where it can.
    """

    what: str
    changes: Mapping[str, Change] = field(default_factory=dict)
    where: Mapping[str, str] = field(default_factory=dict)
    only_in_one: int = 0
    differ: str = ""


@dataclass(frozen=True)
class Beside:
    """Everything two runs are told by.

    Attributes
    ----------
    runs : tuple of two str
        What A and B are.
    settings : pandas.DataFrame
        `compare_files.SETTING_COLUMNS`; no rows where nothing differs.
    places : Places or None
        None where a run has no places.
    cells : Cells
        Cells or sites.
    designs_known : bool
        Whether both manifests hold the numbers of the still.
    """

    runs: tuple[str, str]
    settings: pd.DataFrame
    places: Places | None
    cells: Cells
    designs_known: bool = True
