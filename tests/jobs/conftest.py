"""One finished run of the town, made step by step; tests that change it work on a copy."""

from pathlib import Path
from typing import Any

import pytest

from tests.jobs.desk import Desk
from tests.jobs.town import write_town


@pytest.fixture(scope="session")
def town(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The folder of the town's inputs."""
    folder = tmp_path_factory.mktemp("town")
    write_town(folder)
    return folder


@pytest.fixture(scope="session")
def finished(town: Path, spark: Any) -> Desk:
    """The three steps one after the other, each with the status 0."""
    desk = Desk.at(town, input__known_spam=str(town / "known_spam.csv"))
    for job in ("build_graph", "score_hosts", "rank_candidates"):
        assert desk.start(job, session=spark) == 0
    return desk


@pytest.fixture
def no_spark(monkeypatch: pytest.MonkeyPatch) -> None:
    """A test that must end before anything of Spark or Java is looked at."""
    from sparkrank import entry

    def fail(*_: object, **__: object) -> None:
        raise AssertionError("a session was asked for")

    monkeypatch.setattr(entry, "check_runtime", lambda: None)
    monkeypatch.setattr(entry, "open_session", fail)
