"""A solve that stops anywhere goes on from its last committed step, to the same bits."""

import contextlib
from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pytest

from sparkrank.errors import NotConverged
from sparkrank.propagate.folder import SolveFolder
from sparkrank.propagate.mixing import KEPT_STEPS
from tests.steps.graphs import ROUGH_TOLERANCE, Crawl, Scored, file_digests, tasks_in_process


class Interrupted(Exception):
    """What the tests stop a solve with."""


@contextlib.contextmanager
def commits(stop_at: str = "", *, before: bool = False) -> Iterator[list[str]]:
    """The names of the records that are committed meanwhile; stops before or after one of them."""
    committed: list[str] = []
    commit = SolveFolder.commit

    def counted(folder: SolveFolder, name: str, record: dict) -> dict:
        if before and name == stop_at:
            raise Interrupted
        committed.append(name)
        commit(folder, name, record)
        if name == stop_at:
            raise Interrupted
        return record

    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(SolveFolder, "commit", counted)
        yield committed


@pytest.fixture(params=["one group", "two groups"])
def whole(request, web_crawl) -> Scored:
    """A solve that nothing interrupts, on one stripe and on a grid."""
    if request.param == "two groups":
        return request.getfixturevalue("grid_scored")
    graph = request.getfixturevalue("links_scored").graph
    return web_crawl.run(graph, solve__tolerance=ROUGH_TOLERANCE)


def solve(crawl: Crawl, whole: Scored, work: Path, **settings: int) -> Path:
    """Solves the graph of `whole` with states below another work folder, which holds one solve."""
    with tasks_in_process():
        solved = crawl.solve(whole.graph, run__work=work, solve__tolerance=ROUGH_TOLERANCE, **settings)
    return Path(solved.solution.solve.folder.place.local_path)


def bits(scored: Scored) -> dict[str, str]:
    return file_digests(Path(scored.solved.solution.solve.folder.place.local_path), without=["scores"])


def state_file(work: Path, step: int, stripe: int = 0, kind: str = "") -> Path:
    (folder,) = (work / "solves").iterdir()
    return folder / "states" / f"{step:05d}" / f"{stripe:03d}{kind}.arrays"


def flip_a_bit(path: Path) -> None:
    data = bytearray(path.read_bytes())
    data[-100] ^= 1
    path.write_bytes(data)


def test_committed_steps_are_not_done_again(web_crawl, whole, tmp_path) -> None:
    # After step 11 the solve mixes the states of a cycle and goes on from there.
    stops = ["prepared", "step-00001", "step-00010", "step-00011", "step-00012", "step-00014", "solution"]
    done: list[str] = []
    for stop in stops:
        with pytest.raises(Interrupted), commits(stop) as committed:
            solve(web_crawl, whole, tmp_path)
        done += committed
    with commits() as committed:
        folder = solve(web_crawl, whole, tmp_path)
    done += committed
    steps = whole.solved.solution.steps
    assert steps > 14
    expected = [f"step-{step:05d}" for step in range(1, steps + 1)]
    assert done == ["prepared", *expected, "solution", "reached"]
    assert file_digests(folder) == bits(whole)


def test_a_step_without_its_record_is_done_again(web_crawl, whole, tmp_path) -> None:
    for stop in ("prepared", "step-00001", "step-00003", "step-00012", "solution", "reached"):
        with pytest.raises(Interrupted), commits(stop, before=True):
            solve(web_crawl, whole, tmp_path)
    assert file_digests(solve(web_crawl, whole, tmp_path)) == bits(whole)


def test_too_few_steps_say_so_and_more_go_on_from_there(web_crawl, whole, tmp_path) -> None:
    with pytest.raises(NotConverged) as refusal, commits() as first:
        solve(web_crawl, whole, tmp_path, solve__max_steps=4)
    assert first == ["prepared", *(f"step-0000{step}" for step in range(1, 5))]
    message = str(refusal.value)
    assert message.startswith(
        "solve: expected an error of at most 0.02 of PageRank (solve.tolerance) within 4 steps "
        "(solve.max_steps), found "
    )
    assert message.endswith(" after step 4; allow more steps, the steps done are kept, or a larger tolerance")
    # As many again are no step more.
    with pytest.raises(NotConverged), commits() as again:
        solve(web_crawl, whole, tmp_path, solve__max_steps=4)
    assert again == []
    with commits() as rest:
        folder = solve(web_crawl, whole, tmp_path)
    assert rest[0] == "step-00005"
    assert file_digests(folder) == bits(whole)


def damage_by(damage: str, path: Path) -> None:
    if damage == "flipped bit":
        flip_a_bit(path)
    elif damage == "cut short":
        path.write_bytes(path.read_bytes()[:-64])
    else:
        path.unlink()


@pytest.fixture(params=["flipped bit", "cut short", "removed"])
def damage(request) -> str:
    return request.param


@pytest.mark.parametrize("step", [4, 14])
def test_a_damaged_state_is_computed_again(damage, step, web_crawl, grid_scored, tmp_path) -> None:
    with pytest.raises(NotConverged):
        solve(web_crawl, grid_scored, tmp_path, solve__max_steps=step)
    damage_by(damage, state_file(tmp_path, step, stripe=2))
    with commits() as committed:
        folder = solve(web_crawl, grid_scored, tmp_path)
    assert committed[0] == f"step-{step:05d}"
    assert file_digests(folder) == bits(grid_scored)


def test_a_damaged_mixture_is_noticed(damage, web_crawl, grid_scored, tmp_path) -> None:
    """Step 12 started from the mixture after step 11, and the next mixture needs it once more."""
    with pytest.raises(NotConverged):
        solve(web_crawl, grid_scored, tmp_path, solve__max_steps=14)
    damage_by(damage, state_file(tmp_path, 11, stripe=2, kind="-mixed"))
    assert file_digests(solve(web_crawl, grid_scored, tmp_path)) == bits(grid_scored)


def test_where_too_few_states_are_whole_the_solve_starts_again(web_crawl, grid_scored, tmp_path) -> None:
    with pytest.raises(NotConverged):
        solve(web_crawl, grid_scored, tmp_path, solve__max_steps=14)
    # The mixture after step 18 needs step 12, and what step 12 came from is gone.
    flip_a_bit(state_file(tmp_path, 12))
    # It is stopped once more, while records of lost steps are still there.
    with pytest.raises(Interrupted), commits("step-00002") as committed:
        solve(web_crawl, grid_scored, tmp_path)
    assert committed == ["step-00001", "step-00002"]
    with commits() as committed:
        folder = solve(web_crawl, grid_scored, tmp_path)
    assert committed[0] == "step-00003"
    assert file_digests(folder) == bits(grid_scored)


def test_states_that_no_later_step_needs_are_removed(whole) -> None:
    folder = Path(whole.solved.solution.solve.folder.place.local_path)
    steps = whole.solved.solution.steps
    kept = {int(path.name) for path in (folder / "states").iterdir()}
    assert kept == set(range(steps - KEPT_STEPS + 1, steps + 1))


def test_another_teleport_is_another_solve(web_crawl, even_scored, tmp_path) -> None:
    with tasks_in_process():
        one = web_crawl.solve(even_scored.graph, solve__tolerance=50, run__work=tmp_path)
        places = {one.solution.solve.folder.place.path}
        for settings in ({"mass__good_share": 0.5}, {"solve__damping": 0.8}, {"solve__max_columns": 3}):
            given = {"solve__tolerance": 50, "run__work": tmp_path, **settings}
            places.add(web_crawl.solve(even_scored.graph, **given).solution.solve.folder.place.path)
        more = web_crawl.solve(
            even_scored.graph, solve__tolerance=50, run__work=tmp_path, solve__max_steps=77
        )
    assert len(places) == 4
    assert more.solution.solve.folder.place == one.solution.solve.folder.place
    assert np.isfinite(one.solution.pagerank_sum)
