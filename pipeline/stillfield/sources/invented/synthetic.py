"""Invented daily weather for an invented land, so that everything can be tried without any download.

The land comes from a polygon file; the weather from `synthetic_climate`. The result has the shape of a real
gridded record: sea cells are missing, years differ, and every place has a height.
"""

from __future__ import annotations

import json
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import partial
from pathlib import Path
from threading import Lock
from typing import TYPE_CHECKING, Any
from uuid import uuid4

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from stillfield.errors import WeatherError
from stillfield.sources.invented.synthetic_climate import Ground, daily_weather, draw_chance
from stillfield.sources.invented.synthetic_fields import DAYS_PER_YEAR, Floats, relief_elevation
from stillfield.vocabulary import DAY_WEATHER, STEP_HOURS_DAILY

if TYPE_CHECKING:
    from shapely.geometry.base import BaseGeometry

KM_PER_DEGREE = 111.195
LARGEST_LATITUDE = 60.0
LARGEST_CELL_DAYS = 200_000_000

#: Variables and the decimals kept: no record is finer, and rounding hides the last bits that differ
#: between one machine's exponential function and another's.
DECIMALS = {
    "irradiation": 3,
    "temp_air": 2,
    "temp_air_min": 2,
    "temp_air_max": 2,
    "temp_dew": 2,
    "wind_speed": 2,
}

CONVENTIONS = (
    "The weather is invented; no measurement, model or real place stands behind it.",
    "Days are local solar days already, and time marks their start.",
    "Wind is at 2 m; temperatures are means and extremes of the day.",
    "Cells whose centre lies on the sea are missing.",
)


@dataclass(frozen=True, kw_only=True)
class SyntheticSource:
    """Invented weather over a box, with the sea where a polygon file has it.

    Attributes
    ----------
    land : Path
        GeoJSON file of land polygons in WGS84 longitude and latitude. Edges on the outer frame of the file
        are taken for cuts, not for shores.
    south, north, west, east : float
        Edges of the box. [degree]
    shape : tuple of int
        Rows and columns of the grid.
    first_year, years : int
        First calendar year and number of years.
    seed : int
        Seed of the weather, 0 or above. Heights do not depend on it.
    """

    land: Path
    south: float
    north: float
    west: float
    east: float
    shape: tuple[int, int] = (60, 60)
    first_year: int = 2011
    years: int = 8
    seed: int = 1

    def open(self) -> xr.Dataset:
        """Lay out the weather; it is made, a year at a time, when its first value is asked for, and kept.

        Returns
        -------
        xarray.Dataset
            Lazy daily weather with dims time, latitude, longitude in single precision, and the coordinate
            elevation (latitude, longitude) [m], missing at sea.

        Raises
        ------
        WeatherError
            The box, the size or the land file cannot be used, or no cell lies on land.
        """
        self._check()
        land = read_land(self.land)
        latitude = cell_centres(self.south, self.north, self.shape[0])
        longitude = cell_centres(self.west, self.east, self.shape[1])
        grid_lat, grid_lon = np.meshgrid(latitude, longitude, indexing="ij")
        is_land = land_mask(land, grid_lat, grid_lon)
        if not is_land.any():
            raise WeatherError(
                "no cell centre of the weather box lies on land", where=str(self.land),
                cure="Move the box over the polygons or give it more rows and columns.",
            )
        ground = ground_at(land, grid_lat[is_land], grid_lon[is_land])
        first, end = f"{self.first_year:04d}-01-01", f"{self.first_year + self.years:04d}-01-01"
        days = np.arange(np.datetime64(first, "D"), np.datetime64(end, "D"))
        weather = _made_later(partial(_weather_on_grid, ground, is_land, days, self.seed), (days.size, *is_land.shape))
        elevation = np.full(is_land.shape, np.nan, dtype=np.float32)
        elevation[is_land] = np.round(ground.elevation_m, 1)
        dataset = _labelled(weather, days, latitude, longitude, elevation)
        return dataset.assign_attrs(self._attributes(int(is_land.sum())))

    def _check(self) -> None:
        where = "synthetic weather"
        inside = -LARGEST_LATITUDE <= self.south < self.north <= LARGEST_LATITUDE
        if not (inside and -180.0 <= self.west < self.east <= 180.0):
            raise WeatherError(
                "the box has no area or leaves the map", where=where,
                got=f"south {self.south}, north {self.north}, west {self.west}, east {self.east}",
                wanted=f"-{LARGEST_LATITUDE:g} <= south < north <= {LARGEST_LATITUDE:g} and"
                " -180 <= west < east <= 180 degrees",
            )
        if min(*self.shape, self.years) < 1 or self.seed < 0 or not 1 <= self.first_year <= 9999 - self.years:
            raise WeatherError(
                "grid, years and seed must count something", where=where,
                got=f"shape {self.shape}, {self.years} years from {self.first_year}, seed {self.seed}",
                wanted="at least 1 row, column and year, a seed of 0 or above",
            )
        cell_days = self.shape[0] * self.shape[1] * self.years * DAYS_PER_YEAR
        if cell_days > LARGEST_CELL_DAYS:
            raise WeatherError(
                "the invented record would not fit into memory", where=where,
                got=f"{cell_days:.3g} cell-days", wanted=f"at most {LARGEST_CELL_DAYS:.3g}",
                cure="Ask for fewer rows, columns or years.",
            )

    def _attributes(self, land_cells: int) -> dict[str, Any]:
        last = self.first_year + self.years - 1
        return {
            "record": "series",
            "step_hours": STEP_HOURS_DAILY,
            "clock": "own-days",
            "origin": f"Invented daily weather of {self.first_year} to {last} (seed {self.seed}) on"
            f" {land_cells} land cells of {self.land.name}.",
            "conventions": list(CONVENTIONS),
            "recognised": [
                json.dumps({"name": None, "quantity": name, "units": DAY_WEATHER[name].unit, "how": "invention"})
                for name in DECIMALS
            ],
        }


def cell_centres(low: float, high: float, count: int) -> Floats:
    """Centres of `count` equal cells between two edges, ascending, in the unit of the edges.

    Examples
    --------
    >>> cell_centres(10.0, 12.0, 4).tolist()
    [10.25, 10.75, 11.25, 11.75]
    """
    centres: Floats = low + (high - low) * (np.arange(count) + 0.5) / count
    return centres


def read_land(path: Path, *, what: str = "land") -> BaseGeometry:
    """Union of the polygons of a GeoJSON file.

    Parameters
    ----------
    path : Path
        A GeoJSON FeatureCollection, Feature or geometry in WGS84 longitude and latitude.
    what : str
        What the polygons are, for errors.

    Returns
    -------
    shapely geometry
        Polygon or MultiPolygon. [degree]

    Raises
    ------
    WeatherError
        The file is absent, is not GeoJSON, or holds something other than valid polygons.
    """
    import shapely

    try:
        content = json.loads(path.read_text(encoding="utf-8"))
        shapes = [shapely.geometry.shape(geometry) for geometry in _geometries(content)]
    except OSError as error:
        raise WeatherError(f"the {what} file cannot be read", where=str(path), got=error.strerror) from error
    except (ValueError, LookupError, TypeError, AttributeError, shapely.errors.ShapelyError) as error:
        raise WeatherError(
            f"the {what} file is not GeoJSON", where=str(path), got=f"{type(error).__name__}: {error}",
            cure="Give a GeoJSON file of polygons.",
        ) from error
    wrong = [shape.geom_type for shape in shapes if shape.geom_type not in ("Polygon", "MultiPolygon")]
    broken = [number for number, shape in enumerate(shapes, start=1) if not shape.is_valid or shape.is_empty]
    if wrong or broken or not shapes:
        raise WeatherError(
            f"the {what} file must hold valid polygons only", where=str(path),
            got=f"{len(shapes)} shapes, other kinds: {sorted(set(wrong))},"
            f" invalid or empty shapes number: {broken}",
        )
    return shapely.union_all(shapes)


def land_mask(land: BaseGeometry, latitude: Floats, longitude: Floats) -> NDArray[np.bool_]:
    """Whether each point lies inside the land.

    Parameters
    ----------
    land : shapely geometry
        Land of `read_land`. [degree]
    latitude, longitude : ndarray, same shape
        Points. [degree]

    Returns
    -------
    ndarray of bool, shape of `latitude`
        True on land, False on the sea and on the very shore.
    """
    import shapely

    shapely.prepare(land)
    return np.asarray(shapely.contains_xy(land, longitude, latitude), dtype=bool)


def ground_at(land: BaseGeometry, latitude: Floats, longitude: Floats) -> Ground:
    """Position, distance to the shore and invented height of points.

    Distances are taken on a plane that is true along the middle latitude of the land file: within 2 % over
    five degrees of latitude in the tropics, which is plenty for weather that is invented.

    Parameters
    ----------
    land : shapely geometry
        Land of `read_land`. [degree]
    latitude, longitude : ndarray, shape (cells,)
        Points. [degree]

    Returns
    -------
    Ground
        What the invented climate needs to know of each point.
    """
    import shapely

    west, south, east, north = land.bounds
    origin = np.array([(west + east) / 2.0, (south + north) / 2.0])
    scale = KM_PER_DEGREE * np.array([np.cos(np.radians(origin[1])), 1.0])

    def to_plane(points: Floats) -> Floats:
        plane: Floats = (points - origin) * scale
        return plane

    hair = 1e-6 * max(east - west, north - south)
    inside_frame = shapely.box(west + hair, south + hair, east - hair, north - hair)
    shore = shapely.transform(shapely.intersection(land.boundary, inside_frame), to_plane)
    position = to_plane(np.stack([longitude, latitude], axis=-1))
    if shore.is_empty:
        coast_km = np.full(latitude.shape, 500.0)
    else:
        shapely.prepare(shore)
        coast_km = np.asarray(shapely.distance(shore, shapely.points(position)), dtype=np.float64)
    east_km, north_km = position[..., 0], position[..., 1]
    return Ground(latitude, east_km, north_km, coast_km, relief_elevation(east_km, north_km, coast_km))


class _Once:
    """Grids that are made once, by whichever thread asks first."""

    def __init__(self, make: Callable[[], dict[str, Floats]]) -> None:
        self._make = make
        self._lock = Lock()
        self._grids: dict[str, Floats] | None = None

    def grid(self, name: str) -> Floats:
        """One variable."""
        with self._lock:
            if self._grids is None:
                self._grids = self._make()
            return self._grids[name]


def _made_later(make: Callable[[], dict[str, Floats]], shape: tuple[int, ...]) -> dict[str, Any]:
    """Lazy arrays of the variables `make` gives; all are made together at the first computation."""
    import dask.array as da

    once = _Once(make)
    chunks = tuple((size,) for size in shape)
    like = np.empty((0,) * len(shape), dtype=np.float32)
    return {
        name: da.map_blocks(partial(once.grid, name), chunks=chunks, dtype=like.dtype, meta=like,
                            name=f"{name}-{uuid4().hex}")
        for name in DECIMALS
    }


def _weather_on_grid(
    ground: Ground, is_land: NDArray[np.bool_], days: NDArray[np.datetime64], seed: int
) -> dict[str, Floats]:
    """Fill the grids year by year, so that working memory stays that of one year."""
    calendar_year = days.astype("datetime64[Y]")
    day_in_year = (days - calendar_year.astype("datetime64[D]")).astype(np.float64)
    year_of_day = (calendar_year - calendar_year[0]).astype(np.float64) + day_in_year / DAYS_PER_YEAR
    chance = draw_chance(ground, seed=seed, days=days.size, year_of_day=year_of_day)
    grids = {name: np.full((days.size, *is_land.shape), np.nan, dtype=np.float32) for name in DECIMALS}
    starts = np.flatnonzero(day_in_year == 0.0)
    for start, end in zip(starts, [*starts[1:], days.size], strict=True):
        year = slice(int(start), int(end))
        for name, values in daily_weather(ground, chance, year, day_in_year[year] + 1.0).items():
            grids[name][year, is_land] = np.round(values, DECIMALS[name])
    return grids


def _labelled(
    weather: Mapping[str, Any],
    days: NDArray[np.datetime64],
    latitude: Floats,
    longitude: Floats,
    elevation: Floats,
) -> xr.Dataset:
    """Put names, units and coordinates on the arrays."""
    variables = {}
    for name, values in weather.items():
        quantity = DAY_WEATHER[name]
        attributes = {"units": quantity.unit, "long_name": quantity.meaning}
        if quantity.standard_name:
            attributes["standard_name"] = quantity.standard_name
        variables[name] = (("time", "latitude", "longitude"), values, attributes)
    height = {"units": "m", "long_name": "Height above the sea", "standard_name": "surface_altitude"}
    north = {"units": "degrees_north", "standard_name": "latitude"}
    east = {"units": "degrees_east", "standard_name": "longitude"}
    return xr.Dataset(
        variables,
        coords={
            "time": ("time", days.astype("datetime64[s]")),
            "latitude": ("latitude", latitude, north),
            "longitude": ("longitude", longitude, east),
            "elevation": (("latitude", "longitude"), elevation, height),
            "inside": (("latitude", "longitude"), np.isfinite(elevation)),
        },
    )


def _geometries(content: Mapping[str, Any]) -> list[Mapping[str, Any]]:
    if content["type"] == "FeatureCollection":
        return [feature["geometry"] for feature in content["features"]]
    return [content["geometry"] if content["type"] == "Feature" else content]
