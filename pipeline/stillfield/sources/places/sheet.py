"""Tables in XLSX workbooks: values as the spreadsheet program last saved them."""

from __future__ import annotations

import datetime
import io
import warnings
import zipfile
from collections.abc import Iterable, Iterator, Mapping
from typing import Any

from stillfield.errors import PlacesError
from stillfield.sources.places.raw_table import (
    HEADING_WITHIN,
    MAX_ROWS,
    Cell,
    RawTable,
    Row,
    enough,
    heading_at,
    listed,
    quoted,
    table_of_rows,
    within_limits,
)

MAX_INFLATED_BYTES = 500_000_000
#: Rows of a sheet; more cannot be in a workbook.
SHEET_ROWS = 1_048_576


def read_sheet(raw: bytes, mapping: Mapping[str, str], *, sheet: str | None, where: str) -> RawTable:
    """Read one sheet of a workbook.

    Parameters
    ----------
    raw : bytes
        The file.
    mapping : mapping of str to str
        Columns named in the run file.
    sheet : str or None
        Name of the sheet; None takes the only one that can be a table of places.
    where : str
        File, for messages.

    Returns
    -------
    RawTable

    Raises
    ------
    PlacesError
        If it is no workbook, the sheet is not there or cannot be told, or it is beyond the limits.
    """
    import openpyxl

    _check_size(raw, where=where)
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")  # styles and validations the library leaves out do not matter here
            book = openpyxl.load_workbook(io.BytesIO(raw), read_only=True, data_only=True, keep_links=False)
            tables = _tables(book, sheet, where=where)
            name, lines = _choose(tables, mapping, where=where)
            book.close()
    except PlacesError:
        raise
    except Exception as error:  # a damaged workbook raises a dozen kinds from XML, zip and number parsing
        raise PlacesError(
            "cannot be read as an XLSX workbook", where=where, got=quoted(f"{type(error).__name__}: {error}", 100),
            cure="Open it in a spreadsheet program and save it anew as XLSX or CSV.",
        ) from None
    remarks = [f"Sheet {quoted(name)} is read."] if len(tables) > 1 else []
    return table_of_rows(lines, mapping, where=f"{where}, sheet {quoted(name)}", remarks=remarks)


def _check_size(raw: bytes, *, where: str) -> None:
    try:
        with zipfile.ZipFile(io.BytesIO(raw)) as archive:
            inflated = sum(part.file_size for part in archive.infolist())
            known = any(part.filename == "[Content_Types].xml" for part in archive.infolist())
    except (zipfile.BadZipFile, ValueError, NotImplementedError, OSError) as error:
        raise PlacesError("cannot be read as an XLSX workbook", where=where, got=quoted(error, 100),
                          cure="Copy or save the file again.") from None
    if not known:
        raise PlacesError("is a zip archive, but no XLSX workbook", where=where,
                          cure="Unpack it, or save the table as XLSX, CSV, GeoJSON or GeoPackage.")
    if inflated > MAX_INFLATED_BYTES:
        raise PlacesError("the workbook is too large", where=where, got=f"{inflated / 1e6:.0f} MB unpacked",
                          wanted=f"at most {MAX_INFLATED_BYTES / 1e6:.0f} MB", cure="Save only the table, as CSV.")


def _tables(book: Any, sheet: str | None, *, where: str) -> dict[str, list[Row]]:
    """Rows of every sheet that may be meant."""
    worksheets = {str(one.title): one for one in book.worksheets}
    if sheet is not None and sheet not in worksheets:
        close = [name for name in worksheets if name.strip().casefold() == sheet.strip().casefold()]
        if len(close) != 1:
            raise PlacesError("no such sheet", where=where, got=quoted(sheet), wanted=listed(worksheets),
                              cure="Correct places.sheet.")
        sheet = close[0]
    meant = [sheet] if sheet is not None else [
        name for name, one in worksheets.items() if one.sheet_state == "visible"]
    found = {}
    for name in meant:
        worksheets[name].reset_dimensions()  # some programs state them wrong
        rows = _rows(worksheets[name].iter_rows(values_only=True), where=f"{where}, sheet {quoted(name)}")
        lines = list(within_limits(rows, where=f"{where}, sheet {quoted(name)}"))
        if lines or sheet is not None:
            found[name] = lines
    return found


def _rows(rows: Iterable[tuple[Any, ...]], *, where: str) -> Iterator[Row]:
    blank = 0
    for number, values in enumerate(rows, start=1):
        if number > SHEET_ROWS:
            raise PlacesError(f"the sheet has more than {SHEET_ROWS} rows", where=where, cure="Save the table as CSV.")
        last = max((index for index, value in enumerate(values) if value is not None), default=-1)
        blank = blank + 1 if last < 0 else 0
        if blank > MAX_ROWS:
            return
        cells = tuple(_cell(value) for value in values[: last + 1])
        if cells and isinstance(cells[0], str) and cells[0].startswith("#") and len(cells) == 1:
            continue  # a remark line
        yield Row(number, cells)


def _cell(value: Any) -> Cell:
    """Value of a cell; what a spreadsheet made a time of day becomes text again."""
    if value is None:
        return ""
    if isinstance(value, bool):
        return str(value).upper()
    if isinstance(value, int | float):
        return value
    if isinstance(value, datetime.timedelta):
        seconds = value.total_seconds()
        return f"{int(seconds // 3600)}:{int(seconds % 3600 // 60):02d}:{seconds % 60:g}"
    if isinstance(value, datetime.datetime | datetime.date):
        return value.isoformat()[:10]
    return str(value).strip()


def _choose(tables: Mapping[str, list[Row]], mapping: Mapping[str, str], *, where: str) -> tuple[str, list[Row]]:
    """The only sheet there is, else the only one whose headings name places and positions."""
    if not tables:
        raise PlacesError("the table of places is empty", where=where, wanted="a header row and a row per place")
    fits = [name for name, lines in tables.items()
            if lines and enough(lines[heading_at(lines[:HEADING_WITHIN], mapping)].cells, mapping)]
    candidates = list(tables) if len(tables) == 1 else fits
    if len(candidates) != 1:
        raise PlacesError(
            "several sheets could be the table of places" if candidates else "no sheet has a name and a position",
            where=where, got=listed(candidates or tables), cure="Name one under places.sheet.",
        )
    return candidates[0], tables[candidates[0]]
