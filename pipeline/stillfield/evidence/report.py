"""The evidence as tables: CSV for machines, Markdown for people."""

from __future__ import annotations

import csv
from collections.abc import Iterable, Sequence
from dataclasses import astuple, fields
from io import StringIO

from stillfield.evidence.accuracy import HIGHEST_LATITUDE, Accuracy
from stillfield.evidence.row import Row
from stillfield.stages.audit import LEAST_MONTH_L_M2
from stillfield.vocabulary import WATER_CAUTION

COLUMNS = ("subject", "what", "source", "expected", "got", "tolerance", "unit", "verdict", "bound", "note")
_SIGNS = {"within": "", "at most": "≤ ", "at least": "≥ "}


def evidence_csv(rows: Iterable[Row]) -> str:
    """Every line with full numbers.

    Parameters
    ----------
    rows : iterable of Row
        The evidence.

    Returns
    -------
    str
        CSV with the columns of `COLUMNS`.
    """
    return _csv([COLUMNS, *([_cell(getattr(row, name)) for name in COLUMNS] for row in rows)])


def accuracy_csv(found: Sequence[Accuracy]) -> str:
    """Every comparison of the correlation with the balance; errors in percent, named so in the header."""
    names = [field.name for field in fields(Accuracy)]
    header = [f"{name}_pct" if name.startswith(("annual", "month", "all")) else name for name in names]
    return _csv([header, *([_cell(value) for value in astuple(one)] for one in found)])


def _cell(value: object) -> object:
    return "" if value is None else f"{value:.6g}" if isinstance(value, float) else value


def _csv(lines: Iterable[Sequence[object]]) -> str:
    stream = StringIO()
    csv.writer(stream, lineterminator="\n").writerows(lines)
    return stream.getvalue()


def evidence_markdown(rows: Sequence[Row], accuracy: str, figures: Sequence[str]) -> str:
    """The evidence for people.

    Parameters
    ----------
    rows : sequence of Row
        The evidence.
    accuracy : str
        `accuracy_markdown`, shown at the end.
    figures : sequence of str
        File names of the pictures.

    Returns
    -------
    str
        Markdown.
    """
    text = ["# Evidence", "", f"> {WATER_CAUTION}", "", _counts(rows), ""]
    outside = [row for row in rows if row.verdict == "outside"]
    if outside:
        text += ["## What disagrees", ""]
        text += [_disagreement(row) for row in outside]
        text.append("")
    for subject in dict.fromkeys(row.subject for row in rows):
        text += [f"## {subject.capitalize()}", "", *_table([row for row in rows if row.subject == subject]), ""]
    text += [accuracy.replace("# Accuracy", "## Accuracy", 1), "", "## Pictures", ""]
    text += [f"![{name.removesuffix('.png').replace('-', ' ')}]({name})" for name in figures]
    return "\n".join(text) + "\n"


def _disagreement(row: Row) -> str:
    unit = "" if row.unit == "1" else f" {row.unit}"
    words = f"- **{row.what}**: expected {_expected(row)}, got {_number(row.got)}{unit}; {row.source}."
    return f"{words} {row.note[0].upper()}{row.note[1:]}." if row.note else words


def _counts(rows: Sequence[Row]) -> str:
    verdicts = [row.verdict for row in rows]
    return (
        f"{len(rows)} lines: {verdicts.count('within')} within their tolerance, {verdicts.count('outside')} outside, "
        f"{verdicts.count('no comparison')} without comparison because the source, the model or the weather has no "
        "number for it. The notes say why."
    )


def _table(rows: Sequence[Row]) -> list[str]:
    lines = ["| what | expected | got | tolerance | unit | verdict | source |", "|---|---:|---:|---:|---|---|---|"]
    for row in rows:
        source = f"{row.source}. *{row.note}*" if row.note else row.source
        verdict = row.verdict if row.verdict == "within" else f"**{row.verdict}**"
        cells = (row.what, _expected(row), _number(row.got), _number(row.tolerance), row.unit, verdict, source)
        lines.append("| " + " | ".join(cell.replace("|", "/") for cell in cells) + " |")
    return lines


def _expected(row: Row) -> str:
    return f"{_SIGNS[row.bound]}{_number(row.expected)}"


def _number(value: float | None) -> str:
    if value is None:
        return "–"
    return f"{value:.0f}" if abs(value) >= 1000.0 else f"{value:.4g}"


def accuracy_markdown(found: Sequence[Accuracy], sites: Sequence[str]) -> str:
    """The comparison of the correlation with the balance, short: one line for each still and condition.

    Parameters
    ----------
    found : sequence of Accuracy
        The comparison.
    sites : sequence of str
        Sites within the latitude.

    Returns
    -------
    str
        Markdown with every set of predictors.
    """
    text = [
        "# Accuracy of the correlation", "",
        f"Error of the fitted correlation against the hourly balance, in percent, on {found[0].sites} typical years "
        f"that the fit never saw, within {HIGHEST_LATITUDE:g}° of the equator: {', '.join(sites)}.", "",
        "A year: absolute error of a site, mean / largest. A month: absolute error, mean / 95th percentile, over "
        f"months without frost, and over all months of at least {LEAST_MONTH_L_M2:g} L/m². H, T, u: irradiation, "
        "temperature and wind of the day.",
    ]
    for predictors in dict.fromkeys(one.predictors for one in found):
        text += ["", f"### {predictors[0].upper()}{predictors[1:]}", "",
                 "| still | condition | year | month, no frost | month, all |", "|---|---|---:|---:|---:|"]
        text += [_accuracy_line(one) for one in found if one.predictors == predictors]
    return "\n".join(text) + "\n"


def _accuracy_line(one: Accuracy) -> str:
    return (f"| {one.still} | {one.condition} | {one.annual_mean:.1f} / {one.annual_max:.1f} | "
            f"{one.month_mean:.1f} / {one.month_p95:.1f} | {one.all_month_mean:.1f} / {one.all_month_p95:.1f} |")


def short_markdown(found: Sequence[Accuracy]) -> str:
    """One table with the least and the most predictors, for a page that has room for no more.

    Parameters
    ----------
    found : sequence of Accuracy
        The comparison.

    Returns
    -------
    str
        Markdown table.
    """
    by_label = {(one.still, one.condition, one.predictors): one for one in found}
    lines = ["| still | condition | from daily H, T, u: year | month | from hours: year | month |",
             "|---|---|---:|---:|---:|---:|"]
    for still, condition in dict.fromkeys((one.still, one.condition) for one in found):
        cells = []
        for predictors in ("daily H, T, u", "hourly"):
            one = by_label[still, condition, predictors]
            cells += [f"{one.annual_mean:.1f} / {one.annual_max:.1f}", f"{one.month_mean:.1f} / {one.month_p95:.1f}"]
        lines.append(f"| {still} | {condition} | " + " | ".join(cells) + " |")
    return "\n".join(lines) + "\n"
