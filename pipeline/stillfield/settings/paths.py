"""Files named in a run file: found, checked, and kept as the user wrote them.

Paths count from the folder of the file that names them. ``package:path`` names a file inside an installed
package (``pvlib:data/12839.tm2``). What is missing is looked for near by, so that the message can say what
was probably meant.
"""

from __future__ import annotations

import glob
import os
import re
from collections.abc import Iterator
from dataclasses import dataclass
from difflib import get_close_matches
from importlib.util import find_spec
from pathlib import Path
from typing import Annotated, Any

from pydantic import GetPydanticSchema, PlainSerializer, ValidationInfo, WithJsonSchema
from pydantic_core import PydanticCustomError, core_schema

from stillfield.settings.text import harmless

_PACKAGE_FILE = re.compile(r"([A-Za-z_][A-Za-z0-9_]+):(?!//)(.+)")
_GLOB = re.compile(r"[*?\[]")
#: How far the search for a misnamed file goes.
_MAX_LOOKED_AT = 2_000
_MAX_DEPTH = 4


@dataclass(frozen=True)
class InputFile:
    """One existing file.

    Attributes
    ----------
    given : str
        As written in the run file; this is what is shown.
    path : Path
        Where it is.
    """

    given: str
    path: Path


@dataclass(frozen=True)
class InputFiles:
    """One entry of a list of files: a file or a pattern, and the files it stands for in sorted order."""

    given: str
    paths: tuple[Path, ...]

    @property
    def names(self) -> tuple[str, ...]:
        """The files as text: ``package:path`` as given, so that no output learns where a package lies."""
        in_package = _PACKAGE_FILE.fullmatch(self.given)
        if in_package:
            inside = Path(in_package[2]).parent
            return tuple(f"{in_package[1]}:{(inside / path.name).as_posix()}" for path in self.paths)
        return tuple(str(path) for path in self.paths)


def refuse(message: str) -> PydanticCustomError:
    """Fault with `message` taken as it is, for validators to raise."""
    return PydanticCustomError("stillfield", "{message}", {"message": message})


def find_file(given: str, folder: Path) -> InputFile:
    """Find the one file `given`, counted from `folder`.

    Raises
    ------
    PydanticCustomError
        When there is no such file, with the file that was probably meant.
    """
    path = _locate(given, folder)
    if path.is_dir():
        raise refuse(f"'{harmless(given)}' is a folder, not a file")
    if not path.is_file():
        raise refuse(f"no such file '{harmless(given)}'{_probably(given, folder)}")
    return InputFile(given, path)


def find_files(given: str, folder: Path) -> InputFiles:
    """Find the files that the file name or pattern `given` stands for, counted from `folder`.

    ``*``, ``?``, ``[...]`` and ``**`` (any folders) work; a file whose name really holds such a sign is taken
    as it is.
    """
    path = _locate(given, folder)
    if _is_store(path):
        return InputFiles(given, (path,))
    if not _GLOB.search(given) or path.exists():
        return InputFiles(given, (find_file(given, folder).path,))
    found = glob.glob(str(path), recursive=True)  # noqa: PTH207 (Path.glob takes no absolute pattern)
    matches = sorted(Path(match) for match in found)
    files = tuple(match for match in matches if match.is_file() or _is_store(match))
    if not files:
        raise refuse(f"no file matches '{harmless(given)}'{_nearest_folder(path, given, folder)}")
    return InputFiles(given, files)


def _is_store(path: Path) -> bool:
    """Whether a folder is a Zarr store, which is one thing like a file."""
    return path.suffix == ".zarr" and path.is_dir()


def _locate(given: str, folder: Path) -> Path:
    """Path that `given` stands for; it need not exist."""
    if not given.strip():
        raise refuse("should name a file (got an empty text)")
    if "://" in given:
        raise refuse(f"should be a file on this machine; fetch '{harmless(given)}' first and name the copy")
    package = _PACKAGE_FILE.fullmatch(given)
    if package:
        return _in_package(*package.groups())
    try:
        path = folder / Path(given).expanduser()
        path.exists()
    except (OSError, ValueError, RuntimeError):
        raise refuse(f"cannot be used as a file name (got '{harmless(given)}')") from None
    return path


def _in_package(package: str, inside: str) -> Path:
    """Path of a file inside an installed package, found without importing it."""
    try:
        spec = find_spec(package)
    except ValueError:  # a module such as __main__ that came from no package
        spec = None
    if spec is None or not spec.origin or not spec.submodule_search_locations:
        raise refuse(f"no package '{package}' is installed")
    if Path(inside).is_absolute() or ".." in Path(inside).parts:
        raise refuse(f"should stay inside the package '{package}' (got '{harmless(inside)}')")
    return Path(spec.origin).parent / inside


def _probably(given: str, folder: Path) -> str:
    """' (did you mean ...?)' for a file that is not there, or nothing."""
    package = _PACKAGE_FILE.fullmatch(given)
    if package:
        name, inside = package.groups()
        wanted = _in_package(name, inside)
        close = _closest(wanted.name, [entry.name for entry in _entries(wanted.parent)])
        return f" (did you mean '{name}:{Path(inside).with_name(close).as_posix()}'?)" if close else ""
    for spelling in (given.replace("\\", "/"), given.strip()):
        if spelling != given and (folder / spelling).is_file():
            return f" (did you mean '{spelling}'?)"
    if Path(given).is_file():
        return f" (paths count from the folder of this file; did you mean '{_from(folder, Path(given))}'?)"
    found = _near_by(folder / given, folder)
    return f" (did you mean '{_from(folder, found)}'?)" if found else ""


def _near_by(wanted: Path, folder: Path) -> Path | None:
    """Find a file of the same name below `folder`, else one of a similar name where it was meant to be."""
    below = list(_walk(folder))
    for path in below:
        if path.name.lower() == wanted.name.lower():
            return path
    for candidates in (list(_entries(wanted.parent)), below):
        close = _closest(wanted.name, [path.name for path in candidates])
        if close:
            return next(path for path in candidates if path.name == close)
    return None


def _nearest_folder(pattern: Path, given: str, folder: Path) -> str:
    """Say of a pattern without matches that its folder is missing or what the folder holds."""
    parent = pattern.parent
    if _GLOB.search(str(parent)):
        return ""
    if not parent.is_dir():
        return f" (there is no folder '{Path(given).parent.as_posix()}' beside this file)"
    endings = sorted({path.suffix for path in _entries(parent) if path.is_file() and path.suffix})
    shown = f"; files there end in {', '.join(endings[:6])}" if endings else "; it holds no files"
    return f" (looked in '{_from(folder, parent)}'{shown})"


def _closest(name: str, names: list[str]) -> str | None:
    """Most similar of `names`, capitals aside."""
    by_lower = {other.lower(): other for other in names}
    close = get_close_matches(name.lower(), list(by_lower), n=1, cutoff=0.72)
    return by_lower[close[0]] if close else None


def _entries(folder: Path) -> Iterator[Path]:
    """Give some visible entries of a folder; none when it cannot be read."""
    try:
        entries = sorted(folder.iterdir())[:_MAX_LOOKED_AT]
    except OSError:
        return
    yield from (entry for entry in entries if not entry.name.startswith("."))


def _walk(folder: Path) -> Iterator[Path]:
    """Files below `folder`, nearest first, up to the limits of the search."""
    looked_at, level = 0, [folder]
    for _ in range(_MAX_DEPTH):
        deeper: list[Path] = []
        for path in (entry for parent in level for entry in _entries(parent)):
            looked_at += 1
            if looked_at > _MAX_LOOKED_AT:
                return
            if path.is_dir():
                deeper.append(path)
            else:
                yield path
        level = deeper


def _from(folder: Path, path: Path) -> str:
    return Path(os.path.relpath(path, folder)).as_posix()


def folder_of(info: ValidationInfo) -> Path:
    """Folder from which the paths being checked count; without a run file the working directory."""
    context = info.context if isinstance(info.context, dict) else {}
    return Path(context.get("folder", "."))


def shown(given: str) -> str:
    """`given` as it may stand in an output: an absolute path is a fact of one machine, so its end is kept.

    Examples
    --------
    >>> shown("demo/villages.csv"), shown("/data/era/2019.nc")
    ('demo/villages.csv', '.../2019.nc')
    """
    absolute = Path(given).is_absolute() or given.startswith("~") or bool(re.match(r"[A-Za-z]:[\\/]", given))
    return ".../" + re.split(r"[\\/]", given)[-1] if absolute else given


def _file_schema(_source: Any, _handler: Any) -> core_schema.CoreSchema:
    return core_schema.with_info_after_validator_function(
        lambda given, info: find_file(given, folder_of(info)), core_schema.str_schema(strict=True)
    )


def _files_schema(_source: Any, _handler: Any) -> core_schema.CoreSchema:
    return core_schema.with_info_after_validator_function(
        lambda given, info: find_files(given, folder_of(info)), core_schema.str_schema(strict=True)
    )


#: A run-file key that names one file.
FileKey = Annotated[
    InputFile,
    GetPydanticSchema(_file_schema),
    PlainSerializer(lambda file: shown(file.given), return_type=str),
    WithJsonSchema({"type": "string"}),
]

#: A run-file key that names a file or a pattern of files.
FilesKey = Annotated[
    InputFiles,
    GetPydanticSchema(_files_schema),
    PlainSerializer(lambda files: shown(files.given), return_type=str),
    WithJsonSchema({"type": "string"}),
]
