"""What usually makes a curve leave the prediction of a kernel without memory."""

_CAUSES = {
    "structure_function": "waves (inertial oscillations, tides), position errors and mean shear change velocities "
    "more than they separate pairs",
    "separation_distribution": "pairs of several populations and strain that differs between releases are the usual "
    "causes",
    "kurtosis": "a few pairs caught in eddies or fronts are the usual cause",
    "triplet_area": "convergence, and strain that persists along a release, are the usual causes",
}
_USUAL = "strain that persists along a pair or differs between releases, oscillations and shear are the usual causes"


def usual_cause(curve: str) -> str:
    """A clause for a curve by the name that its check has."""
    return _CAUSES.get(curve, _USUAL)
