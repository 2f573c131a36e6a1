"""Words and rows of the report on particles taken one by one."""

import math

from regimes.analysis import Analysis, SinglesOnly
from regimes.particles import Estimate, Ratio, SingleParticle
from regimes.particles.record import MEAN_WORDS, METHOD_WORDS
from regimes.report.digits import count, decimals, fixed, significant
from regimes.units import DAY, KM

TITLES = {
    "correlation": "Single particles: memory of the velocity",
    "absolute": "Single particles: absolute dispersion",
}


def number_rows(single: SingleParticle) -> list[tuple[str, str, str]]:
    """Quantity, value and 95 % interval, each with its unit."""
    tensor = single.diffusivity
    rows = [("root mean square velocity of one component", single.velocity, 1.0, "m/s")]
    for scale in single.scales:
        rows.append((f"integral time, {METHOD_WORDS[scale.method]}", scale.time, DAY, "d"))
    for scale in single.scales:
        rows.append((f"integral length, {METHOD_WORDS[scale.method]}", scale.length, KM, "km"))
    rows += [
        ("diffusivity, mean of both axes", tensor.mean, 1.0, "m²/s"),
        ("diffusivity, major axis", tensor.major, 1.0, "m²/s"),
        ("diffusivity, minor axis", tensor.minor, 1.0, "m²/s"),
        ("direction of the major axis, counterclockwise from east", tensor.angle, 1.0, "degrees"),
    ]
    return [(name, *_numbers(found.scaled(1.0 / unit), words)) for name, found, unit, words in rows]


def ratio_rows(ratios: tuple[Ratio, ...]) -> list[tuple[str, str, str, str]]:
    """What is divided by what, the ratio, its 95 % interval, and what was expected."""
    rows = []
    for ratio in ratios:
        places = decimals((ratio.high - ratio.low) / 3.92) if ratio.high > ratio.low else 2
        said = "" if math.isnan(ratio.expected) else f"{ratio.expected:g}: {_agreement(ratio)}"
        ends = f"{fixed(ratio.low, places)} to {fixed(ratio.high, places)}"
        rows.append((ratio.name, fixed(ratio.value, places), ends, said))
    return rows


def about(single: SingleParticle) -> str:
    """How many particles, what was removed, how far the lags go and what was left out."""
    text = (
        f"{count(single.n_particle)} particles in {count(single.n_unit)} independent units (releases, and particles "
        f"without one), {MEAN_WORDS[single.mean]}, lags to {significant(single.window / DAY)} d. "
        + ("The running integral levels off." if single.converges else "The running integral does not level off.")
    )
    if single.n_short:
        text += f" Left out as too short: {count(single.n_short)} tracks."
    if single.n_lost:
        text += f" Left out since their mean is not known: {count(single.n_lost)} velocities."
    return text


def caption(name: str, found: Analysis | SinglesOnly) -> str:
    """Caption of the figure of that name."""
    return {"correlation": _correlation, "absolute": _absolute}[name](found.single)


def shown(name: str, found: Analysis | SinglesOnly) -> str:
    """What the figure shows, in words."""
    return {"correlation": _see_correlation, "absolute": _see_absolute}[name](found.single)


def _numbers(found: Estimate, unit: str) -> tuple[str, str]:
    if not found.high > found.low:
        return f"{significant(found.value, 3)} {unit}", "none: fewer than two independent units"
    places = decimals((found.high - found.low) / 3.92)
    return f"{fixed(found.value, places)} {unit}", f"{fixed(found.low, places)} to {fixed(found.high, places)} {unit}"


def _agreement(ratio: Ratio) -> str:
    return "agrees" if ratio.agrees else "does not agree"


def _who(single: SingleParticle) -> str:
    return f"{count(single.n_particle)} particles, {count(single.n_unit)} independent units"


def _correlation(single: SingleParticle) -> str:
    return (
        f"Autocorrelation of the velocity against lag ({_who(single)}; {MEAN_WORDS[single.mean]}): both components "
        "together with 95 % band, and each by itself (x and y on a plane). Dash-dotted, on the right-hand axis: its "
        "integral from zero to each lag with 95 % band; where it levels off it is the integral time. Bands come from "
        "resampling the independent units."
    )


def _absolute(single: SingleParticle) -> str:
    text = (
        f"Mean square displacement since the first position of each track ({_who(single)}; {MEAN_WORDS[single.mean]}), "
        "total and east and north parts (x and y on a plane), with 95 % intervals of the logarithm. Lines: Taylor's "
        "limits of the total while the velocity is remembered (twice the square of the root mean square velocity times "
        "the time squared) and long after (four times the diffusivity times the time), from the velocities of whole "
        "tracks; points below both mean that particles were slower at first than later."
    )
    if single.mean == "record":
        text += (
            " Only a third of the record is shown: less its own mean, every displacement is back at zero at the end "
            "of the record, and a share of the late limit is lost that grows to a third here."
        )
    return text


def _see_correlation(single: SingleParticle) -> str:
    time = single.scale().time
    level = "The running integral levels off." if single.converges else "The running integral does not level off."
    return f"Integral time of a fitted decaying cosine {significant(time.value / DAY)} days. {level}"


def _see_absolute(single: SingleParticle) -> str:
    kappa = single.diffusivity.mean.value
    return f"The late limit is that of a diffusivity of {significant(kappa)} square metres per second."
