"""Threat: a range of separations too narrow for the law that is read from it."""

import numpy as np

from regimes.audit.improbable import best_kernel
from regimes.audit.law import middle_slope
from regimes.audit.record import Finding
from regimes.audit.room import Room, rooms_of
from regimes.audit.subject import Subject, supported
from regimes.inference.average import mixing_weights
from regimes.inference.slope import RangeSlope
from regimes.theory.kernel import Kernel
from regimes.theory.regimes import REGIMES
from regimes.verdict.digits import km, listed
from regimes.verdict.rule import Stretch

LEAST = 0.5  # share of kernels under which a law must show: more likely than not
_KERNELS = 60
_LEAST_BAND = 2.5  # ratio of the ends of a range from which a structure function is computed


def range_width(subject: Subject) -> Finding:
    r"""Whether the law of each regime that is read would show in the range that it has, under the fitted kernel.

    .. math:: \left| \frac{d \ln D^2 / d \ln t}{2 / (2 - a)} - 1 \right| \le \frac{1}{6}

    while the root-mean-square separation grows by a factor 3; for the exponential regime d ln D2 / dt over
    8 K / r^2 in place of the ratio. D2(t) comes from the Fokker-Planck equation, from the median start separation. A
    sixth is t^2.5 of Richardson's t^3, which in an endless range is reached when pairs have grown 19-fold.

    That is asked of kernels drawn from all named sequences. Flag: a supported regime whose law would show under fewer
    than half of them; where nothing is supported, fewer than half under which any regime but the diffusive one would
    show its law. `size` is that share, the smallest of the supported regimes; the text tells of the most probable
    kernel. The verdict changes where a supported regime is not within the 95 % interval of the slope over its stretch
    once the spectrum may end at an outer scale.

    Parameters
    ----------
    subject : Subject

    Returns
    -------
    Finding

    References
    ----------
    LaCasce & Meunier (2022) J. Fluid Mech., relative dispersion with finite inertial ranges; LaCasce (2016) Fluids 1,
    33, structure functions of finite ranges.
    """
    kernel = best_kernel(subject)
    start = float(np.median(subject.pairs.start_separation))
    rooms = rooms_of(kernel, subject.fit.best, subject.resolved, start)
    stretches = supported(subject.fit)
    judged = [room for room in rooms if _judged(room, stretches)]
    share = _share_that_shows(subject, stretches, start)
    flag = share < LEAST and bool(judged or stretches)
    narrow = [room for room in judged if not room.shows] or judged
    changes = [s for s in stretches if not _within(s, subject.fit.slope(s.low, s.high, subject.options.seed))]
    where = (min(r.low for r in narrow), max(r.high for r in narrow)) if flag and narrow else None
    text = [_threat(), *_sizes(judged, start, bool(stretches)), _chance(share, bool(stretches))]
    return Finding(
        "range",
        flag,
        share,
        "share of the kernels that agree with the data under which dispersion would follow the law of what is read",
        where,
        bool(changes),
        " ".join([*text, _verdict(stretches, changes), _advice(flag)]),
    )


def _judged(room: Room, stretches: tuple[Stretch, ...]) -> bool:
    """Whether a regime is read from the data: a supported one, or any but the diffusive where none is supported."""
    if stretches:
        return any(_overlaps(room, s) for s in stretches)
    return room.regime != "diffusive"


def _share_that_shows(subject: Subject, stretches: tuple[Stretch, ...], start: float) -> float:
    """Share of the drawn kernels under which the law shows, the smallest of the supported regimes."""
    named = [p for p in subject.fit.named if len(p.draws)]
    rng = np.random.default_rng(subject.options.seed)
    low, high = subject.resolved
    shown = []
    for number, post in zip(rng.multinomial(_KERNELS, mixing_weights(named)), named, strict=True):
        for theta in post.draws[rng.integers(len(post.draws), size=number)]:
            exponents, breaks = post.model.exponents(theta), post.model.breaks(theta)
            kernel = Kernel(exponents, breaks, float(np.exp(theta[0])), float(np.sqrt(low * high)))
            shows = [room for room in rooms_of(kernel, post.model.pieces, (low, high), start) if room.shows]
            wide = [any(_overlaps(room, s) for room in shows) for s in stretches]
            shown.append(wide or [any(room.regime != "diffusive" for room in shows)])
    return float(np.min(np.mean(shown, axis=0)))


def _overlaps(room: Room, stretch: Stretch) -> bool:
    return room.regime == stretch.regime and room.low < stretch.high and stretch.low < room.high


def _within(stretch: Stretch, slope: RangeSlope) -> bool:
    """Whether the slope of a supported regime is among those that a spectrum with an end leaves possible."""
    own = REGIMES[stretch.regime].exponent
    if own < 1.0 or slope.kind == "none":
        return True
    alpha = 2.0 * own - 1.0
    if slope.kind == "lower_bound":
        return alpha >= float(np.quantile(slope.draws, 0.05))
    if slope.kind == "upper_bound":
        return alpha <= float(np.quantile(slope.draws, 0.95))
    low, high = np.quantile(slope.draws, (0.025, 0.975))
    return bool(low <= alpha <= high)


def _threat() -> str:
    return (
        "A law in time needs room: pairs grow 19-fold before Richardson dispersion reaches t^2.5 of its t^3, and "
        "slopes of structure functions need two to three decades."
    )


def _sizes(judged: list[Room], start: float, is_supported: bool) -> list[str]:
    if not judged:
        return ["No regime that is read here has such a law."]
    parts = []
    for room in judged:
        slope = 2.0 * REGIMES[room.regime].exponent - 1.0
        law = (
            f"dispersion would follow its law over a factor {room.factor:.2g}"
            if room.factor > 1.0
            else ("dispersion would nowhere follow its law")
        )
        power = "" if np.isnan(room.power) or room.regime == "exponential" else f" (at most t^{room.power:.1f})"
        text = (
            f"{REGIMES[room.regime].word} from {km(room.low)} to {km(room.high)} km spans {room.decades:.1f} decades, "
            f"{law}{power}"
        )
        if slope > 1.0 and room.high > _LEAST_BAND * room.low:
            seen = middle_slope(slope, room.low, room.high)
            text += f", the slope of its structure function at the middle would be {seen:.1f}, not {slope - 1.0:.1f}"
        parts.append(text)
    which = "supported regimes" if is_supported else "most probable sequence, none of it supported"
    return [f"Under the fitted kernel, from {km(start)} km on ({which}): {'; '.join(parts)}."]


def _verdict(stretches: tuple[Stretch, ...], changes: list[Stretch]) -> str:
    if not stretches:
        return "Nothing is supported that could be lost."
    if not changes:
        return "The verdict rests on exit rates and is the same where the spectrum may end at an outer scale."
    names = listed(f"{REGIMES[s.regime].word} from {km(s.low)} to {km(s.high)} km" for s in changes)
    return f"Where the spectrum may end at an outer scale, {names} is no longer within the interval of the slope."


def _chance(share: float, is_supported: bool) -> str:
    which = "the law of each supported regime" if is_supported else "some law"
    return (
        f"{which[0].upper()}{which[1:]} would show under {100 * share:.0f} % of the kernels that agree with the data."
    )


def _advice(flag: bool) -> str:
    if flag:
        return (
            "Do not look for the law in dispersion against time; quote the exponent over its range, not its name alone."
        )
    return "The range may be wide enough; hold dispersion against the prediction of the kernel, not against a law."
