"""Mistakes that only a look at the rows shows: the one line, the status, and nothing half-written."""

from pathlib import Path

import pyarrow.parquet as pq

from tests.jobs import town
from tests.jobs.desk import Desk


def refused(desk: Desk, spark, capsys, line: str, job: str = "run_pipeline") -> None:
    assert desk.start(job, "--quiet", session=spark) == 3
    assert capsys.readouterr().err == f"sparkrank: {line}\n"
    assert desk.visible() == []
    assert (desk.outcomes()[-1]["exit_status"], desk.outcomes()[-1]["message"]) == (3, line)


def test_more_rejected_rows_than_allowed(spark, tmp_path, capsys) -> None:
    rejected = [town.GOOD[0], town.GOOD[1], ("no host", "town-0.example", 1, None), (None, "x.test", 1, None)]
    town.write_town(tmp_path)
    town.write_edges(tmp_path / "edges.parquet", rejected)
    line = (
        "input.edges: expected at most 0.2 of the rows to be rejected (graph.max_rejected_share), "
        "found 2 of 4 (not_bare 1, null 1); mend the edge table or allow more"
    )
    refused(Desk.at(tmp_path), spark, capsys, line, "build_graph")


def test_a_graph_that_is_there_is_held_to_the_share_in_force(finished, spark, tmp_path, capsys) -> None:
    desk = Desk(folder=tmp_path, inputs=finished.inputs, work=finished.work)
    n_rejected, n_rows = len(town.REJECTED), len(town.ACCEPTED) + len(town.REJECTED)
    line = (
        "input.edges: expected at most 0.01 of the rows to be rejected (graph.max_rejected_share), "
        f"found {n_rejected} of {n_rows} (bad_links 2, bad_character 1, bad_idna 1); "
        "mend the edge table or allow more"
    )
    refused(desk.having(graph__max_rejected_share="0.01"), spark, capsys, line)


def test_no_usable_edge_left(spark, tmp_path, capsys) -> None:
    town.write_town(tmp_path)
    town.write_edges(tmp_path / "edges.parquet", town.SELF + town.NOT_FOLLOWED)
    line = (
        "input.edges: expected links between different hosts, found none in 3 rows (0 rejected, "
        "1 self-links, 2 not followed); check the columns src, dst and rel"
    )
    refused(Desk.at(tmp_path), spark, capsys, line)


def test_no_core_host_in_the_graph(finished, spark, tmp_path, capsys) -> None:
    core = tmp_path / "core.csv"
    core.write_text("host\nelsewhere.example\nbeyond.test\n")
    desk = Desk(folder=tmp_path, inputs=finished.inputs, work=finished.work)
    line = (
        "input.core: expected hosts of the graph, found none of the 2 listed in it; "
        "check that list and edges come from the same crawl"
    )
    refused(desk.having(input__core=str(core)), spark, capsys, line)


def damage_first_page(path: Path) -> None:
    """Turn bytes of the first column's data, which no footer speaks of."""
    content = bytearray(path.read_bytes())
    column = pq.read_metadata(path).row_group(0).column(0)
    first = column.dictionary_page_offset or column.data_page_offset
    for at in range(first, first + 40):
        content[at] ^= 0xFF
    path.write_bytes(bytes(content))


def test_a_page_that_cannot_be_read(spark, tmp_path, capsys) -> None:
    town.write_town(tmp_path)
    path = tmp_path / "edges.parquet"
    damage_first_page(path)
    desk = Desk.at(tmp_path)
    assert desk.start("run_pipeline", "--quiet", session=spark) == 3
    line = capsys.readouterr().err
    # In between stand the reader's own words.
    assert line.startswith(
        f"sparkrank: input.edges: expected files that can be read to their end, found damage in {path} ("
    )
    assert line.endswith("); write that file again\n")
    assert line.count("\n") == 1
    assert desk.visible() == []
    assert desk.outcomes()[-1]["exit_status"] == 3
