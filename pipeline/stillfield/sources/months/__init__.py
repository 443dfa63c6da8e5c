"""Monthly means, gridded or by station, from which days are generated."""
