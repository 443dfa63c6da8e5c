"""Real typical years whose clock is off by 2 to 85 minutes give the litres of the file put right by hand.

By hand: the offset is found with pvlib's solar position (NREL's algorithm), not with our own measurement, and
the radiation of every row is moved by it, a clear-sky index carried from one hour to the next so that mornings
keep their shape. Temperatures and wind stay where they are unless whole hours are moved.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from pvlib.solarposition import get_solarposition

import stillfield as sf
from data.fetch import fetched

DESIGN = sf.load_still(Path(__file__).parents[2] / "config" / "stills" / "single-slope-glass.yaml")
GHI, DNI, DHI = 13, 14, 15  # fields of a row, EnergyPlus Auxiliary Programs, "EPW CSV Format"
#: File -> minutes after the start of the hour at which its sunshine fits the sun, by the survey of these files.
YEARS = {
    "ESP_AN_Sevilla.AP.083910_TMYx.2011-2025.epw": 85,
    "ESP_MD_Madrid-Barajas-Suarez.AP.082210_TMYx.2011-2025.epw": 63,
    "UK_Oxford_GBR_ENG_RAF.Benson.036580_TMYx.2007-2021.epw": 46,
    "GBR_ENG_London-Heathrow.Intl.AP.037720_TMYx.2011-2025.epw": 2,
    "USA_Denver_725650TYCST.epw": 37,
}


class Rows:
    """An EPW file as its head and a table of fields."""

    def __init__(self, path: Path) -> None:
        lines = path.read_text(encoding="latin-1").splitlines()
        self.head, self.fields = lines[:8], [line.split(",") for line in lines[8:]]
        place = lines[0].split(",")
        self.latitude, self.longitude, self.zone = (float(one) for one in place[6:9])

    def column(self, number: int) -> np.ndarray:
        return np.array([float(row[number]) for row in self.fields])

    def start_utc(self) -> pd.DatetimeIndex:
        local = pd.date_range("2001-01-01", periods=8760, freq="h")
        return local.tz_localize("UTC") - pd.Timedelta(hours=self.zone)

    def cos_zenith(self, minutes: float) -> np.ndarray:
        when = self.start_utc() + pd.Timedelta(minutes=minutes)
        zenith = get_solarposition(when, self.latitude, self.longitude)["zenith"].to_numpy()
        return np.clip(np.cos(np.radians(zenith)), 0.0, None)

    def write(self, path: Path, columns: dict[int, np.ndarray], roll: int) -> str:
        order = np.roll(np.arange(8760), roll)
        rows = []
        for position, row in enumerate(self.fields):
            moved = list(row[:6]) + list(self.fields[order[position]][6:])
            for number, values in columns.items():
                moved[number] = f"{values[position]:.2f}"
            rows.append(",".join(moved))
        path.write_text("\n".join([*self.head, *rows]) + "\n", encoding="latin-1")
        return str(path)


def measured_offset(rows: Rows) -> float:
    """Offset [min] at which global radiation of the whole year follows the sun best."""
    ghi = rows.column(GHI)
    offsets = np.arange(-20.0, 106.0, 3.0)
    score = [np.corrcoef(ghi, rows.cos_zenith(offset))[0, 1] for offset in offsets]
    return float(offsets[int(np.argmax(score))])


def put_right(rows: Rows, folder: Path, offset: float) -> str:
    """Write the file with its radiation in the middle of the hours."""
    whole = round((offset - 30.0) / 60.0)
    rest = offset - 60.0 * whole
    there, wanted = rows.cos_zenith(rest), rows.cos_zenith(30.0)
    columns = {}
    for number in (GHI, DHI):
        values = np.roll(rows.column(number), whole)
        # A clear-sky index at the moment of the row, read off at the middle of the hour, sums kept by day.
        index = np.where(there > 0.03, values / np.maximum(there, 0.03), np.nan)
        steps = np.arange(8760.0)
        known = np.isfinite(index)
        shifted = np.interp(steps, steps[known] + (rest - 30.0) / 60.0, index[known]) * wanted
        before, after = values.reshape(365, 24).sum(axis=1), shifted.reshape(365, 24).sum(axis=1)
        columns[number] = shifted * np.repeat(before / np.maximum(after, 1e-9), 24)
    beam = (columns[GHI] - columns[DHI]) / np.maximum(wanted, 0.05)
    columns[DNI] = np.clip(beam, 0.0, 1100.0)
    return rows.write(folder / "right.epw", columns, whole)


@pytest.mark.parametrize("name", YEARS)
def test_a_misaligned_year_gives_the_litres_of_the_year_put_right(tmp_path, name):
    rows = Rows(fetched(name))
    offset = measured_offset(rows)
    assert offset == pytest.approx(YEARS[name], abs=6)
    given = sf.open_weather(str(fetched(name)))
    right = sf.open_weather(put_right(rows, tmp_path, offset))
    months = {}
    for key, weather in (("given", given), ("right", right)):
        months[key] = sf.monthly_yield(weather, DESIGN, method="heat-balance").isel(site=0)
    annual = {key: float(one["annual_yield"]) for key, one in months.items()}
    assert annual["given"] == pytest.approx(annual["right"], rel=0.01)
    sunny = months["right"]["monthly_yield"].to_numpy() > 30.0
    ratio = (months["given"]["monthly_yield"] / months["right"]["monthly_yield"]).to_numpy()[sunny]
    assert sunny.sum() >= 5
    # The offset itself is uncertain: over all days or over the clearest it differs by up to 12 minutes.
    assert np.abs(ratio - 1.0).max() < 0.015


def test_rows_taken_as_they_stand_are_more_than_a_per_cent_off(tmp_path):
    """The rows of Seville, an hour late, as if they were not: outside what the corrected reading stays within."""
    name = "ESP_AN_Sevilla.AP.083910_TMYx.2011-2025.epw"
    weather = sf.open_weather(str(fetched(name)))
    assert any("all rows were moved by +1 h" in line for line in weather.attrs["conventions"])
    as_they_stand = weather.roll(time=-1, roll_coords=False).assign_coords(sun_offset_minutes=("site", [30.0]))
    right = sf.open_weather(put_right(Rows(fetched(name)), tmp_path, YEARS[name]))
    wrong, truth = (float(sf.monthly_yield(one, DESIGN, method="heat-balance")["annual_yield"][0])
                    for one in (as_they_stand, right))
    assert abs(wrong / truth - 1.0) > 0.01
