"""Virtual deployments: the larger data set taken as the smaller one was."""

from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from regimes.compare.common import Side
from regimes.compare.drawing import Pools
from regimes.compare.launches import Launch, launches_of
from regimes.compare.matching import FACTOR, LEAST, Choices, Near, choices_of
from regimes.compare.taking import Part, missing_share, missing_steps, some_gaps, taken
from regimes.errors import DataError
from regimes.pairs import Pairs
from regimes.tracks import Tracks
from regimes.units import DAY

LEAST_TIMES = 3  # as many launches in the larger set as in the smaller one, or more
LEAST_EFFECTIVE = 2.0  # the same of those that are drawn, by how often each is
_LEAST_LENGTH = 0.9
MOST_SAMPLES = 15_000_000  # of the larger set as a whole, positions; more would fill the memory


@dataclass(frozen=True, slots=True)
class Plan:
    """How virtual deployments are drawn.

    Parameters
    ----------
    small, large : Side
        On one step.
    launches : tuple of Launch
        Of the smaller set.
    reservoir : tuple of Launch
        Of the larger set.
    choices : tuple of Choices
        For each launch of the smaller set.
    horizon : int
        Steps after which every record is cut: half the launches of the larger set last so long.
    copied : float
        Share of the gaps of the smaller set that a deployment gets, beside those that its tracks have themselves.
    cautions : tuple of str
    """

    small: Side
    large: Side
    launches: tuple[Launch, ...]
    reservoir: tuple[Launch, ...]
    choices: tuple[Choices, ...]
    horizon: int
    copied: float
    cautions: tuple[str, ...]

    @property
    def position_error(self) -> float:
        """Of both sets as they are compared: the larger of the two [m]."""
        return max(self.small.tracks.position_error, self.large.tracks.position_error)

    def observed(self, rng: np.random.Generator) -> tuple[Tracks, Pairs]:
        """The smaller set as it is compared."""
        parts = [self._part(launch, launch.members, launch.begin, 1.0, rng) for launch in self.launches]
        return taken(self.small.tracks, parts, self.position_error, rng)

    def stand_ins(self, unit: int, rng: np.random.Generator) -> tuple[Tracks, Pairs]:
        """All that can stand for one launch of the smaller set, each a cluster, in the order of its choices."""
        launch, choices = self.launches[unit], self.choices[unit]
        parts = [
            self._part(launch, self.reservoir[i].members[members], self.reservoir[i].begin, self.copied, rng)
            for i, members in zip(choices.launch, choices.members, strict=True)
        ]
        return taken(self.large.tracks, parts, self.position_error, rng)

    @property
    def pools(self) -> Pools:
        """Choices by their rows: those of the smaller set come first, then the choices of each of its launches."""
        sizes = [len(self.launches), *(c.launch.size for c in self.choices)]
        start = np.cumsum(sizes)
        rows = tuple(np.arange(a, b) for a, b in pairwise(start))
        return Pools(tuple(c.launch for c in self.choices), rows, len(self.reservoir))

    def _part(self, launch: Launch, members: np.ndarray, begin: int, copied: float, rng: np.random.Generator) -> Part:
        """A launch's own records, cut at the horizon, put on other tracks with a share of its gaps."""
        n_step = np.minimum(launch.n_step, self.horizon)
        missing = tuple(
            some_gaps(missing_steps(self.small.tracks, own, launch.begin, n), copied, rng)
            for own, n in zip(launch.members, n_step, strict=True)
        )
        return Part(members, begin, n_step, missing, launch.pairs)

    def whole(self, side: Side, rng: np.random.Generator) -> tuple[Tracks, Pairs]:
        """All of one set, records cut at the horizon; of a very large set as many launches as memory allows."""
        launches = self.launches if side is self.small else self.reservoir
        samples = np.cumsum([np.minimum(u.n_step, self.horizon).sum() for u in launches])
        if samples[-1] > MOST_SAMPLES:
            keep = max(1, int(len(launches) * MOST_SAMPLES / samples[-1]))
            launches = [launches[i] for i in rng.choice(len(launches), keep, replace=False)]
        parts = []
        for u in launches:
            n_step = np.minimum(u.n_step, self.horizon)
            missing = tuple(np.empty(0, int) for _ in n_step)
            parts.append(Part(u.members, u.begin, n_step, missing, u.pairs))
        return taken(side.tracks, parts, self.position_error, rng)


def plan_of(small: Side, large: Side, near: Near, seed: int) -> Plan:
    """How deployments like those of the smaller set are drawn from the larger one.

    Raises
    ------
    DataError
        If the larger set has too few launches, or too few that are alike.
    """
    launches, late = launches_of(small.tracks, small.pairs)
    reservoir, late_large = launches_of(large.tracks, large.pairs)
    if not launches or len(reservoir) < LEAST_TIMES * len(launches):
        raise DataError(
            f"compare: got {len(reservoir)} groups that start together in {large.name} and {len(launches)} in "
            f"{small.name}; one must have {LEAST_TIMES} times as many as the other, to be sampled like it many times; "
            "use more releases, or name the column that holds them (observations.columns.release)"
        )
    most = max(u.size for u in reservoir)
    cut = [u.first(most) if u.size > most else u for u in launches]
    shrunk = sum(u.size > most for u in launches)
    usable = tuple(u for u in cut if len(u.pairs))
    horizon = int(np.median([u.n_step.max() for u in reservoir]))
    choices = choices_of((small.tracks, usable), (large.tracks, reservoir), near, horizon, seed)
    mine, theirs = (missing_share(*data, horizon) for data in ((small.tracks, usable), (large.tracks, reservoir)))
    copied = max(0.0, 1.0 - theirs / mine) if mine > 0.0 else 1.0
    cautions = _cautions(small, large, (late, late_large, shrunk), choices)
    plan = Plan(small, large, usable, reservoir, choices, horizon, copied, cautions)
    effective = plan.pools.effective
    if effective < LEAST_EFFECTIVE * len(usable):
        raise DataError(
            f"compare: got {len(reservoir)} groups in {large.name}, of which only {effective:.0f} are alike enough in "
            f"start separations, place and season to stand for the {len(usable)} of {small.name}; must be "
            f"{LEAST_EFFECTIVE:g} times as many; widen --same-place or --same-season, or start pairs as far apart"
        )
    return plan


def _cautions(small: Side, large: Side, counts: tuple[int, int, int], choices: tuple[Choices, ...]) -> tuple[str, ...]:
    late, late_large, shrunk = counts
    out = []
    for side, n in ((small, late), (large, late_large)):
        if n:
            out.append(
                f"{n} pairs of {side.name} are left out: their members are not together when their group starts."
            )
    if shrunk:
        out.append(
            f"{shrunk} groups of {small.name} are compared without some of their members: {large.name} has no group "
            "as large."
        )
    factors = np.array([c.factor for c in choices])
    wide = factors > FACTOR * (1.0 + 1e-6)
    if np.any(wide):
        out.append(
            f"For {int(wide.sum())} of {len(choices)} groups of {small.name}, fewer than {LEAST} groups of "
            f"{large.name} start with pairs as far apart within a factor {FACTOR:g}; the nearest were taken, up to a "
            f"factor {factors.max():.2g}."
        )
    return tuple(out)


def shortfall(plan: Plan, have: float, want: int) -> tuple[str, ...]:
    """A caution where virtual records end much earlier than those that they copy; pair steps of both."""
    if have >= _LEAST_LENGTH * want:
        return ()
    days = (plan.horizon - 1) * plan.large.tracks.step / DAY
    return (
        f"Records of {plan.large.name} end early: within {days:.3g} days a virtual deployment has {have / want:.0%} of "
        f"the pair days of {plan.small.name}.",
    )
