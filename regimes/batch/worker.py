"""One run in a process of its own, which can be told to leave without harm to a report."""

import os
import signal
import threading
from multiprocessing import connection, parent_process

from regimes.batch.outcome import Outcome
from regimes.batch.task import Task
from regimes.errors import CaseError, FitError, RegimesError, defect
from regimes.pipeline import analyse
from regimes.report import check_folder, write_report

LEFT = 130  # exit code of a process that was told to leave


class Leaving:
    """Leaves the process at once when told so, until a report is being written: then there is little left to do."""

    def __init__(self) -> None:
        self._finishing = self._told = False

    def tell(self, *_details: object) -> None:
        """Leave now, unless the report is being written."""
        self._told = True
        if not self._finishing:
            os._exit(LEFT)

    def finish(self) -> None:
        """From here on the process comes to its own end."""
        self._finishing = True
        if self._told:  # told in between
            os._exit(LEFT)


def outcome_of(task: Task, threads: int, leaving: Leaving) -> Outcome:
    """Analyse and write the report; every failure becomes an outcome.

    Parameters
    ----------
    task : Task
    threads : int
    leaving : Leaving
        Asked before the writing.
    """
    try:
        if task.case is None:
            raise CaseError(task.problem)
        folder = check_folder(task.folder)
        analysis = analyse(task.case, jobs=threads, seed=task.seed)
        leaving.finish()
        write_report(analysis, folder)
    except RegimesError as error:
        return Outcome(task, "failed", error.exit_code, str(error))
    except Exception as error:  # noqa: BLE001 - one run must not stop the others
        return Outcome(task, "failed", 1, defect(error))
    return Outcome(task, "done", 0 if analysis.healthy else FitError.exit_code, analysis.sentence)


def work(task: Task, threads: int, pipe: connection.Connection) -> None:
    """What the process of a run does: the outcome goes into the pipe."""
    leaving = Leaving()
    signal.signal(signal.SIGINT, signal.SIG_IGN)  # the parent decides
    signal.signal(signal.SIGTERM, leaving.tell)
    threading.Thread(target=_follow, args=(leaving,), daemon=True).start()
    outcome = outcome_of(task, threads, leaving)
    pipe.send(outcome)
    pipe.close()


def _follow(leaving: Leaving) -> None:
    """Leave when the parent is gone."""
    parent = parent_process()
    if parent is not None:
        connection.wait([parent.sentinel])
        leaving.tell()
