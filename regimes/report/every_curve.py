"""The section on every curve: what agrees, what dissents, and what relative velocities say."""

import math
from typing import Any

from regimes.analysis import Analysis, OtherCurves
from regimes.checks import Check, usual_cause
from regimes.curves.ballistic import BallisticCheck
from regimes.curves.triplets import Triplets
from regimes.report.digits import count, significant, span
from regimes.report.figures import OF_EVERY_CURVE
from regimes.report.slopes import alpha_text, spectrum_slope
from regimes.report.words import checked, p_text
from regimes.units import DAY, HOUR, KM
from regimes.verdict.digits import listed

_LONG = 2.0 * DAY  # from here on durations are given in days


def every_curve(analysis: Analysis, drawn: dict[str, dict[str, Any]]) -> dict[str, Any]:
    """What the section shows; `drawn` is what `figures_content` gives."""
    others = analysis.others
    figures = {name: [drawn[name]] for name in OF_EVERY_CURVE if name in drawn}
    velocities = [name for name in OF_EVERY_CURVE if name not in ("checks", "triplets")]
    return {
        "agreement": agreement(others),
        "dissents": [dissent(check) for check in others.checks if not check.agrees],
        "checks": figures.get("checks", []),
        "spectrum": spectrum_sentence(others),
        "velocities": [figure for name in velocities for figure in figures.get(name, [])],
        "ballistic": ballistic_sentence(others.ballistic),
        "triplets": triplets_sentence(others.triplets),
        "triangles": figures.get("triplets", []),
    }


def agreement_fact(others: OtherCurves) -> tuple[str, str, str]:
    """Name, value and note of the fact: how many curves agree."""
    if not others.checks:
        return ("curves that agree", "none checked", "with the fitted kernels")
    agreeing = sum(check.agrees for check in others.checks)
    return ("curves that agree", f"{agreeing} of {len(others.checks)}", "with the fitted kernels")


def agreement(others: OtherCurves) -> str:
    """Which curves agree with the fitted kernels and which dissent, or why none was checked."""
    missing = f"Curves in time are not held against the fitted kernels: {others.checks_missing}."
    if not others.checks:
        return missing
    agree = [checked(check.curve) for check in others.checks if check.agrees]
    against = [checked(check.curve) for check in others.checks if not check.agrees]
    total = len(others.checks)
    if not against:
        number = f"All {total} other curves agree" if total > 1 else "The only other curve checked agrees"
    else:
        number = f"{len(agree) or 'None'} of {total} other curves agree" + ("s" if len(agree) == 1 else "")
    lowest = min(others.checks, key=lambda check: check.p_value)
    said = f"{number} with the kernels fitted to the exit rates (lowest p = {p_text(lowest.p_value)})"
    said += f": {listed(agree)}. " if agree else ". "
    if against:
        said += f"{'These dissent' if len(against) > 1 else 'One dissents'}: {listed(against)}. "
    return said + (missing if others.checks_missing else "")


def dissent(check: Check) -> str:
    """One curve that dissents, where, and what usually causes it."""
    name = checked(check.curve)
    where = ""
    if check.where.size:
        scale, unit = (KM, "km") if check.axis_name == "separation" else (DAY, "days")
        ends = dict.fromkeys(significant(at / scale) for at in (check.where[0], check.where[-1]))
        where = f", outside the 95 % band at {' to '.join(ends)} {unit}"
    return f"{name[:1].upper()}{name[1:]} (p = {p_text(check.p_value)}{where}): {usual_cause(check.curve)}."


def spectrum_sentence(others: OtherCurves) -> str:
    """The slope from the structure function, or why there is none."""
    slope = spectrum_slope(others)
    if slope.kind == "none":
        return f"No spectral slope comes from the structure function: {slope.reason}."
    reason = f": {slope.reason}" if slope.reason else ""
    return (
        f"Spectra fitted to the structure function have a slope {alpha_text(slope)} at wavelengths of "
        f"{span(slope.low, slope.high)} km{reason}."
    )


def ballistic_sentence(found: BallisticCheck | None) -> str:
    """The first velocity difference of the pairs and how long they keep it."""
    if found is None:
        return "How long pairs keep their first relative velocity is not known: too few steps follow their start."
    square, start = float(found.structure.value[0]), math.sqrt(float(found.start_square.value[0]))
    speed = f"{math.sqrt(square):.2g} m/s" if square > 0 else "not above the position errors"
    said = (
        f"Pairs start {significant(start / KM)} km apart; their first relative velocity is {speed} (root mean squares, "
        "position errors taken out). "
    )
    if square <= 2.0 * float(found.structure.standard_error[0]):
        return f"{said}How long they keep it cannot be told."
    held, first, last = found.holds_until, float(found.dispersion.axis[0]), float(found.dispersion.axis[-1])
    if math.isnan(held):
        return f"{said}One cluster says nothing of how long they keep it."
    if held == last:
        return f"{said}The ballistic law of pairs that keep it holds to the last time, {duration(last)}."
    if held == 0.0:
        return f"{said}The ballistic law of pairs that keep it does not hold at the first time, {duration(first)}."
    return f"{said}The ballistic law of pairs that keep it holds until {duration(held)} after the start."


def triplets_sentence(found: Triplets | None) -> str:
    """How the triangles grow, or that there are none."""
    if found is None:
        return "No triplets are followed: releases hold none, or the case does not want them."
    area, side, shape = (curve.value[[0, -1]] for curve in (found.area, found.side_square, found.aspect))
    first, last = (duration(float(t)) for t in found.area.axis[[0, -1]])
    grown = [f"{significant(a / KM**2)} to {significant(b / KM**2)} km\u00b2" for a, b in (area, side)]
    number = f"{count(found.n_triplet)} {'triangle' if found.n_triplet == 1 else 'triangles'}"
    return (
        f"{number} of particles released together: between {first} and {last} the mean area goes from {grown[0]}, the "
        f"mean square side from {grown[1]}, the mean aspect from {shape[0]:.2f} to {shape[1]:.2f} (1: equilateral; "
        "0: in line)."
    )


def duration(seconds: float) -> str:
    """A time in hours, from two days on in days."""
    value, unit = (seconds / DAY, "day") if seconds >= _LONG else (seconds / HOUR, "hour")
    text = significant(value)
    return f"{text} {unit}{'' if float(text) == 1.0 else 's'}"
