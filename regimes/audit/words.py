"""Words that the findings share: lengths, and what a quick fit supports."""

from regimes.audit.subject import supported
from regimes.fitting.quick import QuickFit
from regimes.theory.regimes import REGIMES
from regimes.units import KM
from regimes.verdict.digits import km, listed


def length(metres: float) -> str:
    """A length with two significant digits, in m below 1 km; 0 is 0 m."""
    if metres < 0.995 * KM:
        return f"{float(f'{metres:.2g}'):.15g} m"
    return f"{km(metres)} km"


def upheld(fit: QuickFit | None) -> str:
    """What a fit supports, for instance "exponential from 2.0 to 16 km"."""
    if fit is None:
        return "nothing, since too few separations are resolved"
    found = supported(fit)
    if not found:
        return "no regime"
    return listed(f"{REGIMES[s.regime].word} from {km(s.low)} to {km(s.high)} km" for s in found)
