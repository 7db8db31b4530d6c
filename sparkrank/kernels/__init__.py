"""Array arithmetic of the program: numpy only, arrays in and arrays out, no files, no globals.

Read in the order of the data flow:

- ``plain_hosts``: the hosts of plain names and URLs; ``labels`` and ``cut``: their last labels
- ``xxhash``: ids of names; ``stripes``: the stripe of an id
- ``lookup``: hashed ids to positions in a sorted stripe
- ``edges``: packed edge keys of one tile: sort, merge duplicates, degrees
- ``peel``: which hosts a peel round takes away
- ``diagonals``: one sub-block of edges in jagged diagonal storage
- ``accumulate``: the multiplication, k columns at once
- ``extrapolate``: a better state from the last few steps
- ``mass``: absolute and relative spam mass, and its range over the core's slices
- ``farms``: closed forms of farm arithmetic; ``floor``: the smallest farms that thresholds list
- ``sources``: what the direct sources of a candidate look like
- ``shape``: the shape of a candidate's support, and the order in which to look at candidates
- ``reasons``: what put a candidate there, and what else it may be
"""
