"""The engine: a region worked through in blocks of cells and windows of time, each stored chunk read once.

`planning` cuts the region, `readers` bring weather of any origin into the engine's arrays, `steps` holds a window
of it on local days, `block` walks the stills through one block, `job` gathers the blocks into a result, and
`embedded` and `cluster` are the two ways to run the same function on many blocks.
"""
