"""Two runs beside each other in words: the answer first, then what was set differently, then where it shows most."""

from __future__ import annotations

import textwrap
from collections.abc import Iterable, Sequence

import pandas as pd

from stillfield.products.compare_facts import Beside, Cells, Change, Places
from stillfield.products.compare_files import AREA, COST, LITRES, PLACE_FIGURES, YEAR, Figure
from stillfield.vocabulary import WATER_CAUTION

_WIDTH = 100
_FEW = 5
_MANY = 10
_ROWS = 25
#: Changes smaller than this are none: tables carry two decimals of litres. [%]
SAME_PERCENT = 0.05
_TEN = 10.0
_MONTHS = 12

_ACCURACY = (
    "Litres are told to 30 % for a stated, maintained still, and ratios between places or months to 10 to 15 %: "
    "a smaller difference between runs is one between two calculations, and not yet one between stills in the field."
)


def compare_text(beside: Beside, *, written: tuple[str, int] | None = None) -> str:
    """Write a comparison as plain text.

    Parameters
    ----------
    beside : Beside
        What was found.
    written : tuple of str and int, optional
        Folder and number of files, where there are any.

    Returns
    -------
    str
        The answer on the first line, the caution at the end.
    """
    lines = [*headline(beside), ""]
    for letter, told in zip("AB", beside.runs, strict=True):
        lines += _wrapped(f"{letter}  {told}", indent=3)
    lines += ["", *_settings(beside)]
    if beside.places is not None:
        lines += ["", *_places(beside.places)]
    lines += ["", *_cells(beside.cells), "", *_wrapped(_ACCURACY), "", *_wrapped(WATER_CAUTION)]
    if written is not None:
        lines += ["", f"{written[1]} files in {written[0]}"]
    return "\n".join(lines) + "\n"


def headline(beside: Beside) -> list[str]:
    """The answer, one sentence a line; the first is on what differs.

    Parameters
    ----------
    beside : Beside
        What was found.

    Returns
    -------
    list of str
    """
    places = beside.places
    if places is not None and places.changes:
        return _headline_of_places(places)
    if beside.cells.changes:
        said, change = next(iter(beside.cells.changes.items()))
        what = beside.cells.what
        if _same(change):
            return [f"A and B give the same {said} at {_all(change.count, what)}."]
        return [f"B gives {more_or_less(change.percent)}, in {said}, at {_median_of(change, what)}{_range(change)}."]
    return ["A and B have neither places nor cells in common: only their settings can be compared."]


def _headline_of_places(places: Places) -> list[str]:
    said, same = [], []
    sentences = (
        (LITRES, "B gives {} water in the sizing month", "litres in the sizing month"),
        (AREA, "In B a person needs {} basin area", "basin area a person"),
        (COST, "In B a litre costs {}", "cost of a litre"),
    )
    for figure, words, what in sentences:
        change = places.changes.get(figure.column)
        if change is None:
            continue
        if _same(change):
            same.append(what)
            continue
        said.append(f"{words.format(more_or_less(change.percent))} at {_median_of(change, 'place')}{_range(change)}.")
    ranked = places.both["rank_change"].dropna()
    if not said and ranked.ne(0.0).any():
        said.append(f"The order of the places differs: {ranked.ne(0.0).sum()} of {len(ranked)} change rank.")
    if same:
        said.append(f"The same in both: {', '.join(same)}.")
    return said or ["The places of A and B have no figures in common."]


def more_or_less(percent: float) -> str:
    """A change in words.

    Parameters
    ----------
    percent : float
        [%]

    Returns
    -------
    str

    Examples
    --------
    >>> more_or_less(8.04), more_or_less(-24.2), more_or_less(0.01)
    ('8.0 % more', '24 % less', 'as much')
    """
    if abs(percent) < SAME_PERCENT:
        return "as much"
    return f"{_size(percent)} % {'more' if percent > 0 else 'less'}"


def _size(percent: float) -> str:
    return f"{abs(percent):.{1 if abs(percent) < _TEN else 0}f}"


def _signed(percent: float) -> str:
    if abs(percent) < SAME_PERCENT:
        return "0 %"
    return f"{'+' if percent > 0 else '-'}{_size(percent)} %"


def _same(change: Change) -> bool:
    return max(abs(change.percent_low), abs(change.percent_high)) < SAME_PERCENT


def _range(change: Change) -> str:
    if change.count == 1:
        return ""
    low, high = change.percent_low, change.percent_high
    if min(abs(low), abs(high)) < SAME_PERCENT or (low < 0.0) != (high < 0.0):
        return f" ({more_or_less(low)} to {more_or_less(high)})"
    near, far = sorted((low, high), key=abs)
    if _size(near) == _size(far):
        return f" ({more_or_less(far)} everywhere)"
    return f" ({_size(near)} to {more_or_less(far)})"


def _median_of(change: Change, what: str) -> str:
    return f"the one {what}" if change.count == 1 else f"the median of {change.count} {what}s"


def _all(count: int, what: str) -> str:
    return f"the one {what}" if count == 1 else f"all {count} {what}s"


def _wrapped(sentence: str, *, indent: int = 0) -> list[str]:
    return textwrap.wrap(sentence, _WIDTH, subsequent_indent=" " * indent, break_long_words=False,
                         break_on_hyphens=False)


def _listed(names: Iterable[object], most: int = _MANY) -> str:
    named = [str(name) for name in names]
    more = len(named) - most
    return ", ".join(named[:most]) + (f" and {more} more" if more > 0 else "")


def _settings(beside: Beside) -> list[str]:
    table, lines = beside.settings, ["What differs"]
    titles = {"setting": "run file", "still": "still file", "input": "input files", "version": "versions"}
    moving = table[table["moves_figures"].astype(bool)]
    for what, title in titles.items():
        rows = moving[moving["what"] == what]
        if rows.empty:
            known = beside.designs_known or what != "still"
            lines.append(f"  {title}: {'the same' if known else 'its numbers do not stand in both manifests'}")
            continue
        lines.append(f"  {title}:")
        for row in rows.head(_ROWS).to_dict("records"):
            unit = f" [{row['unit']}]" if row["unit"] else ""
            lines += _wrapped(f"    {row['key']}{unit}: {row['a_value'] or 'none'} -> {row['b_value'] or 'none'}",
                              indent=6)
        if len(rows) > _ROWS:
            lines.append(f"    and {len(rows) - _ROWS} more; --into FOLDER writes them all")
    idle = table[~table["moves_figures"].astype(bool)]["key"]
    if len(idle):
        lines += _wrapped(f"  without effect on the figures: {_listed(idle)}", indent=4)
    return lines


def _places(places: Places) -> list[str]:
    both = places.both
    most = max((change.count for change in places.changes.values()), default=0)
    without = f", {len(both) - most} of them without litres in one or both" if most < len(both) else ""
    lines = [f"Places ({len(both)} in both runs{without})"]
    lines += _figure_table([(figure.said, places.changes[figure.column]) for figure in PLACE_FIGURES
                            if figure.column in places.changes])
    lines += _largest(both, _telling(places))
    lines += _sizing_months(both) + _ranks(places.table)
    if any(not _same(change) for change in places.by_month.values()):
        rows = sorted(places.by_month.items(), key=lambda item: -abs(item[1].percent))
        lines += ["", "Months, over the places", *_figure_table([(f"L m-2 in {month}", one) for month, one in rows])]
    return lines + _unpaired(places)


def _telling(places: Places) -> Figure | None:
    """The first figure that differs, and by more at one place than at another."""
    for figure in (LITRES, YEAR, AREA, COST):
        change = places.changes.get(figure.column)
        if change is not None and not _same(change):
            return figure if _signed(change.percent_low) != _signed(change.percent_high) else None
    return None


def _figure_table(rows: Sequence[tuple[str, Change]], what: str = "place") -> list[str]:
    if not rows:
        return ["  no figure stands in both"]
    width = max(len(said) for said, _ in rows)
    lines = [f"  {'median':<{width}}  {'A':>9}  {'B':>9}  change of a {what}: median (range)"]
    for said, change in rows:
        low, high = _signed(change.percent_low), _signed(change.percent_high)
        spread = f" ({low} to {high})" if low != high else ""
        lines.append(f"  {said:<{width}}  {_number(change.median_a):>9}  {_number(change.median_b):>9}  "
                     f"{_signed(change.percent)}{spread}")
    return lines


def _number(value: float) -> str:
    """Three figures, whole numbers in full."""
    return f"{value:.0f}" if abs(value) >= 100 else f"{value:.3g}"


def _largest(both: pd.DataFrame, figure: Figure | None) -> list[str]:
    if figure is None:
        return []
    rows = both[both[figure.change].abs() >= SAME_PERCENT]
    rows = rows.reindex(rows[figure.change].abs().sort_values(ascending=False, kind="stable").index).head(_FEW)
    width = max(len(str(name)) for name in rows["name"])
    lines = ["", f"Largest differences, {figure.said}"]
    lines += [f"  {row['name']:<{width}}  {_number(row[f'a_{figure.column}'])} -> "
              f"{_number(row[f'b_{figure.column}'])} ({_signed(row[figure.change])})"
              for row in rows.to_dict("records")]
    return lines


def _sizing_months(both: pd.DataFrame) -> list[str]:
    other = both[(both["a_sizing_month"] != both["b_sizing_month"]) & both["a_sizing_month"].astype(bool)
                 & both["b_sizing_month"].astype(bool)]
    if other.empty:
        return []
    named = [f"{row['name']} {row['a_sizing_month']} -> {row['b_sizing_month']}" for row in other.to_dict("records")]
    return ["", *_wrapped(f"Another sizing month at {len(other)} of {len(both)} places: {_listed(named, _FEW)}.",
                          indent=2)]


def _ranks(table: pd.DataFrame) -> list[str]:
    """Who moves in the order, among the places that both runs rank."""
    both = table[table["in_runs"] == "both"]
    ranked = both[both["rank_change"].notna()]
    lines = [""]
    moved = ranked[ranked["rank_change"] != 0]
    if moved.empty:
        lines += [f"Order: the same for the {len(ranked)} places that both rank."]
    else:
        first = moved.reindex(moved["rank_change"].abs().sort_values(ascending=False, kind="stable").index)
        named = [f"{row['name']} {row['a_among']:.0f} -> {row['b_among']:.0f}" for row in first.to_dict("records")]
        lines += _wrapped(f"Order: {len(moved)} of {len(ranked)} places that both rank change place, at most by "
                          f"{moved['rank_change'].abs().max():.0f}: {_listed(named, _FEW)}."
                          f"{_beyond(table, ranked)}", indent=2)
    for run, other in (("a", "b"), ("b", "a")):
        alone = both[both[f"{run}_rank"].notna() & both[f"{other}_rank"].isna()]["name"]
        if len(alone):
            lines += _wrapped(f"Ranked only in {run.upper()}: {_listed(alone)}.", indent=2)
    return lines


def _beyond(table: pd.DataFrame, ranked: pd.DataFrame) -> str:
    """How many leave the interval that A gave; ranks of lists with other places do not tell."""
    interval = {"a_rank_low", "a_rank_high"} <= set(table)
    if not interval or len(table) != len(ranked) or ranked[["a_rank_low", "a_rank_high"]].isna().any(axis=None):
        return ""
    beyond = ranked[(ranked["b_rank"] < ranked["a_rank_low"]) | (ranked["b_rank"] > ranked["a_rank_high"])]
    if beyond.empty:
        return " All stay within the rank interval that A gives them: the order says nothing new."
    return f" {len(beyond)} leave the rank interval that A gives them: {_listed(beyond['name'], _FEW)}."


def _unpaired(places: Places) -> list[str]:
    lines: list[str] = []
    for run in "AB":
        alone = places.table[places.table["in_runs"] == f"{run} only"]
        if len(alone):
            lines += _wrapped(f"Only in {run}, unpaired: {_listed(alone['name'])}.", indent=2)
    if places.months is not None:
        paired = set(places.both["id"])
        for run in "AB":
            alone = places.months[places.months["in_runs"] == f"{run} only"]
            alone = alone[alone["id"].isin(paired)]
            named = [f"{name} ({'all 12' if len(rows) == _MONTHS else ', '.join(rows['month'])})"
                     for name, rows in alone.groupby("name", sort=False)]
            if named:
                lines += _wrapped(f"Months with litres only in {run}, unpaired: {_listed(named)}.", indent=2)
    if places.by_position:
        lines += _wrapped(f"{places.by_position} places were paired by name and position, because their ids differ.",
                          indent=2)
    if places.other_place:
        lines += _wrapped(f"Ids that mean another place in the other run, not paired by id: "
                          f"{_listed(places.other_place)}.", indent=2)
    if places.moved:
        lines += _wrapped(f"Same id, another position: {_listed(places.moved)}.", indent=2)
    return ["", *lines] if lines else []


def _cells(cells: Cells) -> list[str]:
    if cells.differ:
        return _wrapped(f"Cells are not compared: {cells.differ}.", indent=2)
    if not cells.changes:
        return [f"No {cells.what} has a year's litres in both runs."]
    year, worst, *months = cells.changes.items()
    shown = [year, worst, *sorted(months, key=lambda item: -abs(item[1].percent))]
    if all(_same(change) for _, change in shown):
        lines = [f"Litres are the same at {_all(year[1].count, cells.what)}."]
    else:
        lines = [f"{cells.what.capitalize()}s ({year[1].count} in both runs)",
                 *_figure_table(shown[:2 + _FEW], cells.what),
                 f"  The year changes most at {cells.where[year[0]]}."]
    if cells.only_in_one:
        lines.append(f"  With a year's litres in one run only: {cells.only_in_one}.")
    return lines
