"""What becomes of each row: merged, rejected with its reason, not followed, a link of a host to itself."""

import pyarrow.parquet as pq
import pytest

from sparkrank.errors import InputRefused
from tests.reference import dense_solve
from tests.steps.graphs import Crawl, Scored, make_crawl, tasks_in_process

ROWS = [
    # src, dst, links, rel
    ("a.one.example", "b.one.example", 2, None),
    ("a.one.example", "b.one.example", 3, ""),
    ("HTTP://A.one.example:80/x?y", "b.ONE.example.", 4, "noopener external"),
    ("a.one.example", "c.two.example", 3, None),
    ("b.one.example", "c.two.example", 1, "no-follow"),
    ("c.two.example", "a.one.example", 1, "nofollowed, ugcs"),
    # A long s folds to an s in Unicode, not in ASCII.
    ("c.two.example", "d.two.example", 1, "ſponsored"),
    ("d.two.example", "192.0.2.7", 1, None),
    # Not followed; their hosts count all the same.
    ("a.one.example", "nf1.example", 1, "nofollow"),
    ("a.one.example", "nf2.example", 1, "noopener\tNoFollow"),
    ("a.one.example", "nf3.example", 1, "me,UGC"),
    ("a.one.example", "nf4.example", 1, "external, Sponsored ,x"),
    ("a.one.example", "nf5.example", 1, "\nnofollow\n"),
    # Links of hosts to themselves, the second one not followed.
    ("self1.example", "https://self1.example/", 1, None),
    ("self2.example", "self2.example", 1, "ugc"),
    # Rejected rows, each counted once; their hosts don't count.
    ("bad host.example", "lost1.example", 1, None),
    ("bad host.example", "lost1.example", 1, "nofollow"),
    ("lost2.example", None, 1, None),
    ("also bad", None, 0, None),
    ("lost3.example", "lost4.example", None, None),
    ("lost3.example", "lost4.example", 0, "nofollow"),
    ("lost3.example", "lost4.example", -7, None),
    ("lost3.example", "user@lost4.example", 0, None),
]
HOSTS = ["quiet.example", "https://quiet2.example/path", "a.one.example", "not a host", None]

ACCEPTED = {"a.one.example", "b.one.example", "c.two.example", "d.two.example", "192.0.2.7"}
ACCEPTED |= {f"nf{i}.example" for i in range(1, 6)} | {"self1.example", "self2.example"}
ACCEPTED |= {"quiet.example", "quiet2.example"}


@pytest.fixture(scope="module")
def crawl(spark, tmp_path_factory: pytest.TempPathFactory) -> Crawl:
    folder = tmp_path_factory.mktemp("counts")
    core = [("a.one.example",), ("c.two.example",), ("two.example",), ("www.one.example",)]
    settings = {"graph__max_rejected_share": 0.5, "solve__tolerance": 1e-10}
    return make_crawl(spark, folder, ROWS, core, hosts=HOSTS, **settings)


@pytest.fixture(scope="module")
def counting_links(crawl) -> Scored:
    return crawl.run(graph__weighting="links")


def test_every_row_is_counted_once(counting_links) -> None:
    counts = counting_links.graph.counts
    assert counts["rows"] == len(ROWS)
    assert counts["rejected_rows"] == 8
    assert counts["rejected"] == {"bad_character": 1, "bad_links": 3, "not_bare": 3, "null": 1}
    assert counts["rejected_hosts"] == {"not_bare": 1, "null": 1}
    assert counts["not_followed_rows"] == 6
    assert counts["self_link_rows"] == 1
    assert counts["merged_rows"] == 2
    assert counts["edges"] == 6
    parts = ("rejected_rows", "not_followed_rows", "self_link_rows", "merged_rows", "edges")
    assert sum(counts[name] for name in parts) == len(ROWS)


def test_hosts_are_those_of_accepted_rows_and_of_the_hosts_list(counting_links) -> None:
    assert set(counting_links.hosts) == ACCEPTED
    assert counting_links.graph.counts["hosts"] == len(ACCEPTED)


def test_rejected_rows_keep_value_and_reason(counting_links) -> None:
    places = [counting_links.graph.folder.rejected(i) for i in counting_links.graph.rejected_pieces]
    rows = [row for place in places for row in pq.read_table(place.local_path).to_pylist()]
    found = {(row["source"], row["row_value"]): (row["reason"], row["rows"]) for row in rows}
    assert len(found) == len(rows)
    assert {key: rows for key, (_, rows) in found.items()} == {
        ("edges.src", "bad host.example"): 2,
        ("edges.src", "also bad"): 1,
        ("edges.dst", None): 1,
        ("edges.dst", "user@lost4.example"): 1,
        ("edges.links", None): 1,
        ("edges.links", "0"): 1,
        ("edges.links", "-7"): 1,
        ("hosts.host", "not a host"): 1,
        ("hosts.host", None): 1,
    }
    assert found["edges.dst", None][0] == found["hosts.host", None][0] == "null"
    assert {found["edges.links", value][0] for value in (None, "0", "-7")} == {"bad_links"}


def test_links_add_up_and_split_the_rank(counting_links) -> None:
    """a gives b 9 of 12 parts of its rank and c 3, as a dense solve has it."""
    hosts = counting_links.hosts
    at = {host: i for i, host in enumerate(hosts)}
    a, b, c, d = (at[f"{name}.example"] for name in ("a.one", "b.one", "c.two", "d.two"))
    edges = [(a, b, 9), (a, c, 3), (b, c, 1), (c, a, 1), (c, d, 1), (d, at["192.0.2.7"], 1)]
    expected = dense_solve(edges, len(hosts), [1.0] * len(hosts))
    assert counting_links.column("scaled_pagerank") == pytest.approx(expected, rel=1e-9, abs=0)
    assert counting_links["a.one.example"]["out_degree"] == 2


def test_following_all_links_counts_none_as_not_followed(crawl) -> None:
    with tasks_in_process():
        counts = crawl.build(graph__follow_only=False).counts
    assert counts["not_followed_rows"] == 0
    assert counts["edges"] == 6 + 5
    assert counts["self_link_rows"] == 2
    assert counts["hosts"] == len(ACCEPTED)


def test_nodes_can_be_registrable_domains(crawl) -> None:
    """Hosts of one domain are one node; links inside it are links of a host to itself."""
    by_domain = crawl.run(graph__node="domain")
    expected = {"one.example", "two.example", "192.0.2.7", "self1.example", "self2.example"}
    expected |= {f"nf{i}.example" for i in range(1, 6)} | {"quiet.example", "quiet2.example"}
    assert set(by_domain.hosts) == expected
    counts = by_domain.graph.counts
    # one -> two (2 rows), two -> one, two -> the address; a -> b three times and c -> d stay inside.
    assert (counts["edges"], counts["merged_rows"], counts["self_link_rows"]) == (3, 1, 5)
    assert counts["not_followed_rows"] == 6
    # An entry of a list counts for its domain only if it is the domain or its www.
    core = {host for host in by_domain.hosts if by_domain[host]["is_core"]}
    assert core == {"one.example", "two.example"}
    assert {r.row_value for r in crawl.lists(graph__node="domain").core.rejections} == {
        "a.one.example",
        "c.two.example",
    }
    assert by_domain["192.0.2.7"]["domain"] is None


def test_as_many_rejected_rows_as_allowed_pass_and_one_more_is_refused(crawl, counting_links) -> None:
    assert crawl.build(graph__weighting="links", graph__max_rejected_share=8 / 23).counts["rows"] == 23
    with pytest.raises(InputRefused) as refusal:
        crawl.build(graph__weighting="links", graph__max_rejected_share=0.34)
    message = str(refusal.value)
    assert message.startswith(
        "input.edges: expected at most 0.34 of the rows to be rejected (graph.max_rejected_share), "
        "found 8 of 23 ("
    )
    assert message.endswith("; mend the edge table or allow more")
