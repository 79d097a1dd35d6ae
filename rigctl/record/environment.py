"""What the run file says of the conditions of a run: how it ended, versions, hidden truth, and logs in time."""

from collections.abc import Mapping
from typing import Any

from rigctl.record.conditions import Log, logs
from rigctl.record.hdf import put_group, put_log, put_values
from rigctl.record.run import Run
from rigctl.record.variables import Variable


def put_environment(entry: Any, run: Run) -> None:
    """Write `/entry/environment`."""
    end: Mapping[str, Any] = run.end or {}
    facts = {
        "simulated": run.header.is_simulated,
        "run_status": run.status,
        "exit_code": end.get("code"),
        "why": end.get("why", ""),
        "seed": run.header.seed,
    }
    environment = put_values(entry, "environment", facts)
    put_values(environment, "versions", run.header.versions)
    if run.header.truth:
        put_values(environment, "truth", run.header.truth)
    _put_logs(environment, run)


def _put_logs(parent: Any, run: Run) -> None:
    found = logs(run)
    if not found:
        return
    group = put_group(parent, "logs", "NXcollection")
    for log in found:
        put_log(group, log.name, *_variables(log, run))


def _variables(log: Log, run: Run) -> tuple[Variable, Variable]:
    meaning = {"units": log.units, "long_name": f"{log.role}, {log.quantity}"}
    return (
        Variable("time", ("time",), log.times_s, {"units": "s", "start": run.header.start.isoformat()}),
        Variable("value", ("time",), log.values, meaning),
    )
