"""Manifest: digests follow the values and nothing else; the file repeats and names no machine."""

from __future__ import annotations

import json
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from product_samples import monthly_grid, monthly_sites
from stillfield.errors import OutputError
from stillfield.products.manifest import (
    PIECE_BYTES,
    WHOLE_BYTES,
    digest_dataset,
    digest_file,
    identity_of,
    software_versions,
    write_manifest,
)
from stillfield.stages.read import describe_inputs


@pytest.fixture
def grid():
    return monthly_grid(np.linspace(20.0, 18.0, 6), np.linspace(-41.0, -39.0, 5), missing=[(2, 2)])


@pytest.mark.parametrize("kind", ["f4", "f8"])
def test_digest_ignores_chunks_byte_order_and_the_order_of_variables(grid, kind):
    grid = grid.astype(kind)
    expected = digest_dataset(grid)
    assert digest_dataset(grid.chunk({"latitude": 2, "month": 5})) == expected
    assert digest_dataset(grid.astype(f">{kind}")) == expected
    assert digest_dataset(grid[sorted(grid.data_vars, reverse=True)]) == expected
    assert digest_dataset(grid.assign_attrs(note="other words")) == expected


def test_digest_ignores_how_a_file_is_packed(grid, tmp_path):
    plain = {"monthly_yield": {"zlib": False}}
    packed = {"monthly_yield": {"zlib": True, "complevel": 9, "chunksizes": (3, 2, 5)}}
    digests = set()
    for name, encoding in (("a.nc", plain), ("b.nc", packed)):
        grid.to_netcdf(tmp_path / name, encoding=encoding)
        with xr.open_dataset(tmp_path / name) as back:
            digests.add(digest_dataset(back))
    assert digest_file(tmp_path / "a.nc") != digest_file(tmp_path / "b.nc")
    assert len(digests) == 1


def test_every_nan_and_both_zeros_are_one():
    odd_nan = np.array([0x7FF8000000000123], dtype=np.uint64).view(np.float64)
    one = xr.Dataset({"x": ("t", [np.nan, 0.0])})
    other = xr.Dataset({"x": ("t", np.array([odd_nan[0], -0.0]))})
    assert one["x"].values.tobytes() != other["x"].values.tobytes()
    assert digest_dataset(one) == digest_dataset(other)


def test_digest_follows_values_names_and_shape(grid):
    changed = grid.copy(deep=True)
    changed["monthly_yield"][3, 1, 1] += 1e-9
    text = [xr.Dataset({"x": ("t", words)}) for words in (["ab", "c"], ["a", "bc"])]
    cases = [grid, changed, grid.rename(monthly_yield="yield"), grid.transpose("longitude", ...),
             grid.isel(month=slice(0, 11)), monthly_sites(["Marl"]), *text]
    assert len({digest_dataset(case) for case in cases}) == len(cases)


def test_slabs_do_not_move_the_digest(grid, monkeypatch):
    expected = digest_dataset(grid)
    monkeypatch.setattr("stillfield.products.manifest._SLAB_BYTES", 100)
    assert digest_dataset(grid) == expected


def test_file_digest_is_the_published_one(tmp_path):
    # FIPS 180-2, appendix B.1: SHA-256 of "abc".
    (tmp_path / "abc").write_bytes(b"abc")
    assert digest_file(tmp_path / "abc") == "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"


@dataclass(frozen=True)
class Settings:
    weather: Path
    seed: int
    margins: tuple[float, ...]


def test_manifest_repeats_and_names_no_machine(tmp_path):
    run = tmp_path / "run"
    (run / "weather").mkdir(parents=True)
    (run / "weather" / "a.nc").write_bytes(b"abc")
    (tmp_path / "a.nc").write_bytes(b"abcd")
    settings = {"still": Settings(run / "weather" / "a.nc", 7, (np.float32(0.5), float("nan"))),
                "elsewhere": str(tmp_path / "a.nc"), "kinds": {"b", "a"}}
    inputs = describe_inputs([str(run / "weather" / "a.nc")] * 2 + [str(tmp_path / "a.nc")], run)
    for name in ("m.json", "n.json"):
        write_manifest(run / name, settings=settings, inputs=inputs, conventions=["Hours end at the stamp."],
                       counts={"clipped": np.int64(3)}, digests={"monthly.nc": "ab"}, base=run, caution="Test it.")
    text = (run / "m.json").read_text(encoding="utf-8")
    assert text == (run / "n.json").read_text(encoding="utf-8")
    assert str(tmp_path) not in text
    content = json.loads(text)
    assert list(content) == sorted(content)
    assert content["settings"]["still"] == {"margins": [0.5, None], "seed": 7, "weather": "weather/a.nc"}
    assert content["settings"]["elsewhere"] == "a.nc"
    assert content["settings"]["kinds"] == ["a", "b"]
    assert {name: facts["bytes"] for name, facts in content["inputs"].items()} == {
        "weather/a.nc": 3, "weather/a.nc (2)": 3, "a.nc": 4}
    assert content["counts"] == {"clipped": 3}
    assert content["caution"] == "Test it."


def test_what_json_cannot_hold_is_refused(tmp_path):
    with pytest.raises(OutputError, match="complex"):
        write_manifest(tmp_path / "m.json", settings={"z": 1j}, inputs={})


def test_versions_name_what_moves_a_result():
    versions = software_versions()
    assert {"python", "stillfield", "numpy", "xarray", "pvlib", "scipy"} <= set(versions)
    assert versions["numpy"] == np.__version__


def test_large_files_are_told_apart_by_size_and_samples(tmp_path):
    path = tmp_path / "large.nc"
    size = WHOLE_BYTES + 5
    with path.open("wb") as stream:
        stream.truncate(size)
    first = identity_of(path)
    assert set(first) == {"sha256_of_samples", "bytes"}
    assert first["bytes"] == size
    for spot in (0, size - 1, size // 2, size - PIECE_BYTES):
        with path.open("r+b") as stream:
            stream.seek(spot)
            stream.write(b"x")
        assert identity_of(path) != first, spot
        with path.open("r+b") as stream:
            stream.seek(spot)
            stream.write(b"\0")
    assert identity_of(path) == first
    with path.open("r+b") as stream:
        stream.truncate(size + 1)
    assert identity_of(path)["sha256_of_samples"] != first["sha256_of_samples"]
