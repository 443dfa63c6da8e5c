"""Typical-year files: one site each, the hours of a nominal year."""
