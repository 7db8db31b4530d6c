"""The kernel's hash of a name against Spark's own function."""

from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa
from pyspark.sql import functions as sf

from sparkrank.kernels.xxhash import xxh64

if TYPE_CHECKING:
    from pyspark.sql import SparkSession


def test_the_kernel_hashes_as_spark_does(spark: "SparkSession") -> None:
    names = [
        ("bücher.example.", "shop-7.example.", "[2001:db8::1]")[n % 3] * (n // 8) + "x" * (n % 8)
        for n in range(160)
    ]
    table = pa.table({"name": pa.array(names, pa.string())})
    rows = spark.createDataFrame(table).select("name", sf.xxhash64("name").alias("hash")).collect()
    octets = [row["name"].encode() for row in rows]
    data = np.frombuffer(b"".join(octets), dtype=np.uint8)
    offsets = np.cumsum([0, *map(len, octets)])
    assert len({row["hash"] for row in rows}) > 150
    assert xxh64(data, offsets, 42).tolist() == [row["hash"] for row in rows]
