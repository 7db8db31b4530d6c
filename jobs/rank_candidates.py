"""Scored hosts → the candidates for review, in order, with cautions: `spam_candidates`, and the manifest."""

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
    """Rank the candidates of a scored run; the exit status."""
    inputs = stages.InputCheck()

    def body(context: JobContext) -> None:
        if stages.open_run(context, inputs.checked) is None:
            scored = stages.scored_before(context, inputs.checked)
            ranked = ranking.rank(context, inputs.checked, scored)
            stages.conclude(context, inputs.checked, scored, ranked)

    return run_job(
        "rank_candidates",
        __doc__ or "",
        argv,
        session,
        body,
        example="python jobs/rank_candidates.py --config local_sample/config.toml",
        check_inputs=inputs,
    )


if __name__ == "__main__":
    sys.exit(main())
