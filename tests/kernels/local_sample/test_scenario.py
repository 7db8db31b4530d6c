"""The scenario is fit for its purpose: farms stand out, honest places come close, the core has gaps."""

from typing import Any

import numpy as np
import pytest
from scenario import FARM_SHAPES, LOOKALIKES, Scenario, Settings, generate
from scenario.web import WeightedGroups, power_law


def test_size_and_degrees_look_like_a_crawl(scenario: Scenario) -> None:
    graph = scenario.graph
    n_hosts = len(graph.hosts)
    assert 19_000 <= n_hosts <= 21_000
    assert 140_000 <= scenario.edges.num_rows <= 160_000
    out_degree = np.bincount(graph.sources, minlength=n_hosts)
    in_degree = np.bincount(graph.destinations, minlength=n_hosts)
    assert 0.5 <= np.mean(out_degree == 0) <= 0.65
    # Heavy tails: the upper percent holds far more than its share, the median host nearly nothing.
    for degree in (in_degree, out_degree):
        assert np.sort(degree)[-n_hosts // 100 :].sum() > 0.12 * degree.sum()
    assert np.median(in_degree) <= 3
    assert in_degree.max() > 400


def test_farm_targets_pass_both_thresholds(measured: Any) -> None:
    fed_by_core = measured.shape == "abused_core"
    target = (measured.role == "target") & ~fed_by_core
    assert np.mean(measured.candidate[target]) >= 0.85
    # Most of them are reached by the core: being reached clears nobody.
    assert np.mean(measured.reached[target]) >= 0.7
    for shape in FARM_SHAPES:
        if shape != "abused_core":
            assert np.any(measured.candidate & target & (measured.shape == shape)), shape


@pytest.mark.parametrize(
    ("shape", "divisor"), [("one_way_star", 1.0), ("back_star", 1 - 0.85**2)], ids=["one way", "back"]
)
def test_stars_cut_out_of_the_web_have_the_published_score(
    measured: Any, scenario: Scenario, shape: str, divisor: float
) -> None:
    # Gyöngyi & Garcia-Molina, "Link Spam Alliances", VLDB 2005 (memory): a target with k boosters and no
    # feed from outside scores 1 + ck, with back-links (1 + ck)/(1 - c²). A dense solve of the farm alone.
    graph = scenario.graph
    for number in range(1, 5):
        members = np.flatnonzero(measured.group == f"{shape}_{number}")
        place = np.full(len(graph.hosts), -1)
        place[members] = np.arange(len(members))
        inside = (place[graph.sources] >= 0) & (place[graph.destinations] >= 0)
        links = np.zeros((len(members), len(members)))
        links[place[graph.sources[inside]], place[graph.destinations[inside]]] = 1.0
        shares = links / np.maximum(links.sum(axis=1, keepdims=True), 1)
        scaled = np.linalg.solve(np.eye(len(members)) - 0.85 * shares.T, np.ones(len(members)))
        (target,) = np.flatnonzero(measured.role[members] == "target")
        boosters = np.count_nonzero(measured.role[members] == "booster")
        expected = (1 + 0.85 * boosters) / divisor
        np.testing.assert_allclose(scaled[target], expected, rtol=1e-12, atol=0)
        # In the whole web, links from outside only add.
        assert measured.pagerank[members[target]] >= expected * (1 - 1e-6)


def test_an_abused_core_page_hides_its_farm(measured: Any) -> None:
    targets = (measured.role == "target") & (measured.shape == "abused_core")
    assert np.count_nonzero(targets) == 4
    assert np.all(measured.pagerank[targets] >= 10)
    assert np.all(measured.mass[targets] < 0.2)
    assert np.any(measured.mass[targets] < 0)
    guest_books = (measured.role == "abused") & (measured.shape == "abused_core")
    assert np.all(measured.is_core[guest_books])


@pytest.mark.parametrize("community", ["fishing_coop", "island_blogs"])
def test_communities_beyond_the_core(measured: Any, community: str) -> None:
    members = measured.group == community
    assert np.count_nonzero(members) > 300
    assert not np.any(measured.reached[members])
    assert np.all(measured.mass[members] == 1)
    assert np.count_nonzero(measured.candidate & members) >= 5


def test_lookalikes_come_close(measured: Any) -> None:
    homes = measured.role == "lookalike"
    assert np.count_nonzero(measured.candidate & homes) >= 4
    # Others are credited by hosts that the core knows: importance alone is not mass.
    cleared = homes & (measured.pagerank >= 100) & (measured.mass < 0.5)
    assert np.any(cleared)


def test_most_important_honest_hosts_are_cleared(measured: Any) -> None:
    honest = (measured.role == "good") & (measured.pagerank >= 10) & ~measured.is_core
    assert np.count_nonzero(honest) > 80
    assert np.mean(measured.mass[honest] < 0.5) > 0.7


def test_farms_stand_on_own_domains_and_on_shared_ones(scenario: Scenario, measured: Any) -> None:
    for shape, shared in (("back_star_1", False), ("back_star_2", True)):
        boosters = np.flatnonzero((measured.group == shape) & (measured.role == "booster")).tolist()
        parents = {scenario.graph.hosts[host].split(".", 1)[1] for host in boosters}
        assert (len(parents) == 1 and parents.isdisjoint({"example", "test"})) is shared


@pytest.mark.parametrize("seed", [1, 2])
def test_other_seeds_are_fit_too(seed: int, measure: Any) -> None:
    found = measure(generate(Settings(seed=seed)))
    target = (found.role == "target") & (found.shape != "abused_core")
    assert np.mean(found.candidate[target]) >= 0.75
    communities = found.role == "community"
    assert np.all(found.mass[communities] == 1)
    hidden = found.mass[(found.role == "target") & (found.shape == "abused_core")]
    assert np.min(hidden) < 0


def test_seed_and_scale_change_the_web() -> None:
    small = generate(Settings(scale=0.1))
    assert 1_500 <= len(small.graph.hosts) <= 2_500
    assert generate(Settings(scale=0.1, seed=3)).graph.hosts != small.graph.hosts
    assert generate(Settings(scale=0.1)).edges.equals(small.edges)


@pytest.mark.parametrize("left_out", [*FARM_SHAPES, *LOOKALIKES])
def test_a_shape_can_be_left_out(left_out: str) -> None:
    settings = Settings(
        scale=0.1,
        farm_shapes=tuple(shape for shape in FARM_SHAPES if shape != left_out),
        lookalikes=tuple(name for name in LOOKALIKES if name != left_out),
    )
    planted = set(generate(settings).truth["shape"].to_pylist())
    assert planted & {*FARM_SHAPES, *LOOKALIKES} == {*FARM_SHAPES, *LOOKALIKES} - {left_out}


def test_a_web_without_farms() -> None:
    honest = generate(Settings(scale=0.1, farm_shapes=()))
    assert not {"target", "booster", "feeder", "abused"} & set(honest.truth["role"].to_pylist())
    assert honest.known_spam.num_rows == 0


@pytest.mark.parametrize("core_share", [0.005, 0.02, 0.04])
def test_core_share(core_share: float) -> None:
    graph = generate(Settings(core_share=core_share)).graph
    members = sum(len(hosts) for hosts in graph.core.values())
    assert members / len(graph.hosts) == pytest.approx(core_share, rel=0.1)


@pytest.mark.parametrize(
    ("wrong", "message"),
    [
        ({"seed": -1}, "seed: expected 0 or more, found -1"),
        ({"scale": 0.0}, "scale: expected at least 0.05, found 0.0"),
        ({"scale": float("nan")}, "scale: expected at least 0.05, found nan"),
        ({"core_share": 0.05}, "core_share: expected above 0 and at most 0.04, found 0.05"),
        ({"farms_per_shape": -1}, "farms_per_shape: expected 0 or more, found -1"),
    ],
)
def test_settings_refuse(wrong: dict[str, Any], message: str) -> None:
    with pytest.raises(ValueError, match=f"^{message}$"):
        Settings(**wrong)


def test_settings_refuse_unknown_shapes() -> None:
    with pytest.raises(ValueError, match=r"^farm_shapes: expected some of .*, found pyramid$"):
        Settings(farm_shapes=("ring", "pyramid"))


def test_weighted_groups_draw_in_proportion() -> None:
    groups = WeightedGroups(np.array([1, 0, 1, 1]), np.array([1.0, 5.0, 2.0, 1.0]))
    uniform = (np.arange(8) + 0.5) / 8
    drawn = groups.draw(np.ones(8, dtype=np.int64), uniform)
    assert drawn.tolist() == [0, 0, 2, 2, 2, 2, 3, 3]
    assert groups.draw(np.zeros(2, dtype=np.int64), np.array([0.0, 0.999])).tolist() == [1, 1]


def test_power_law_inverts_its_tail() -> None:
    # P(X > x) = x**-alpha, so the uniform value 1 - x**-alpha gives x.
    np.testing.assert_allclose(
        power_law(np.array([0.0, 1 - 4.0**-1.5, 1 - 1e-9]), 1.5, 9.0), [1, 4, 9], rtol=1e-12
    )
