"""Forecast: what a run will cost in bytes, memory, disk and time, from sizes and stated constants.

All constants are own measurements on two cores of a 2020s server, rounded; a run may well take half or twice
as much. They are here to tell a coffee break from a weekend.
"""

from __future__ import annotations

from dataclasses import dataclass
from importlib.util import find_spec

#: Cell-days a second, by method, one still with its band: daily weather, and weather in steps.
CELL_DAYS_PER_SECOND = {"fitted": 5e7, "rule": 1.5e8, "nafey-2000": 3e7}
CELL_HOURLY_DAYS_PER_SECOND = {"fitted": 3e6, "heat-balance": 4e5, "rule": 8e6, "nafey-2000": 4e6}
#: How many times slower methods are where numba is not installed.
SLOWER_IN_NUMPY = {"fitted": 12.0, "heat-balance": 8.0, "rule": 1.5, "nafey-2000": 1.5}
#: Reading and inflating files, as they lie on disk. [bytes s-1]
READ_BYTES_PER_SECOND = 3e8
#: Start; self-audit and drawing; making the fit of one still in one condition. [s]
STARTING_SECONDS = 4.0
SECONDS_PER_STILL = 2.0
SECONDS_PER_FIT = 4.0

#: Memory of drawing maps and writing. [bytes]
DRAWING_BYTES = 1.5e8

#: Maps and other files whose size does not depend on the number of cells, of grids and of sites. [bytes]
FIXED_GRID_BYTES, FIXED_SITES_BYTES = 1.6e6, 1.5e5
#: Bytes a compressed number and a line of the table of cells take.
BYTES_PER_NUMBER = 2.6
BYTES_PER_ROW = 150
#: Numbers of a cell in the files: months of five climatologies and their counts, annual values; rasters' bands.
NUMBERS_PER_CELL = 100
RASTER_NUMBERS_PER_CELL = 38
MONTHS = 12

BASIS = (
    "Rough: from constants measured on two cores of a 2020s server; half or twice as much is likely. Memory is "
    "an upper estimate."
)


@dataclass(frozen=True)
class Forecast:
    """What a run will cost.

    Attributes
    ----------
    bytes_to_read : int
        Size of the weather files.
    memory_bytes : int
        Largest memory at any time.
    disk_bytes : int
        Size of everything written.
    seconds : float
        From start to end. [s]
    basis : str
        What the figures rest on, one sentence.
    """

    bytes_to_read: int
    memory_bytes: int
    disk_bytes: int
    seconds: float
    basis: str = BASIS


@dataclass(frozen=True)
class Job:
    """The sizes a forecast rests on.

    Attributes
    ----------
    method : str
        One of `vocabulary.METHODS`.
    hourly : bool
        Whether it works on steps within the day.
    bytes_to_read : int
        Size of the weather files.
    memory_bytes : int
        Memory that the engine's plan takes.
    cells : int
        Cells or sites that have weather; all cells where that is not known.
    days, years : int
        Local days; calendar years touched.
    stills : int
        Number of still designs.
    fits_to_make : int
        Fits that are neither shipped nor kept, all stills and conditions together.
    grid : bool
        Whether rasters are written.
    """

    method: str
    hourly: bool
    bytes_to_read: int
    memory_bytes: int
    cells: int
    days: int
    years: int
    stills: int
    fits_to_make: int
    grid: bool


def forecast(job: Job) -> Forecast:
    """Estimate the cost of a run.

    Parameters
    ----------
    job : Job
        Its sizes.

    Returns
    -------
    Forecast

    Examples
    --------
    >>> demo = Job("fitted", False, 0, 400_000_000, cells=2045, days=2922, years=8, stills=1, fits_to_make=0, grid=True)
    >>> 5 < forecast(demo).seconds < 60
    True
    """
    speed = (CELL_HOURLY_DAYS_PER_SECOND if job.hourly else CELL_DAYS_PER_SECOND)[job.method]
    speed /= 1.0 if find_spec("numba") else SLOWER_IN_NUMPY[job.method]
    fixed = FIXED_GRID_BYTES if job.grid else FIXED_SITES_BYTES
    numbers = NUMBERS_PER_CELL + MONTHS * job.years + (RASTER_NUMBERS_PER_CELL if job.grid else 0)
    disk = job.stills * (fixed + job.cells * (numbers * BYTES_PER_NUMBER + BYTES_PER_ROW))
    reading = job.bytes_to_read / READ_BYTES_PER_SECOND  # once, however many stills
    seconds = STARTING_SECONDS + reading + job.stills * (job.cells * job.days / speed + SECONDS_PER_STILL)
    seconds += job.fits_to_make * SECONDS_PER_FIT
    return Forecast(job.bytes_to_read, round(job.memory_bytes + DRAWING_BYTES), round(disk), round(seconds, 1))
