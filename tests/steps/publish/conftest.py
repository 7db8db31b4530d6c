"""The run that the tables of these tests are published into."""

from collections.abc import Iterator

import pytest

from sparkrank.places import resolve
from sparkrank.publish.attempts import RunFolder, new_attempt_id
from sparkrank.publish.lock import hold_run


@pytest.fixture
def run(tmp_path) -> Iterator[RunFolder]:
    """A held run, in a folder whose name has a blank."""
    output = resolve(str(tmp_path / "out put"))
    with hold_run(output, "run-1") as lock:
        yield RunFolder(output=output, run_id="run-1", attempt_id=new_attempt_id(), lock=lock)
