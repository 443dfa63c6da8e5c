"""Whatever a village table holds, it is read or refused with words; what is written in one way is read so."""

from __future__ import annotations

import io
import json
import tempfile
from pathlib import Path

import numpy as np
import openpyxl
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from stillfield.errors import PlacesError
from stillfield.sources.places import read_places
from stillfield.sources.places.number_text import number_of
from stillfield.sources.places.positions import parse_angle, parse_position

QUICK = settings(deadline=None, max_examples=60, suppress_health_check=[HealthCheck.too_slow])


def read_or_refuse(raw: bytes) -> None:
    """No error but the one with words, and a table that keeps its promises."""
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "v.csv"
        path.write_bytes(raw)
        told = ""
        try:
            frame = read_places(path)
        except PlacesError as error:
            told = str(error)
    if told:
        assert told.startswith(str(path))
        assert len(told) < 20_000
        return
    assert len(frame) > 0
    assert frame["latitude"].between(-90, 90).all()
    assert (frame["longitude"].ge(-180) & frame["longitude"].lt(180)).all()
    assert frame["name"].ne("").all()
    assert frame["id"].is_unique
    assert frame["row"].is_monotonic_increasing


HEADINGS = ["name", "lat", "lon", "id", "pop", "TDS mg/L", "EC", "GPS", "lon_lat", "distance (m)", "note", "", "#",
            "lat", "Longitude (W)", "x", "population"]
CELLS = ["A", "NA", "", "19.38", "-42,5", "19°22'48\" N", "42 11 51 O", "1.250", "1,250", "8 400", "inf", "1e999", "٣",
         "²", "#N/A", "-", "0", "999999", "19.3, -42.1", "12d34m56S", "N", "°", "--1", "1__2", "\x00", "\r", "𝟙",
         "POINT (1 2)"]
cell = st.one_of(st.sampled_from(CELLS), st.text(max_size=8))


@QUICK
@given(st.lists(st.sampled_from(HEADINGS), min_size=1, max_size=6), st.lists(st.lists(cell, max_size=7), max_size=5),
       st.sampled_from(",;\t|"), st.sampled_from(["utf-8", "utf-8-sig", "utf-16", "cp1252", "utf-16-le"]))
def test_any_table_of_text_is_read_or_refused_with_words(headings, rows, delimiter, encoding):
    text = "\n".join(delimiter.join(row) for row in [headings, *rows])
    read_or_refuse(text.encode(encoding, errors="ignore"))


@QUICK
@given(st.binary(max_size=200))
def test_any_bytes_are_read_or_refused_with_words(raw):
    read_or_refuse(b"name,lat,lon\n" + raw)
    read_or_refuse(raw)


@QUICK
@given(st.lists(st.tuples(st.sampled_from(["A", "B"]), cell, cell), min_size=1, max_size=4))
def test_any_cells_for_coordinates_are_read_or_refused_with_words(rows):
    text = io.StringIO()
    for row in [("name", "lat", "lon"), *rows]:
        text.write(";".join('"' + one.replace('"', '""') + '"' for one in row) + "\r\n")
    read_or_refuse(text.getvalue().encode("utf-8", errors="ignore"))


nested = st.recursive(
    st.one_of(st.none(), st.booleans(), st.integers(), st.floats(), st.text(max_size=5)),
    lambda inner: st.one_of(st.lists(inner, max_size=3), st.dictionaries(st.sampled_from(
        ["type", "features", "geometry", "properties", "coordinates", "name", "crs", "id", "lat"]), inner, max_size=4)),
    max_leaves=10,
)


@QUICK
@given(nested, nested, nested)
def test_any_json_is_read_or_refused_with_words(geometry, properties, crs):
    feature = {"type": "Feature", "geometry": geometry, "properties": properties}
    for document in (geometry, {"type": "FeatureCollection", "features": [feature], "crs": crs},
                     {"type": "FeatureCollection", "features": geometry}):
        read_or_refuse(b"{" + json.dumps(document).encode().lstrip(b"{"))


def _workbook() -> bytes:
    book = openpyxl.Workbook()
    for row in (["name", "lat", "lon"], ["A", 19.38, -42.1975]):
        book.active.append(row)
    stream = io.BytesIO()
    book.save(stream)
    return stream.getvalue()


WORKBOOK = _workbook()


@settings(deadline=None, max_examples=40)
@given(st.lists(st.tuples(st.integers(0, len(WORKBOOK) - 1), st.integers(0, 255)), min_size=1, max_size=6))
def test_a_damaged_workbook_is_read_or_refused_with_words(changes):
    raw = bytearray(WORKBOOK)
    for place, value in changes:
        raw[place] = value
    read_or_refuse(bytes(raw))


MARKS = ["{d}°{m}'{s}\"{h}", "{d} {m} {s} {h}", "{d}:{m}:{s}{h}", "{h}{d}°{m}′{s}″", "{h} {d} {m} {s}",
         "{d}d{m}m{s}s {h}", "{d}º {m}' {s}'' {h}", "{d}-{m}-{s} {h}", "{d} deg {m} min {s} sec {h}"]


@QUICK
@given(st.integers(0, 89), st.integers(0, 59), st.integers(0, 59), st.sampled_from("NS"), st.sampled_from(MARKS))
def test_degrees_minutes_and_seconds_are_the_same_in_every_spelling(degrees, minutes, seconds, letter, mark):
    text = mark.format(d=degrees, m=f"{minutes:02d}", s=f"{seconds:02d}", h=letter)
    wanted = (degrees + minutes / 60 + seconds / 3600) * (1 if letter == "N" else -1)
    assert parse_angle(text, "latitude").degrees == pytest.approx(wanted, abs=1e-12)


@QUICK
@given(st.floats(-90, 90), st.floats(-180, 180), st.sampled_from(["{} {}", "{}, {}", "{},{}", "{}; {}", "({}, {})"]))
def test_two_in_one_cell_are_the_two(latitude, longitude, form):
    north, east = (f"{value:.6f}" for value in (latitude, longitude))
    found = parse_position(form.format(north, east))
    assert [angle.degrees for angle in found] == [float(north), float(east)]


@QUICK
@given(st.floats(-1e9, 1e9), st.sampled_from([".", ","]))
def test_a_number_is_the_same_however_its_thousands_stand(value, mark):
    value = float(np.round(value, 2))
    other = "," if mark == "." else "."
    text = f"{value:,.2f}".translate(str.maketrans(",.", other + mark))
    for spelling in (text, text.replace(other, ""), text.replace(other, " "), text.replace(other, "'")):
        assert number_of(spelling, None) == value
