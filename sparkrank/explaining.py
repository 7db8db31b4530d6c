"""The stage of `explain_host`: the evidence for named hosts of a finished run, listed or not."""

from __future__ import annotations

import dataclasses
import logging

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
import pyarrow.parquet as pq
from numpy.typing import NDArray

from sparkrank.arrays import read_arrays
from sparkrank.entry import JobContext
from sparkrank.errors import ConfigError, InputRefused
from sparkrank.evidence.candidates import rows_of
from sparkrank.evidence.words import explanation
from sparkrank.graph.build import Graph
from sparkrank.kernels.lookup import find_ids
from sparkrank.kernels.xxhash import xxh64
from sparkrank.names.canonical import REASONS, canonical_host
from sparkrank.names.octets import octets_of
from sparkrank.publish.by_driver import publish_rows
from sparkrank.publish.clean import remove_unnamed
from sparkrank.publish.entries import TableEntry
from sparkrank.publish.manifest import Manifest, check_run, write_manifest
from sparkrank.ranking import candidate_files, gather, strength_of_core
from sparkrank.shown import shown_value
from sparkrank.stages import RunInputs, build, scored_before
from sparkrank.tables import EXPLAINED_HOSTS, EXPLAINED_SUPPORT, FARM_GROUPS, TableSpec, arrow_schema

log = logging.getLogger(__name__)


def asked_hosts(context: JobContext, inputs: RunInputs) -> list[str]:
    """The canonical hosts of the arguments, sorted, each once; in a domain graph their domains.

    ConfigError for a value that names no host.
    """
    hosts = set()
    for value in context.arguments.host:
        name = canonical_host(value)
        if name.host is None:
            raise ConfigError(
                f'--host "{shown_value(value)}": expected a host or a URL, found that '
                f"{REASONS[name.reason or '']}; correct it"
            )
        domain = inputs.rules.split(name.host)[1] if context.config.graph.node == "domain" else None
        hosts.add(domain or name.host)
    return sorted(hosts)


def explain(context: JobContext, inputs: RunInputs, hosts: list[str]) -> list[str]:
    """Publishes ``explained_hosts`` and ``explained_support``; the explanations in words, by host.

    Listed hosts have what the run's own tables say of them; for the others it is gathered now.
    InputRefused where the run is not complete or has no host of a name.
    """
    manifest = _complete(context, inputs)
    rows = _published(context, manifest.tables["spam_candidates"], EXPLAINED_HOSTS, hosts)
    support = _published(context, manifest.tables["candidate_support"], EXPLAINED_SUPPORT, hosts)
    listed = set(rows["host"].to_pylist())
    if others := [host for host in hosts if host not in listed]:
        more_rows, more_support = _gathered(context, inputs, others)
        groups = _published(context, manifest.tables["farm_groups"], FARM_GROUPS, others)
        more_rows = _with_groups(more_rows, groups)
        rows = pa.concat_tables([rows, more_rows])
        support = pa.concat_tables([support, more_support])
    tables = {
        "explained_hosts": publish_rows(rows, EXPLAINED_HOSTS, context.run),
        "explained_support": publish_rows(support, EXPLAINED_SUPPORT, context.run),
    }
    write_manifest(context.run, dataclasses.replace(manifest, tables={**manifest.tables, **tables}))
    remove_unnamed(context.run)
    by_host = {row["host"]: row for row in rows.to_pylist()}
    sources = {host: support.filter(pc.equal(support["host"], host)).to_pylist() for host in hosts}
    thresholds = context.config.candidates
    return [explanation(by_host[host], sources[host], thresholds) for host in hosts]


def _published(context: JobContext, entry: TableEntry, table: TableSpec, hosts: list[str]) -> pa.Table:
    """Rows of some hosts in a table of the run; only the row groups that may have them are read."""
    schema = arrow_schema(table)
    parts = [schema.empty_table()]
    for file in entry.files:
        place = context.run.output.below(file.path)
        wanted = [("host", "in", hosts)]
        found = pq.read_table(place.path, filesystem=place.filesystem, filters=wanted, partitioning=None)
        parts.append(found.select(schema.names).cast(schema))
    return pa.concat_tables(parts)


def _gathered(context: JobContext, inputs: RunInputs, hosts: list[str]) -> tuple[pa.Table, pa.Table]:
    """Rows and support of hosts that the run does not list."""
    scored = scored_before(context, inputs)
    ids = _known_ids(build(context, inputs), hosts)
    found = gather(context, inputs, scored, ids, f"{context.run.run_id}-{context.run.attempt_id}")
    strength = strength_of_core(context.config, scored)
    rows = rows_of(candidate_files(context, scored, found, tuple(hosts), strength))
    rows = found.attributes.added(rows, "host", "attributes")
    rows = rows.append_column("rank", pa.nulls(rows.num_rows, pa.int32()))
    rows = rows.append_column("farm_group", pa.nulls(rows.num_rows, pa.string()))
    support = found.support_table()
    found.folder.place.delete_tree()
    schemas = (arrow_schema(EXPLAINED_HOSTS), arrow_schema(EXPLAINED_SUPPORT))
    cast = [
        table.select(schema.names).cast(schema)
        for table, schema in zip((rows, support), schemas, strict=True)
    ]
    return cast[0], cast[1]


def _with_groups(rows: pa.Table, groups: pa.Table) -> pa.Table:
    """The rows with the group that each host is a member of: those not listed are so as boosters."""
    group_of = dict(zip(groups["host"].to_pylist(), groups["group"].to_pylist(), strict=True))
    found = pa.array([group_of.get(host) for host in rows["host"].to_pylist()], pa.string())
    return rows.set_column(rows.schema.get_field_index("farm_group"), rows.schema.field("farm_group"), found)


def _complete(context: JobContext, inputs: RunInputs) -> Manifest:
    """The manifest of the run; RunConflict where it was made from something else."""
    run = context.run
    found = check_run(run.output, run.run_id, inputs.run_fingerprint, replace=False)
    if found is None or found.status != "complete":
        raise InputRefused(
            f"run {run.run_id}: expected a complete run below {run.output}, found none; "
            "run jobs/run_pipeline.py first"
        )
    return found


def _known_ids(graph: Graph, hosts: list[str]) -> NDArray[np.int64]:
    """The hosts' ids; InputRefused for hosts that the graph does not have."""
    ids = xxh64(*octets_of(pa.array(hosts, pa.string())), graph.salt)
    is_known = np.zeros(len(ids), dtype=np.bool_)
    for stripe in range(graph.plan.stripes):
        is_known |= find_ids(read_arrays(graph.folder.ids(stripe))["ids"], ids) >= 0
    if unknown := [host for host, known in zip(hosts, is_known, strict=True) if not known]:
        shown = ", ".join(shown_value(host) for host in unknown[:5])
        raise InputRefused(
            f"--host: expected hosts of the run's graph, found {len(unknown):,} that it does not have "
            f"({shown}); only hosts that an accepted row or the hosts list names have scores"
        )
    return ids
