"""Ranks the hosts of a web crawl whose importance is mostly made by link farms.

The packages carry the words of the data flow, in this order:

- ``inputs``: footers of Parquet inputs held against what an input must be, before Java starts
- ``names``: what a row says → the canonical host; lists of hosts; public suffixes
- ``graph``: edge rows → hashed ids, stripes of hosts, cells of edges, the order of computation
- ``propagate``: the block power iteration over the cells: PageRank and trust, many columns at once
- ``scores``: columns → scores, spam mass and its range over the core's slices, a row a host
- ``evidence``: hosts over both thresholds, in the order in which to review them, with cautions
- ``publish``: tables, step records, the manifest, what a run leaves in its output folder

``kernels`` below them is array arithmetic on numpy alone.  Beside them: ``config``, ``errors``,
``tables`` (the declaration of every table), ``places`` (where files are), ``arrays`` (work files),
``session`` and ``entry`` (how a job starts and ends).
"""

__version__ = "0.2.0"
