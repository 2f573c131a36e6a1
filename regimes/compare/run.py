"""The comparison itself, from two cases or from pairs already found."""

from collections.abc import Callable
from dataclasses import dataclass, field, replace
from pathlib import Path

from regimes.cases import Case
from regimes.compare.common import side_of
from regimes.compare.matching import Near
from regimes.compare.record import Comparison
from regimes.compare.sides import compare_sides
from regimes.errors import CaseError, DataError
from regimes.fitting import Options
from regimes.pipeline.run import options_of
from regimes.pipeline.survey import pairs_of, read_tracks

Progress = Callable[[str, int, int], None]
LEAST_DEPLOYMENTS = 99
NAMES = ("the observed case", "the model")


@dataclass(frozen=True, slots=True)
class CompareOptions:
    """Choices of a comparison.

    Parameters
    ----------
    deployments : int
        Virtual ones, 99 or more.
    near : Near
        How near in place and season groups must be to stand for one another.
    fit : Options
        Of the fits of both cases; its seed and threads are those of the comparison.

    Raises
    ------
    CaseError
        If there are too few deployments.
    """

    deployments: int = 199
    near: Near = field(default_factory=Near)
    fit: Options = field(default_factory=Options)

    def __post_init__(self) -> None:
        if self.deployments < LEAST_DEPLOYMENTS:
            raise CaseError(
                f"deployments: got {self.deployments}; must be {LEAST_DEPLOYMENTS} or more, for p-values of a few per "
                "cent to be told apart; give more"
            )


def compare(
    observed: Case, model: Case, options: CompareOptions | None = None, progress: Progress | None = None
) -> Comparison:
    """Compare two cases from their files of fixes.

    Parameters
    ----------
    observed, model : Case
        The one with more groups that start together is sampled like the other.
    options : CompareOptions, optional
        Default: ratio of separations, regimes and range of the slope of the observed case, its seed.
    progress : callable, optional
        Called with (stage, done, total).

    Returns
    -------
    Comparison

    Raises
    ------
    CaseError, DataError
    """
    options = options or CompareOptions(fit=options_of(observed, observed.seed, 1))
    found = []
    for k, case in enumerate((observed, model)):
        if progress is not None:
            progress("reading fixes", k, 2)
        fixes, tracks = read_tracks(case)
        pairs, no_pair = pairs_of(case, tracks)
        if pairs is None:
            raise DataError(f"compare: no pair in {case.name}: {no_pair}")
        found.append((case.name, tracks, pairs, fixes.source))
        del fixes
    if progress is not None:
        progress("reading fixes", 2, 2)
    sides = [side_of(name, tracks, pairs) for name, (_, tracks, pairs, _) in zip(NAMES, found, strict=True)]
    both = (sides[0][0], sides[1][0])
    result = compare_sides(both, options.deployments, options.near, options.fit, progress)
    chance = tuple(
        f"{n} chance pairs of {side.name} are left out: only groups that start together are sampled alike."
        for side, n in sides
        if n
    )
    inputs = [
        replace(known, case=name, source=Path(source.path).name, sha256=source.sha256 or "")
        for known, (name, _, _, source) in zip((result.observed, result.model), found, strict=True)
    ]
    return replace(result, observed=inputs[0], model=inputs[1], cautions=chance + result.cautions)
