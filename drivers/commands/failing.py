"""What a command says when the routine that it was given fails."""

from __future__ import annotations

import sys
from collections.abc import Callable

from drivers.commands.output import deliver
from drivers.foreign.failure import RoutineFailureError
from drivers.foreign.replay import replay_name, save_replay
from drivers.point import ControlError, ResponseError
from drivers.report.data import envelope

__all__ = ["with_routine"]


def with_routine(command: str, json_file: str | None, task: Callable[[], int]) -> int:
    """Run a task that drives a routine which is not ours; its failure is a result, and one line on standard error.

    Parameters
    ----------
    command : str
    json_file : str or None
    task : callable
        Gives the exit status.

    Returns
    -------
    status : int
        That of the task; 1 where the routine failed, its increment saved for replay in the folder that the command runs in.
    """
    try:
        return task()
    except RoutineFailureError as error:
        file: str | None = replay_name(error.routine)
        file = file if save_replay(error, str(file)) else None
        kind, detail, text = error.kind, error.detail, str(error)
    except (ControlError, ResponseError) as error:
        file, kind, detail, text = None, "control", str(error), str(error)
    line = f"{text}; saved for replay in {file}" if file else text
    print("cardproof: " + " ".join(line.split()), file=sys.stderr)
    failure = {"kind": kind, "detail": detail, "message": text, "replay": file}
    return deliver(envelope(command, False, failure=failure), [], json_file)
