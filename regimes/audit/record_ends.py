"""Threat: records that end early, and sooner for pairs that drift apart."""

import math
from dataclasses import replace

import numpy as np
from scipy.stats import t as student

from regimes.audit.endings import Endings, early_ends, endings
from regimes.audit.record import Finding
from regimes.audit.subject import Subject, verdict_changes
from regimes.curves import exit_statistics
from regimes.verdict.digits import km

LEVEL = 0.02  # two-sided, of the score test
MOST_LOST = 1.0 / 3.0  # share of the passages from a separation that early ends may cut short; common practice
_LEAST_INTERVALS = 3.0 - 1e-9  # fewer cannot be fitted


def record_ends(subject: Subject) -> Finding:
    r"""Exits lost to records that end, and whether records end sooner, or later, where pairs are far apart.

    .. math:: h(t, r) = h_0(t)\, r^\beta, \qquad z = U(\beta = 0) / \mathrm{se}

    Flag: abs(z) beyond the 99 % point of Student's t with as many degrees of freedom as clusters with a lost pair, less
    one. `size` is 2^beta. Ends that do not depend on separation are allowed for by counting time at risk and crediting
    unfinished passages; where they do, the fit is repeated below the separation from which on more than a third of the
    passages is cut short by an early end.

    Parameters
    ----------
    subject : Subject

    Returns
    -------
    Finding

    References
    ----------
    Cox (1972) J. R. Stat. Soc. B 34, 187; Lin & Wei (1989) J. Am. Stat. Assoc. 84, 1074; for ends that carry
    information Kalbfleisch & Prentice (2002) The Statistical Analysis of Failure Time Data (from memory).
    """
    found = endings(subject.tracks, subject.pairs)
    flag = abs(found.z) > student.isf(0.5 * LEVEL, found.clusters - 1) if math.isfinite(found.z) else False
    where = _thin_from(subject)
    changes = False
    if flag and where is not None:
        changes = verdict_changes(subject.fit, _fit_below(subject, where))
    return Finding(
        "record_ends",
        bool(flag),
        found.growth if math.isfinite(found.z) else math.nan,
        "factor of the rate at which records end early for each doubling of separation",
        (where, subject.resolved[1]) if flag and where is not None else None,
        changes,
        " ".join([_how_many(found), _lost(subject), *_dependence(found, bool(flag), where, changes)]),
    )


def _thin_from(subject: Subject) -> float | None:
    """Lowest resolved separation [m] at which early ends cut short more of the passages than `MOST_LOST`."""
    over = np.flatnonzero(_cut_share(subject) > MOST_LOST)
    return float(subject.fit.rates.likelihood.thresholds[over[0]]) if over.size else None


def _cut_share(subject: Subject) -> np.ndarray:
    """Share of the passages of each resolved interval that an early end cuts short, over three neighbours."""
    everything = subject.fit.rates.everything
    early = subject.pairs.select(early_ends(subject.tracks, subject.pairs))
    cut = subject.fit.rates.resolved.intervals
    if early.n_pair == 0:
        return np.zeros(everything.separation[cut].size)
    lost = exit_statistics(subject.tracks, early, everything.thresholds).censored[cut].astype(float)
    begun = everything.passages[cut].astype(float)
    window = np.ones(3)
    return np.convolve(lost, window, "same") / np.maximum(np.convolve(begun, window, "same"), 1.0)


def _fit_below(subject: Subject, where: float):
    low = subject.resolved[0]
    if where < low * subject.options.ratio**_LEAST_INTERVALS:
        return None
    return subject.refit(options=replace(subject.options, limits=(low, where)))


def _how_many(found: Endings) -> str:
    if found.lost == 0:
        return f"Records that end early lose exits, but all {found.planned} pairs last as long as the survey."
    return (
        f"Records that end early lose exits: {found.lost} of {found.lost + found.planned} pairs end before the survey "
        "does."
    )


def _lost(subject: Subject) -> str:
    everything, cut = subject.fit.rates.everything, subject.fit.rates.resolved.intervals
    exact = subject.fit.rates.credited[:, cut]
    exits, risk = everything.weight @ exact, everything.weight @ everything.time_at_risk[:, cut]
    passages, unfinished = int(everything.passages[cut].sum()), int(everything.censored[cut].sum())
    good = (exits > 0) & (risk > 0) & np.isfinite(everything.textbook_rate[cut])
    text = f"{unfinished} of {passages} passages between resolved separations are not finished"
    if not np.any(good):
        return text + "."
    ratio = np.full(exits.size, np.nan)
    ratio[good] = (everything.textbook_rate[cut] * risk)[good] / (everything.log_ratio[cut] * exits)[good]
    worst = int(np.nanargmax(np.abs(np.log(np.where(good, ratio, 1.0)))))
    return (
        f"{text}; from finished ones alone the exponent would be up to a factor {ratio[worst]:.2g} off (at "
        f"{km(everything.thresholds[cut][worst])} km), and time at risk with credit for the others allows for that as "
        "long as ends do not depend on separation."
    )


def _dependence(found: Endings, flag: bool, where: float | None, changes: bool) -> list[str]:
    if not math.isfinite(found.z):
        return [] if found.lost == 0 else ["Too few clusters lost a pair to tell whether their ends depend on it."]
    sense = "sooner" if found.z > 0 else "later"
    how = f"a factor {found.growth:.2g} for each doubling of separation, z = {found.z:.1f}"
    if not math.isfinite(found.growth):
        how = f"z = {found.z:.1f}"
    if not flag:
        return [f"They do not beyond chance (rate of early ends: {how}), and the verdict stands."]
    text = f"But records end {sense} where pairs are farther apart than others of their age ({how})"
    if where is None:
        return [
            f"{text}; early ends nowhere cut short over a third of the passages, and the verdict stands.",
            "Find out why contact is lost, and quote the verdict for pairs that stay in contact.",
        ]
    verdict = "the verdict changes" if changes else "the verdict is the same"
    return [
        f"{text}: from {km(where)} km on early ends cut short over a third of the passages, and with those "
        f"separations left out {verdict}.",
        "Find out why contact is lost, and quote nothing beyond that separation.",
    ]
