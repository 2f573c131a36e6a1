"""Simulating every campaign of every design, on several cores, in any order, with the same result."""

import multiprocessing
import time
from collections.abc import Callable, Iterator
from concurrent.futures import ProcessPoolExecutor, as_completed
from dataclasses import dataclass

import numpy as np

from regimes.cases import Planned
from regimes.fitting.options import Options
from regimes.interrupts import deaf
from regimes.plan.aim import Target
from regimes.plan.design import Point, layout_of, points_of
from regimes.plan.judge import Judged, judged
from regimes.plan.progress import Progress
from regimes.plan.summary import Summary, summary_of
from regimes.plan.truth import Truth
from regimes.synthetic.campaign import Layout, campaign
from regimes.theory.kernel import Kernel

SAVE_EVERY = 5.0  # s
_STREAM = 4

Told = Callable[[str, int, int], None]


@dataclass(frozen=True, slots=True)
class Work:
    """One campaign to be made, fitted and judged.

    Parameters
    ----------
    point : Point
    number : int
    layout : Layout
    kernel : Kernel
    target : Target
    options : Options
        Of the fit, with the seed of the campaign.
    """

    point: Point
    number: int
    layout: Layout
    kernel: Kernel
    target: Target
    options: Options


def simulate_plan(
    planned: Planned, truth: Truth, progress: Progress, jobs: int = 1, told: Told | None = None
) -> tuple[Summary, ...]:
    """Simulate and judge every campaign that is not known yet.

    Parameters
    ----------
    planned : Planned
    truth : Truth
    progress : Progress
        Campaigns that are known; new ones are added and saved, also on an interruption.
    jobs : int
        Processes.
    told : callable, optional
        Called with (stage, done, total).

    Returns
    -------
    tuple of Summary
        One a design, in the order of `points_of`. Every campaign has a seed of its own, made of the seed of the plan,
        its design and its number: neither the order nor an interruption nor other designs change it.

    Raises
    ------
    DataError
        If no kernel can be drawn.
    """
    plan = planned.plan
    missing = _missing(planned, truth, progress)
    total = plan.campaigns * len(points_of(plan))
    done = total - len(missing)
    saved = time.monotonic()
    if told is not None:
        told("campaigns", done, total)
    try:
        for work, found in _results(missing, jobs):
            progress.add(work.point.key, work.number, found)
            done += 1
            if told is not None:
                told("campaigns", done, total)
            if time.monotonic() - saved > SAVE_EVERY:
                progress.save()
                saved = time.monotonic()
    finally:
        progress.save()
    return tuple(
        summary_of(point, [progress.find(point.key, number) for number in range(plan.campaigns)])
        for point in points_of(plan)
    )


def perform(work: Work) -> Judged:
    """One campaign from its seed to what it shows."""
    seed = np.random.SeedSequence([work.options.seed, _STREAM])  # the fit has a stream of its own
    return judged(*campaign(work.kernel, work.layout, seed), work.kernel, work.target, work.options)


def _missing(planned: Planned, truth: Truth, progress: Progress) -> list[Work]:
    """Campaigns that are not known yet, number by number, so that all designs grow together."""
    plan, curves, models = planned.plan, planned.curves, planned.models
    found = []
    for number in range(plan.campaigns):
        wanted = [p for p in points_of(plan) if progress.find(p.key, number) is None]
        kernel = truth.kernel(number) if wanted else None
        for point in wanted:
            name = [planned.seed, _STREAM, point.releases, round(1000.0 * point.interval), number]
            options = Options(
                ratio=curves.separation_ratio,
                limits=curves.separations,
                regimes=models.regimes,
                most_transitions=models.most_transitions,
                seed=int(np.random.SeedSequence(name).generate_state(1)[0]),
            )
            found.append(Work(point, number, layout_of(plan, point), kernel, truth.target, options))
    return found


def _results(missing: list[Work], jobs: int) -> Iterator[tuple[Work, Judged]]:
    """Each campaign as soon as it is done; on an interruption those that are under way come still."""
    if jobs == 1 or len(missing) < 2:
        yield from ((work, perform(work)) for work in missing)
        return
    spawn = multiprocessing.get_context("spawn")  # a copy of a process with threads may hang
    with ProcessPoolExecutor(min(jobs, len(missing)), mp_context=spawn) as pool:
        with deaf():
            futures = {pool.submit(perform, work): work for work in missing}
        try:
            while futures:
                future = next(as_completed(futures))
                yield futures.pop(future), future.result()
        except KeyboardInterrupt:
            pool.shutdown(cancel_futures=True)
            yield from ((work, f.result()) for f, work in futures.items() if f.done() and not f.cancelled())
            raise
        finally:
            pool.shutdown(cancel_futures=True)
