"""What a run leaves behind: rasters, maps, tables and the manifest, each from labelled data alone."""
