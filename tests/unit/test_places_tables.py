"""Village tables as people make them: what is read, what is refused, and with which words."""

from __future__ import annotations

import datetime
import json
import sqlite3
import struct
import zipfile

import numpy as np
import openpyxl
import pandas as pd
import pytest
import shapely

from stillfield.errors import PlacesError
from stillfield.sources.places import raw_table, read_places, refuse_misplaced

#: Two places of the demo region; what every sound variant below must come to.
QUAY = {"name": "Ossandrel Quay", "latitude": 19.38, "longitude": -42.1975}
HOOK = {"name": "Tirravesh", "latitude": 19.175, "longitude": -40.3825}


def write(folder, text, name="v.csv", encoding="utf-8"):
    path = folder / name
    path.write_bytes(text if isinstance(text, bytes) else text.encode(encoding))
    return path


def complaint(folder, text, **options):
    with pytest.raises(PlacesError) as told:
        read_places(text if hasattr(text, "suffix") else write(folder, text), **options)
    return str(told.value)


def remarks(frame):
    return " ".join(frame.attrs["remarks"])


PLAIN = "name,lat,lon\nOssandrel Quay,19.38,-42.1975\nTirravesh,19.175,-40.3825\n"
#: Text of the table, encoding, rows as a spreadsheet shows them.
SOUND = {
    "plain": (PLAIN, "utf-8", [2, 3]),
    "byte-order mark": (PLAIN, "utf-8-sig", [2, 3]),
    "UTF-16 of a spreadsheet": (PLAIN.replace(",", "\t"), "utf-16", [2, 3]),
    "CRLF": (PLAIN.replace("\n", "\r\n"), "utf-8", [2, 3]),
    "CR alone": (PLAIN.replace("\n", "\r"), "utf-8", [2, 3]),
    "no last line end": (PLAIN.rstrip(), "utf-8", [2, 3]),
    "semicolon, decimal comma": (PLAIN.replace(",", ";").replace(".", ","), "utf-8", [2, 3]),
    "tab, decimal comma": (PLAIN.replace(",", "\t").replace(".", ","), "utf-8", [2, 3]),
    "bar": (PLAIN.replace(",", " | "), "utf-8", [2, 3]),
    "comma, quoted decimal comma": (
        'name,lat,lon\nOssandrel Quay,"19,38","-42,1975"\nTirravesh,"19,175","-40,3825"\n', "utf-8", [2, 3]),
    "separator stated": ("sep=;\r\nname;lat;lon\r\nOssandrel Quay;19.38;-42.1975\r\nTirravesh;19.175;-40.3825", "utf-8",
                         [2, 3]),
    "blank lines and trailing blanks": (
        "\n name , lat , lon ,,\n\nOssandrel Quay , 19.38 , -42.1975 ,,\n,,,,\nTirravesh,19.175,-40.3825\n\n", "utf-8",
        [4, 6]),
    "comments": ("# made by hand\nname,lat,lon\n# north\nOssandrel Quay,19.38,-42.1975\nTirravesh,19.175,-40.3825\n",
                 "utf-8", [4, 5]),
    "heading behind a #": ("# " + PLAIN, "utf-8", [2, 3]),
    "column called #": (
        "#,name,lat,lon\n1,Ossandrel Quay,19.38,-42.1975\n2,Tirravesh,19.175,-40.3825\n", "utf-8", [2, 3]),
    "title above": ("Villages of the coast\n\nname,lat,lon\nOssandrel Quay,19.38,-42.1975\nTirravesh,19.175,-40.3825\n",
                    "utf-8", [4, 5]),
    "cell of two lines": (
        'name,note,lat,lon\nOssandrel Quay,"an\nisland",19.38,-42.1975\nTirravesh,"",19.175,-40.3825\n',
        "utf-8", [2, 3]),
    "comma in quotes": (
        'name,note,lat,lon\nOssandrel Quay,"far, by boat",19.38,-42.1975\nTirravesh,,19.175,-40.3825\n',
        "utf-8", [2, 3]),
    "minus sign of typesetters": (PLAIN.replace("-", "−"), "utf-8", [2, 3]),
    "degrees, minutes, seconds": (
        "name;lat;lon\nOssandrel Quay;19°22'48\"N;42°11'51\"W\nTirravesh;19°10′30″ N;40°22’57” W\n",
        "utf-8", [2, 3]),
    "French letters": (
        "Nom du village;Latitude;Longitude\nOssandrel Quay;19°22'48\" N;42°11'51\" O\n"
        "Tirravesh;N 19 10 30;O 40 22 57\n",
        "cp1252", [2, 3]),
    "Spanish": ("Localidad;Latitud;Longitud\nOssandrel Quay;19d22m48s Norte;42d11m51s Oeste\n"
                "Tirravesh;19:10:30 N;40:22:57 Oeste\n", "utf-8", [2, 3]),
    "Portuguese": ("Povoação;Latitude;Longitude\nOssandrel Quay;19,38;-42,1975\nTirravesh;19,175;-40,3825\n", "cp1252",
                   [2, 3]),
    "Arabic": ("اسم القرية,خط العرض,خط الطول\n"
               "Ossandrel Quay,١٩.٣٨,-42.1975\nTirravesh,19.175,-40.3825\n", "utf-8", [2, 3]),
    "one column": (
        'name,coordinates\nOssandrel Quay,"19.38, -42.1975"\nTirravesh,"19.175,-40.3825"\n', "utf-8", [2, 3]),
    "one column, decimal commas": ("name\tGPS\nOssandrel Quay\t19,38; -42,1975\nTirravesh\t19,175 -40,3825\n", "utf-8",
                                   [2, 3]),
    "one column, letters": ("name;position\nOssandrel Quay;19°22'48\"N 42°11'51\"W\nTirravesh;W40.3825 N19.175\n",
                            "utf-8", [2, 3]),
    "one column, longitude first": ("name;lon_lat\nOssandrel Quay;-42.1975 19.38\nTirravesh;-40.3825 19.175\n", "utf-8",
                                    [2, 3]),
    "field form": ("name,_geopoint\nOssandrel Quay,19.38 -42.1975 6.0 4.9\nTirravesh,19.175 -40.3825 0 0\n", "utf-8",
                   [2, 3]),
    "WKT": ("name;wkt\nOssandrel Quay;POINT (-42.1975 19.38)\nTirravesh;POINT(-40.3825 19.175)\n", "utf-8", [2, 3]),
    "longitude to 360": (PLAIN.replace("-42.1975", "317.8025"), "utf-8", [2, 3]),
    "capitals and signs": (PLAIN.replace("name,lat,lon", "VILLAGE NAME,Lat. (deg),LONG. [°]"), "utf-8", [2, 3]),
    "makeshift names": (PLAIN.replace("name,lat,lon", "label,Y,X"), "utf-8", [2, 3]),
}


@pytest.mark.parametrize("variant", SOUND)
def test_sound_tables_come_to_the_same(tmp_path, variant):
    text, encoding, rows = SOUND[variant]
    frame = read_places(write(tmp_path, text, encoding=encoding))
    assert frame["name"].tolist() == [QUAY["name"], HOOK["name"]]
    np.testing.assert_allclose(frame["latitude"], [QUAY["latitude"], HOOK["latitude"]], atol=1e-9)
    np.testing.assert_allclose(frame["longitude"], [QUAY["longitude"], HOOK["longitude"]], atol=1e-9)
    assert frame["row"].tolist() == rows
    assert frame["id"].tolist() == ["1", "2"]


#: Heading and cell of one more column, the column of stillfield, its value.
CONVERTED = [
    ("population", "8 400", "population", 8400),
    ("Population (2020)", "8400", "population", 8400),
    ("pop_2015", "8400", "population", 8400),
    ("Habitants", "8\u202f400", "population", 8400),
    ("población", "812,5", "population", 812.5),
    ("people", "1,250,000", "population", 1250000),
    ("people", "8'400", "population", 8400),
    ("population", "n/a", "population", np.nan),
    ("population", "1.2E+03", "population", 1200),
    ("Ménages", "120", "households", 120),
    ("TDS (mg/L)", "1200", "feed_salinity_g_kg", 1.2),
    ("tds_mg_l", "1,200.5", "feed_salinity_g_kg", 1.2005),
    ("Salinity [g/kg]", "36.9", "feed_salinity_g_kg", 36.9),
    ("salinidad ‰", "36,9", "feed_salinity_g_kg", 36.9),
    ("salinity ppm", "800", "feed_salinity_g_kg", 0.8),
    # 640 mg/L per dS/m: Agriculture Handbook 60 (1954), quoted from memory.
    ("EC (µS/cm)", "2000", "feed_salinity_g_kg", 1.28),
    ("EC_uS_cm", "2000", "feed_salinity_g_kg", 1.28),
    ("Conductivité (mS/cm)", "2", "feed_salinity_g_kg", 1.28),
    ("EC dS/m", "2", "feed_salinity_g_kg", 1.28),
    ("distance_to_feed_km", "1.3", "distance_to_feed_km", 1.3),
    ("Distance to water (m)", "850", "distance_to_feed_km", 0.85),
    ("distance, km", "0.85", "distance_to_feed_km", 0.85),
    ("Altitude (m)", "-12", "elevation_m", -12),
    ("elev_ft", "100", "elevation_m", 30.48),
    ("Altitude (m a.s.l.)", "33", "elevation_m", 33),
    ("altitude", "33", "elevation_m", 33),
]


@pytest.mark.parametrize(("heading", "cell", "column", "value"), CONVERTED)
def test_numbers_and_units_are_converted(tmp_path, heading, cell, column, value):
    frame = read_places(write(tmp_path, f"name;lat;lon;{heading}\nSarrune;19.155;-42.34;{cell}\n"))
    assert frame[column].iloc[0] == pytest.approx(value, nan_ok=True)


@pytest.mark.parametrize(
    ("mark", "cell", "value"),
    [(",", "8.400", 8400), (".", "8,400", 8400), (",", "8400,5", 8400.5), (".", "8400.5", 8400.5)],
)
def test_the_decimal_mark_of_the_coordinates_decides_about_thousands(tmp_path, mark, cell, value):
    text = f"name;lat;lon;population\nSarrune;19{mark}155;-42{mark}34;{cell}\n"
    assert read_places(write(tmp_path, text))["population"].tolist() == [value]


def test_texts_stay_what_they_are(tmp_path):
    text = "id,name,lat,lon,note\n00123,NA,19,-42,=1+1\n1e5,None,19.1,-42,\n" \
           "NA,Жемчужное,19.2,-42,\n,قرية البحر,19.3,-42,nan\n"
    frame = read_places(write(tmp_path, text))
    assert frame["id"].tolist() == ["00123", "1e5", "NA", "row-5"]
    assert frame["name"].tolist() == ["NA", "None", "Жемчужное", "قرية البحر"]
    assert frame["note"].tolist() == ["=1+1", "", "", "nan"]
    assert "'row-5'" in remarks(frame)


def test_a_name_in_the_code_page_of_windows_is_read_and_told(tmp_path):
    frame = read_places(write(tmp_path, PLAIN.replace("Tirravesh", "Tírraveß"), encoding="cp1252"))
    assert frame["name"].tolist()[1] == "Tírraveß"
    assert "read as Windows-1252" in remarks(frame)


def test_remarks_say_what_was_done(tmp_path):
    text = "village,lat,lon,EC uS/cm,roof\nSarrune,19.155,-42.34,2000,tin\n#Old,1,2,3,4\n" \
           "Sarrune,19.155,-42.34,2100,tin\n"
    said = remarks(read_places(write(tmp_path, text)))
    for words in ("'EC uS/cm' is converted to feed_salinity_g_kg (times 0.00064)", "Not used: 'roof'",
                  "'Sarrune' stands at the same position in rows 2, 4", "begin with # are left out: row 3"):
        assert words in said


#: Table, options, words of the message.
REFUSED = {
    "empty": ("", {}, ["empty"]),
    "heading only": ("name,lat,lon\n", {}, ["empty", "a row per place"]),
    "blank rows only": ("name,lat,lon\n,,\n\n", {}, ["empty"]),
    "no name": ("lat,lon\n1,2\n", {}, ["row 1: no column for name", "'lat', 'lon'", "places.columns"]),
    "no position": ("name,people\nA,5\n", {}, ["no column for latitude, longitude"]),
    "two columns fit": ("name,lat,lon,pop_2015,pop_2020\nA,1,2,3,4\n", {},
                        ["'population' could be column 'pop_2015' or 'pop_2020'", "places.columns.population"]),
    "the same heading twice": ("name,lat,lat,lon\nA,1,1,2\n", {}, ["'latitude' could be column 'lat' or 'lat'"]),
    "salts without unit": ("name,lat,lon,TDS\nA,1,2,900\n", {}, ["column 'TDS' says no unit", "mg_l"]),
    "conductivity without unit": ("name,lat,lon,EC\nA,1,2,900\n", {}, ["column 'EC' says no unit", "us_cm"]),
    "unknown unit": ("name,lat,lon,salinity (Brix)\nA,1,2,9\n", {}, ["'brix'", "not known", "g_kg"]),
    "distance without unit": ("name,lat,lon,distance\nA,1,2,9\n", {}, ["says no unit", "km"]),
    "counted to the west": ("name,lat,Longitude (W)\nA,1,42\n", {}, ["counts to the w", "negative numbers"]),
    "mapped wrong": ("name,lat,lon,peeple\nA,1,2,3\n", {"columns": {"population": "people"}},
                     ["places.columns.population: no column 'people' (did you mean 'peeple'?)"]),
    "unknown key": ("name,lat,lon\nA,1,2\n", {"columns": {"colour": "lat"}}, ["no 'colour'", "latitude"]),
    "no number": ("name,lat,lon,people\nA,1,2,lots\n", {}, ["row 2, people: should be a number (got 'lots'"]),
    "unit in the cell": ("name,lat,lon,people\nA,1,2,35 people\n", {}, ["a unit belongs into the heading"]),
    "thousands or fraction": ("name,lat,lon,people\nA,1.5,2.5,8.400\n", {}, ["could be 8400 or 8.400"]),
    "wrong thousands": ("name;lat;lon;people\nA;1.5;2.5;84,00,0\n", {}, ["should be a number"]),
    "negative people": ("name,lat,lon,people\nA,1,2,-3\n", {},
                        ["row 2, people: should be between 0 and 5e+07 (got -3)"]),
    "mg in g": ("name,lat,lon,salinity\nA,1,2,900\n", {}, ["between 0 and 350", "is it in mg/L?"]),
    "not a number at all": ("name,lat,lon,people\nA,1,2,inf\n", {}, ["should be a number"]),
    "no latitude": ("name,lat,lon\nA,,2\n", {}, ["row 2, lat: is empty"]),
    "latitude NA": ("name,lat,lon\nA,NA,2\n", {}, ["row 2, lat: is empty (got 'NA')"]),
    "no name in a row": ("name,lat,lon\n,1,2\n", {}, ["row 2, name: is empty"]),
    "beyond the pole": ("name,lat,lon\nA,-120.2,25.8\n", {},
                        ["row 2, lat: should be between -90 and 90 (got -120.2; are latitude and longitude swapped?)"]),
    "beyond the date line": ("name,lat,lon\nA,1,-200\n", {}, ["row 2, lon: should be between -180 and 360 (got -200)"]),
    "UTM": ("name,y,x\nA,2142000,412345.6\n", {}, ["row 2, y: looks like metres of a projection", "(got '2142000')"]),
    "UTM with zone": ("name,gps\nA,23Q 412345 2142000\n", {}, ["looks like metres of a projection"]),
    "zero zero": ("name,lat,lon\nA,0,0\n", {}, ["row 2, latitude, longitude: are both 0", "open sea"]),
    "zero zero in words": ("name,lat,lon\nA,0°0'0\" N,0.000\n", {}, ["are both 0"]),
    "letter of the other axis": ("name,lat,lon\nA,42 W,19 N\n", {}, ["says W, which is a longitude", "swapped?"]),
    "sign and letter": ("name,lat,lon\nA,-19.5 S,42\n", {}, ["a sign and the letter S"]),
    "seconds or south": ("name,lat,lon\nA,12D34M56S,42\n", {}, ["may be seconds or south"]),
    "75 minutes": ("name,lat,lon\nA,12 75 00,42\n", {}, ["has 75 minutes; they should be below 60"]),
    "60 seconds": ("name,lat,lon\nA,12 15 60,42\n", {}, ["has 60 seconds"]),
    "fraction of a degree and minutes": ("name,lat,lon\nA,12.5 15,42\n", {}, ["should be degrees such as"]),
    "a word for a coordinate": ("name,lat,lon\nA,north of B,42\n", {}, ["should be degrees such as", "'north of B'"]),
    "mark lost": ("name,lat,lon\nA,19.380.000,42\n", {}, ["should be degrees such as"]),
    "O beside W": ("name,lat,lon\nA,12 N,42 O\nB,12 N,42 W\n", {}, ["both O and W"]),
    "one half of a position": ("name,gps\nA,19.38\n", {}, ["a latitude and a longitude such as"]),
    "two latitudes": ("name;gps\nA;19 N, 20 N\n", {}, ["one latitude and one longitude"]),
    "id twice": ("id,name,lat,lon\n7,A,1,2\n8,B,1,3\n7,C,1,4\n", {}, ["row 2, id: '7' stands in rows 2, 4"]),
    "decimal comma in a comma table": ("name,lat,lon\nA,19,38,-42,1975\n", {},
                                       ["row 2: has 5 cells under 3 headings", "decimal comma"]),
    "failed formula": ('name,lat,lon\n"#REF!",1,2\n', {}, ["row 2, name: holds a formula that failed (#REF!)"]),
    "quote left open": ('name,lat,lon\nA,1,2\n"B,1,3\nC,1,4\n', {}, ["quotation mark", "row 3"]),
    "quote in a quoted cell": ('name,lat,lon\n"A "big" one",1,2\n', {}, ["quotation mark", "row 2", "twice"]),
    "control character": ("name,lat,lon\nA\x1b[2J,1,2\n", {}, ["control character", "'A\\x1b[2J'"]),
    "very long name": ("name,lat,lon\n" + "A" * 201 + ",1,2\n", {}, ["longer than 200 characters"]),
    "endless cell": ("name,lat,lon\n" + "A" * 10_001 + ",1,2\n", {}, ["more than 10000 characters in row 2"]),
    "endless row": ("name,lat,lon\nA,1,2" + "," * 600 + "x\n", {}, ["more than 500 cells in row 2"]),
    "sheet of a CSV": ("name,lat,lon\nA,1,2\n", {"sheet": "x"}, ["has no sheets", "Leave out places.sheet"]),
    "layer of a CSV": ("name,lat,lon\nA,1,2\n", {"layer": "x"}, ["has no layers"]),
    "web page": ("<!DOCTYPE html><html></html>", {}, ["a web page"]),
    "PDF": ("%PDF-1.7", {}, ["a PDF"]),
    "binary": (b"\x01\x00\x02\x00", {}, ["no table of text"]),
    "old workbook": (b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1", {}, ["old XLS or a protected workbook", "Save it as XLSX"]),
    "shapefile": (b"\x00\x00\x27\x0a" + bytes(60), {}, ["a shapefile", "GeoPackage"]),
    "no GeoJSON": ("{this is not", {}, ["cannot be read as GeoJSON"]),
    "deep GeoJSON": ('{"a":' * 100_000, {}, ["cannot be read as GeoJSON"]),
    "other JSON": ('{"type": "Topology"}', {}, ["no GeoJSON of places", "FeatureCollection"]),
}


@pytest.mark.parametrize("variant", REFUSED)
def test_faults_are_told_in_words(tmp_path, variant):
    text, options, words = REFUSED[variant]
    told = complaint(tmp_path, text, **options)
    for word in words:
        assert word in told
    assert "\x1b" not in told
    assert len(told) < 1500


def test_every_fault_is_told_with_its_row_and_the_rest_are_counted(tmp_path):
    bad = "".join(f"A{number},north,2\n" for number in range(30))
    told = complaint(tmp_path, f"name,lat,lon\n\n# remark\n{bad},1,2\n")
    assert "has 31 faults" in told
    assert "row 4, lat: should be degrees" in told
    assert told.endswith("and 11 more")
    assert told.count("\n") == 21


def test_headings_and_cells_are_told_together_only_when_the_headings_can_be_read(tmp_path):
    told = complaint(tmp_path, "name,lat,lon,TDS,EC,distance,pop_2015,pop_2020\nA,1,2,3,4,5,6,7\n")
    assert "has 3 faults" in told
    for words in ("'TDS' says no unit", "'distance' says no unit", "'population' could be"):
        assert words in told


def test_a_table_beyond_its_rows_is_refused(tmp_path, monkeypatch):
    monkeypatch.setattr(raw_table, "MAX_ROWS", 5)
    told = complaint(tmp_path, "name,lat,lon\n" + "A,1,2\n" * 6)
    assert "more than 5 rows" in told
    assert "split the table" in told


def test_the_run_file_wins_over_the_names_of_columns(tmp_path):
    text = "name,village,lat,lon,x1,well m\nHead of house,Sarrune,19.155,-42.34,8400,850\n"
    frame = read_places(write(tmp_path, text), {"name": "village", "population": "x1", "note": "name"})
    assert frame["name"].tolist() == ["Sarrune"]
    assert frame["population"].tolist() == [8400]
    assert frame["note"].tolist() == ["Head of house"]
    in_brackets = write(tmp_path, "name,lat,lon,well (m)\nSarrune,19.155,-42.34,850\n")
    assert read_places(in_brackets, {"distance_to_feed_km": "well (m)"})["distance_to_feed_km"].tolist() == [0.85]


def test_a_file_that_is_not_there_is_told(tmp_path):
    assert "Correct places.table" in complaint(tmp_path, tmp_path / "none.csv")
    assert "Correct places.table" in complaint(tmp_path, tmp_path)


BOX = {"south": 17.5, "north": 22.5, "west": -43.0, "east": -37.5}


@pytest.mark.parametrize(
    ("latitude", "longitude", "words"),
    [([-42.2, -40.4, 19.2], [19.4, 19.2, -40.0], "2 would lie inside with latitude and longitude exchanged"),
     ([19.4, 19.2], [42.2, 40.4], "longitude of the other sign"),
     ([-19.4, -19.2], [-42.2, -40.4], "latitude of the other")],
)
def test_places_that_would_fit_after_a_usual_slip_are_refused(latitude, longitude, words):
    places = pd.DataFrame({"latitude": latitude, "longitude": longitude})
    with pytest.raises(PlacesError, match=words) as told:
        refuse_misplaced(places, BOX, where="v.csv")
    assert "Did you mean that?" in str(told.value)


@pytest.mark.parametrize(
    ("latitude", "longitude"),
    [([19.4, 50.0], [-42.2, 10.0]), ([50.0, 51.0], [10.0, 11.0]), ([19.4], [317.8]), ([], [])],
)
def test_places_elsewhere_for_no_such_reason_are_left_to_the_distance(latitude, longitude):
    refuse_misplaced(pd.DataFrame({"latitude": latitude, "longitude": longitude}), BOX, where="v.csv")


def test_weather_across_the_antimeridian_holds_places_of_either_sign():
    box = {"south": -2.0, "north": 2.0, "west": 176.0, "east": 184.0}
    refuse_misplaced(pd.DataFrame({"latitude": [1.0, 1.0], "longitude": [-177.0, 178.0]}), box, where="v.csv")


# ---- GeoJSON ----


def geojson(*features, **more):
    return json.dumps({"type": "FeatureCollection", "features": list(features), **more}, ensure_ascii=False)


def feature(geometry, **properties):
    shape = json.loads(shapely.to_geojson(geometry)) if geometry is not None else None
    return {"type": "Feature", "geometry": shape, "properties": properties}


QUAY_POINT = shapely.Point(QUAY["longitude"], QUAY["latitude"])


def test_features_are_places_with_their_properties(tmp_path):
    one = feature(QUAY_POINT, Nom="Ossandrel Quay", code="00123", pop=640, **{"TDS mg/L": 36100.0, "lat": 1.0})
    two = {**feature(shapely.Point(-40.3825, 19.175, 4.0), Nom="Tirravesh", nested={"a": 1}), "id": 9}
    frame = read_places(write(tmp_path, geojson(one, two), "v.geojson"))
    assert frame["row"].tolist() == [1, 2]
    assert frame["id"].tolist() == ["00123", "row-2"]
    assert frame["population"].iloc[0] == 640
    assert frame["feed_salinity_g_kg"].iloc[0] == pytest.approx(36.1)
    assert frame["latitude"].tolist() == [QUAY["latitude"], HOOK["latitude"]]  # geometry wins over a column


def test_the_id_of_features_is_taken_where_properties_have_none(tmp_path):
    one = {**feature(QUAY_POINT, name="A"), "id": "q-1"}
    assert read_places(write(tmp_path, geojson(one), "v.json"))["id"].tolist() == ["q-1"]


def test_shapes_are_taken_by_their_centre_and_told(tmp_path):
    square, pair = shapely.box(-42, 19, -41, 20), shapely.MultiPoint([(-42, 19), (-41, 19)])
    frame = read_places(write(tmp_path, geojson(
        feature(square, name="A"), feature(pair, name="B"), feature(shapely.MultiPoint([(-40, 19)]), name="C"))))
    assert frame["latitude"].tolist() == [19.5, 19.0, 19.0]
    assert frame["longitude"].tolist() == [-41.5, -41.5, -40.0]
    said = remarks(frame)
    assert "1 place is given as Polygon; the centre is taken" in said
    assert "1 place is given as MultiPoint" in said


@pytest.mark.parametrize(
    ("text", "words"),
    [
        (geojson(feature(QUAY_POINT, name="A"), crs={"type": "name", "properties": {"name": "EPSG:32623"}}),
         ["another system", "'EPSG:32623'", "Reproject it to EPSG:4326"]),
        (geojson(feature(shapely.Point(412345, 2142000), name="A")),
         ["feature 1, geometry, longitude: looks like metres"]),
        (geojson(feature(shapely.Point(19.4, -142.2), name="A")), ["feature 1, geometry, latitude", "swapped?"]),
        (geojson(feature(None, name="A"), feature(QUAY_POINT, name="")), ["feature 1, geometry: is empty",
                                                                         "feature 2, name: is empty"]),
        (geojson({"type": "Feature", "geometry": {"type": "Point", "coordinates": ["a"]}, "properties": {"name": "A"}}),
         ["feature 1, geometry: is no geometry"]),
        (geojson(feature(shapely.box(-170, 10, 170, 11), name="A")), ["spans more than 90 degrees"]),
        (geojson(feature(QUAY_POINT, title="A")), ["no column for name (the table has 'title')"]),
        (geojson(), ["empty", "a feature per place"]),
        (json.dumps({"type": "Point", "coordinates": [1, 2]}), ["no GeoJSON of places"]),
        (geojson(7), ["no GeoJSON of places"]),
        (geojson(feature(QUAY_POINT, name="A", people=10**400)), ["should be between 0 and 5e+07 (got a huge number)"]),
    ],
)  # fmt: skip
def test_faults_of_features_are_told_in_words(tmp_path, text, words):
    told = complaint(tmp_path, text)
    for word in words:
        assert word in told


@pytest.mark.parametrize("name", ["urn:ogc:def:crs:OGC:1.3:CRS84", "urn:ogc:def:crs:EPSG::4326", "EPSG:4326"])
def test_degrees_by_any_of_their_names_are_accepted(tmp_path, name):
    text = geojson(feature(QUAY_POINT, name="A"), crs={"type": "name", "properties": {"name": name}})
    assert len(read_places(write(tmp_path, text))) == 1


# ---- GeoPackage ----

#: Reference systems as GeoPackage 1.4, clause 1.1.2, has them; the projected one is UTM zone 23 N.
SYSTEMS = [
    ("WGS 84", 4326, "EPSG", 4326, 'GEOGCS["WGS 84",PRIMEM["Greenwich",0],UNIT["degree",0.0174532925199433]]'),
    ("Undefined geographic", 0, "NONE", 0, "undefined"), ("Undefined Cartesian", -1, "NONE", -1, "undefined"),
    ("UTM 23N", 32623, "EPSG", 32623, 'PROJCS["WGS 84 / UTM zone 23N"]'),
    ("NTF (Paris)", 4807, "EPSG", 4807, 'GEOGCS["NTF (Paris)",PRIMEM["Paris",2.33],UNIT["grad",0.01570796326794897]]'),
    ("Old datum", 4267, "EPSG", 4267, 'GEOGCS["NAD27",PRIMEM["Greenwich",0],UNIT["degree",0.0174532925199433]]'),
]


def blob(geometry, system=4326, envelope=0):
    """Geometry as GeoPackage 1.4, clause 2.1.3, lays it out."""
    if geometry is None or isinstance(geometry, bytes):
        return geometry
    bounds = struct.pack("<4d", *(geometry.bounds[i] for i in (0, 2, 1, 3))) if envelope else b""
    flags = 1 | envelope << 1 | (0x10 if geometry.is_empty else 0)
    return b"GP\x00" + struct.pack("<Bi", flags, system) + bounds + shapely.to_wkb(geometry)


def geopackage(path, layers, system=4326, envelope=0):
    """Layers: name to rows of (fid, geometry, name, people)."""
    with sqlite3.connect(path) as database:
        database.execute("CREATE TABLE gpkg_spatial_ref_sys (srs_name TEXT, srs_id INTEGER, organization TEXT, "
                         "organization_coordsys_id INTEGER, definition TEXT)")
        database.executemany("INSERT INTO gpkg_spatial_ref_sys VALUES (?,?,?,?,?)", SYSTEMS)
        database.execute("CREATE TABLE gpkg_contents (table_name TEXT, data_type TEXT)")
        database.execute("CREATE TABLE gpkg_geometry_columns (table_name TEXT, column_name TEXT, srs_id INTEGER)")
        for name, rows in layers.items():
            table = '"' + name.replace('"', '""') + '"'
            database.execute("INSERT INTO gpkg_contents VALUES (?, 'features')", (name,))
            database.execute("INSERT INTO gpkg_geometry_columns VALUES (?, 'geom', ?)", (name, system))
            database.execute(f'CREATE TABLE {table} (fid INTEGER PRIMARY KEY, geom BLOB, name TEXT, people INTEGER)')
            packed = [(fid, blob(shape, system, envelope), label, people) for fid, shape, label, people in rows]
            database.executemany(f'INSERT INTO {table} VALUES (?,?,?,?)', packed)
    database.close()
    return path


@pytest.mark.parametrize("envelope", [0, 1])
def test_a_layer_is_a_table_and_its_rows_have_the_number_of_the_feature(tmp_path, envelope):
    rows = [(7, QUAY_POINT, "Ossandrel Quay", 640), (3, shapely.Point(-40.3825, 19.175), "Tirravesh", None)]
    frame = read_places(geopackage(tmp_path / "v.gpkg", {'my "villages"': rows}, envelope=envelope))
    assert frame["row"].tolist() == [3, 7]
    assert frame["id"].tolist() == ["3", "7"]
    assert frame["name"].tolist() == ["Tirravesh", "Ossandrel Quay"]
    np.testing.assert_array_equal(frame["population"], [np.nan, 640.0])
    assert frame["longitude"].tolist() == [-40.3825, -42.1975]


def test_the_layer_is_chosen_by_its_name(tmp_path):
    path = geopackage(tmp_path / "v.gpkg", {"north": [(1, QUAY_POINT, "A", 1)], "south": [(1, QUAY_POINT, "B", 1)]})
    assert read_places(path, layer="south")["name"].tolist() == ["B"]
    told = complaint(tmp_path, path)
    for words in ("several layers", "'north', 'south'", "Name one under places.layer"):
        assert words in told
    assert "no such layer (got 'west'; wanted 'north', 'south')" in complaint(tmp_path, path, layer="west")


@pytest.mark.parametrize(
    ("system", "words"), [(32623, "EPSG:32623"), (-1, "NONE:-1"), (4807, "Paris"), (77, "srs_id 77")]
)
def test_a_layer_in_other_coordinates_is_refused(tmp_path, system, words):
    path = geopackage(tmp_path / "v.gpkg", {"v": [(1, QUAY_POINT, "A", 1)]}, system=system)
    told = complaint(tmp_path, path)
    assert "another system" in told
    assert words in told


@pytest.mark.parametrize("system", [0, 4267])
def test_degrees_of_another_datum_are_taken_and_told(tmp_path, system):
    frame = read_places(geopackage(tmp_path / "v.gpkg", {"v": [(1, QUAY_POINT, "A", 1)]}, system=system))
    assert "taken as WGS 84" in remarks(frame)


@pytest.mark.parametrize("shape", [b"GP", b"nonsense", b"GP\x00\x01" + bytes(4) + b"\x01\x02", None, shapely.Point()])
def test_geometry_that_is_none_is_told_by_its_feature(tmp_path, shape):
    path = geopackage(tmp_path / "v.gpkg", {"v": [(1, QUAY_POINT, "A", 1), (9, shape, "B", 1)]})
    assert "feature 9, geometry: is " in complaint(tmp_path, path)


def test_databases_that_are_no_geopackage_are_refused(tmp_path):
    with sqlite3.connect(tmp_path / "a.gpkg") as database:
        database.execute("CREATE TABLE villages (name TEXT)")
    database.close()
    assert "no GeoPackage" in complaint(tmp_path, tmp_path / "a.gpkg")
    whole = geopackage(tmp_path / "b.gpkg", {"v": [(1, QUAY_POINT, "A", 1)]}).read_bytes()
    for cut in (16, 100, 5000):
        path = write(tmp_path, whole[:cut], "c.gpkg")
        assert "GeoPackage" in complaint(tmp_path, path)


def test_a_view_that_never_ends_is_stopped(tmp_path, monkeypatch):
    from stillfield.sources.places import geopackage as module

    monkeypatch.setattr(module, "_MOST_STEPS", 2)
    path = geopackage(tmp_path / "v.gpkg", {"v": [(1, QUAY_POINT, "A", 1)]})
    with sqlite3.connect(path) as database:
        database.execute("CREATE VIEW w AS WITH RECURSIVE n(i) AS (SELECT 1 UNION ALL SELECT i + 1 FROM n) "
                         "SELECT i AS name, 1 AS lat, 2 AS lon FROM n WHERE i < 0")
        database.execute("INSERT INTO gpkg_contents VALUES ('w', 'attributes')")
    database.close()
    assert "interrupted" in complaint(tmp_path, path, layer="w")


# ---- XLSX ----


def workbook(path, **sheets):
    book = openpyxl.Workbook()
    book.remove(book.active)
    for title, rows in sheets.items():
        sheet = book.create_sheet(title)
        for row in rows:
            sheet.append(row)
    book.save(path)
    return path


def test_a_sheet_with_a_title_numbers_and_texts(tmp_path):
    path = workbook(tmp_path / "v.xlsx", villages=[
        ["Villages of the coast"], [], [None, "code", "Village", "Latitude", "Longitude", "Population", "TDS (mg/L)"],
        [None, "00123", "Ossandrel Quay", 19.38, "42°11'51\" W", "8 400", 36100],
        [None, 45.0, "NA", "19,175", -40.3825, 2100, "n/a"], [None] * 7, [None, True, 12, 19, -41, None, None],
    ])
    frame = read_places(path)
    assert frame["row"].tolist() == [4, 5, 7]
    assert frame["id"].tolist() == ["00123", "45", "TRUE"]
    assert frame["name"].tolist() == ["Ossandrel Quay", "NA", "12"]
    np.testing.assert_allclose(frame["longitude"], [-42.1975, -40.3825, -41.0])
    np.testing.assert_array_equal(frame["population"], [8400, 2100, np.nan])
    np.testing.assert_allclose(frame["feed_salinity_g_kg"], [36.1, np.nan, np.nan])
    assert "headings stand in row 3" in remarks(frame)


def test_minutes_that_a_spreadsheet_took_for_a_time_are_degrees_again(tmp_path):
    path = workbook(tmp_path / "v.xlsx", v=[
        ["name", "lat", "lon"], ["A", datetime.time(19, 22, 48), datetime.timedelta(hours=42, minutes=11, seconds=51)]])
    frame = read_places(path)
    assert frame["latitude"].tolist() == pytest.approx([19.38])
    assert frame["longitude"].tolist() == pytest.approx([42.1975])


def test_a_number_that_a_spreadsheet_took_for_a_date_is_told(tmp_path):
    path = workbook(tmp_path / "v.xlsx", v=[["name", "lat", "lon", "people"],
                                            ["A", 1, 2, datetime.datetime(2024, 5, 12)]])
    assert "did the spreadsheet turn a number into a date?" in complaint(tmp_path, path)


def test_the_sheet_is_the_one_with_places_or_the_one_that_is_named(tmp_path):
    rows = [["name", "lat", "lon"], ["A", 1, 2]]
    path = workbook(tmp_path / "v.xlsx", read_me=[["Hello"]], north=rows)
    frame = read_places(path)
    assert "Sheet 'north' is read" in remarks(frame)
    path = workbook(tmp_path / "v.xlsx", north=rows, south=[rows[0], ["B", 1, 3]])
    assert read_places(path, sheet="south")["name"].tolist() == ["B"]
    assert read_places(path, sheet=" South")["name"].tolist() == ["B"]
    told = complaint(tmp_path, path)
    for words in ("several sheets", "'north', 'south'", "Name one under places.sheet"):
        assert words in told
    assert "no such sheet (got 'west'; wanted 'north', 'south')" in complaint(tmp_path, path, sheet="west")
    told = complaint(tmp_path, workbook(tmp_path / "v.xlsx", a=[["x"], [1]], b=[["y"], [2]]))
    assert "no sheet has a name and a position" in told


def test_faults_of_a_sheet_have_its_row_numbers(tmp_path):
    path = workbook(tmp_path / "v.xlsx", v=[["t"], ["name", "lat", "lon"], ["A", 412345.0, 2], [], ["#N/A", 1, 2]])
    told = complaint(tmp_path, path)
    assert "sheet 'v' has 2 faults" in told
    assert "row 3, lat: looks like metres" in told
    assert "row 5, name: holds a formula that failed (#N/A)" in told


def test_files_that_are_no_workbook_are_refused(tmp_path, monkeypatch):
    whole = workbook(tmp_path / "v.xlsx", v=[["name", "lat", "lon"], ["A", 1, 2]]).read_bytes()
    assert "cannot be read as an XLSX workbook" in complaint(tmp_path, write(tmp_path, whole[:2000], "cut.xlsx"))
    with zipfile.ZipFile(tmp_path / "a.zip", "w") as archive:
        archive.writestr("villages.csv", PLAIN)
    assert "no XLSX workbook" in complaint(tmp_path, tmp_path / "a.zip")
    with zipfile.ZipFile(tmp_path / "b.xlsx", "w") as archive:
        archive.writestr("[Content_Types].xml", "<broken")
    assert "save it anew" in complaint(tmp_path, tmp_path / "b.xlsx")
    from stillfield.sources.places import sheet

    monkeypatch.setattr(sheet, "MAX_INFLATED_BYTES", 1000)
    assert "the workbook is too large" in complaint(tmp_path, tmp_path / "v.xlsx")


# ---- all formats ----


@pytest.mark.parametrize("form", ["csv", "geojson", "gpkg", "xlsx"])
def test_the_same_places_come_back_from_every_format(tmp_path, form):
    names, people = ["Pelisqua", "قرية", "Saint \"Big\", Well; two", "NA"], [1350, 0, 12, 7]
    positions = [(-41.0725, 18.66), (179.9999, -0.0001), (-180.0, 89.0), (12.345678901, -45.5)]
    path = tmp_path / f"v.{form}"
    rows = [[name, y, x, count] for name, (x, y), count in zip(names, positions, people, strict=True)]
    if form == "csv":
        pd.DataFrame(rows, columns=["name", "lat", "lon", "people"]).to_csv(path, index=False)
    elif form == "xlsx":
        workbook(path, v=[["name", "lat", "lon", "people"], *rows])
    elif form == "geojson":
        path.write_text(geojson(*(feature(shapely.Point(x, y), name=n, people=p) for n, y, x, p in rows)), "utf-8")
    else:
        geopackage(path, {"v": [(i, shapely.Point(x, y), n, p) for i, (n, y, x, p) in enumerate(rows, start=1)]})
    frame = read_places(path)
    assert frame["name"].tolist() == names
    assert frame["id"].tolist() == ["1", "2", "3", "4"]
    assert frame["population"].tolist() == people
    np.testing.assert_allclose(frame["longitude"], [x for x, _ in positions], atol=1e-12)
    np.testing.assert_allclose(frame["latitude"], [y for _, y in positions], atol=1e-12)
