"""What became of a run."""

from collections.abc import Iterable
from dataclasses import dataclass

from regimes.batch.task import Task

STATES = ("done", "kept", "failed", "not run")
# From bad to worse: done, no convergence, unusable data, wrong case or argument, a defect of the program.
_SEVERITY = (0, 4, 3, 2, 1)


@dataclass(frozen=True, slots=True)
class Outcome:
    """What became of a run.

    Parameters
    ----------
    task : Task
    state : str
        "done"; "kept", where a report of the same run was there already; "failed"; or "not run".
    code : int
        Exit code that this run alone would have had.
    message : str
        The sentence of the verdict, or what went wrong.
    """

    task: Task
    state: str
    code: int
    message: str

    @property
    def reported(self) -> bool:
        """Whether its folder holds its report."""
        return self.state in ("done", "kept")


def worst_code(outcomes: Iterable[Outcome]) -> int:
    """The exit code of all runs together; 0 done, 4 no convergence, 3 data, 2 case, 1 defect, from bad to worse."""
    return max((outcome.code for outcome in outcomes), key=_SEVERITY.index, default=0)
