"""Tables of stations: rows, columns, places and times as people write them."""
