"""Station tables as text: rows with their line numbers, and headings taken apart into name and unit.

Everything is read as text first; what a cell means is decided later, so that a fault can be told with the line
of the file in which it stands.
"""

from __future__ import annotations

import io
import re
from dataclasses import dataclass
from pathlib import Path

import pandas as pd

from stillfield.errors import WeatherError

#: Units that stand at the end of a heading, after an underscore: longest first.
_UNIT_ENDINGS = {
    "kwh_m2_day": "kWh m-2 day-1", "kwh_m2_d": "kWh m-2 day-1", "mj_m2_day": "MJ m-2 day-1", "mj_m2_d": "MJ m-2 day-1",
    "kj_m2_d": "kJ m-2 day-1", "kwh_m2": "kWh m-2", "wh_m2": "Wh m-2", "mj_m2": "MJ m-2", "kj_m2": "kJ m-2",
    "j_m2": "J m-2", "w_m2": "W m-2", "degc": "degC", "deg_c": "degC", "celsius": "degC", "kpa": "kPa", "hpa": "hPa",
    "m_s": "m s-1", "ms": "m s-1", "km_h": "km h-1", "pct": "%", "percent": "%", "g_kg": "g kg-1", "deg": "deg",
    "m": "m",
}


@dataclass(frozen=True)
class Rows:
    """One table, as text.

    Attributes
    ----------
    path : Path
        The file.
    cells : DataFrame
        Columns by heading, all text, stripped; the index is the line in the file.
    units : dict of str to str
        Unit of a column, where its heading states one.
    keys : dict of str to str
        Heading without unit, in small letters and underscores, to the heading.
    decimal_comma : bool
        Whether a comma may stand for the decimal point.
    """

    path: Path
    cells: pd.DataFrame
    units: dict[str, str]
    keys: dict[str, str]
    decimal_comma: bool

    @property
    def headings(self) -> list[str]:
        """Every heading, in the order of the columns."""
        return [str(name) for name in self.cells.columns]


def read_rows(path: Path, *, comment: str | None = None, header: bool = True, skip_lines: int = 0) -> Rows:
    """Read one table as text.

    UTF-8 (with or without byte-order mark) or cp1252; comma, semicolon, tab or blanks between the cells.

    Parameters
    ----------
    path : Path
        The table.
    comment : str, optional
        Lines that start with it are no rows.
    header : bool
        Whether the first line names the columns; otherwise they are called 1, 2, 3...
    skip_lines : int
        Lines to leave out at the top, comments not counted.

    Returns
    -------
    Rows

    Raises
    ------
    WeatherError
        If the file cannot be read or holds no rows.
    """
    lines = _lines(path)
    numbered = [(number, line) for number, line in enumerate(lines, start=1)
                if line.strip() and not (comment and line.lstrip().startswith(comment))][skip_lines:]
    if len(numbered) < (2 if header else 1):
        raise WeatherError("the table is empty", where=str(path), got=f"{len(numbered)} lines that are no comment",
                           wanted="a heading and a row for each time" if header else "rows")
    first = numbered[0][1]
    delimiter = max(",;\t", key=first.count)
    separator = delimiter if delimiter in first else r"\s+"
    body = numbered[1:] if header else numbered
    frame = _parsed([line for _, line in body], separator)
    names = [str(name) for name in _parsed([first], separator).iloc[0]] if header else []
    names = [name.strip() or f"column {i}" for i, name in enumerate(names, start=1)]
    names += [str(i) for i in range(len(names) + 1, frame.shape[1] + 1)]
    if len(set(names)) < len(names):
        twice = next(name for name in names if names.count(name) > 1)
        raise WeatherError("two columns have one heading", where=str(path), got=twice, cure="Rename one of them.")
    frame = frame.reindex(columns=range(len(names)), fill_value="")
    frame.columns = pd.Index(names)
    frame.index = pd.Index([number for number, _ in body])
    units: dict[str, str] = {}
    keys: dict[str, str] = {}
    for name in names:
        key, unit = heading(name)
        keys.setdefault(key, name)
        if unit is not None:
            units[name] = unit
    return Rows(path, frame, units, keys, delimiter != ",")


def _lines(path: Path) -> list[str]:
    try:
        raw = path.read_bytes()
    except OSError as error:
        raise WeatherError("cannot read the table", where=str(path), got=error.strerror) from error
    if b"\x00" in raw[:4000]:
        raise WeatherError("this is no table of text", where=str(path), wanted="CSV or columns of text",
                           cure="Save it as CSV; NetCDF files are of kind 'netcdf'.")
    try:
        text = raw.decode("utf-8-sig")
    except UnicodeDecodeError:
        text = raw.decode("cp1252", errors="replace")
    return text.splitlines()


def _parsed(lines: list[str], separator: str) -> pd.DataFrame:
    """Cells of lines as stripped text, short rows filled with empty cells."""
    width = max(len(re.split(separator, line.strip()) if separator == r"\s+" else line.split(separator))
                for line in lines)
    frame = pd.read_csv(
        io.StringIO("\n".join(lines)), sep=separator, header=None, names=range(width), dtype=str,
        keep_default_na=False, na_filter=False, index_col=False, skipinitialspace=True, skip_blank_lines=False,
        on_bad_lines="error", engine="c",
    ).fillna("")
    if len(frame) != len(lines):
        raise WeatherError("a quotation mark is never closed", cure="Correct the quotes of the table.")
    for name in frame:
        frame[name] = frame[name].str.strip()
    return frame


def heading(text: str) -> tuple[str, str | None]:
    """Take a heading apart: its name in small letters and underscores, and its unit if it states one.

    Parameters
    ----------
    text : str
        A column's heading.

    Returns
    -------
    name : str
    unit : str or None

    Examples
    --------
    >>> heading("Tmin(C)"), heading("Solar radiation [kJ/m2/d]"), heading("wind_speed_m_s"), heading("TMAX")
    (('tmin', 'C'), ('solar_radiation', 'kJ/m2/d'), ('wind_speed', 'm s-1'), ('tmax', None))
    """
    bracket = re.fullmatch(r"(.*?)\s*[\(\[]([^\)\]]*)[\)\]]\s*", text)
    name, unit = (bracket[1], bracket[2].strip() or None) if bracket else (text, None)
    key = re.sub(r"[^0-9a-z]+", "_", name.strip().lower()).strip("_")
    if unit is None:
        for ending, meant in _UNIT_ENDINGS.items():
            if key.endswith(f"_{ending}") and not re.search(r"\d_m$", f"_{key}"):
                return key[: -len(ending) - 1], meant
    return key, unit
