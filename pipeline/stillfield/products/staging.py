"""Several files into a folder, all of them or none."""

from __future__ import annotations

import shutil
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from stillfield.errors import OutputError


@contextmanager
def all_or_none(folder: Path, what: str) -> Iterator[Path]:
    """Give a folder to write into; its files are moved in when the block ends well, and replace older ones.

    Parameters
    ----------
    folder : Path
        Made if need be.
    what : str
        What is written, for the message.

    Yields
    ------
    Path
        A temporary folder inside `folder`.

    Raises
    ------
    OutputError
        If the folder cannot be written to.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     with all_or_none(Path(folder, "new"), "a note") as stage:
    ...         _ = (stage / "note.txt").write_text("done")
    ...     sorted(path.name for path in Path(folder, "new").iterdir())
    ['note.txt']
    """
    stage = folder / ".unfinished"
    try:
        shutil.rmtree(stage, ignore_errors=True)
        stage.mkdir(parents=True)
        try:
            yield stage
            for path in sorted(stage.iterdir()):
                path.replace(folder / path.name)
        finally:
            shutil.rmtree(stage, ignore_errors=True)
    except OSError as error:
        raise OutputError(f"cannot write {what}", where=str(folder), got=error.strerror or str(error),
                          cure="Free the disk or the permissions, or choose another folder.") from None
