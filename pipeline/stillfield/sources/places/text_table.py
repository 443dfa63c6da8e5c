"""Tables of text: CSV with whatever stands between the cells, in the encodings spreadsheets write."""

from __future__ import annotations

import csv
import io
import re
from collections.abc import Iterator, Mapping

from stillfield.errors import PlacesError
from stillfield.sources.places.columns import recognised
from stillfield.sources.places.raw_table import (
    HEADING_WITHIN,
    MAX_ROWS,
    RawTable,
    Row,
    enough,
    table_of_rows,
    within_limits,
)

DELIMITERS = (",", ";", "\t", "|")


def read_text_table(raw: bytes, mapping: Mapping[str, str], *, where: str) -> RawTable:
    """Read a table of text.

    Parameters
    ----------
    raw : bytes
        The file.
    mapping : mapping of str to str
        Columns named in the run file.
    where : str
        File, for messages.

    Returns
    -------
    RawTable

    Raises
    ------
    PlacesError
        If it is no table of text or beyond the limits.
    """
    text, remarks = _decoded(raw, where=where)
    stated = re.match(r"sep=([,;|\t])\s*?(?:\r\n|\r|\n)", text, re.IGNORECASE)
    if stated:
        text, delimiter = text[stated.end():], stated[1]  # a spreadsheet hides this line and does not count it
    else:
        delimiter = _delimiter(text, mapping)
    comments: list[Row] = []
    lines = list(within_limits(_records(text, delimiter, comments, where=where), where=where))
    lines = _heading_among_comments(lines, comments, mapping)
    if comments:
        numbers = ", ".join(str(row.number) for row in comments[:10]) + (" ..." if len(comments) > 10 else "")
        remarks.append(f"Lines that begin with # are left out: row {numbers}.")
    return table_of_rows(lines, mapping, where=where, usual_mark="." if delimiter == "," else None, remarks=remarks)


def _decoded(raw: bytes, *, where: str) -> tuple[str, list[str]]:
    remarks: list[str] = []
    if raw.startswith((b"\xff\xfe", b"\xfe\xff")):
        text = raw.decode("utf-16", errors="replace")
    else:
        try:
            text = raw.decode("utf-8-sig")
        except UnicodeDecodeError:
            text = raw.decode("cp1252", errors="replace")
            remarks.append("The table is not UTF-8; it is read as Windows-1252. If names look wrong, save it as UTF-8.")
    if "\x00" in text:
        raise PlacesError(
            "this is no table of text", where=where, wanted="CSV, GeoJSON, GeoPackage or XLSX",
            cure="Save the table as one of them.",
        )
    return text, remarks


def _delimiter(text: str, mapping: Mapping[str, str]) -> str:
    """The delimiter that makes headings of the first lines, else the most frequent one."""
    first = [line for line in io.StringIO(text[:100_000]) if line.strip()][:HEADING_WITHIN]

    def worth(delimiter: str) -> tuple[int, int]:
        best = (0, 0)
        for line in first:
            cells = [cell.strip().strip('"') for cell in line.lstrip("# ").split(delimiter)]
            best = max(best, (len(recognised(cells[:200], mapping)) if len(cells) > 1 else 0, len(cells)))
        return best

    return max(DELIMITERS, key=worth)


def _records(text: str, delimiter: str, comments: list[Row], *, where: str) -> Iterator[Row]:
    """Rows as a spreadsheet counts them: blank lines and comments count, a cell of several lines counts once."""
    number, fresh = 0, True

    def lines() -> Iterator[str]:
        nonlocal number, fresh
        for line in io.StringIO(text, newline=""):
            if fresh and line.lstrip().startswith("#"):
                number += 1
                if len(comments) < MAX_ROWS:
                    cells = line.strip().split(delimiter)
                    comments.append(Row(number, tuple(cell.strip() for cell in cells[:500])))
                continue
            fresh = False
            yield line

    reader = csv.reader(lines(), delimiter=delimiter, skipinitialspace=delimiter != "\t", strict=True)
    while True:
        try:
            cells = next(reader, None)
        except csv.Error as error:
            raise PlacesError(
                f"a quotation mark has no partner or stands inside a cell ({error})",
                where=f"{where}, row {number + 1}",
                cure='Write a quotation mark inside a quoted cell twice ("").',
            ) from None
        if cells is None:
            return
        number, fresh = number + 1, True
        yield Row(number, tuple(cell.strip() for cell in cells))


def _heading_among_comments(lines: list[Row], comments: list[Row], mapping: Mapping[str, str]) -> list[Row]:
    """Take '# name, lat, lon' for the headings when no other row above the places can be."""
    if any(enough(row.cells, mapping) for row in lines[:HEADING_WITHIN]):
        return lines
    before = [row for row in comments if not lines or row.number < lines[0].number]
    for row in before:
        for cells in (row.cells, (str(row.cells[0]).lstrip("# "), *row.cells[1:])):
            if enough(cells, mapping):
                comments.remove(row)
                return [Row(row.number, cells), *lines]
    return lines
