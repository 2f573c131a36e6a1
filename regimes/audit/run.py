"""All threats, one after the other."""

from collections.abc import Callable

from regimes.audit.oscillation import oscillation
from regimes.audit.pairs import pairs
from regimes.audit.position_error import position_error
from regimes.audit.record_ends import record_ends
from regimes.audit.sampling_interval import sampling_interval
from regimes.audit.shear import shear
from regimes.audit.subject import Subject
from regimes.verdict.finding import THREATS, Finding

Progress = Callable[[str, int, int], None]

ROWS: dict[str, Callable[[Subject], Finding]] = {
    "position_error": position_error,
    "sampling_interval": sampling_interval,
    "oscillation": oscillation,
    "shear": shear,
    "pairs": pairs,
    "record_ends": record_ends,
}


def audit(subject: Subject, progress: Progress | None = None) -> tuple[Finding, ...]:
    """What could fake the result: every threat sized on the data.

    Parameters
    ----------
    subject : Subject
    progress : callable, optional
        Called with (stage, done, total).

    Returns
    -------
    tuple of Finding
        In the order of `THREATS`.
    """
    found = []
    for i, threat in enumerate(t for t in THREATS if t in ROWS):
        found.append(ROWS[threat](subject))
        if progress is not None:
            progress("audit", i + 1, len(ROWS))
    return tuple(found)
