"""Every curve as part of the verdict document."""

from typing import Any

from regimes.analysis import Analysis, SinglesOnly
from regimes.checks import Check
from regimes.report.slopes import spectrum_slope
from regimes.units import DAY, KM

_LEVELS = ("median", "lo68", "hi68", "lo95", "hi95")


def every_part(found: Analysis | SinglesOnly) -> dict[str, Any]:
    """Which curves agree with the fitted kernels, and the slope of the spectrum from the structure function."""
    if isinstance(found, SinglesOnly):
        why = found.reasons[0]
        nothing = {"kind": "none", **dict.fromkeys(_LEVELS), "wavelength_km": None, "reason": why}
        return {"checks": [], "checks_reason": why, "spectrum": nothing}
    slope = spectrum_slope(found.others)
    span = None if slope.kind == "none" else [slope.low / KM, slope.high / KM]
    spectrum = {"kind": slope.kind} | {level: getattr(slope.value, level) for level in _LEVELS}
    return {
        "checks": [_check(check) for check in found.others.checks],
        "checks_reason": found.others.checks_missing,
        "spectrum": spectrum | {"wavelength_km": span, "reason": slope.reason},
    }


def _check(check: Check) -> dict[str, Any]:
    scale, unit = (KM, "km") if check.axis_name == "separation" else (DAY, "d")
    return {
        "curve": check.curve,
        "p_value": check.p_value,
        "agrees": check.agrees,
        "unit": unit,
        "where": check.where / scale,
    }
