"""All threats, one after the other."""

import math
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor

from regimes.audit.convergence import convergence
from regimes.audit.independence import independence
from regimes.audit.oscillation import oscillation
from regimes.audit.pairs import pairs
from regimes.audit.position_error import position_error
from regimes.audit.range import range_width
from regimes.audit.record_ends import record_ends
from regimes.audit.sampling_interval import sampling_interval
from regimes.audit.shear import shear
from regimes.audit.subject import Subject
from regimes.errors import RegimesError
from regimes.verdict.finding import THREATS, Finding

Progress = Callable[[str, int, int], None]

ROWS: dict[str, Callable[[Subject], Finding]] = {
    "position_error": position_error,
    "sampling_interval": sampling_interval,
    "oscillation": oscillation,
    "shear": shear,
    "pairs": pairs,
    "independence": independence,
    "record_ends": record_ends,
    "range": range_width,
    "convergence": convergence,
}


def audit(subject: Subject, progress: Progress | None = None, jobs: int = 1) -> tuple[Finding, ...]:
    """What could fake the result: every threat sized on the data.

    Parameters
    ----------
    subject : Subject
    progress : callable, optional
        Called with (stage, done, total).
    jobs : int
        Threads; findings do not depend on it.

    Returns
    -------
    tuple of Finding
        In the order of `THREATS`; a row that the data do not allow says why and raises no flag.
    """
    threats = [t for t in THREATS if t in ROWS]
    found = []
    with ThreadPoolExecutor(jobs) as pool:
        for i, finding in enumerate(pool.map(lambda threat: _row(threat, subject), threats)):
            found.append(finding)
            if progress is not None:
                progress("audit", i + 1, len(threats))
    return tuple(found)


def _row(threat: str, subject: Subject) -> Finding:
    try:
        return ROWS[threat](subject)
    except RegimesError as error:
        text = f"Could not be computed for these data: {error}"
        return Finding(threat, False, math.nan, "not measured", None, False, text if text.endswith(".") else f"{text}.")
