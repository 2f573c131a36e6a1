"""Several cases at once: side by side in processes, a folder each, and one page over all of them."""

from regimes.batch.outcome import Outcome, worst_code
from regimes.batch.overview import check_overview, write_overview
from regimes.batch.processes import run_all
from regimes.batch.task import Task, tasks_of

__all__ = ["Outcome", "Task", "check_overview", "run_all", "tasks_of", "worst_code", "write_overview"]
