"""Checks of the Parquet inputs before any JVM starts, and the facts that later steps need about them.

`files` lists the files that count and takes their fingerprints, `parquet` reads footers and holds columns
and types against what an input must have. A folder that passes is one that Spark reads whole: what Spark
would skip silently or fail on later is refused here by name.
"""

from sparkrank.inputs.files import DataFile, data_files
from sparkrank.inputs.parquet import InputFacts, InputFile, check_edges, check_hosts

__all__ = ["DataFile", "InputFacts", "InputFile", "check_edges", "check_hosts", "data_files"]
