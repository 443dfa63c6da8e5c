"""Village tables as people make them: CSV, GeoJSON, GeoPackage and XLSX, read into one table."""

from stillfield.sources.places.reading import read_places
from stillfield.sources.places.swapped import refuse_misplaced

__all__ = ["read_places", "refuse_misplaced"]
