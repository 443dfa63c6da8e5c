"""The arithmetic of the worked example in DEVELOPERS.md, in plain Python: nothing of the package is used here."""

from __future__ import annotations

from math import ceil, log

MONTH_DAYS = (31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31)


def day_by_day(means, listed_year, listed_month, listed):
    """Litres of every day and its month; a day gives the mean of its month unless the month is listed."""
    litres, months = [], []
    for year, of_year in means.items():
        for month, mean in enumerate(of_year, start=1):
            days = listed if (year, month) == (listed_year, listed_month) else [mean] * MONTH_DAYS[month - 1]
            litres += days
            months += [month] * MONTH_DAYS[month - 1]
    return litres, months


def reached(values, share_of_years):
    """Value reached or passed in a share of the years: linear between ranks (Hyndman & Fan 1996, type 7)."""
    ranked = sorted(values)
    place = (1 - share_of_years) * (len(ranked) - 1)
    below = int(place + 1e-12)
    above = min(below + 1, len(ranked) - 1)
    return ranked[below] + (place - below) * (ranked[above] - ranked[below])


def walk(litres, needs, area, tank, works):
    """What is there, what is left, and whether the need is met, day by day, from a full tank."""
    left, rows = tank, []
    for one, need in zip(litres, needs, strict=True):
        there = left + area * works * one
        met = there >= need * (1 - 1e-9)
        left = min(tank, max(0.0, there - need))
        rows.append((there, left, met))
    return rows


def least_area(litres, needs, tank, works, share_of_days):
    """Smallest area that meets the need on the share of days, by halving."""
    wanted = ceil(share_of_days * len(litres) - 1e-9)
    low, high = 0.0, 100.0
    while high - low > 1e-9:
        middle = (low + high) / 2
        enough = sum(met for _, _, met in walk(litres, needs, middle, tank, works)) >= wanted
        low, high = (low, middle) if enough else (middle, high)
    return high


def longest_run(flags):
    """Length of the longest run of True."""
    best = run = 0
    for flag in flags:
        run = run + 1 if flag else 0
        best = max(best, run)
    return best


def recovery(interest, years):
    """Capital recovery factor; the sinking fund factor is this less the interest."""
    grown = (1 + interest) ** years
    return interest * grown / (grown - 1)


def scaled(values, logarithmic=False):
    """Values from the least (0) to the greatest (1)."""
    on_scale = [log(value) if logarithmic else value for value in values]
    low, high = min(on_scale), max(on_scale)
    return [(value - low) / (high - low) for value in on_scale]
