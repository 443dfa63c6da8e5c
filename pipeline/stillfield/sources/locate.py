"""Names in a run file turned into files: plain paths, patterns, and files inside installed packages."""

from __future__ import annotations

import glob
from collections.abc import Sequence
from importlib import resources
from pathlib import Path

from stillfield.errors import WeatherError

#: A path of one letter before the colon is a drive, not a package.
_SHORTEST_PACKAGE = 2


def _inside_package(name: str) -> Path | None:
    package, colon, inner = name.partition(":")
    if not colon or len(package) < _SHORTEST_PACKAGE or not package.isidentifier() or Path(name).exists():
        return None
    try:
        root = resources.files(package)
    except ModuleNotFoundError as fault:
        raise WeatherError(
            f"no installed package is called '{package}'",
            where=name,
            cure="Install the package, or give the path of the file.",
        ) from fault
    path = Path(str(root)).joinpath(*Path(inner).parts)
    if ".." in Path(inner).parts or Path(inner).is_absolute() or not path.is_file():
        raise WeatherError(f"package '{package}' holds no such file", where=name, got=inner)
    return path


def locate(names: Sequence[str]) -> tuple[Path, ...]:
    """Files behind the names of a run file, in the order given, matches of a pattern sorted.

    Parameters
    ----------
    names : sequence of str
        Paths, patterns with ``*``, ``?`` or ``[]``, or ``package:path`` for a file that an installed package
        brings along.

    Returns
    -------
    tuple of Path
        Existing files, each once.

    Raises
    ------
    WeatherError
        If there is no name, or a name leads to no file.

    Examples
    --------
    >>> [path.name for path in locate(["pvlib:data/12839.tm2"])]
    ['12839.tm2']
    """
    if isinstance(names, str) or not names:
        raise WeatherError("no weather files are named", wanted="a list of files", cure="List them under `files`.")
    found: dict[Path, None] = {}
    for name in map(str, names):
        packaged = _inside_package(name)
        if packaged is not None:
            found[packaged] = None
            continue
        path = Path(name).expanduser()
        if path.is_file() or path.is_dir():
            matches = [path]
        else:
            matches = sorted(Path(match) for match in glob.glob(str(path), recursive=True))  # noqa: PTH207
        if not matches:
            raise WeatherError(
                "no such file", where=name, cure="Check the path; it is relative to the working directory."
            )
        found.update(dict.fromkeys(matches))
    for path in found:
        if path.is_dir() and path.suffix != ".zarr":
            raise WeatherError("this is a folder", where=str(path), cure=f"Name the files: '{path}/*.nc'.")
    return tuple(found)
