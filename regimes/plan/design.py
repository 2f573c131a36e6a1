"""The designs to compare."""

from dataclasses import dataclass

from regimes.cases import PlanRules
from regimes.synthetic.campaign import Layout


@dataclass(frozen=True, slots=True)
class Point:
    """One design: how many releases, fixed how often.

    Parameters
    ----------
    releases : int
    interval : float [s]
        Between fixes.
    """

    releases: int
    interval: float

    @property
    def key(self) -> str:
        """Name under which the campaigns of this design are kept."""
        return f"{self.releases} releases, fix every {self.interval:.10g} s"


def points_of(plan: PlanRules) -> tuple[Point, ...]:
    """Every number of releases with every fix interval, the intervals in turn."""
    return tuple(Point(n, step) for step in plan.steps for n in plan.releases)


def layout_of(plan: PlanRules, point: Point) -> Layout:
    """The campaign of one design."""
    return Layout(
        releases=point.releases,
        particles=plan.particles,
        start_separation=plan.start_separation,
        step=point.interval,
        n_step=int(plan.duration / point.interval * (1.0 + 1e-12)) + 1,
        position_error=plan.position_error_m,
        loss=plan.loss,
    )
