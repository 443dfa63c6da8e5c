"""Outputs appear whole or not at all, and an earlier run's are replaced, removed or left alone as they should be."""

from __future__ import annotations

import errno
import json
import os
from types import SimpleNamespace

import pandas as pd
import pytest

from product_samples import monthly_sites
from stillfield.errors import OutputError, StillfieldError
from stillfield.stages import write
from stillfield.stages.write import Results, check_outputs, write_results


def results(*, seed=0, ranked=None):
    monthly = monthly_sites(["Invented"], seed=seed)
    return Results(monthly, ranked, "Title", "Still x; method y.", "name: x\n", {"name": "x"}, {})


def bytes_of(folder):
    return {path.relative_to(folder).as_posix(): path.read_bytes() for path in folder.rglob("*") if path.is_file()}


def full_disk(*_arguments, **_options):
    raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))


def test_a_full_disk_leaves_no_folder_behind(tmp_path, monkeypatch):
    monkeypatch.setattr(write, "write_csv", full_disk)
    with pytest.raises(OutputError, match=r"run: cannot write the results \(got No space left on device\)") as caught:
        write_results(tmp_path / "new" / "run", results())
    assert caught.value.exit_code == 3
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize("step", ["write_netcdf", "write_csv", "write_notes", "write_manifest"])
def test_a_full_disk_at_any_step_leaves_the_earlier_results_whole(tmp_path, monkeypatch, step):
    write_results(tmp_path / "run", results(seed=1))
    before = bytes_of(tmp_path)
    monkeypatch.setattr(write, step, full_disk)
    with pytest.raises(OutputError):
        write_results(tmp_path / "run", results(seed=2))
    assert bytes_of(tmp_path) == before


def test_an_interrupt_leaves_the_earlier_results_whole(tmp_path, monkeypatch):
    def interrupt(*_arguments, **_options):
        raise KeyboardInterrupt

    write_results(tmp_path / "run", results(seed=1))
    before = bytes_of(tmp_path)
    monkeypatch.setattr(write, "write_manifest", interrupt)
    with pytest.raises(KeyboardInterrupt):
        write_results(tmp_path / "run", results(seed=2))
    assert bytes_of(tmp_path) == before


def test_what_a_killed_run_left_is_cleared_away(tmp_path):
    (tmp_path / "run" / ".unfinished").mkdir(parents=True)
    (tmp_path / "run" / ".unfinished" / "half.nc").write_text("half")
    files = write_results(tmp_path / "run", results())
    assert sorted(bytes_of(tmp_path / "run")) == sorted(path.relative_to(tmp_path / "run").as_posix() for path in files)


def test_files_of_an_earlier_run_that_the_new_one_has_not_are_removed_and_strangers_stay(tmp_path):
    places = pd.DataFrame({"rank": [1], "name": ["A"], "id": ["1"], "sizing_month": [1.0]})
    write_results(tmp_path, results(ranked=SimpleNamespace(places=places, months=places, storage=pd.DataFrame())))
    (tmp_path / "my-notes.txt").write_text("kept")
    assert (tmp_path / "places.csv").exists()
    write_results(tmp_path, results())
    assert not (tmp_path / "places.csv").exists()
    assert (tmp_path / "my-notes.txt").read_text() == "kept"


@pytest.mark.parametrize("listed", ["../outside.txt", "/outside.txt", "a/../../outside.txt"])
def test_a_forged_manifest_removes_nothing_outside_the_folder(tmp_path, listed):
    outside = tmp_path / "outside.txt"
    outside.write_text("kept")
    (tmp_path / "run").mkdir()
    name = str(outside) if listed.startswith("/") else listed
    (tmp_path / "run" / "manifest.json").write_text(json.dumps({"files": [name]}))
    write_results(tmp_path / "run", results())
    assert outside.read_text() == "kept"


@pytest.mark.parametrize("content", ["", "[1", '{"files": 3}', '{"files": null}', "[]", '{"format": 1}'])
def test_a_manifest_that_is_none_is_replaced(tmp_path, content):
    (tmp_path / "manifest.json").write_text(content)
    write_results(tmp_path, results())
    assert "cells.csv" in json.loads((tmp_path / "manifest.json").read_text())["files"]


def test_the_manifest_is_the_last_to_come_and_lists_every_file(tmp_path):
    files = write_results(tmp_path, results())
    assert files[-1] == tmp_path / "manifest.json"
    listed = json.loads(files[-1].read_text())["files"]
    assert [tmp_path / name for name in listed] == files[:-1]


def test_outputs_are_checked_without_being_made(tmp_path, monkeypatch):
    check_outputs([tmp_path / "a" / "b", tmp_path])
    assert list(tmp_path.iterdir()) == []
    (tmp_path / "file").touch()
    with pytest.raises(OutputError, match="a file, not a folder"):
        check_outputs([tmp_path / "file" / "b"])
    # The permission bits do not bind every user, so the system's answer is acted here.
    monkeypatch.setattr(os, "access", lambda path, mode: False)
    with pytest.raises(OutputError, match="no permission to write"):
        check_outputs([tmp_path / "a"])


def test_a_land_outline_is_checked_as_input(tmp_path):
    (tmp_path / "land.geojson").write_text("{}")
    with pytest.raises(StillfieldError, match=r"land\.geojson: not readable as GeoJSON") as caught:
        check_outputs([tmp_path], land=tmp_path / "land.geojson")
    assert caught.value.exit_code == 2
