"""How an attempt ended, for whoever cannot see its exit status, as on YARN in cluster mode."""

from dataclasses import dataclass

from sparkrank.places import Place
from sparkrank.publish.attempts import outcome_place
from sparkrank.publish.entries import to_json

STATUS_NAMES = {
    0: "done",
    1: "failed",
    2: "wrong arguments or configuration",
    3: "input refused",
    4: "not converged",
    5: "run conflict",
    6: "held",
    130: "interrupted",
}
"""The exit statuses and what each is called."""


@dataclass(frozen=True, kw_only=True)
class Outcome:
    """The end of one attempt. `message` is the line on standard error, empty when done; `details` is the
    traceback of what nobody expected, else empty."""

    run_id: str
    attempt_id: str
    job: str
    exit_status: int
    message: str
    started_at: str
    finished_at: str
    details: str = ""


def write_outcome(output: Place, outcome: Outcome) -> None:
    """Write the outcome to a file of its own. It needs no lock: no other attempt has its name."""
    data = {
        "run_id": outcome.run_id,
        "attempt": outcome.attempt_id,
        "job": outcome.job,
        "exit_status": outcome.exit_status,
        "status": STATUS_NAMES.get(outcome.exit_status, "failed"),
        "message": outcome.message,
        "started_at": outcome.started_at,
        "finished_at": outcome.finished_at,
        "details": outcome.details,
    }
    outcome_place(output, outcome.run_id, outcome.attempt_id).write_bytes(to_json(data))
