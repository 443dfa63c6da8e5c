"""Gridded weather: NetCDF files, Zarr stores and GRIB files on one set of axes and meanings."""
