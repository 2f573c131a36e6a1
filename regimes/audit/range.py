"""Threat: a range of separations too narrow for the law that is read from it."""

from dataclasses import dataclass

import numpy as np

from regimes.audit.improbable import best_kernel
from regimes.audit.law import Growth, growth, law_holds, longest_factor, middle_slope
from regimes.audit.record import Finding
from regimes.audit.subject import Subject, supported
from regimes.inference.slope import RangeSlope
from regimes.theory.kernel import Kernel
from regimes.theory.regimes import REGIMES
from regimes.verdict.digits import km, listed
from regimes.verdict.rule import SPAN, Stretch

_LEAST_BAND = 2.5  # ratio of the ends of a range from which a structure function is computed


@dataclass(frozen=True, slots=True)
class Room:
    """How much room one regime has.

    Parameters
    ----------
    regime : str
    low, high : float [m]
        Ends of its piece of the kernel, inside the resolved range.
    decades : float
        From the start separation, or from `low` if that is larger, to `high`.
    factor : float
        Over which the root-mean-square separation grows while relative dispersion is within a sixth of the law.
    power : float
        Largest d ln D2 / d ln t inside the piece; NaN where dispersion does not reach it.
    """

    regime: str
    low: float
    high: float
    decades: float
    factor: float
    power: float

    @property
    def shows(self) -> bool:
        """Whether the law holds over a factor 3 of separation, as much as the rule asks of a regime."""
        return self.factor >= SPAN


def range_width(subject: Subject) -> Finding:
    r"""Whether the law of each regime that is read would show in the range that it has, under the fitted kernel.

    .. math:: \left| \frac{d \ln D^2 / d \ln t}{2 / (2 - a)} - 1 \right| \le \frac{1}{6}

    while the root-mean-square separation grows by a factor 3; for the exponential regime d ln D2 / dt over
    8 K / r^2 in place of the ratio. D2(t) comes from the Fokker-Planck equation of the most probable sequence, from the
    median start separation. A sixth is t^2.5 of Richardson's t^3, which in an endless range is reached when pairs
    have grown 19-fold.

    Flag: a supported regime whose law would not show; where nothing is supported, no regime of the most probable
    sequence but the diffusive one whose law would show. `size` is the largest factor among those judged. The verdict
    changes where a supported regime is not within the 95 % interval of the slope over its stretch once the
    spectrum may end at an outer scale.

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
    found = growth(kernel, start, subject.resolved[1])
    rooms = [_room(found, kernel, start, *piece) for piece in _pieces(subject, kernel)]
    stretches = supported(subject.fit)
    if stretches:
        judged = [room for room in rooms if any(_overlaps(room, s) for s in stretches)]
        flag = not all(room.shows for room in judged)
    else:
        judged = [room for room in rooms if room.regime != "diffusive"]
        flag = bool(judged) and not any(room.shows for room in judged)
    narrow = [room for room in judged if not room.shows]
    changes = [s for s in stretches if not _within(s, subject.fit.slope(s.low, s.high, subject.options.seed))]
    return Finding(
        "range",
        flag,
        max((room.factor for room in judged), default=float("nan")),
        "factor of separation over which relative dispersion would follow the law of a regime that is read",
        (min(r.low for r in narrow), max(r.high for r in narrow)) if flag else None,
        bool(changes),
        " ".join(
            [_threat(), *_sizes(judged, start, bool(stretches)), _verdict(stretches, changes), _advice(flag, narrow)]
        ),
    )


def _pieces(subject: Subject, kernel: Kernel):
    """Regime and ends [m], inside the resolved range, of each piece of the most probable sequence."""
    low, high = subject.resolved
    ends = np.clip([low, *kernel.breaks, high], low, high)
    return [
        (name, float(ends[i]), float(ends[i + 1]))
        for i, name in enumerate(subject.fit.best)
        if ends[i + 1] > ends[i] * (1.0 + 1e-9)
    ]


def _room(found: Growth, kernel: Kernel, start: float, regime: str, low: float, high: float) -> Room:
    inside = (found.rms >= low) & (found.rms <= high)
    return Room(
        regime,
        low,
        high,
        max(float(np.log10(high / max(low, start))), 0.0),
        longest_factor(found.rms, law_holds(found, kernel, regime, (low, high))),
        float(np.max(found.power[inside])) if np.any(inside) else float("nan"),
    )


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


def _advice(flag: bool, narrow: list[Room]) -> str:
    if flag:
        return (
            "Do not look for the law in dispersion against time; quote the exponent over its range, not its name alone."
        )
    if narrow:
        names = listed(dict.fromkeys(REGIMES[room.regime].word for room in narrow))
        return f"Of these do not look for {names} in dispersion against time; the rest has room."
    return "The range is wide enough."
