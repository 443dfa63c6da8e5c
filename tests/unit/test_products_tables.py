"""Tables: harmless in a spreadsheet, stable in order, and led by the caution."""

from __future__ import annotations

import csv

import numpy as np
import pandas as pd
import pytest

from product_samples import monthly_grid, monthly_sites
from stillfield.errors import OutputError
from stillfield.products.tables import CELL_COLUMNS, cells_frame, write_csv, write_notes
from stillfield.vocabulary import WATER_CAUTION


def read_back(path):
    with path.open(encoding="utf-8", newline="") as file:
        return list(csv.reader(file))


@pytest.mark.parametrize("start", ["=", "+", "-", "@", "\t"])
def test_text_that_would_run_as_a_formula_is_neutralised(tmp_path, start):
    # With the carriage return below, the characters of the OWASP advice on CSV injection.
    frame = pd.DataFrame({f"{start}name": [f"{start}HYPERLINK(1)", f"a{start}b"]})
    write_csv(frame, tmp_path / "a.csv")
    assert read_back(tmp_path / "a.csv") == [[f"'{start}name"], [f"'{start}HYPERLINK(1)"], [f"a{start}b"]]


def test_a_carriage_return_neither_starts_a_cell_nor_breaks_a_row(tmp_path):
    write_csv(pd.DataFrame({"name": ["\r=1+1", "two\r\nlines", "three\rparts"]}), tmp_path / "a.csv")
    assert read_back(tmp_path / "a.csv") == [["name"], ["'\n=1+1"], ["two\nlines"], ["three\nparts"]]


def test_negative_numbers_stay_numbers(tmp_path):
    frame = pd.DataFrame({"longitude_deg": [-40.1234567], "height_m": [-3], "text": ["-40.1"]})
    write_csv(frame, tmp_path / "a.csv")
    assert read_back(tmp_path / "a.csv")[1] == ["-40.12346", "-3", "'-40.1"]


def test_cells_are_plain_text_with_sensible_decimals(tmp_path):
    frame = pd.DataFrame({
        "name": ['Őld "Saltern", north', None], "id": ["00123", "NA"], "distance_km": [3.14159, np.nan],
        "annual_yield_l_m2_year": [912.3456, -0.0001], "substituted": [True, False],
        "rank": pd.array([1, None], dtype="Int64"),
    })
    write_csv(frame, tmp_path / "a.csv", columns=["rank", "id", "name", "annual_yield_l_m2_year", "distance_km",
                                                  "substituted"])
    assert (tmp_path / "a.csv").read_bytes().decode("utf-8") == (
        "rank,id,name,annual_yield_l_m2_year,distance_km,substituted\n"
        '1,00123,"Őld ""Saltern"", north",912.35,3.14,yes\n'
        ",NA,,0.00,,no\n"
    )


def test_unknown_column_is_refused(tmp_path):
    with pytest.raises(OutputError, match="litres"):
        write_csv(pd.DataFrame({"a": [1]}), tmp_path / "a.csv", columns=["a", "litres"])


def test_cells_are_ranked_by_their_worst_month():
    grid = monthly_grid([20.0, 19.5, 19.0], [-40.0, -39.5], missing=[(0, 1)])
    frame = cells_frame(grid)
    assert list(frame.columns) == [column.name for column in CELL_COLUMNS]
    assert len(frame) == 5, "a cell without any value has no row"
    assert frame["rank"].tolist() == [1, 2, 3, 4, 5]
    assert frame["worst_month_yield_l_m2_day"].is_monotonic_decreasing
    cell = grid.sel(latitude=frame["latitude_deg"][0], longitude=frame["longitude_deg"][0])
    months = frame.filter(regex=r"^yield_").loc[0].to_numpy()
    np.testing.assert_allclose(months, cell["monthly_yield"].values, atol=0.005001)
    assert frame["annual_yield_low_l_m2_year"][0] == pytest.approx(float(cell["monthly_yield_low"].sum()), abs=0.006)
    assert frame["days_used_min"][0] == 28


def test_order_does_not_depend_on_the_order_of_the_input_and_ties_share_a_rank():
    grid = monthly_grid([20.0, 19.5], [-40.0, -39.5])
    grid["worst_month_yield"][:] = [[2.0, 1.5], [1.5, 1.0]]
    turned = grid.isel(latitude=[1, 0], longitude=[1, 0])
    frame = cells_frame(grid)
    pd.testing.assert_frame_equal(frame, cells_frame(turned))
    assert frame["rank"].tolist() == [1, 2, 2, 4]
    assert frame["latitude_deg"].tolist() == [20.0, 20.0, 19.5, 19.5]


def test_a_cell_with_a_missing_month_stands_last_without_a_rank():
    grid = monthly_grid([20.0], [-40.0, -39.5])
    grid["monthly_yield"][6, 0, 0] = np.nan
    for name in ("annual_yield", "worst_month", "worst_month_yield"):
        grid[name][0, 0] = np.nan
    last = cells_frame(grid).iloc[-1]
    assert last["longitude_deg"] == -40.0
    assert pd.isna(last["rank"])
    assert pd.isna(last["yield_jul_l_m2_month"])
    assert not pd.isna(last["yield_jun_l_m2_month"])


def test_sites_lead_with_their_id_and_lack_no_column():
    sites = monthly_sites(["Marl", "Bresk"]).drop_vars(["monthly_yield_low", "monthly_yield_high", "days_used"])
    frame = cells_frame(sites)
    assert list(frame.columns) == ["site", *(column.name for column in CELL_COLUMNS)]
    assert set(frame["site"]) == {"s000", "s001"}
    assert frame["annual_yield_low_l_m2_year"].isna().all()


def test_result_without_worst_month_is_refused():
    with pytest.raises(OutputError, match="worst_month_yield"):
        cells_frame(monthly_grid([20.0], [-40.0]).drop_vars("worst_month_yield"))


def test_notes_lead_with_the_whole_caution_and_explain_every_column(tmp_path):
    write_notes(tmp_path / "READ-ME-FIRST.txt", CELL_COLUMNS, title="Cells", remarks=["Method: rule."])
    text = (tmp_path / "READ-ME-FIRST.txt").read_text(encoding="utf-8")
    assert WATER_CAUTION in " ".join(text.split("COLUMNS")[0].split())
    for column in CELL_COLUMNS:
        assert f"\n{column.name}" in text
        assert column.meaning in " ".join(text.split())


def test_money_and_shares_show_no_more_than_is_known(tmp_path):
    frame = pd.DataFrame({
        "capital_village": [1233240.0, 999.96, 0.0], "cost_per_litre": [0.016249, 0.00098765, 12.345],
        "area_village_m2": [10276.15, 143.302, np.nan], "share_of_days_served": [0.9504, 1.0, 0.0],
        "reliability": [0.9431, 1.0, np.nan], "longest_poor_spell_days": [6.0, 0.0, np.nan],
        "need_l_person_day": [5, 2.25, 3.0], "modification_capital_to_break_even_per_m2": [-123.4, 1.0, 2.0],
    })  # fmt: skip
    write_csv(frame, tmp_path / "t.csv")
    rows = (tmp_path / "t.csv").read_text().splitlines()[1:]
    assert rows == [
        "1230000,0.0162,10280,0.95,0.94,6,5.00,-123", "1000,0.000988,143.3,1.00,1.00,0,2.25,1.00",
        "0,12.3,,0.00,,,3.00,2.00",
    ]
