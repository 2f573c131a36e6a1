"""A plan from its case file to its answer."""

from pathlib import Path

from regimes.cases import Case, Planned
from regimes.errors import CaseError, DataError
from regimes.fitting.quick import QuickFit, quick_fit
from regimes.fixes.reading import sha256_of
from regimes.pipeline.origin import case_sha256, versions
from regimes.pipeline.run import Progress as Told
from regimes.pipeline.run import options_of
from regimes.pipeline.survey import pairs_of, read_tracks
from regimes.plan import (
    FILE,
    Plan,
    Progress,
    drawn_truth,
    given_truth,
    points_of,
    progress_key,
    simulate_plan,
    target_of,
)


def plan_survey(
    planned: Planned, case: Case | None, folder: Path | None = None, jobs: int = 1, told: Told | None = None
) -> Plan:
    """Simulate the campaigns of a plan and tell which design reaches its aim.

    Parameters
    ----------
    planned : Planned
    case : Case or None
        Whose data the kernel is drawn from; None where the plan has one.
    folder : Path, optional
        Where finished campaigns are kept, for an interrupted plan to go on from.
    jobs : int
        Processes.
    told : callable, optional
        Called with (stage, done, total).

    Returns
    -------
    Plan

    Raises
    ------
    CaseError
        If the aim cannot be reached by any data, or its regimes do not compete.
    DataError
        If the data are unusable, or all but exclude what is aimed at.
    """
    plan = planned.plan
    target = target_of(plan.aim, plan.start_separation, plan.position_error_m)
    for name in (target.regime, target.against):
        if name is not None and name not in planned.models.regimes:
            raise CaseError(f"plan.aim: got {name}, which models.regimes leaves out; must compete; add it there")
    data, choices = "", ""
    if case is None:
        truth = given_truth(plan.kernel, target, planned.seed)
    else:
        data, choices = sha256_of(Path(case.observations.path)), case_sha256(case)
        truth = drawn_truth(_fit(case), target, planned.seed)
    key = progress_key(planned, {"versions": versions(), "input": data, "case": choices})
    progress = Progress(None if folder is None else folder / FILE, key)
    before = sum(progress.find(p.key, i) is not None for p in points_of(plan) for i in range(plan.campaigns))
    summaries = simulate_plan(planned, truth, progress, jobs, told)
    return Plan(planned, target, versions(), data, choices, truth.probability, summaries, before)


def _fit(case: Case) -> QuickFit:
    _, tracks = read_tracks(case)
    pairs, missing = pairs_of(case, tracks)
    if pairs is None:
        raise DataError(f"plan: no kernel can be drawn, for there is no pair: {missing}; or give [plan.kernel]")
    return quick_fit(tracks, pairs, options_of(case, case.seed, 1))
