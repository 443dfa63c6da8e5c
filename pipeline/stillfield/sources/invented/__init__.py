"""Invented weather on an invented land, to try things with."""
