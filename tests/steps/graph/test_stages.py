"""The build's stages: a graph that is there is recognised, one that is half done goes on."""

import contextlib
import dataclasses
from collections.abc import Iterator
from pathlib import Path

import pytest

from sparkrank.graph.build import graph_fingerprint
from sparkrank.graph.folder import GraphFolder
from sparkrank.graph.plan import GridPlan
from sparkrank.inputs import check_edges
from sparkrank.names.suffixes import SuffixRules
from tests.steps.graphs import GRID, RULES, Crawl, Scored, file_digests, tasks_in_process, write_edges

STAGES = ["scan-1", "hosts-1", "tiles", "order", "graph"]


class Interrupted(Exception):
    """What the tests stop a build with."""


@contextlib.contextmanager
def stop_at(stage: str, *, before: bool) -> Iterator[list[str]]:
    """Stops the build before or after a stage's record is written; the stages that did their work."""
    worked: list[str] = []
    commit = GraphFolder.commit

    def stopping(folder: GraphFolder, name: str, record: dict) -> dict:
        worked.append(name)
        if name == stage and before:
            raise Interrupted
        commit(folder, name, record)
        if name == stage:
            raise Interrupted
        return record

    with pytest.MonkeyPatch.context() as patch, tasks_in_process():
        patch.setattr(GraphFolder, "commit", stopping)
        yield worked


def lasting_files(folder: GraphFolder) -> dict[str, str]:
    """Digests of what stays after a build, intermediate files apart."""
    return file_digests(Path(folder.place.local_path), without=["scan", "tiles", "peel"])


def test_a_build_stopped_anywhere_goes_on_to_the_same_bits(web_crawl, grid_scored, tmp_path) -> None:
    settings = {"plan": GRID, "graph__weighting": "links", "run__work": tmp_path}
    for stage in STAGES:
        # Stopped with the work done and no record, it is done again; with the record, it is not.
        for before in (True, False):
            with pytest.raises(Interrupted), stop_at(stage, before=before) as worked:
                web_crawl.build(**settings)
            assert worked == [stage]
    graph = web_crawl.build(**settings)
    assert graph.fingerprint == grid_scored.graph.fingerprint
    assert graph.counts == grid_scored.graph.counts
    assert lasting_files(graph.folder) == lasting_files(grid_scored.graph.folder)


def test_a_finished_build_leaves_no_intermediate_files(even_scored, grid_scored) -> None:
    for scored in (even_scored, grid_scored):
        place = scored.graph.folder.place
        folders = {path.name for path in Path(place.local_path).iterdir() if path.is_dir()}
        assert folders == {"hosts", "degrees", "order", "cells"}


def without_spark(crawl: Crawl) -> Crawl:
    """The same crawl; whoever asks it for a Spark job fails."""
    return dataclasses.replace(crawl, spark=None)


def test_an_unchanged_input_needs_no_spark_job(web_crawl, even_scored, grid_scored) -> None:
    assert without_spark(web_crawl).build() == even_scored.graph
    # What only the solve and the ranking go by changes no graph.
    again = without_spark(web_crawl).build(
        solve__damping=0.5, mass__good_share=0.3, candidates__min_scaled_pagerank=2, run__id="other"
    )
    assert again == even_scored.graph
    grid = without_spark(web_crawl).build(plan=GRID, graph__weighting="links")
    assert grid == grid_scored.graph


def test_a_changed_input_is_built_again(web_crawl, web, even_scored, tmp_path) -> None:
    def crawl(name: str, rows: list[tuple[str, str, int]]) -> Crawl:
        return dataclasses.replace(without_spark(web_crawl), edges=write_edges(tmp_path / name, rows))

    # One number of links another: the build goes to work, and finds no Spark.
    source, destination, links = web.rows[0]
    with pytest.raises(AttributeError):
        crawl("changed", [(source, destination, links + 1), *web.rows[1:]]).build()
    with pytest.raises(AttributeError):
        dataclasses.replace(without_spark(web_crawl), hosts=None).build()


def test_whatever_changes_the_graph_changes_its_fingerprint(web_crawl) -> None:
    edges = check_edges(str(web_crawl.edges))
    plan = GridPlan(stripes=1, build_groups=1, solve_groups=1)

    def fingerprint(rules: SuffixRules = RULES, plan: GridPlan = plan, **settings: object) -> str:
        return graph_fingerprint(web_crawl.config(**settings), edges, None, rules, plan)

    more_rules = SuffixRules.load("icann+private", ("shops.example",))
    different = [
        fingerprint(),
        fingerprint(graph__node="domain"),
        fingerprint(graph__node="domain", rules=more_rules),
        fingerprint(graph__weighting="links"),
        fingerprint(graph__follow_only=False),
        fingerprint(plan=GRID),
    ]
    assert len(set(different)) == len(different)
    # Suffixes are no part of a graph of hosts; the share allowed to be rejected is checked each time.
    assert fingerprint(rules=more_rules) == fingerprint() == fingerprint(graph__max_rejected_share=0.9)


def test_a_recognised_graph_is_what_was_built(even_scored: Scored) -> None:
    record = even_scored.graph.folder.record("graph")
    assert record is not None
    assert record["fingerprint"] == even_scored.graph.fingerprint
    assert even_scored.graph.folder.place.path.endswith(even_scored.graph.fingerprint[:24])
