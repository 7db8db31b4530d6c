"""Edge rows as they come → accepted rows between nodes, and rejected rows with their reasons.

Rows whose two names are plain stay in native expressions all the way.  The others ("odd" rows) are
set aside once, their distinct odd names go through Python, and the decided rows come back.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from sparkrank.errors import InputRefused
from sparkrank.graph.folder import GraphFolder
from sparkrank.inputs import InputFacts
from sparkrank.names.suffixes import SuffixRules
from sparkrank.shown import shown_value

if TYPE_CHECKING:
    from pyspark.sql import Column, DataFrame, SparkSession

# A token of rel between white space or commas. Java's flag (?i) folds ASCII letters only.
_NOT_FOLLOWED = r"(?i)(?<![^\s,])(?:nofollow|ugc|sponsored)(?![^\s,])"

BAD_LINKS = "bad_links"
"""The reason of a row whose ``links`` is null or not positive."""


@dataclass(frozen=True, kw_only=True)
class EdgeRows:
    """The edge table of a run: ``src``, ``dst``, ``links`` (long) and ``followed``, one row as read."""

    spark: SparkSession
    folder: GraphFolder
    facts: InputFacts
    hosts_facts: InputFacts | None
    follow_only: bool
    domain_rules: SuffixRules | None
    """The suffix rules where nodes are registrable domains, None where they are hosts."""

    def set_odd_aside(self) -> dict[str, Any]:
        """Decides all odd rows; keeps them and the rejected rows in scratch tables.

        Returns the stage's record: ``odd_rows``, ``rejected_rows`` (rows of the edge table), and
        ``rejected`` (rows by reason, the hosts list's apart as ``rejected_hosts``).
        """
        from pyspark.sql import functions as sf

        odd = self._raw().where(~_is_clean())
        self._write(odd, "odd")
        odd = self._read("odd")
        n_odd = odd.count()
        values = odd.where(sf.col("src_host").isNull()).select(sf.col("src").alias("value"))
        values = values.union(odd.where(sf.col("dst_host").isNull()).select(sf.col("dst").alias("value")))
        if self.hosts_facts is not None:
            listed = self._listed().where(sf.col("host").isNull())
            values = values.union(listed.select("value"))
        self._write_names(values)
        self._write(_decide(odd, self._read("names")), "decided")
        self._write(self._rejections(), "rejected")
        return {"odd_rows": n_odd, **self._count_rejected()}

    def accepted(self, record: dict[str, Any]) -> DataFrame:
        """Accepted rows between nodes: ``src``, ``dst``, ``links``, ``followed``."""
        from pyspark.sql import functions as sf

        raw = self._raw()
        clean = raw.where(_is_clean()) if record["odd_rows"] else raw
        columns = (sf.col("src_host").alias("src"), sf.col("dst_host").alias("dst"), "links", "followed")
        rows = clean.select(*columns)
        if record["odd_rows"]:
            rows = rows.union(self._read("decided").where(sf.col("reason").isNull()).select(*columns))
        return self._to_nodes(rows, "src", "dst")

    def hosts(self, record: dict[str, Any]) -> DataFrame:
        """Distinct nodes in the column ``host``: of accepted rows and of the hosts list."""
        from pyspark.sql import functions as sf

        rows = self.accepted(record)
        hosts = rows.select(sf.col("src").alias("host")).union(rows.select("dst"))
        if self.hosts_facts is not None:
            listed = self._listed()
            named = _join_names(listed, "value", self._read("names"), "named")
            found = sf.coalesce("host", "named_host").alias("host")
            hosts = hosts.union(self._to_nodes(named.select(found).where("host is not null"), "host"))
        return hosts.distinct()

    def rejected(self) -> DataFrame:
        """``source``, ``row_value`` (as shown), ``reason``, ``rows``."""
        return self._read("rejected")

    def _raw(self) -> DataFrame:
        """The table with ``src_host`` and ``dst_host``: canonical where plain, null where odd."""
        from pyspark.sql import functions as sf

        from sparkrank.names.native import plain_host

        table = self._table(self.facts)
        links = sf.expr("try_cast(links as bigint)") if self.facts.has_links else sf.lit(1).cast("long")
        followed = sf.lit(True)
        if self.facts.has_rel and self.follow_only:
            followed = ~sf.coalesce(sf.col("rel").rlike(_NOT_FOLLOWED), sf.lit(False))
        return table.select(
            "src",
            "dst",
            plain_host(sf.col("src")).alias("src_host"),
            plain_host(sf.col("dst")).alias("dst_host"),
            links.alias("links"),
            followed.alias("followed"),
        )

    def _listed(self) -> DataFrame:
        from pyspark.sql import functions as sf

        from sparkrank.names.native import plain_host

        assert self.hosts_facts is not None
        value = sf.col("host")
        return self._table(self.hosts_facts).select(value.alias("value"), plain_host(value).alias("host"))

    def _table(self, facts: InputFacts) -> DataFrame:
        # The files that were checked and fingerprinted, and no other.
        if facts.place.size() is not None:
            return self.spark.read.parquet(facts.place.uri)
        return self.spark.read.parquet(*[facts.place.below(file.name).uri for file in facts.files])

    def _to_nodes(self, rows: DataFrame, *columns: str) -> DataFrame:
        from pyspark.sql import functions as sf

        from sparkrank.names.suffixes import with_suffix_and_domain

        if self.domain_rules is None:
            return rows
        for column in columns:
            rows = with_suffix_and_domain(rows, column, self.domain_rules)
            # A host without a registrable domain is a node of its own.
            rows = rows.withColumn(column, sf.coalesce("domain", column)).drop("domain", "suffix")
        return rows

    def _write_names(self, values: DataFrame) -> None:
        from sparkrank.names.native import odd_name_map

        self._write(odd_name_map(values), "names")

    def _rejections(self) -> DataFrame:
        from pyspark.sql import functions as sf

        rejected = self._read("decided").where(sf.col("reason").isNotNull())
        rows = rejected.select("source", "row_value", "reason")
        if self.hosts_facts is not None:
            named = _join_names(self._listed(), "value", self._read("names"), "named")
            reason = _reason("value", "host", "named")
            listed = named.select(sf.lit("hosts.host"), "value", reason.alias("reason"))
            rows = rows.union(listed.where(sf.col("reason").isNotNull()))
        counted = rows.groupBy("source", "row_value", "reason").agg(sf.count(sf.lit(1)).alias("rows"))
        shown = counted.withColumn("row_value", _shown()(sf.col("row_value").cast("binary")))
        # Values that are shown alike count together.
        return shown.groupBy("source", "row_value", "reason").agg(sf.sum("rows").alias("rows"))

    def _count_rejected(self) -> dict[str, Any]:
        from pyspark.sql import functions as sf

        counts: dict[str, dict[str, int]] = {"edges": {}, "hosts": {}}
        by_source = self._read("rejected").groupBy("source", "reason").agg(sf.sum("rows").alias("rows"))
        for row in by_source.orderBy("source", "reason").collect():
            of_table = counts[row["source"].split(".")[0]]
            of_table[row["reason"]] = of_table.get(row["reason"], 0) + row["rows"]
        return {
            "rejected_rows": sum(counts["edges"].values()),
            "rejected": counts["edges"],
            "rejected_hosts": counts["hosts"],
        }

    def _write(self, rows: DataFrame, name: str) -> None:
        rows.write.mode("overwrite").parquet(self.folder.scratch(name).uri)

    def _read(self, name: str) -> DataFrame:
        return self.spark.read.parquet(self.folder.scratch(name).uri)


def check_rejected_share(record: dict[str, Any], n_rows: int, allowed: float) -> None:
    """InputRefused where more than the allowed share of the edge rows was rejected."""
    n_rejected = record["rejected_rows"]
    if n_rejected > allowed * n_rows:
        most = sorted(record["rejected"].items(), key=lambda item: (-item[1], item[0]))[:3]
        reasons = ", ".join(f"{reason} {rows:,}" for reason, rows in most)
        raise InputRefused(
            f"input.edges: expected at most {allowed:.4g} of the rows to be rejected "
            f"(graph.max_rejected_share), found {n_rejected:,} of {n_rows:,} ({reasons}); "
            "mend the edge table or allow more"
        )


def _is_clean() -> Column:
    """Rows that native expressions decide: both names plain, a usable number of links."""
    from pyspark.sql import functions as sf

    links_fit = sf.coalesce(sf.col("links") > 0, sf.lit(False))
    return sf.col("src_host").isNotNull() & sf.col("dst_host").isNotNull() & links_fit


def _decide(odd: DataFrame, names: DataFrame) -> DataFrame:
    """Odd rows with canonical hosts, or with the first reason that rejects them and its value."""
    from pyspark.sql import functions as sf

    named = _join_names(_join_names(odd, "src", names, "src_named"), "dst", names, "dst_named")
    src_reason, dst_reason = _reason("src", "src_host", "src_named"), _reason("dst", "dst_host", "dst_named")
    bad_links = sf.coalesce(sf.col("links") > 0, sf.lit(False)) == sf.lit(False)
    source = (
        sf.when(src_reason.isNotNull(), "edges.src")
        .when(dst_reason.isNotNull(), "edges.dst")
        .when(bad_links, "edges.links")
    )
    value = (
        sf.when(source == "edges.src", sf.col("src"))
        .when(source == "edges.dst", sf.col("dst"))
        .when(source == "edges.links", sf.col("links").cast("string"))
    )
    return named.select(
        sf.coalesce("src_host", "src_named_host").alias("src_host"),
        sf.coalesce("dst_host", "dst_named_host").alias("dst_host"),
        "links",
        "followed",
        source.alias("source"),
        value.alias("row_value"),
        sf.coalesce(src_reason, dst_reason, sf.when(bad_links, BAD_LINKS)).alias("reason"),
    )


def _reason(value: str, plain: str, named: str) -> Column:
    """Why a value is no host; null where it is one."""
    from pyspark.sql import functions as sf

    odd = sf.when(sf.col(value).isNull(), "null").otherwise(sf.col(f"{named}_reason"))
    return sf.when(sf.col(plain).isNull(), odd)


def _join_names(rows: DataFrame, value: str, names: DataFrame, prefix: str) -> DataFrame:
    """Adds ``<prefix>_host`` and ``<prefix>_reason`` by the hash of the value, checked by the value."""
    from pyspark.sql import functions as sf

    columns = [sf.col(name).alias(f"{prefix}_{name}") for name in ("value", "host", "reason")]
    known = names.where(sf.col("value").isNotNull()).select(*columns)
    hashed = known.withColumn(f"{prefix}_hash", sf.xxhash64(f"{prefix}_value"))
    same = (sf.xxhash64(rows[value]) == sf.col(f"{prefix}_hash")) & (rows[value] == sf.col(f"{prefix}_value"))
    return rows.join(hashed, same, "left").drop(f"{prefix}_value", f"{prefix}_hash")


def _shown() -> Any:
    """A value as ``rejected_rows`` shows it: on one line, cut, control characters escaped."""
    import pyarrow as pa
    from pyspark.sql import functions as sf

    def show(values: pa.Array) -> pa.Array:
        texts = [None if value is None else value.decode("utf-8", "replace") for value in values.to_pylist()]
        return pa.array([None if text is None else shown_value(text) for text in texts], pa.string())

    # Spark reads annotations as the kind of function; its default is what is meant.
    show.__annotations__ = {}
    return sf.arrow_udf(show, "string")  # type: ignore[attr-defined]  # not in pyspark's stubs
