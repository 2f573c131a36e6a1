"""Runs side by side, each in a process of its own: one that fails or dies leaves the others alone."""

import multiprocessing
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from multiprocessing import connection
from multiprocessing.process import BaseProcess

from regimes.batch.earlier import kept
from regimes.batch.outcome import Outcome
from regimes.batch.task import Task
from regimes.batch.worker import work
from regimes.interrupts import deaf

PATIENCE = 60.0  # s for a report that is being written when the runs are interrupted
NOT_RUN = "interrupted before its report was written"

Told = Callable[[Outcome], None]


@dataclass(frozen=True, slots=True)
class _Run:
    task: Task
    process: BaseProcess
    pipe: connection.Connection


def run_all(tasks: Sequence[Task], jobs: int, again: bool = False, told: Told | None = None) -> tuple[Outcome, ...]:
    """Run every task, as many at a time as there are jobs.

    Parameters
    ----------
    tasks : sequence of Task
    jobs : int
        Cores to use: one process each, with more threads where there are fewer tasks.
    again : bool
        Also where a report of the same run is there already.
    told : callable, optional
        Called with each outcome as soon as it is known.

    Returns
    -------
    tuple of Outcome
        In the order of the tasks. After an interruption (Ctrl-C) those that have no report yet are "not run";
        reports that are there are complete.
    """
    found: dict[int, Outcome] = {}
    running: dict[int, _Run] = {}

    def settle(i: int, outcome: Outcome) -> None:
        found[i] = outcome
        if told is not None:
            told(outcome)

    try:
        waiting = []
        for i, task in enumerate(tasks):
            outcome = None if again else kept(task)
            waiting.append(i) if outcome is None else settle(i, outcome)
        side_by_side = max(1, min(jobs, len(waiting)))
        while waiting or running:
            while waiting and len(running) < side_by_side:
                i = waiting.pop(0)
                running[i] = _start(tasks[i], max(1, jobs // side_by_side))
            connection.wait([run.process.sentinel for run in running.values()])
            for i in [i for i, run in running.items() if not run.process.is_alive()]:
                settle(i, _ended(running.pop(i)))
    except KeyboardInterrupt:
        _stop(running.values())
        for i, run in running.items():
            outcome = _answer(run)
            if outcome is not None:
                settle(i, outcome)
    return tuple(found.get(i, Outcome(task, "not run", 0, NOT_RUN)) for i, task in enumerate(tasks))


def _start(task: Task, threads: int) -> _Run:
    spawn = multiprocessing.get_context("spawn")  # a copy of a process with threads may hang
    receive, send = spawn.Pipe(duplex=False)
    process = spawn.Process(target=work, args=(task, threads, send), daemon=True)
    with deaf():
        process.start()
    send.close()
    return _Run(task, process, receive)


def _ended(run: _Run) -> Outcome:
    """The outcome of a process that has ended by itself."""
    run.process.join()
    code = run.process.exitcode
    words = f"its process ended with code {code} before it could answer (out of memory?); run it alone"
    return _answer(run) or Outcome(run.task, "failed", 1, words)


def _answer(run: _Run) -> Outcome | None:
    """What a process that is gone has left in its pipe."""
    try:
        return run.pipe.recv()
    except EOFError:
        return None


def _stop(runs) -> None:
    """End processes; one that is writing its report finishes first."""
    for run in runs:
        run.process.terminate()
    for run in runs:
        run.process.join(PATIENCE)
        if run.process.is_alive():
            run.process.kill()
            run.process.join()
