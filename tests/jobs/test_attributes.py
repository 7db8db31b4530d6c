"""What the hosts input says beside names: beside candidates and their sources, in words, and in no score."""

import json

import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from tests.jobs.desk import Desk


@pytest.fixture(scope="module")
def told(finished, spark, tmp_path_factory) -> Desk:
    """The finished run again, with a hosts input that names hosts of its graph alone."""
    folder = tmp_path_factory.mktemp("told")
    hosts = {
        "host": ["https://target.test/", "target.test", "booster-7.test", "town-1.example", "island.example"],
        "language": ["de", "nl", "\x1b[31m", None, None],
        "status": [200, 200, 410, 200, None],
    }
    pq.write_table(pa.table(hosts), folder / "hosts.parquet")
    desk = finished.copied(folder / "desk").having(input__hosts=str(folder / "hosts.parquet"))
    assert desk.start("run_pipeline", "--replace", "--quiet", session=spark) == 0
    return desk


def test_candidates_and_their_sources_carry_them(told) -> None:
    rows = {row["host"]: row["attributes"] for row in told.table("spam_candidates")}
    assert rows == {"target.test": '{"language": ["de", "nl"], "status": 200}', "island.example": None}
    sources = {row["source"]: row["source_attributes"] for row in told.table("candidate_support")}
    assert json.loads(sources["booster-7.test"]) == {"language": "\\x1b[31m", "status": 410}
    assert sources["target.test"] == rows["target.test"]
    assert sources["booster-8.test"] is None


def test_no_score_and_no_order_knows_of_them(told, finished) -> None:
    before, after = finished.digests(), told.digests()
    assert after["host_scores"] == before["host_scores"]
    assert set(after) == set(before)
    for table, column in (("spam_candidates", "attributes"), ("candidate_support", "source_attributes")):
        assert after[table] != before[table]
        rows = [[{**row, column: None} for row in desk.table(table)] for desk in (finished, told)]
        assert rows[0] == rows[1]


def test_an_explanation_says_them(told, spark, capsys) -> None:
    names = ["target.test", "booster-7.test", "booster-8.test"]
    assert told.start("explain_host", "--quiet", *(f"--host={name}" for name in names), session=spark) == 0
    said = capsys.readouterr().out
    assert '  the hosts input says: {"language": ["de", "nl"], "status": 200}\n' in said
    assert '  the hosts input says: {"language": "\\\\x1b[31m", "status": 410}\n' in said
    assert said.count("the hosts input says") == 2
