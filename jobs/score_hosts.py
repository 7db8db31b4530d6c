"""The graph and the reviewed lists → PageRank, trust and spam mass of every host: `host_scores`."""

import sys
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

sys.path.insert(0, str(Path(__file__).resolve().parent.parent))

from sparkrank import stages
from sparkrank.entry import JobContext, run_job

if TYPE_CHECKING:
    from pyspark.sql import SparkSession


def main(argv: Sequence[str] | None = None, session: "SparkSession | None" = None) -> int:
    """Score the hosts; the exit status."""
    inputs = stages.InputCheck()

    def body(context: JobContext) -> None:
        if stages.open_run(context, inputs.checked) is None:
            stages.score(context, inputs.checked)

    return run_job(
        "score_hosts",
        __doc__ or "",
        argv,
        session,
        body,
        example="python jobs/score_hosts.py --config local_sample/config.toml",
        check_inputs=inputs,
    )


if __name__ == "__main__":
    sys.exit(main())
