"""The manifest of a run: settings, inputs, versions, counts, and digests of what the outputs hold."""

from __future__ import annotations

import hashlib
import json
import os
import platform
from collections.abc import Iterable, Mapping
from dataclasses import asdict, is_dataclass
from importlib import metadata
from pathlib import Path, PurePosixPath, PureWindowsPath
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from stillfield.errors import OutputError

MANIFEST_FORMAT = 1

_PACKAGES = ("stillfield", "numpy", "scipy", "pandas", "xarray", "dask", "pvlib", "netCDF4", "cftime", "numba",
             "rasterio", "shapely", "matplotlib")
_PIECE = 1 << 20
_SLAB_BYTES = 64 << 20


def write_manifest(
    path: str | Path,
    *,
    settings: object,
    inputs: Mapping[str, Mapping[str, Any]],
    versions: Mapping[str, str] | None = None,
    conventions: Iterable[str] = (),
    counts: Mapping[str, int] | None = None,
    digests: Mapping[str, str] | None = None,
    base: str | Path | None = None,
    **more: object,
) -> None:
    """Write the manifest as JSON with sorted keys; the same run gives the same bytes, no clock is read.

    Parameters
    ----------
    path : str or Path
        File to write, exactly as named.
    settings : object
        Resolved settings: a mapping, a dataclass or anything with ``model_dump``.
    inputs : mapping of str to mapping
        Name to ``{'sha256': str, 'bytes': int}``.
    versions : mapping, optional
        By default `software_versions`.
    conventions : iterable of str
        Every assumption made about the inputs.
    counts : mapping of str to int, optional
        Clips, flags, substitutions, dropped days.
    digests : mapping of str to str, optional
        Output name to `digest_dataset` or `digest_file`.
    base : str or Path, optional
        Folder of the run file; absolute paths in `settings` are written relative to it, or by their last
        part where they lie outside, so that a manifest tells nothing about the machine.
    **more : object
        Further sections.

    Raises
    ------
    OutputError
        When a value is no number, text, list or mapping.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     write_manifest(f"{folder}/m.json", settings={"seed": 1}, inputs={}, versions={"stillfield": "0"})
    ...     sorted(json.loads(Path(f"{folder}/m.json").read_text()))
    ['conventions', 'counts', 'digests', 'format', 'inputs', 'settings', 'versions']
    """
    content = {
        "format": MANIFEST_FORMAT,
        "settings": settings,
        "inputs": inputs,
        "versions": software_versions() if versions is None else versions,
        "conventions": list(conventions),
        "counts": counts or {},
        "digests": digests or {},
        **more,
    }
    plain = _plain(content, Path(base) if base is not None else None)
    text = json.dumps(plain, sort_keys=True, indent=2, ensure_ascii=False, allow_nan=False)
    Path(path).write_text(text + "\n", encoding="utf-8", newline="\n")


def _plain(value: Any, base: Path | None) -> Any:
    """Bring a value to what JSON knows; absolute paths lose the machine."""
    if hasattr(value, "model_dump"):
        value = value.model_dump(mode="python")
    elif is_dataclass(value) and not isinstance(value, type):
        value = asdict(value)
    if isinstance(value, Mapping):
        return {str(key): _plain(item, base) for key, item in value.items()}
    if isinstance(value, set | frozenset):
        return sorted((_plain(item, base) for item in value), key=str)
    if isinstance(value, list | tuple | np.ndarray):
        return [_plain(item, base) for item in value]
    if isinstance(value, os.PathLike):
        return portable_name(os.fspath(value), base)
    return _scalar(value, base)


def _scalar(value: Any, base: Path | None) -> Any:
    if isinstance(value, np.generic):
        value = value.item()
    if isinstance(value, float):
        return value if np.isfinite(value) else None
    if value is None or isinstance(value, bool | int):
        return value
    if isinstance(value, str):
        return portable_name(value, base) if _is_absolute(value) else value
    if hasattr(value, "isoformat"):
        return value.isoformat()
    raise OutputError("the manifest cannot hold a value", got=type(value).__name__)


def _is_absolute(text: str) -> bool:
    return "\n" not in text and (PurePosixPath(text).is_absolute() or PureWindowsPath(text).is_absolute())


def portable_name(path: str | Path, base: str | Path | None = None) -> str:
    """Name of a file as the run file may give it: relative to `base`, or its last part alone.

    Parameters
    ----------
    path : str or Path
        As given. A relative path is kept.
    base : str or Path, optional
        Folder of the run file.

    Returns
    -------
    str
        With forward slashes, never absolute.

    Examples
    --------
    >>> portable_name("/data/run/weather/a.nc", "/data/run"), portable_name("/elsewhere/a.nc", "/data/run")
    ('weather/a.nc', 'a.nc')
    >>> portable_name("../weather/a.nc")
    '../weather/a.nc'
    """
    text = str(path)
    if not _is_absolute(text):
        return Path(text).as_posix()
    if base is not None and Path(text).is_relative_to(base):
        return Path(text).relative_to(base).as_posix()
    return (PureWindowsPath(text) if "\\" in text else PurePosixPath(text)).name


def digest_file(path: str | Path) -> str:
    """SHA-256 of a file's bytes; of a folder, such as a Zarr store, over the names and bytes of what is inside.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     _ = Path(folder, "a").write_bytes(b"abc")
    ...     digest_file(Path(folder, "a"))[:8]
    'ba7816bf'
    """
    if Path(path).is_dir():
        inside = hashlib.sha256()
        for name, file in _files_inside(Path(path)):
            inside.update(f"{name}\0{digest_file(file)}\n".encode())
        return inside.hexdigest()
    with Path(path).open("rb") as stream:
        return hashlib.file_digest(stream, "sha256").hexdigest()


#: Files up to this size are identified by all their bytes. [bytes]
WHOLE_BYTES = 64 * 2**20
#: Of larger ones so many pieces of this size count, spread evenly from the first byte to the last.
PIECES, PIECE_BYTES = 17, 2**18


def identity_of(path: str | Path) -> dict[str, str | int]:
    """Tell a file from others without reading terabytes for it.

    Parameters
    ----------
    path : path
        A file, or a folder such as a Zarr store.

    Returns
    -------
    dict
        ``bytes``, and ``sha256`` of all bytes, or for what is larger than `WHOLE_BYTES` ``sha256_of_samples``: of the
        names, the sizes and `PIECES` pieces of each file, spread evenly over it.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     _ = Path(folder, "a").write_bytes(b"abc")
    ...     identity_of(Path(folder, "a"))["sha256"][:8]
    'ba7816bf'
    """
    size = size_of(path)
    if size <= WHOLE_BYTES:
        return {"sha256": digest_file(path), "bytes": size}
    files = _files_inside(Path(path)) if Path(path).is_dir() else [("", Path(path))]
    digest = hashlib.sha256()
    for name, file in files:
        length = file.stat().st_size
        digest.update(f"{name}\0{length}\n".encode())
        with file.open("rb") as stream:
            for number in range(PIECES):
                stream.seek(max(length - PIECE_BYTES, 0) * number // (PIECES - 1))
                digest.update(stream.read(PIECE_BYTES))
    return {"sha256_of_samples": digest.hexdigest(), "bytes": size}


def size_of(path: str | Path) -> int:
    """Bytes of a file, or of all files inside a folder."""
    if Path(path).is_dir():
        return sum(file.stat().st_size for _, file in _files_inside(Path(path)))
    return Path(path).stat().st_size


def _files_inside(folder: Path) -> list[tuple[str, Path]]:
    """Files below a folder by their names inside it, sorted."""
    return sorted((file.relative_to(folder).as_posix(), file) for file in folder.rglob("*") if file.is_file())


def digest_dataset(dataset: xr.Dataset) -> str:
    """SHA-256 over names, dimensions and decoded values of a dataset.

    Chunks, compression, byte order, the order of variables and attributes do not matter; every NaN is the
    same NaN and minus zero is zero. The precision does matter: float32 and float64 are different values.

    Parameters
    ----------
    dataset : Dataset
        In memory or lazy; lazy data are read in slabs along their first dimension.

    Returns
    -------
    str
        64 hexadecimal digits.

    Examples
    --------
    >>> a = xr.Dataset({"x": ("t", np.array([1.0, np.nan]))})
    >>> digest_dataset(a) == digest_dataset(a.astype(">f8")), digest_dataset(a) == digest_dataset(a + 1)
    (True, False)
    """
    total = hashlib.sha256()
    for name in sorted(map(str, dataset.variables)):
        variable = dataset[name].variable
        kind = _canonical_kind(variable.dtype)
        header = [name, kind, list(map(str, variable.dims)), list(variable.shape)]
        total.update(json.dumps(header, ensure_ascii=False).encode() + b"\n")
        for slab in _slabs(variable):
            total.update(_canonical_bytes(slab, kind))
    return total.hexdigest()


def _slabs(variable: xr.Variable) -> Iterable[NDArray[Any]]:
    if variable.ndim == 0 or variable.size == 0:
        yield np.asarray(variable.values)
        return
    rows = max(1, int(_SLAB_BYTES * variable.shape[0] // max(variable.nbytes, 1)))
    for start in range(0, variable.shape[0], rows):
        yield np.asarray(variable[start:start + rows].values)


def _canonical_kind(dtype: np.dtype[Any]) -> str:
    if dtype.kind == "f":
        return f"<f{dtype.itemsize}"
    return {"i": "<i8", "u": "<u8", "b": "|b1", "M": "<M8[us]", "m": "<m8[us]"}.get(dtype.kind, "text")


def _canonical_bytes(values: NDArray[Any], kind: str) -> bytes:
    if kind == "text":
        # Length first, so that ("ab", "c") and ("a", "bc") differ.
        encoded = [str(value).encode() for value in values.ravel().tolist()]
        return b"".join(len(text).to_bytes(8, "little") + text for text in encoded)
    same = np.ascontiguousarray(values).astype(kind)
    if kind.startswith("<f"):
        same = np.where(np.isnan(same), np.array(np.nan, dtype=kind), same + np.array(0.0, dtype=kind)).astype(kind)
    return same.tobytes()


def software_versions() -> dict[str, str]:
    """Versions of Python and of the packages that can move a result; absent ones say so.

    Examples
    --------
    >>> sorted(software_versions())[:3]
    ['cftime', 'dask', 'matplotlib']
    """
    found = {"python": platform.python_version()}
    for package in _PACKAGES:
        try:
            found[package] = metadata.version(package)
        except metadata.PackageNotFoundError:
            found[package] = "not installed"
    return found
