"""A plan with its answer."""

from dataclasses import dataclass

from regimes.cases import Planned
from regimes.plan.aim import Target
from regimes.plan.summary import Summary


@dataclass(frozen=True, slots=True)
class Plan:
    """Every design, what its campaigns showed, and the smallest one that reaches the aim.

    Parameters
    ----------
    planned : Planned
        What was asked.
    target : Target
    versions : dict of str to str
        Of this package, Python and the libraries that the numbers depend on.
    input_sha256, case_sha256 : str
        Of the data that the kernels were drawn from, and of the choices of their case; empty for a given kernel.
    probability : float
        Of the aimed-at regime by the data; 1 for a given kernel.
    summaries : tuple of Summary
        Fix intervals in turn, the number of releases rising within each.
    kept : int
        Campaigns that an earlier run had finished.
    """

    planned: Planned
    target: Target
    versions: dict[str, str]
    input_sha256: str
    case_sha256: str
    probability: float
    summaries: tuple[Summary, ...]
    kept: int

    @property
    def best(self) -> Summary | None:
        """The design with the fewest releases, then the longest fix interval, that reaches the aim; or None."""
        enough = [s for s in self.summaries if s.told.value >= self.target.probability]
        return min(enough, key=lambda s: (s.point.releases, -s.point.interval), default=None)
