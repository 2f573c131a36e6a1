"""The sampling interval: separations that pairs leave faster than they are seen."""

from dataclasses import replace

import numpy as np
from scipy.stats import t as student

from regimes.audit.levels import LEAST, WINDOW, Shift, level, shifts
from regimes.audit.record import Finding
from regimes.audit.subject import Subject, verdict_changes
from regimes.audit.thinning import thinned
from regimes.audit.words import length, upheld
from regimes.curves import Curve
from regimes.curves.resolution import FREED, MEMORY
from regimes.units import DAY, HOUR
from regimes.verdict.digits import listed

SHARE = 0.05  # of exits within one interval, beyond which it matters
_UNLIKELY = 0.01  # one-sided probability at which the share is taken to exceed it
_RATIOS = (1.2, 2.0**0.5, 2.0)
_MOVED = 0.05  # least change of a level that is told


def sampling_interval(subject: Subject) -> Finding:
    r"""Exits within one sampling interval, and what fewer fixes and other ratios of thresholds would give.

    .. math:: z_w = \frac{\sum_{n \in w} E^0_n}{\sum_{n \in w} E_n}, \qquad \lambda_{cap} = \frac{\ln\rho}{\Delta t}

    E0 are exits whose start falls on the same fix, w windows of a factor 4 of separation.

    Parameters
    ----------
    subject : Subject

    Returns
    -------
    Finding
        Flagged where the one-sided 99 % bound of z, over clusters, exceeds 5 % in a window between twice the start
        separations and the highest resolved one. The verdict changes if it is another one with the resolved
        separations of such windows left out.

    Notes
    -----
    Dropping such exits, as is often done, lowers rates by 10 to 61 % at dt / T = 0.1 (simulated); counting them as here
    leaves no bias in motion without memory, but motion between fixes remains unseen. Levels from every second and
    fourth fix, and from ratios 1.2, sqrt 2 and 2 corrected to ratio 1 in closed form (see `Level`), are compared window
    by window with the errors of their differences; beyond chance means 1 % two-sided in one window of several.

    References
    ----------
    Haza et al. (2008) Ocean Modelling 22, 48, on ratios; Boffetta & Sokolov (2002) Phys. Rev. Lett. 88, 094501, on
    exit times.
    """
    share, reached = _within_one_interval(subject)
    low = subject.resolved[0]
    fits = [subject.refit(*thinned(subject.tracks, subject.pairs, n)) for n in (2, 4)]
    allowed = subject.fit
    if reached is not None and reached[1] > low:
        rest = None if subject.options.limits is None else subject.options.limits[1]
        limits = (reached[1], rest or float(subject.fit.rates.everything.thresholds[-1]))
        allowed = subject.refit(options=replace(subject.options, limits=limits)) if limits[0] < limits[1] else None
    changes = verdict_changes(subject.fit, allowed)
    text = " ".join(
        (
            _cap(subject, share, reached),
            _counted_otherwise(subject),
            _trial(subject, allowed, fits),
            _advice(subject, share, reached, changes),
        )
    )
    measure = "largest share of exits within one sampling interval"
    return Finding("sampling_interval", reached is not None, share, measure, reached, changes, text)


def _within_one_interval(subject: Subject) -> tuple[float, tuple[float, float] | None]:
    """Largest share of any window, and the separations over which it exceeds 5 % beyond chance."""
    statistics = subject.fit.rates.everything
    r, n = statistics.separation, max(1, round(np.log(WINDOW) / float(statistics.log_ratio[0])))
    used = np.flatnonzero((r >= _lowest(subject)) & (r < subject.resolved[1]))
    largest, hit = float("nan"), []
    for window in (used[i : i + n] for i in range(max(used.size - n + 1, 1))):
        exits, at_once = (x[:, window].sum(axis=1, keepdims=True) for x in (statistics.exits, statistics.at_once))
        if statistics.weight @ exits[:, 0] < LEAST:
            continue
        curve = Curve("share", "separation", r[window[:1]], at_once, exits, statistics.weight, "1")
        value, clusters = float(curve.value[0]), int(curve.n_cluster[0])
        largest = float(np.nanmax([largest, value]))
        error = float(curve.standard_error[0])
        if clusters >= 3 and value - student.isf(_UNLIKELY, clusters - 1) * error > SHARE:
            hit.append((float(r[window[0]]), float(statistics.thresholds[window[-1] + 1])))
    return largest, (hit[0][0], hit[-1][1]) if hit else None


def _cap(subject: Subject, share: float, reached) -> str:
    statistics = subject.fit.rates.everything
    exits, risk = statistics.weight @ subject.fit.rates.credited, statistics.weight @ statistics.time_at_risk
    counted = (statistics.weight @ statistics.exits >= LEAST / 4) & (exits > 0) & (risk > 0)
    counted &= statistics.separation >= _lowest(subject)
    part = np.where(counted, exits / np.where(risk > 0, risk, np.inf), 0.0) * statistics.step
    at = int(np.argmax(part))
    cap = float(statistics.log_ratio[0]) / statistics.step * DAY
    text = (
        f"Fixes every {statistics.step / HOUR:.3g} h show a pair leave a threshold at {cap:.2g} per day at most; the "
        f"largest exponent is {100 * part[at]:.0f} % of that, at {length(statistics.separation[at])}, "
    )
    if np.isnan(share):
        return text + "and exits are too few to say how many fall within one sampling interval."
    if reached is None:
        return (
            text + f"and {f'at most {100 * share:.2g} %' if share else 'none'} of the exits fall within one interval."
        )
    where = f"from {length(reached[0])} to {length(reached[1])}"
    return text + f"and up to {100 * share:.2g} % of the exits fall within one interval ({where})."


def _counted_otherwise(subject: Subject) -> str:
    """What thinning and other ratios change, in words."""
    rates = subject.fit.rates
    thresholds, ends = rates.everything.thresholds, (_lowest(subject), subject.resolved[1])
    base = level(subject.tracks, rates.pairs, rates.pairs, thresholds)
    if base is None:
        return "Exits are too few to compare with fewer fixes or other ratios."
    found = {}
    for every, name in ((2, "every second fix"), (4, "every fourth fix")):
        other = level(*thinned(subject.tracks, rates.pairs, every), rates.pairs, thresholds)
        found[name] = [] if other is None else shifts(base, other, *ends)
    name = "other ratios of thresholds (1.2 to 2)"
    found[name] = []
    for ratio in (r for r in _RATIOS if abs(r / subject.options.ratio - 1.0) > 1e-6):
        n = int(np.log(thresholds[-1] / thresholds[0]) / np.log(ratio) + 1e-6)
        other = level(subject.tracks, rates.pairs, rates.pairs, thresholds[0] * ratio ** np.arange(n + 1))
        found[name] += [] if other is None else shifts(base, other, *ends)
    return _in_words(found)


def _in_words(found: dict[str, list[Shift]]) -> str:
    compared = {name: some for name, some in found.items() if some}
    if not compared:
        return "Exits are too few to compare with fewer fixes or other ratios."
    moved = {name: [s for s in some if s.beyond and abs(s.change) > _MOVED] for name, some in compared.items()}
    said = []
    still = [name for name, some in moved.items() if not some]
    if still:
        said.append(f"with {listed(still)} rates stay within {100 * _MOVED:.0f} % or their errors")
    for name, some in moved.items():
        if some:
            most = max(some, key=lambda s: abs(s.change))
            change = f"{100 * np.expm1(most.change):+.0f} % ({length(most.low)} to {length(most.high)})"
            said.append(f"with {name} they change by up to {change}, beyond their errors")
    text = "; ".join(said)
    return f"{text[0].upper()}{text[1:]}."


def _lowest(subject: Subject) -> float:
    """Lowest separation at which exits count here: free of the memory of the start, or resolved [m]."""
    start = MEMORY * float(np.quantile(subject.pairs.start_separation, FREED))
    return min(start, subject.resolved[0]) * (1.0 - 1e-9)


def _trial(subject: Subject, allowed, fits) -> str:
    first = "The verdict"
    if allowed is not subject.fit:
        changes = verdict_changes(subject.fit, allowed)
        left = f"instead of {upheld(subject.fit)}" if changes else "as before"
        first = f"Without those separations {upheld(allowed)} is upheld, {left}; the verdict"
    same = [not verdict_changes(subject.fit, fit) for fit in fits]
    if all(same):
        return f"{first} stays with every second and every fourth fix."
    worst = "every second fix" if not same[0] else "every fourth fix"
    return f"{first} is another one with {worst} alone: {upheld(fits[same.index(False)])}."


def _advice(subject: Subject, share: float, reached, changes: bool) -> str:
    if reached is None:
        return "Nothing need be done." if share < SHARE else "More frequent fixes would make sure."
    if reached[1] <= subject.resolved[0]:
        return "Those separations are already left out; only more frequent fixes would resolve them."
    if changes:
        return "Use more frequent fixes, and rest no regime on those separations."
    return "More frequent fixes would resolve those separations; no regime rests on them alone."
