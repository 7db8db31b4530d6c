"""Edge tables and reviewed lists → all tables of a run, step by step; what is done and unchanged stays."""

import sys
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

sys.path.insert(0, str(Path(__file__).resolve().parent.parent))

from sparkrank import ranking, stages
from sparkrank.entry import JobContext, run_job

if TYPE_CHECKING:
    from pyspark.sql import SparkSession


def main(argv: Sequence[str] | None = None, session: "SparkSession | None" = None) -> int:
    """Run the whole pipeline; the exit status."""
    inputs = stages.InputCheck()

    def body(context: JobContext) -> None:
        if stages.open_run(context, inputs.checked) is None:
            scored = stages.score(context, inputs.checked)
            ranked = ranking.rank(context, inputs.checked, scored)
            stages.conclude(context, inputs.checked, scored, ranked)

    return run_job(
        "run_pipeline",
        __doc__ or "",
        argv,
        session,
        body,
        example="python jobs/run_pipeline.py --config local_sample/config.toml",
        check_inputs=inputs,
    )


if __name__ == "__main__":
    sys.exit(main())
