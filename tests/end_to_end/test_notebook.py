"""The Python interface, used as in a notebook, gives the numbers of the command line."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
import xarray as xr

import stillfield as sf
from whole_runs import CONFIG, SMALL_WEATHER, STILL, finished, months_of, table, write_run


@pytest.mark.parametrize("method", ["fitted", "heat-balance", "rule", "nafey-2000"])
def test_typical_years_in_a_notebook_and_on_the_command_line(tmp_path, method):
    names = ["pvlib:data/723170TYA.CSV", "pvlib:data/12839.tm2"]
    weather = sf.open_weather(names)
    monthly = sf.monthly_yield(weather, sf.load_still(STILL), method=method)
    run_file = write_run(tmp_path / "x.yaml", weather={"kind": "typical-year", "files": names}, method=method)
    with xr.open_dataset(finished(run_file, cwd=tmp_path) / "monthly_yield.nc") as written:
        assert set(monthly.data_vars) == set(written.data_vars)
        for name in monthly.data_vars:
            # The file holds single precision.
            np.testing.assert_allclose(written[name].values, monthly[name].values, rtol=1e-6, err_msg=str(name))
            assert written[name].attrs["units"] == monthly[name].attrs["units"]
    assert monthly.attrs["method"] == method


def test_a_ranked_table_in_a_notebook_and_on_the_command_line(tmp_path):
    villages = CONFIG / "demo" / "villages.csv"
    box, (rows, columns) = SMALL_WEATHER["box"], SMALL_WEATHER["shape"]
    weather = sf.open_weather(SMALL_WEATHER["land"], "synthetic", **box, shape=(rows, columns), years=1)
    monthly = sf.monthly_yield(weather, sf.load_still(STILL), method="rule", rule_efficiency=0.35)
    ranked = sf.rank_places(monthly, sf.load_places(villages), STILL, litres_per_person_day=4, max_cell_distance_km=40)
    run_file = write_run(
        tmp_path / "x.yaml", weather=SMALL_WEATHER, places={"table": str(villages), "max_cell_distance_km": 40},
        need={"litres_per_person_day": 4}, rule={"efficiency": 0.35},
    )  # fmt: skip
    written = table(finished(run_file, cwd=tmp_path) / "places.csv")
    assert [row["id"] for row in written] == ranked["id"].tolist()
    assert len({row["rank"] for row in written}) > 5
    reached = ranked["rank"].notna()
    assert 5 < reached.sum() < len(ranked)
    for row, (_, ours) in zip(written, ranked.iterrows(), strict=True):
        if not row["rank"]:
            assert row["reason"] == ours["reason"] != ""
            assert row["area_per_person_m2"] == row["yield_jan_l_m2_month"] == ""
            continue
        assert int(row["rank"]) == ours["rank"]
        assert float(row["area_per_person_m2"]) == pytest.approx(ours["area_per_person_m2"], abs=0.006)
        assert float(row["cost_per_litre"]) == pytest.approx(ours["cost_per_litre"], rel=0.006)
        assert [row["rank_low"], row["rank_high"]] == [str(ours["rank_low"]), str(ours["rank_high"])]
        np.testing.assert_allclose(months_of(row)[0], ours["yield_jan_l_m2_month"], atol=0.006)


def test_a_still_without_its_file_works_every_day_and_has_no_price():
    weather = sf.open_weather("pvlib:data/12839.tm2")
    monthly = sf.monthly_yield(weather, sf.load_still(STILL), method="rule")
    village = pd.DataFrame({"name": ["Shore"], "id": ["1"], "latitude": [25.8], "longitude": [-80.3]})
    plain, priced = (sf.rank_places(monthly, village, still).iloc[0] for still in (sf.load_still(STILL), STILL))
    assert "cost_per_litre" not in plain
    assert priced["cost_per_litre"] > 0
    # Of 3 L a day (Sphere Handbook 2018, drinking, quoted from memory), from a still that works on 95 of 100 days.
    assert plain["area_per_person_m2"] == pytest.approx(3.0 / plain["sizing_yield_l_m2_day"])
    assert priced["area_per_person_m2"] == pytest.approx(3.0 / 0.95 / plain["sizing_yield_l_m2_day"])


def test_a_box_cuts_the_weather_in_a_notebook_as_in_a_run_file(tmp_path):
    names = ["pvlib:data/723170TYA.CSV", "pvlib:data/12839.tm2"]
    florida = sf.Box(south=24, north=31, west=-88, east=-79)
    assert sf.open_weather(names, region=florida)["site"].values.tolist() == ["12839"]
    run_file = write_run(
        tmp_path / "x.yaml", weather={"kind": "typical-year", "files": names},
        region={"south": 24, "north": 31, "west": -88, "east": -79},
    )  # fmt: skip
    assert [row["site"] for row in table(finished(run_file, cwd=tmp_path) / "cells.csv")] == ["12839"]


def test_faults_in_a_notebook_are_exceptions_with_the_same_words(tmp_path):
    from stillfield.errors import MethodError, StillfieldError, WeatherError

    with pytest.raises(WeatherError, match=r"gone\.nc"):
        sf.open_weather("gone.nc")
    with pytest.raises(StillfieldError, match=r"gone\.yaml"):
        sf.load_still("gone.yaml")
    weather = sf.open_weather("pvlib:data/12839.tm2")
    with pytest.raises(MethodError, match="wanted fitted, heat-balance, rule, nafey-2000"):
        sf.monthly_yield(weather, sf.load_still(STILL), method="rul")
