"""Numbers in, numbers out: sun, cover, basin, hourly heat balance, fitted correlation, published fits.

Nothing here knows files, labels or settings; every function takes and returns numpy arrays.
"""
