"""Weather files of every kind behind one Protocol; each module knows one family of files."""

from __future__ import annotations

from typing import Protocol

import xarray as xr


class Source(Protocol):
    """One opened-on-demand weather source.

    The dataset a source gives has

    - dimensions ``time, latitude, longitude`` (grid) or ``time, site`` (stations, with coordinates
      ``latitude``, ``longitude``, ``elevation`` and, for local clocks, ``utc_offset_hours`` on ``site``);
    - variables named and in the units of `vocabulary.STEP_WEATHER` (steps shorter than a day) or
      `vocabulary.DAY_WEATHER` (daily);
    - ``time`` marking the start of the interval;
    - attributes ``record`` ('series' or 'typical-year'), ``step_hours`` (24.0 for daily),
      ``clock`` ('UTC', 'local-standard', or 'own-days' for daily weather whose days are the source's own),
      ``origin`` (one sentence: what was read from where) and ``conventions`` (list of str: every
      assumption made about the file, one sentence each).
    """

    def open(self) -> xr.Dataset:
        """Read or lazily open the weather."""
        ...
