"""Any host of a finished run explained: in words, as tables, and what is refused."""

import pytest

from tests.jobs.desk import Desk
from tests.jobs.town import BOOSTERS, write_town


@pytest.fixture(scope="module")
def asked(finished, spark, tmp_path_factory):
    """A desk on which a candidate, a core member and a booster were asked for, and what was said."""
    desk = finished.copied(tmp_path_factory.mktemp("asked"))
    return desk, desk.manifest()


def test_listed_or_not_in_words_and_as_tables(asked, finished, spark, capsys) -> None:
    desk, before = asked
    names = ["HTTPS://Target.test/", "booster-0.test", "town-0.example"]
    assert desk.start("explain_host", *(f"--host={name}" for name in names), session=spark) == 0
    said = capsys.readouterr().out
    booster, target, member = said.split("\n\n")[:3]
    assert target.startswith("target.test\n  candidate number 1 for review\n")
    assert f"  {BOOSTERS + 1} hosts link here, it links to 0\n" in target
    assert "  why: " in target
    assert target.count("  (looks close") == 10
    assert "of hosts that are not listed" in target
    assert booster.startswith("booster-0.test\n  not listed: scaled PageRank 1 is below 10")
    assert "  no host links here\n" in booster
    assert member.startswith("town-0.example\n  not listed: a member of the good core\n")
    for text in (booster, target, member):
        assert text.endswith(
            "A score is a lead, not a verdict: it says how links run, not whose they are or what was meant."
        )
    # The same evidence as in the run's own tables.
    hosts = {row["host"]: row for row in desk.table("explained_hosts")}
    assert list(hosts) == ["booster-0.test", "target.test", "town-0.example"]
    assert [row["rank"] for row in hosts.values()] == [None, 1, None]
    (listed,) = [row for row in desk.table("spam_candidates") if row["host"] == "target.test"]
    assert hosts["target.test"] == listed
    # A booster is told its group, too.
    groups = [row["farm_group"] for row in hosts.values()]
    assert groups == ["target.test", "target.test", None]
    for name in ("booster-0.test", "town-0.example"):
        assert {hosts[name][key] for key in ("scaled_pagerank", "trust")} <= set(
            next(row for row in desk.table("host_scores") if row["host"] == name).values()
        )
    support = [row for row in desk.table("candidate_support") if row["host"] == "target.test"]
    explained = [row for row in desk.table("explained_support") if row["host"] == "target.test"]
    assert explained == support
    after = desk.manifest()
    kept = {name: entry for name, entry in after["tables"].items() if not name.startswith("explained_")}
    assert kept == before["tables"]
    assert (after["fingerprint"], after["evidence"]) == (before["fingerprint"], before["evidence"])


def test_another_question_replaces_the_answer(asked, spark, capsys) -> None:
    desk, _ = asked
    assert desk.start("explain_host", "--host=island.example", "--quiet", session=spark) == 0
    assert "unknown, not spam" in capsys.readouterr().out
    assert [row["host"] for row in desk.table("explained_hosts")] == ["island.example"]
    assert len(desk.attempts("explained_hosts")) == 1
    # And the run is complete as before.
    assert desk.start("run_pipeline", session=spark) == 0
    assert " is complete and unchanged: nothing to do\n" in capsys.readouterr().err
    assert not list((desk.work / "evidence").iterdir())


def test_a_host_that_the_graph_does_not_have(asked, spark, capsys) -> None:
    desk, _ = asked
    before = desk.manifest()
    arguments = ["--host=nowhere.example", "--host=target.test", "--host=elsewhere.example", "--quiet"]
    assert desk.start("explain_host", *arguments, session=spark) == 3
    assert capsys.readouterr().err == (
        "sparkrank: --host: expected hosts of the run's graph, found 2 that it does not have "
        "(elsewhere.example, nowhere.example); only hosts that an accepted row or the hosts list names have "
        "scores\n"
    )
    assert desk.manifest() == before


@pytest.mark.usefixtures("no_spark")
@pytest.mark.parametrize(
    ("arguments", "status", "line"),
    [
        ([], 2, "sparkrank: arguments: the following arguments are required: --host; see --help\n"),
        (
            ["--host=a b"],
            2,
            'sparkrank: --host "a b": expected a host or a URL, found that a value without // may be a host, '
            "a port and a path, nothing else; correct it\n",
        ),
    ],
)
def test_what_names_no_host(asked, capsys, arguments, status, line) -> None:
    assert asked[0].start("explain_host", *arguments, "--quiet") == status
    assert capsys.readouterr().err == line


@pytest.mark.usefixtures("no_spark")
def test_there_must_be_a_complete_run(tmp_path, capsys) -> None:
    write_town(tmp_path)
    desk = Desk.at(tmp_path)
    assert desk.start("explain_host", "--host=target.test", "--quiet") == 3
    assert capsys.readouterr().err == (
        f"sparkrank: run 2026-11-town: expected a complete run below {desk.output}, found none; "
        "run jobs/run_pipeline.py first\n"
    )
