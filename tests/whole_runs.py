"""The command line in a process of its own, run files written for it, and its tables read back."""

from __future__ import annotations

import csv
import os
import subprocess
import sys
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import stillfield

CONFIG = Path(__file__).parents[1] / "config"
PACKAGE = Path(stillfield.__file__).parents[1]
STILL = CONFIG / "stills" / "single-slope-glass.yaml"
MONTHS = ("jan", "feb", "mar", "apr", "may", "jun", "jul", "aug", "sep", "oct", "nov", "dec")

#: A small piece of the invented region, for runs in which the weather does not matter.
SMALL_WEATHER = {
    "kind": "synthetic", "box": {"south": 18.5, "north": 21.5, "west": -40.0, "east": -37.2}, "shape": [6, 5],
    "years": {"count": 1}, "land": str(CONFIG / "demo" / "coast.geojson"),
}  # fmt: skip


def stillfield_command(*arguments: object, cwd: Path) -> subprocess.CompletedProcess[str]:
    """Run ``python -m stillfield`` in `cwd`, as a user would."""
    return subprocess.run(
        [sys.executable, "-m", "stillfield", *map(str, arguments)], capture_output=True, text=True, cwd=cwd,
        env={**os.environ, "PYTHONPATH": str(PACKAGE)}, check=False, timeout=300,
    )  # fmt: skip


def write_run(path: Path, **keys: Any) -> Path:
    """Write a run file; `keys` are added to, or put in place of, a still and the rule."""
    from ruamel.yaml import YAML

    with path.open("w", encoding="utf-8") as stream:
        YAML(typ="safe").dump({"name": path.stem, "still": str(STILL), "method": "rule", **keys}, stream)
    return path


def finished(run_file: Path, *arguments: object, cwd: Path) -> Path:
    """Run a run file named like its run, expect success without a warning, and give the folder it wrote."""
    done = stillfield_command("run", run_file, *arguments, cwd=cwd)
    assert done.returncode == 0, done.stderr
    assert "warning" not in done.stderr.lower(), done.stderr
    return cwd / "outputs" / run_file.stem


def table(path: Path) -> list[dict[str, str]]:
    """Rows of a CSV file as text."""
    with path.open(encoding="utf-8", newline="") as stream:
        return list(csv.DictReader(stream))


def months_of(row: Mapping[str, str]) -> list[float]:
    """Litres of the twelve months in a row of cells.csv or places.csv."""
    return [float(row[f"yield_{month}_l_m2_month"]) for month in MONTHS]
