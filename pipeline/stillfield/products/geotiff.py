"""Months as a cloud-optimised GeoTIFF: north up, one nodata, bands that say what they are."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from stillfield.errors import OutputError
from stillfield.products.grid import NorthUp, is_grid, north_up
from stillfield.products.netcdf import MONTH_NAMES, described_dataset
from stillfield.vocabulary import WATER_CAUTION

#: Stands for a missing number; yields are never negative, so it cannot be mistaken for one.
NODATA = -9999.0
NODATA_MONTH = 0
_BLOCK = 512
_PIECE = 1 << 22


def write_geotiff(
    dataset: xr.Dataset, variable: str, path: str | Path, *, caution: str = WATER_CAUTION
) -> None:
    """Write one variable as a cloud-optimised GeoTIFF: a band per month, or one band.

    Deflate with predictor, which every reader knows; overviews by average of the valid cells, so that
    missing neither spreads nor turns into zero, and by the commonest value for the worst month. The image
    is made in memory and then written, so a full disk is an error and never a half file.

    Parameters
    ----------
    dataset : Dataset
        Monthly result on an evenly spaced latitude-longitude grid, either way up.
    variable : str
        Name of the variable, with or without dimension month.
    path : str or Path
        File to write, exactly as named.
    caution : str
        Tag that travels with the litres.

    Raises
    ------
    OutputError
        When there is no such variable or no even grid.

    Examples
    --------
    >>> import rasterio, tempfile
    >>> grid = xr.Dataset({"annual_yield": (("latitude", "longitude"), [[900.0, float("nan")]])},
    ...                   coords={"latitude": [10.0], "longitude": [40.0, 40.5]})
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     write_geotiff(grid, "annual_yield", f"{folder}/a.tif")
    ...     with rasterio.open(f"{folder}/a.tif") as image:
    ...         print(image.bounds.left, image.bounds.top, image.nodata, image.units[0])
    39.75 10.25 -9999.0 L m-2 year-1
    """
    if variable not in dataset or not is_grid(dataset[variable]):
        raise OutputError("no such variable on a grid", where=variable, cure="Sites have tables, no rasters.")
    place = north_up(dataset)
    described = described_dataset(dataset[[variable]])[variable]
    bands = described.transpose(..., "latitude", "longitude").isel(place.order)
    if bands.ndim == 2:
        bands = bands.expand_dims("band")
    elif bands.dims[0] != "month":
        raise OutputError("only months can be the bands of a raster", where=variable, got=str(bands.dims[0]))
    values, nodata = _pixels(bands, variable)
    tags = {
        "quantity": variable, "meaning": str(described.attrs["long_name"]),
        "unit": str(described.attrs["units"]), "caution": caution,
    }
    _write_image(Path(path), values, place, nodata=nodata, names=_band_names(bands, described), tags=tags)


def _pixels(bands: xr.DataArray, variable: str) -> tuple[NDArray[Any], float]:
    data = np.asarray(bands.values, dtype=np.float64)
    if variable == "worst_month":
        return np.where(np.isfinite(data), data, NODATA_MONTH).astype(np.uint8), float(NODATA_MONTH)
    return np.where(np.isfinite(data), data, NODATA).astype(np.float32), NODATA


def _band_names(bands: xr.DataArray, described: xr.DataArray) -> list[str]:
    if "month" in bands.dims:
        return [f"{month:02d} {MONTH_NAMES[month - 1]}" for month in bands["month"].values.astype(int).tolist()]
    return [str(described.attrs["long_name"])]


def _write_image(
    path: Path, values: NDArray[Any], place: NorthUp, *, nodata: float, names: list[str], tags: dict[str, str]
) -> None:
    from rasterio.io import MemoryFile
    from rasterio.shutil import copy
    from rasterio.transform import Affine

    count, height, width = values.shape
    profile = {
        "driver": "GTiff", "dtype": values.dtype.name, "count": count, "height": height, "width": width,
        "crs": "EPSG:4326", "nodata": nodata, "interleave": "band",
        "transform": Affine(place.width_deg, 0.0, place.west, 0.0, -place.height_deg, place.north),
    }
    layout = {
        "COMPRESS": "DEFLATE", "PREDICTOR": "YES", "LEVEL": "6", "BLOCKSIZE": str(_BLOCK), "NUM_THREADS": "1",
        "OVERVIEW_RESAMPLING": "AVERAGE" if values.dtype.kind == "f" else "MODE", "BIGTIFF": "IF_SAFER",
    }
    with MemoryFile(ext=".tif") as plain, MemoryFile(ext=".tif") as finished:
        with plain.open(**profile) as image:
            image.write(values)
            image.descriptions = names
            image.units = [tags["unit"]] * count
            image.update_tags(**tags)
        copy(plain.name, finished.name, driver="COG", **layout)
        finished.seek(0)
        with path.open("wb") as file:
            while piece := finished.read(_PIECE):
                file.write(piece)
