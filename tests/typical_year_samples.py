"""Invented typical years as text, for tests of the readers. No real place or measurement is behind them."""

from __future__ import annotations

from pathlib import Path

import numpy as np

MONTH_DAYS = (31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31)


def calendar(*, leap: bool = False, per_hour: int = 1) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Month, day and start in minutes of each row of a year."""
    lengths = [days + (1 if leap and month == 1 else 0) for month, days in enumerate(MONTH_DAYS)]
    month = np.repeat(np.arange(1, 13), lengths)
    day = np.concatenate([np.arange(1, n + 1) for n in lengths])
    steps = 24 * per_hour
    start = np.tile(np.arange(steps) * (60 // per_hour), month.size)
    return np.repeat(month, steps), np.repeat(day, steps), start


def clear_sky(month, day, minutes, *, latitude: float, longitude: float, zone: float) -> np.ndarray:
    """Cloudless irradiance at the given moments: 1000 W m-2 times the cosine of the zenith angle.

    Declination and equation of time are the simple textbook sines, so that the readers' own sun is not
    checked against itself.
    """
    first = np.concatenate([[0], np.cumsum(MONTH_DAYS)])
    n = first[np.asarray(month) - 1] + np.asarray(day)
    b = 2 * np.pi * (n - 81) / 364
    delta = np.radians(23.45) * np.sin(2 * np.pi * (284 + n) / 365)
    equation_min = 9.87 * np.sin(2 * b) - 7.53 * np.cos(b) - 1.5 * np.sin(b)
    solar = np.asarray(minutes) / 60 - zone + longitude / 15 + equation_min / 60
    phi = np.radians(latitude)
    cosine = np.sin(phi) * np.sin(delta) + np.cos(phi) * np.cos(delta) * np.cos(np.radians(15 * (solar - 12)))
    return 1000.0 * np.clip(cosine, 0.0, None)


def epw_text(
    *,
    latitude: float = 12.0,
    longitude: float = 67.5,
    zone: float = 4.5,
    late_minutes: float = 0.0,
    leap: bool = False,
    per_hour: int = 1,
    years: tuple[int, ...] = (2003, 1998, 2010),
    city: str = "Drymouth",
) -> list[str]:
    """Lines of an EPW file; `late_minutes` moves the sunshine behind the clock."""
    month, day, start = calendar(leap=leap, per_hour=per_hour)
    middle = start + 30 / per_hour - late_minutes
    ghi = clear_sky(month, day, middle, latitude=latitude, longitude=longitude, zone=zone)
    head = [f"LOCATION,{city},-,XXX,invented,000000,{latitude},{longitude},{zone},15.0", "DESIGN CONDITIONS,0",
            "TYPICAL/EXTREME PERIODS,0", "GROUND TEMPERATURES,0", "HOLIDAYS/DAYLIGHT SAVINGS,No,0,0,0",
            "COMMENTS 1,invented", "COMMENTS 2,", f"DATA PERIODS,1,{per_hour},Data,Sunday, 1/ 1,12/31"]
    rows = []
    for m, d, s, g in zip(month, day, start, ghi, strict=True):
        minute = (s % 60) + 60 // per_hour if per_hour > 1 else 60
        temperature = 20 + m / 10 + s / 1440
        rows.append(
            f"{years[m % len(years)]},{m},{d},{s // 60 + 1},{minute},x,{temperature:.2f},{temperature - 5:.2f},70,"
            f"101325,0,0,300,{g:.2f},{0.8 * g:.2f},{0.2 * g:.2f},0,0,0,0,180,4.0,5,5,20,77777,9,999999999,0,0.1,0,88,"
            "0,0,0"
        )
    return head + rows


def write(path: Path, lines: list[str], encoding: str = "utf-8") -> str:
    """Write lines to a file and give its name."""
    path.write_text("\n".join(lines) + "\n", encoding=encoding)
    return str(path)


def with_field(line: str, position: int, value: str) -> str:
    """The row with one field replaced."""
    parts = line.split(",")
    parts[position] = value
    return ",".join(parts)
