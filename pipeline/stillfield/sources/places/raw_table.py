"""A table of places before its cells mean anything: heading, rows with the file's own numbers, and its limits."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field

from stillfield.errors import Fault, PlacesError
from stillfield.sources.places.columns import recognised

MAX_BYTES = 100_000_000
MAX_ROWS = 100_000
MAX_COLUMNS = 500
MAX_CELL = 10_000
MAX_FAULTS_SHOWN = 20
#: A title, a date and a logo may stand above the headings, hardly more.
HEADING_WITHIN = 20

#: Text as text; numbers only where the file itself says that they are numbers.
Cell = str | int | float
Point = tuple[float, float]


@dataclass(frozen=True)
class Row:
    """One place: the number under which the file's own program shows it, its cells, its (longitude, latitude)."""

    number: int
    cells: tuple[Cell, ...]
    point: Point | None = None

    def cell(self, position: int) -> Cell:
        """Cell at a position; nothing beyond the end of a short row."""
        return self.cells[position] if position < len(self.cells) else ""

    def is_blank(self) -> bool:
        """Whether there is nothing in it."""
        return self.point is None and all(isinstance(cell, str) and not cell.strip() for cell in self.cells)


@dataclass(frozen=True)
class RawTable:
    """Rows as the file has them.

    Attributes
    ----------
    where : str
        File, and sheet or layer, for messages.
    counted : str
        What `Row.number` counts: row or feature.
    header : tuple of str
        Headings, stripped.
    header_row : int or None
        Where they stand.
    rows : list of Row
        Without blank ones.
    has_points : bool
        Whether positions come from geometry.
    usual_mark : str or None
        Decimal mark where the numbers themselves do not show one.
    remarks : list of str
        What was left out or taken for something.
    """

    where: str
    counted: str
    header: tuple[str, ...]
    header_row: int | None
    rows: list[Row]
    has_points: bool = False
    usual_mark: str | None = None
    remarks: list[str] = field(default_factory=list)


class Faults:
    """Faults of a table, gathered so that all can be told at once."""

    def __init__(self, where: str, counted: str) -> None:
        self._where, self._counted = where, counted
        self._found: list[tuple[int, Fault]] = []

    def add(self, number: int | None, label: str, message: str) -> None:
        """Note one: the row, the column's heading, and the sentence."""
        place = ", ".join(part for part in (f"{self._counted} {number}" if number else "", label) if part)
        self._found.append((number or 0, Fault(None, place, message)))

    def refuse(self) -> None:
        """Raise a `PlacesError` with all of them in the order of the rows, if there are any."""
        if not self._found:
            return
        told = [str(fault) for _, fault in sorted(self._found, key=lambda one: one[0])]
        shown = "".join(f"\n  {line}" for line in told[:MAX_FAULTS_SHOWN])
        more = f"\n  and {len(told) - MAX_FAULTS_SHOWN} more" if len(told) > MAX_FAULTS_SHOWN else ""
        raise PlacesError(f"{self._where} has {len(told)} fault{'s' if len(told) > 1 else ''}:{shown}{more}")


def quoted(value: object, most: int = 60) -> str:
    r"""Text of a file as a message may show it: in quotes, unprintable characters escaped, not endless.

    Examples
    --------
    >>> quoted("a\x1b[2J"), quoted("x" * 100, 5)
    ("'a\\x1b[2J'", "'xxxxx...'")
    """
    text = str(value)
    return repr(text if len(text) <= most else text[:most] + "...")


def listed(names: Iterable[str], most: int = 20) -> str:
    """Names as a message lists them.

    Examples
    --------
    >>> listed(["a", "b", "c"], most=2)
    "'a', 'b' and 1 more"
    """
    every = [quoted(name) for name in names]
    return ", ".join(every[:most]) + (f" and {len(every) - most} more" if len(every) > most else "")


def within_limits(rows: Iterable[Row], *, where: str, counted: str = "row") -> Iterator[Row]:
    """Rows that hold something, refused when they are too many, too wide or too long.

    Raises
    ------
    PlacesError
        At the first row beyond a limit.
    """
    kept = 0
    for row in rows:
        if row.is_blank():
            continue
        kept += 1
        limits = (
            (kept - 1, MAX_ROWS, f"more than {MAX_ROWS} rows"),
            (len(row.cells), MAX_COLUMNS, f"more than {MAX_COLUMNS} cells in {counted} {row.number}"),
            (max((len(cell) for cell in row.cells if isinstance(cell, str)), default=0), MAX_CELL,
             f"a cell of more than {MAX_CELL} characters in {counted} {row.number}"),
        )
        for size, limit, told in limits:
            if size > limit:
                raise PlacesError(
                    f"the table of places has {told}", where=where,
                    cure="Is a quotation mark never closed, or is it another file? Else split the table.",
                )
        yield row


def table_of_rows(
    lines: Sequence[Row], mapping: Mapping[str, str], *, where: str, usual_mark: str | None = None,
    remarks: Sequence[str] = (),
) -> RawTable:
    """Find the headings among the first rows of a sheet or text and make the rest the table.

    Parameters
    ----------
    lines : sequence of Row
        Not blank, within the limits.
    mapping : mapping of str to str
        Columns named in the run file.
    where : str
        File, and sheet, for messages.
    usual_mark : str, optional
        Decimal mark where the numbers show none.
    remarks : sequence of str
        What is to be said already.

    Returns
    -------
    RawTable

    Raises
    ------
    PlacesError
        If there is no row below the headings.
    """
    at = heading_at(lines, mapping)
    if len(lines) < at + 2:
        raise PlacesError("the table of places is empty", where=where, wanted="a header row and a row per place")
    said = list(remarks)
    if at:
        said.append(f"The headings stand in row {lines[at].number}; what stands above is left out.")
    header = tuple(str(cell).strip() for cell in lines[at].cells)
    while header and not header[-1]:
        header = header[:-1]
    return RawTable(where, "row", header, lines[at].number, list(lines[at + 1:]), usual_mark=usual_mark, remarks=said)


def heading_at(lines: Sequence[Row], mapping: Mapping[str, str]) -> int:
    """Index of the row of headings: the first that names what a table needs, else the first."""
    for index, row in enumerate(lines[:HEADING_WITHIN]):
        if enough(row.cells, mapping):
            return index
    return 0


def enough(cells: Sequence[Cell], mapping: Mapping[str, str], *, points: bool = False) -> bool:
    """Whether headings name a place and where it is."""
    found = recognised([str(cell) for cell in cells], mapping)
    return "name" in found and (points or "position" in found or {"latitude", "longitude"} <= found)
