"""Threat: a result that a few clusters carry, or clusters that are not independent of one another."""

import math

import numpy as np
from scipy.stats import norm

from regimes.audit.improbable import Improbable, improbable_pairs
from regimes.audit.influence import Influence, by_block, influence
from regimes.audit.record import Finding
from regimes.audit.shared_flow import SharedFlow, shared_flow
from regimes.audit.subject import Subject, supported, verdict_changes
from regimes.pairs import Pairs
from regimes.verdict.decide import FEW_CLUSTERS
from regimes.verdict.digits import km, listed

LEVEL = 0.02  # one-sided, of the test that near clusters separate alike
_GROWTH = 0.5  # of the mean exit time at the lowest resolved separation, over which growth is taken
_LEFT_OUT = 2  # clusters of most influence, each left out in turn
_NAMED = 3


def independence(subject: Subject) -> Finding:
    r"""How many independent clusters there are, and whether one or a few of them carry the result.

    .. math:: C_{eff} = \frac{(\sum_c E_c)^2}{\sum_c E_c^2}

    over clusters; where near ones separate alike, with their correlation, see `SharedFlow.effective`.

    Flag: fewer than six effective clusters, or growth of pairs of near clusters correlated at the same time beyond
    the 98 % point of chance (see `shared_flow`; near is the geometric middle of the resolved range). `size` is C_eff.
    The verdict is compared with those without each of the two clusters of most influence and, where near clusters
    separate alike, with blocks of about three neighbouring clusters as the independent sample.

    Parameters
    ----------
    subject : Subject

    Returns
    -------
    Finding

    References
    ----------
    Effective number: Kish (1965) Survey Sampling. Few clusters: Cameron, Gelbach & Miller (2008) Rev. Econ. Stat. 90,
    414. Pairs that share particles: Aronow, Samii & Assenova (2015) Political Analysis 23, 564.
    """
    own, unit = influence(subject), subject.pairs.cluster
    low, high = subject.resolved
    near = math.sqrt(low * high)
    likelihood = subject.fit.rates.likelihood
    passage = float(likelihood.risk[0] / likelihood.exits[0])
    flow = shared_flow(subject.tracks, subject.pairs, _GROWTH * passage, near)
    alike = bool(flow.z > norm.isf(LEVEL))
    block = by_block(subject.tracks, subject.pairs)
    kish = own.effective(unit)
    effective = flow.effective(own.sums(own.exits, unit)) if alike else kish
    few = effective < FEW_CLUSTERS
    shares = own.shares(unit)
    odd = tuple(c for c in np.argsort(-shares, kind="stable")[:_LEFT_OUT] if shares[c] > 0)
    without = [verdict_changes(subject.fit, subject.refit(pairs=_without(subject.pairs, c))) for c in odd]
    regrouped = alike and _changes_with(subject, block)
    return Finding(
        "independence",
        few or alike,
        effective,
        "effective number of independent clusters",
        subject.resolved if few or alike else None,
        any(without) or regrouped,
        " ".join(
            [
                _number(kish, effective, flow, alike, near),
                _errors(subject, own, block),
                _carried(subject, shares, odd, without),
                *_grouped(alike, regrouped),
                *_odd_pairs(improbable_pairs(subject)),
                _advice(few, alike, any(without)),
            ]
        ),
    )


def _without(pairs: Pairs, cluster: int) -> Pairs:
    """The pairs without a member in a cluster."""
    return pairs.select((pairs.cluster[pairs.first] != cluster) & (pairs.cluster[pairs.second] != cluster))


def _changes_with(subject: Subject, block: Pairs) -> bool:
    """Whether the verdict changes with blocks as the sample; with under six of them nothing is called supported."""
    if block.n_cluster < FEW_CLUSTERS:
        return bool(supported(subject.fit))
    return verdict_changes(subject.fit, subject.refit(pairs=block))


def _number(kish: float, effective: float, flow: SharedFlow, alike: bool, near: float) -> str:
    text = f"Clusters, not pairs, are the sample: {_count(kish)} effective ones by their exits"
    if math.isnan(flow.z):
        return f"{text}; no two are within {km(near)} km of one another at the same time."
    how = f"correlation {flow.correlation:.2f}, z = {flow.z:.1f}, {flow.couples} couples"
    if alike:
        return (
            f"{text}, but clusters within {km(near)} km of one another separate alike at the same time ({how}): they "
            f"share a flow, and count for {_count(effective)}."
        )
    return f"{text}; those within {km(near)} km of one another at the same time do not separate alike ({how})."


def _errors(subject: Subject, own: Influence, neighbours: Pairs) -> str:
    every = np.arange(subject.tracks.n_track)
    rows = {"pairs": own.pair_errors(), "clusters": own.errors(subject.pairs.cluster), "particles": own.errors(every)}
    rows["blocks"] = own.errors(neighbours.cluster)
    levels = listed(f"{100 * level:.2g} % by {name}" for name, (level, _) in rows.items())
    slopes = listed(f"{slope:.2g} by {name}" for name, (_, slope) in rows.items())
    return (
        f"The standard error of the exponent, averaged over separations, is {levels} of neighbouring clusters; that of "
        f"its slope {slopes}."
    )


def _carried(subject: Subject, shares, odd, without: list[bool]) -> str:
    if not odd:
        return "No cluster moves the exponent."
    names = [_name(subject, c) for c in odd]
    share = (
        f"The cluster of {_label(subject, odd[0])} has most influence, {100 * shares[odd[0]]:.0f} % of the variance "
        "of the exponent"
    )
    changing = [name for name, changes in zip(names, without, strict=True) if changes]
    if changing:
        return f"{share}; without {' or without '.join(changing)} the verdict is another one."
    return f"{share}; the verdict is the same without {' and without '.join(names)}, each in turn."


def _name(subject: Subject, cluster: int) -> str:
    return f"that of {_label(subject, cluster)}"


def _label(subject: Subject, cluster: int) -> str:
    return subject.tracks.labels[int(np.flatnonzero(subject.pairs.cluster == cluster)[0])]


def _grouped(alike: bool, changes: bool) -> list[str]:
    if not alike:
        return []
    return [
        f"With blocks of neighbouring clusters as the sample the verdict is {'another one' if changes else 'the same'}."
    ]


def _odd_pairs(found: Improbable) -> list[str]:
    if not found.pairs:
        return []
    named = listed(" with ".join(pair) for pair in found.pairs[:_NAMED])
    verb = "has" if len(found.pairs) == 1 else "have"
    others = len(found.pairs) - _NAMED
    more = f" and {others} others" if others > 1 else " and one other" if others == 1 else ""
    return [
        f"Of {found.compared} pairs, {named}{more} {verb} separations that the fitted kernel hardly ever gives; look "
        "at their records."
    ]


def _advice(few: bool, alike: bool, carried: bool) -> str:
    if few:
        return "Few clusters carry the result: call it a case study, and release again at other times and places."
    if alike:
        return "Take releases that share a flow as one cluster, and spread further ones in time and place."
    return "Say which clusters the verdict rests on." if carried else "No single cluster carries the result."


def _count(number: float) -> str:
    return f"{number:.2g}" if number < 10.0 else f"{number:.0f}"
