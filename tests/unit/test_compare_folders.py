"""Two runs beside each other: pairing, changes, words and refusals, on folders written by hand."""

from __future__ import annotations

import csv
import json
import shutil

import numpy as np
import pytest

from product_samples import monthly_grid, monthly_sites
from stillfield.cli import main
from stillfield.compare import compare
from stillfield.decisions.run_differences import PlaceList, change_over, change_percent, pair_places, rank_among
from stillfield.errors import OutputError
from stillfield.physics.still import STANDARD_CONDITIONS
from stillfield.products.manifest import MANIFEST_FORMAT, digest_file
from stillfield.products.netcdf import MONTH_NAMES, write_netcdf
from stillfield.products.still_table import STILL_COLUMNS, still_row, write_stills
from stillfield.settings.differing import differing_keys
from stillfield.settings.key_units import unit_of_key
from stillfield.settings.still_file import load_still_file
from stillfield.stages.finished import read_finished
from stillfield.vocabulary import WATER_CAUTION
from whole_runs import STILL, table

#: id, name, latitude, longitude, rank, litres a day in the sizing month, basin area a person.
THREE = [
    ("1", "Ash", 10.0, -31.0, 1, 2.00, 2.50), ("2", "Elm", 10.5, -31.0, 2, 2.00, 2.50),
    ("3", "Oak", 11.0, -31.0, 3, 2.00, 2.50),
]
SETTINGS = {"name": "one", "need": {"litres_per_person_day": 5.0}, "output": {"folder": "outputs"}}


def with_litres(*litres):
    """The three places with other litres, and the area that follows from 5 L a day."""
    return [(*row[:5], value, round(5.0 / value, 2)) for row, value in zip(THREE, litres, strict=True)]


def run_folder(folder, places=THREE, *, monthly=None, months=None, **sections):
    """A finished run as its folder tells it; `places` None has none, `months` are litres of each place."""
    folder.mkdir()
    write_netcdf(monthly_grid([10.0, 11.0], [-31.0, -30.0]) if monthly is None else monthly,
                 folder / "monthly_yield.nc", title="Solar still yield, one", history="Still ash; method rule.")
    files = ["monthly_yield.nc"]
    if places is not None:
        write_rows(folder / "places.csv",
                   ["id", "name", "latitude_deg", "longitude_deg", "rank", "sizing_yield_l_m2_day",
                    "area_per_person_m2", "sizing_month"], [(*row, "December") for row in places])
        litres = [60.0] * 12 if months is None else months
        write_rows(folder / "places_months.csv", ["id", "name", "month", "yield_l_m2_month", "need_l_person_day"],
                   [(*row[:2], month, value, 5) for row in places
                    for month, value in zip(MONTH_NAMES, litres, strict=True)])
        files += ["places.csv", "places_months.csv"]
    manifest = {
        "format": MANIFEST_FORMAT, "settings": SETTINGS, "inputs": {}, "versions": {"stillfield": "0.1.0"},
        "files": files, "digests": {name: digest_file(folder / name) for name in files if name.endswith("csv")},
        **sections,
    }
    (folder / "manifest.json").write_text(json.dumps(manifest), encoding="utf-8")
    return str(folder)


def write_rows(path, heads, rows):
    with path.open("w", encoding="utf-8", newline="") as file:
        csv.writer(file).writerows([heads, *rows])


def told(a, b, **options):
    return str(compare(a, b, **options))


def test_the_answer_stands_in_the_first_line(tmp_path):
    """2.00 L to 2.16, 1.94 and 2.30: +8, -3 and +15 %."""
    a = run_folder(tmp_path / "a")
    b = run_folder(tmp_path / "b", with_litres(2.16, 1.94, 2.30))
    text = told(a, b)
    assert text.splitlines()[0] == (
        "B gives 8.0 % more water in the sizing month at the median of 3 places (3.0 % less to 15 % more).")
    largest = text[text.index("Largest differences"):].splitlines()[1:4]
    assert [line.split()[0] for line in largest] == ["Oak", "Ash", "Elm"]
    assert WATER_CAUTION in " ".join(text.split())


def test_the_other_way_round_is_told_of_the_other_run(tmp_path):
    """A third less than 3 is 2; 2 and a half more is 3."""
    a, b = run_folder(tmp_path / "a"), run_folder(tmp_path / "b", with_litres(3.0, 3.0, 3.0))
    assert told(a, b).startswith("B gives 50 % more water in the sizing month at the median of 3 places "
                                 "(50 % more everywhere).")
    assert told(b, a).startswith("B gives 33 % less water in the sizing month at the median of 3 places "
                                 "(33 % less everywhere).")


def test_a_run_beside_itself(tmp_path):
    a = run_folder(tmp_path / "a")
    text = told(a, a)
    assert text.startswith("The same in both: litres in the sizing month, basin area a person.\n")
    assert "run file: the same" in text
    assert "Order: the same for the 3 places that both rank." in text
    assert "Litres are the same at all 4 cells." in text
    assert "%" not in text[:text.index("What differs")]


def test_only_the_order_differs(tmp_path):
    other = [(*row[:4], rank, *row[5:]) for row, rank in zip(THREE, (3, 2, 1), strict=True)]
    text = told(run_folder(tmp_path / "a"), run_folder(tmp_path / "b", other))
    assert text.startswith("The order of the places differs: 2 of 3 change rank.\n")
    assert "Ash 1 -> 3" in text


def test_places_without_ids_of_their_own_are_paired_by_name_and_position(tmp_path):
    """A village in front shifts the numbers 1, 2, 3: no village may be held against its neighbour."""
    shifted = [("1", "New", 9.0, -31.0, 1, 9.00, 0.56),
               *((str(number), *row[1:4], number, *row[5:]) for number, row in enumerate(THREE, start=2))]
    text = told(run_folder(tmp_path / "a"), run_folder(tmp_path / "b", shifted), into=str(tmp_path / "out"))
    assert text.startswith("The same in both: litres")
    assert "3 places were paired by name and position" in text
    assert "Only in B, unpaired: New." in text
    rows = {row["name"]: row for row in table(tmp_path / "out" / "compare_places.csv")}
    assert rows["New"]["in_runs"] == "B only"
    assert (rows["New"]["a_sizing_yield_l_m2_day"], rows["New"]["sizing_yield_change_percent"]) == ("", "")
    assert [rows[name]["rank_change"] for name in ("Ash", "Elm", "Oak")] == ["0", "0", "0"]


def test_ids_pair_renamed_and_moved_places_and_say_so():
    a = PlaceList(["a", "b", "c"], ["Ash", "Elm", "Oak"], np.array([1.0, 2.0, 3.0]), np.array([179.9999, 5.0, 6.0]))
    b = PlaceList(["c", "b", "a"], ["Fir", "Elm", "Ash new"], np.array([8.0, 2.5, 1.0]),
                  np.array([9.0, 5.0, -179.9999]))
    found = pair_places(a, b)
    assert (found.a.tolist(), found.b.tolist()) == ([0, 1], [2, 1])
    assert (found.only_a.tolist(), found.only_b.tolist()) == ([2], [0])
    assert found.moved == ("b",)
    assert found.other_place == ("c",)


def test_two_places_of_one_name_stay_apart():
    a = PlaceList(["1", "2"], ["Ash", "Ash"], np.array([1.0, 2.0]), np.array([0.0, 0.0]))
    b = PlaceList(["8", "9"], ["Ash", "Ash"], np.array([2.0, 1.0]), np.array([0.0, 0.0]))
    found = pair_places(a, b)
    assert (found.a.tolist(), found.b.tolist(), found.by_position) == ([0, 1], [1, 0], 2)


def test_changes_have_a_base():
    assert np.isnan(change_percent(np.array([0.0, np.nan, 1.0]), np.array([1.0, 1.0, np.nan]))).all()
    assert change_over(np.array([0.0]), np.array([2.0])) is None
    change = change_over(np.array([np.nan, 4.0, 2.0]), np.array([1.0, 5.0, 1.0]))
    assert (change.count, change.percent_low, change.percent, change.percent_high) == (2, -50.0, -12.5, 25.0)
    assert change.largest == 2


def test_ranks_among_some():
    assert rank_among(np.array([9.0, np.nan, 4.0, 4.0, 30.0])).tolist()[2:] == [1.0, 1.0, 4.0]


def test_months_without_litres_are_unpaired(tmp_path):
    litres = [60.0] * 11 + [""]
    text = told(run_folder(tmp_path / "a"), run_folder(tmp_path / "b", months=litres), into=str(tmp_path / "out"))
    assert "Months with litres only in A, unpaired: Ash (December), Elm (December), Oak (December)." in text
    rows = table(tmp_path / "out" / "compare_months.csv")
    assert sum(row["in_runs"] == "A only" for row in rows) == 3
    assert len(rows) == 36


def test_months_are_told_by_the_size_of_their_change(tmp_path):
    litres = [60.0] * 12
    litres[3], litres[7] = 75.0, 45.0
    text = told(run_folder(tmp_path / "a"), run_folder(tmp_path / "b", months=litres))
    months = text[text.index("Months, over the places"):].splitlines()[2:4]
    assert [(line.split()[3], line.split("  ")[-1]) for line in months] == [("April", "+25 %"), ("August", "-25 %")]


def test_cells_of_one_grid(tmp_path):
    monthly = monthly_grid([10.0, 11.0], [-31.0, -30.0], missing=[(0, 0)])
    litres = ("monthly_yield", "annual_yield", "worst_month_yield")
    half = monthly.assign({name: 0.5 * monthly[name] for name in litres})
    half = half.isel(latitude=slice(None, None, -1))  # the same grid, the other way up
    text = told(run_folder(tmp_path / "a", None, monthly=monthly_grid([10.0, 11.0], [-31.0, -30.0])),
                run_folder(tmp_path / "b", None, monthly=half))
    assert text.startswith("B gives 50 % less, in L m-2 a year, at the median of 3 cells (50 % less everywhere).")
    assert "With a year's litres in one run only: 1." in text


def test_grids_that_differ_are_not_compared(tmp_path):
    a = run_folder(tmp_path / "a", None)
    b = run_folder(tmp_path / "b", None, monthly=monthly_grid([10.0, 11.0], [-31.0, -30.5]))
    text = told(a, b)
    assert text.startswith("A and B have neither places nor cells in common")
    assert "the grids differ (2 by 2 cells from 10 to 11 N, -31 to -30 E; 2 by 2" in text


def test_sites_are_paired_by_id_and_not_with_a_grid(tmp_path):
    two = run_folder(tmp_path / "a", None, monthly=monthly_sites(["Ash", "Elm"]))
    three = run_folder(tmp_path / "b", None, monthly=monthly_sites(["Ash", "Elm", "Oak"], seed=0))
    assert "With a year's litres in one run only: 1." in told(two, three)
    assert "one run has the cells of a grid, the other has sites" in told(two, run_folder(tmp_path / "c", None))


def test_settings_inputs_and_versions_that_differ(tmp_path):
    other = {**SETTINGS, "name": "two", "need": {"litres_per_person_day": 3.0}}
    same = {"bytes": 4, "sha256": "ab" * 32}
    a = run_folder(tmp_path / "a", inputs={"w.nc": same, "v.csv": {"bytes": 9, "sha256": "cd" * 32}})
    b = run_folder(tmp_path / "b", settings=other, versions={"stillfield": "0.2.0"},
                   inputs={"moved/w.nc": same, "v.csv": {"bytes": 8, "sha256": "ef" * 32}})
    text = told(a, b, into=str(tmp_path / "out"))
    assert "need.litres_per_person_day [L day-1]: 5 -> 3" in text
    assert "v.csv: 9 bytes, cdcdcdcdcdcd -> 8 bytes, efefefefefef" in text
    assert "w.nc" not in text, "a file that only lies elsewhere is the same input"
    assert "stillfield: 0.1.0 -> 0.2.0" in text
    assert "without effect on the figures: name" in text
    rows = table(tmp_path / "out" / "compare_settings.csv")
    assert [(row["what"], row["key"], row["moves_figures"]) for row in rows] == [
        ("setting", "name", "no"), ("setting", "need.litres_per_person_day", "yes"), ("input", "v.csv", "yes"),
        ("version", "stillfield", "yes")]


def test_members_of_lists_are_told_by_name():
    a = {"cost": {"parts": [{"name": "liner", "price_per_m2": 6.0}, {"name": "glass", "price_per_m2": 25.0}]}}
    b = {"cost": {"parts": [{"name": "glass", "price_per_m2": 30.0}]}}
    assert [(one.key, one.a, one.b) for one in differing_keys(a, b, kind="still")] == [
        ("cost.parts.glass.price_per_m2", 25.0, 30.0), ("cost.parts.liner", ["price_per_m2 6.0"], None)]


def test_units_come_from_the_schema():
    assert unit_of_key(["places", "max_cell_distance_km"]) == "km"
    assert unit_of_key(["storage", "tank_days"]) == "d"
    assert unit_of_key(["method"]) == unit_of_key(["no", "such", "key"]) == ""


def break_manifest(folder):
    (folder / "manifest.json").write_text('{"format": 1, "sett')


def another_version(folder):
    manifest = json.loads((folder / "manifest.json").read_text())
    (folder / "manifest.json").write_text(json.dumps({**manifest, "format": MANIFEST_FORMAT + 1}))


def no_settings(folder):
    manifest = json.loads((folder / "manifest.json").read_text())
    (folder / "manifest.json").write_text(json.dumps({**manifest, "settings": None}))


def spreadsheet(folder):
    text = (folder / "places.csv").read_text()
    (folder / "places.csv").write_text(text.replace("2.5", "25"))


def cut_raster(folder):
    whole = (folder / "monthly_yield.nc").read_bytes()
    (folder / "monthly_yield.nc").write_bytes(whole[:len(whole) // 2])


def no_folder(folder):
    shutil.rmtree(folder)


def a_file(folder):
    shutil.rmtree(folder)
    folder.write_text("")


def of_several_stills(folder):
    folder.rename(folder.parent / "glass")
    folder.mkdir()
    (folder.parent / "glass").rename(folder / "glass")


@pytest.mark.parametrize(("harm", "words"), [
    (no_folder, "no such folder"), (a_file, "is a file"), (of_several_stills, "folders that do (got glass)"),
    (lambda folder: (folder / "manifest.json").unlink(), "there is no manifest.json"),
    (break_manifest, "the manifest cannot be read"), (another_version, "the manifest is of another version"),
    (no_settings, "a damaged one"), (lambda folder: (folder / "manifest.json").write_text("[]"), "a damaged one"),
    (lambda folder: (folder / "places_months.csv").unlink(), "files of the run are gone (got places_months.csv)"),
    (spreadsheet, "is not what the run wrote"), (cut_raster, "cannot be read as NetCDF"),
])  # fmt: skip
def test_a_folder_that_holds_no_whole_run_is_one_message(tmp_path, capsys, harm, words):
    good, bad = run_folder(tmp_path / "a"), run_folder(tmp_path / "b")
    harm(tmp_path / "b")
    for arguments in ([good, bad], [bad, good]):
        assert main(["compare", *arguments, "--into", str(tmp_path / "out")]) == 2
        out, err = capsys.readouterr()
        assert out == ""
        assert words in err
        assert len(err.splitlines()) == 1
        assert str(tmp_path / "b") in err
    assert not (tmp_path / "out").exists()


def test_an_output_that_cannot_be_written_is_refused(tmp_path):
    a = run_folder(tmp_path / "a")
    (tmp_path / "taken").write_text("")
    with pytest.raises(OutputError, match="cannot write the comparison"):
        compare(a, a, into=str(tmp_path / "taken"))


def test_tables_of_an_earlier_comparison_do_not_stay(tmp_path):
    a, bare = run_folder(tmp_path / "a"), run_folder(tmp_path / "b", None)
    out = tmp_path / "out"
    compare(a, a, into=str(out))
    assert {path.name for path in out.iterdir()} == {
        "compare_settings.csv", "compare_places.csv", "compare_months.csv", "compare_notes.txt"}
    compare(a, bare, into=str(out))
    assert {path.name for path in out.iterdir()} == {"compare_settings.csv", "compare_notes.txt"}
    assert WATER_CAUTION in " ".join((out / "compare_notes.txt").read_text(encoding="utf-8").split())


def test_a_place_of_another_script_and_a_name_that_means_missing_stay_names(tmp_path):
    places = [("NA", "NA", 10.0, -31.0, 1, 2.0, 2.5), ("007", "Ünye, 上", 11.0, -31.0, 2, 2.0, 2.5)]
    read = read_finished(run_folder(tmp_path / "a", places)).places
    assert read is not None
    assert read["id"].tolist() == ["NA", "007"]
    assert read["name"].tolist() == ["NA", "Ünye, 上"]


def test_stills_side_by_side_over_cells(tmp_path):
    still = load_still_file(STILL)
    assert still.condition in STANDARD_CONDITIONS
    monthly = monthly_grid([10.0, 11.0], [-31.0, -30.0], missing=[(1, 1)])
    row = still_row(still, monthly, None, method="rule")
    known = np.sort(monthly["annual_yield"].to_numpy().ravel())[:3]
    assert (row["over"], row["count"], row["annual_yield_l_m2_year"]) == ("cells", 3, known[1])
    write_stills(tmp_path, [row, {**row, "still": "other"}], title="Two")
    heads = list(table(tmp_path / "stills.csv")[0])
    assert [row["still"] for row in table(tmp_path / "stills.csv")] == [still.name, "other"]
    assert set(heads) <= {column.name for column in STILL_COLUMNS}
    notes = (tmp_path / "stills_notes.txt").read_text(encoding="utf-8")
    assert all(f"\n{head}" in notes for head in heads)
    assert WATER_CAUTION in " ".join(notes.split())
