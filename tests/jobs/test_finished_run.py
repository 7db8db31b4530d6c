"""What a run leaves: tables by the manifest, counts, and what the manifest says of graph and core."""

import math

import networkx
import numpy as np
import pyarrow.parquet as pq
import pytest

from sparkrank.tables import TABLES, arrow_schema
from tests.jobs import town
from tests.jobs.desk import RUN, sha256


def test_every_file_is_what_the_manifest_says(finished) -> None:
    manifest = finished.manifest()
    assert (manifest["run_id"], manifest["status"]) == (RUN, "complete")
    # All but the answers to questions, which nobody has asked.
    assert set(manifest["tables"]) == {name for name in TABLES if not name.startswith("explained_")}
    for name, entry in manifest["tables"].items():
        for file in entry["files"]:
            path = finished.output / file["path"]
            assert file["path"].startswith(f"{name}/run_id={RUN}/attempt=")
            assert (path.stat().st_size, sha256(path)) == (file["bytes"], file["digest"])
            assert pq.read_metadata(path).num_rows == file["rows"]
        assert sum(file["rows"] for file in entry["files"]) == entry["rows"]
        assert entry["digest"]


def test_columns_are_the_declared_ones_and_carry_their_meaning(finished) -> None:
    for name, entry in finished.manifest()["tables"].items():
        declared = arrow_schema(TABLES[name])
        for table in finished.files(entry):
            found = table.schema
            assert found.names == declared.names
            for field in declared:
                found_type = str(found.field(field.name).type).replace("not null", "").replace(" ", "")
                assert found_type == str(field.type).replace("not null", "").replace(" ", ""), field.name
        assert all(field.metadata[b"description"] for field in declared)


def test_rows_are_in_the_declared_order(finished) -> None:
    hosts = [row["host"] for row in finished.table("host_scores")]
    assert hosts == sorted(set(hosts))
    candidates = finished.table("spam_candidates")
    assert [row["rank"] for row in candidates] == list(range(1, len(candidates) + 1))
    order = [(-row["priority"], row["host"]) for row in candidates]
    assert order == sorted(order)


def test_groups_are_those_that_candidates_name(finished) -> None:
    groups = finished.table("farm_groups")
    farm = [row for row in groups if row["group"] == "target.test"]
    # The small town with the guest book gives it a fifth of what it has, as a booster with decoys would.
    roles = {town.GUEST_BOOK[0][0]: "booster", "target.test": "target"}
    roles |= {f"booster-{i}.test": "booster" for i in range(town.BOOSTERS)}
    assert {row["host"]: row["role"] for row in farm} == roles
    assert {(row["shape"], row["hosts"], row["targets"]) for row in farm} == {("star", len(roles), 1)}
    named = {row["host"]: row["farm_group"] for row in finished.table("spam_candidates")}
    member_of = {row["host"]: row["group"] for row in groups if row["role"] != "booster"}
    assert {host: group for host, group in named.items() if group} == member_of
    assert finished.manifest()["evidence"]["groups"] == len({row["group"] for row in groups})


def test_counts_of_the_graph(finished) -> None:
    graph = finished.manifest()["graph"]
    reasons: dict[str, int] = {}
    for _, _, reason, _ in town.REJECTED:
        reasons[reason] = reasons.get(reason, 0) + 1
    rows = len(town.ACCEPTED) + len(town.REJECTED)
    assert graph == {
        "rows": rows,
        "rejected_rows": len(town.REJECTED),
        "rejected": reasons,
        "rejected_hosts": {},
        "not_followed_rows": len(town.NOT_FOLLOWED),
        "self_link_rows": len(town.SELF),
        "merged_rows": len(town.SAME),
        "hosts": town.HOSTS,
        "edges": len(town.EDGES),
        "iterated_hosts": len(town.TOWNS),
    }
    assert finished.manifest()["inputs"]["edges"]["rows"] == rows


def test_rejected_rows_are_kept_with_their_reason(finished) -> None:
    found = {(r["source"], r["row_value"], r["reason"]): r["rows"] for r in finished.table("rejected_rows")}
    expected = {(source, value, reason): 1 for _, source, reason, value in town.REJECTED}
    expected["core.host", "elsewhere.example", "not_in_graph"] = 1
    assert found == expected


def test_scores_are_those_of_networkx(finished) -> None:
    # networkx spreads the rank of hosts without out-links evenly; here it leaks. Divided by their sums the
    # two are equal, because the system is linear in its teleport.
    graph = networkx.DiGraph((src, dst) for src, dst, _, _ in town.EDGES)
    graph.add_nodes_from(["advert.test", "alone.example"])
    expected = networkx.pagerank(graph, alpha=0.85, tol=1e-14, max_iter=1000)
    rows = finished.table("host_scores")
    assert {row["host"] for row in rows} == set(expected)
    np.testing.assert_allclose(
        [row["pagerank"] for row in rows], [expected[row["host"]] for row in rows], rtol=5e-6, atol=0
    )
    reached = set(town.TOWNS[:4:3]).union(*(networkx.descendants(graph, town.TOWNS[i]) for i in (0, 3)))
    assert {row["host"] for row in rows if row["core_reached"]} == reached
    assert all(row["trust"] == 0 for row in rows if not row["core_reached"])
    degrees = {row["host"]: (row["in_degree"], row["out_degree"]) for row in rows}
    assert degrees == {host: (graph.in_degree(host), graph.out_degree(host)) for host in graph}


def test_candidates_are_the_farm_and_the_island(finished) -> None:
    target, island = finished.table("spam_candidates")
    assert (target["host"], island["host"]) == ("target.test", "island.example")
    # Closed form of a one-way farm, 1 + ck in scaled units: Gyöngyi & Garcia-Molina, VLDB 2005 (memory).
    assert island["scaled_pagerank"] == pytest.approx(1 + 0.85 * town.LONELY, rel=1e-6)
    assert target["scaled_pagerank"] > 1 + 0.85 * town.BOOSTERS
    assert target["known_spam_mass"] == pytest.approx(2 * 0.85, rel=1e-6)
    assert (target["core_reached"], island["core_reached"]) == (True, False)
    assert island["relative_mass"] == 1
    assert any("unknown, not spam" in text for text in island["cautions"])
    assert not any("unknown, not spam" in text for text in target["cautions"])


def test_the_manifest_tells_how_strong_the_core_is(finished) -> None:
    manifest = finished.manifest()
    core = manifest["core"]
    assert (core["listed"], core["matched"], core["unmatched"]) == (3, 2, 1)
    assert core["slices"] == {"north": 0.5, "south": 0.5}
    # J = γN/|core|; the farm that one core link hides: k = (cJ/(d(1-τ)) - 1)/c at d = 10.
    start = 0.85 * town.HOSTS / 2
    assert core["core_start"] == pytest.approx(start, rel=1e-12)
    hidden = (0.85 * start / (10 * (1 - 0.5)) - 1) / 0.85
    assert core["boosters_hidden_by_core_link"] == pytest.approx(hidden, rel=1e-12)
    floor = manifest["detection_floor"]
    assert (floor["core_start"], floor["min_scaled_pagerank"]) == (core["core_start"], 10.0)
    # Smallest farms of a scaled PageRank of 10, by hand: 1 + ck, and (1 + ck)/(1 - c²) with back-links.
    assert floor["shapes"]["star"]["boosters"] == 11
    assert floor["shapes"]["star_with_back_links"]["boosters"] == 3
    # The member's own PageRank, of which 1/d arrives, does a tenth of a booster's work.
    assert floor["shapes"]["star_with_back_links"]["boosters_with_core_link"] == math.ceil(hidden - 0.1)
    assert [column["name"] for column in manifest["columns"]] == [
        "pagerank",
        "trust: north",
        "trust: south",
        "known_spam",
    ]
    for column in manifest["columns"]:
        assert 1 <= column["steps"] <= 200
        assert 0 <= column["error_bound"] <= 1e-6
        assert column["l1_bound"] >= 0
    assert manifest["config"]["solve"]["damping"] == 0.85
    assert all(len(manifest["inputs"][name]["fingerprint"]) == 64 for name in ("edges", "core", "known_spam"))


def test_each_job_leaves_its_outcome(finished) -> None:
    outcomes = finished.outcomes()
    assert [outcome["job"] for outcome in outcomes[:3]] == ["build_graph", "score_hosts", "rank_candidates"]
    assert all((outcome["exit_status"], outcome["status"]) == (0, "done") for outcome in outcomes[:3])
    assert finished.manifest()["attempt"] == outcomes[2]["attempt"]


def test_the_pipeline_at_once_gives_the_same_tables(finished, spark, tmp_path) -> None:
    at_once = finished.copied(tmp_path)
    (at_once.output / "runs" / f"{RUN}.json").unlink()
    for record in (at_once.output / "steps" / RUN).iterdir():
        record.unlink()
    assert at_once.start("run_pipeline", session=spark) == 0
    assert at_once.digests() == finished.digests()
    # What no record names any more is gone.
    assert at_once.attempts("host_scores") == {f"attempt={at_once.manifest()['attempt']}"}
