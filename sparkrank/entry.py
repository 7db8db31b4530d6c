"""The frame around every job: arguments, configuration, checks, lock, session, outcome, exit status.

A job is a function from `JobContext` to nothing. Whatever goes wrong in it becomes one line on
standard error and the exit status of its kind. What can be checked without Spark is checked before.
"""

import argparse
import contextlib
import logging
import re
import sys
import time
import traceback
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, NoReturn

from sparkrank import errors
from sparkrank.config import Config, load_config
from sparkrank.errors import ConfigError, SparkrankError
from sparkrank.places import Place, resolve
from sparkrank.publish.attempts import RunFolder, new_attempt_id, utc_now
from sparkrank.publish.lock import hold_run
from sparkrank.publish.outcome import Outcome, write_outcome
from sparkrank.session import check_runtime, master_is_local, open_session, print_error
from sparkrank.shown import one_line

if TYPE_CHECKING:
    from pyspark.sql import SparkSession

_log = logging.getLogger(__name__)

INTERRUPTED = 130
"""The exit status after Ctrl-C, as shells have it: 128 and the number of the signal."""


@dataclass(kw_only=True)
class JobContext:
    """What a job works with. `spark` opens a session when first asked for, so that a job with nothing to
    do starts no JVM; a session that was passed in is used and left open."""

    config: Config
    run: RunFolder
    replace: bool
    job: str
    arguments: argparse.Namespace = field(default_factory=argparse.Namespace)
    ui: bool = False
    session: "SparkSession | None" = None
    _is_own: bool = field(default=False, init=False, repr=False)

    @property
    def spark(self) -> "SparkSession":
        """The Spark session; SparkrankError if Java or PySpark is not fit."""
        if self.session is None:
            started_seconds = time.monotonic()
            self.session = open_session(self.job, ui=self.ui)
            self._is_own = True
            _log.info("spark: session opened, %.1f s", time.monotonic() - started_seconds)
        return self.session

    def close(self) -> None:
        """Stop the session if this context opened it."""
        if self.session is not None and self._is_own:
            self.session.stop()
            self.session = None


@dataclass(frozen=True, kw_only=True)
class _Known:
    """The run of a configuration that was found good: from here on an outcome can be written."""

    config: Config
    output: Place
    attempt_id: str
    started_at: str


def run_job(
    job: str,
    description: str,
    argv: Sequence[str] | None,
    session: "SparkSession | None",
    body: Callable[[JobContext], None],
    *,
    example: str,
    check_inputs: Callable[[Config], None] | None = None,
    add_arguments: Callable[[argparse.ArgumentParser], None] | None = None,
) -> int:
    """Run a job from its arguments to its exit status; never raises for what a user can meet.

    `argv` as in argparse: None means the process's own. `session` is a running one to use, or None to
    open one when `body` asks for it. `check_inputs` looks at local inputs before Java starts.
    `example` is a command line for the help text, `add_arguments` adds the job's own arguments.
    """
    known: _Known | None = None
    debug, message, details, status = False, "", "", 0
    try:
        arguments = _parse(job, description, argv, example, add_arguments)
        debug = arguments.debug
        with _logging(quiet=arguments.quiet, debug=debug):
            config = load_config(arguments.config, arguments.set, local_master=master_is_local(session))
            known = _open_run(config)
            if check_inputs is not None:
                check_inputs(config)
            if session is None:
                check_runtime()
            _run(job, body, known, session, arguments)
    except SystemExit as end:  # argparse, after --help
        return int(end.code or 0)
    except KeyboardInterrupt:
        status, message = (
            INTERRUPTED,
            f"{job}: interrupted; run it again to go on from the last finished step",
        )
    except SparkrankError as error:
        status, message = error.exit_status, one_line_whole(str(error))
    except Exception as error:
        status, message, details = _unexpected(job, error)
    if known is None:
        message += "; add --debug for the traceback" if details and not debug else ""
    else:
        message, status = _report(job, known, status, message, details)
    if message:
        print_error(f"sparkrank: {message}")
    if details and debug:
        print_error(details)
    return status


def one_line_whole(text: str) -> str:
    """The text on one line, uncut: a refusal ends with what to do."""
    return " ".join(text.split())


class _Parser(argparse.ArgumentParser):
    """Argument errors as ConfigError, so that they leave by the same door as all others."""

    def error(self, message: str) -> NoReturn:
        raise ConfigError(f"arguments: {message}; see --help")


def _parse(
    job: str,
    description: str,
    argv: Sequence[str] | None,
    example: str,
    add_arguments: Callable[[argparse.ArgumentParser], None] | None,
) -> argparse.Namespace:
    parser = _Parser(
        prog=job,
        description=description,
        epilog=f"example: {example}",
        formatter_class=argparse.RawDescriptionHelpFormatter,
        allow_abbrev=False,
    )
    parser.add_argument("--config", metavar="FILE", help="configuration in TOML")
    parser.add_argument(
        "--set",
        metavar="SECTION.KEY=VALUE",
        action="append",
        default=[],
        help="set one value, over the file's; may be repeated",
    )
    parser.add_argument(
        "--replace",
        action="store_true",
        help="replace a run of this id made from other inputs; its older files go once the new ones count",
    )
    parser.add_argument("--ui", action="store_true", help="open Spark's web page while running")
    parser.add_argument("--quiet", action="store_true", help="warnings and errors only")
    parser.add_argument("--debug", action="store_true", help="show the traceback of an unexpected error")
    if add_arguments is not None:
        add_arguments(parser)
    return parser.parse_args(argv)


@contextlib.contextmanager
def _logging(*, quiet: bool, debug: bool) -> Iterator[None]:
    """One line a message on standard error while a job runs; other libraries' chatter stays out."""
    handler = logging.StreamHandler(sys.stderr)
    handler.setFormatter(logging.Formatter("%(asctime)s %(message)s", datefmt="%H:%M:%S"))
    logger = logging.getLogger("sparkrank")
    before = logger.level, logger.propagate
    logger.addHandler(handler)
    logger.setLevel(logging.DEBUG if debug else logging.WARNING if quiet else logging.INFO)
    logger.propagate = False
    try:
        yield
    finally:
        logger.removeHandler(handler)
        logger.setLevel(before[0])
        logger.propagate = before[1]


def _open_run(config: Config) -> _Known:
    """The run's output, made and reached; ConfigError if it cannot be."""
    output = _resolve_setting("run.output", config.run.output)
    _resolve_setting("run.work", config.run.work)
    try:
        output.make_dir()
        output.child("outcomes").make_dir()
        output.list_folders()
    except (OSError, ValueError) as error:
        raise ConfigError(
            f"run.output: expected a folder that can be written at {output}; found {one_line(error)}; "
            "choose another one or its permissions"
        ) from error
    return _Known(config=config, output=output, attempt_id=new_attempt_id(), started_at=utc_now())


def _resolve_setting(name: str, value: str) -> Place:
    try:
        return resolve(value)
    except ConfigError as error:
        raise ConfigError(f"{name}: {error}") from None


def _run(
    job: str,
    body: Callable[[JobContext], None],
    known: _Known,
    session: "SparkSession | None",
    arguments: argparse.Namespace,
) -> None:
    run_id = known.config.run.id
    with hold_run(known.output, run_id) as lock:
        run = RunFolder(output=known.output, run_id=run_id, attempt_id=known.attempt_id, lock=lock)
        context = JobContext(
            config=known.config,
            run=run,
            replace=arguments.replace,
            job=job,
            arguments=arguments,
            ui=arguments.ui,
            session=session,
        )
        try:
            body(context)
        finally:
            context.close()


def _unexpected(job: str, error: Exception) -> tuple[int, str, str]:
    """Status, line and traceback of an error that is no SparkrankError, or that one from a worker."""
    text = str(error)
    # Spark hands a worker's exception over as text; its own kind and words are in there.
    for name, words in re.findall(r"^sparkrank\.errors\.(\w+): (.+)$", text, re.MULTILINE):
        kind = getattr(errors, name, None)
        if isinstance(kind, type) and issubclass(kind, SparkrankError):
            return kind.exit_status, one_line_whole(words), ""
    details = "".join(traceback.format_exception(error))
    return 1, f"{job}: unexpected {type(error).__name__}: {one_line(error)}", details


def _report(job: str, known: _Known, status: int, message: str, details: str) -> tuple[str, int]:
    """Write the outcome; the line and status to leave with, which change if it cannot be written."""
    outcome = Outcome(
        run_id=known.config.run.id,
        attempt_id=known.attempt_id,
        job=job,
        exit_status=status,
        message=message,
        started_at=known.started_at,
        finished_at=utc_now(),
        details=details,
    )
    try:
        write_outcome(known.output, outcome)
    except (OSError, SparkrankError) as error:
        unwritten = f"outcome not written to {known.output}: {one_line(error)}"
        return (f"{message}; {unwritten}" if message else unwritten), status or 1
    if details:
        message += f"; the traceback is in {known.output}/outcomes (or add --debug)"
    return message, status
