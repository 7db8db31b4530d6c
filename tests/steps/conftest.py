"""The shared web of the engine's tests: built once without and once with the numbers of links."""

import pytest

from tests.steps.graphs import GRID, ROUGH_TOLERANCE, Crawl, Scored, make_crawl
from tests.steps.webs import GOOD_SHARE, Web, make_web


@pytest.fixture(scope="session")
def web() -> Web:
    return make_web()


@pytest.fixture(scope="session")
def web_crawl(spark, web, tmp_path_factory: pytest.TempPathFactory) -> Crawl:
    """The web's inputs; its steps run to an error far below what the tests tell apart."""
    return make_crawl(
        spark,
        tmp_path_factory.mktemp("web"),
        web.edge_table(),
        web.core,
        known_spam=[(host,) for host in web.known_spam],
        hosts=[*web.isolated, "hub.example"],
        mass__good_share=GOOD_SHARE,
        solve__tolerance=1e-12,
        solve__max_steps=300,
    )


@pytest.fixture(scope="session")
def even_scored(web_crawl) -> Scored:
    """Every edge weighs the same."""
    return web_crawl.run()


@pytest.fixture(scope="session")
def links_scored(web_crawl) -> Scored:
    """Edges weigh as many links as they have."""
    return web_crawl.run(graph__weighting="links")


@pytest.fixture(params=["even_scored", "links_scored"])
def scored(request) -> Scored:
    """Both, one after the other."""
    return request.getfixturevalue(request.param)


@pytest.fixture
def weighted(request, scored) -> bool:
    """Whether `scored` counts links."""
    return scored is request.getfixturevalue("links_scored")


@pytest.fixture(scope="session")
def grid_scored(web_crawl) -> Scored:
    """Links counted, on a grid of four stripes and two source groups, every task by Spark; a few steps."""
    return web_crawl.run(plan=GRID, by_spark=True, graph__weighting="links", solve__tolerance=ROUGH_TOLERANCE)
