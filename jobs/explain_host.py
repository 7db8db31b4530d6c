"""Why named hosts of a finished run score as they do, listed or not: in words, and as `explained_hosts`."""

import argparse
import sys
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

sys.path.insert(0, str(Path(__file__).resolve().parent.parent))

from sparkrank import explaining, stages
from sparkrank.entry import JobContext, run_job

if TYPE_CHECKING:
    from pyspark.sql import SparkSession


def _add_arguments(parser: argparse.ArgumentParser) -> None:
    parser.add_argument(
        "--host", metavar="NAME", action="append", required=True, help="a host or URL; may be repeated"
    )


def main(argv: Sequence[str] | None = None, session: "SparkSession | None" = None) -> int:
    """Explain hosts; the exit status."""
    inputs = stages.InputCheck()

    def body(context: JobContext) -> None:
        hosts = explaining.asked_hosts(context, inputs.checked)
        for text in explaining.explain(context, inputs.checked, hosts):
            print(text, end="\n\n")

    return run_job(
        "explain_host",
        __doc__ or "",
        argv,
        session,
        body,
        example="python jobs/explain_host.py --config local_sample/config.toml --host quay.example",
        check_inputs=inputs,
        add_arguments=_add_arguments,
    )


if __name__ == "__main__":
    sys.exit(main())
