"""One threat to a verdict, sized on the data at hand."""

from dataclasses import dataclass

THREAT_WORDS = {
    "position_error": "position error",
    "sampling_interval": "the sampling interval",
    "oscillation": "inertial or tidal oscillation",
    "shear": "mean shear",
    "pairs": "the choice of pairs",
    "independence": "dependence between clusters",
    "record_ends": "the end of records",
    "range": "the width of the range",
    "convergence": "convergence",
}
THREATS = tuple(THREAT_WORDS)


@dataclass(frozen=True, slots=True)
class Finding:
    """What one threat does to this data set.

    Parameters
    ----------
    threat : str
        One of `THREATS`.
    flag : bool
        Whether the effect is larger than a clean survey of this size shows.
    size : float
        How large; `measure` says of what. NaN where it could not be measured.
    measure : str
        What `size` is, with its unit.
    separations : (float, float) or None [m]
        Where the threat acts; None where it does not act at separations of its own, or nowhere.
    verdict_changes : bool
        Whether the verdict is another one once the threat is removed or allowed for.
    text : str
        What it is, how large here, whether the verdict changes, what to do: whole sentences for the report.
    """

    threat: str
    flag: bool
    size: float
    measure: str
    separations: tuple[float, float] | None
    verdict_changes: bool
    text: str
