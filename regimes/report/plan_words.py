"""What a plan says, in sentences."""

from regimes.plan import Plan, Summary
from regimes.plan.summary import Share
from regimes.report.digits import span
from regimes.theory.regimes import REGIMES
from regimes.units import HOUR
from regimes.verdict.digits import rounded_down


def design_words(plan: Plan, summary: Summary) -> str:
    """``20 releases of 3, a fix every 3 h``."""
    n, point = plan.planned.plan.particles, summary.point
    releases = "1 release" if point.releases == 1 else f"{point.releases} releases"
    return f"{releases} of {n}, a fix every {point.interval / HOUR:.4g} h"


def aim_words(plan: Plan) -> str:
    """What a campaign must show to reach the aim, as it stands after "that"."""
    target = plan.target
    where = f"over half or more of {span(target.low, target.high)} km"
    own = REGIMES[target.regime].word
    if target.against is None:
        return f"{own} separation is supported {where}, and no regime where it is not true"
    return f"{own} separation is told from {REGIMES[target.against].word} {where}"


def share_words(share: Share, campaigns: int) -> str:
    """``38 of 40 campaigns (95 %; 84 to 99 %)`` with the interval of having simulated only so many."""
    return (
        f"{round(share.value * campaigns)} of {campaigns} campaigns ({percents(share.value)} %, "
        f"95 % interval {percents(share.low)} to {percents(share.high)} %)"
    )


def percents(value: float) -> str:
    """A share in percent, never rounded up to 100."""
    return rounded_down(100.0 * value, 0) if value > 0.99 else f"{100.0 * value:.0f}"


def plan_sentence(plan: Plan) -> str:
    """Whether the aim is reached, by which design, and how sure that is."""
    wanted, best = percents(plan.target.probability), plan.best
    if best is None:
        nearest = max(plan.summaries, key=lambda s: s.told.value)
        return (
            f"Not reached: none of these designs shows in {wanted} % of campaigns that {aim_words(plan)}. The nearest "
            f"is {design_words(plan, nearest)}: {share_words(nearest.told, nearest.campaigns)}."
        )
    sure = ""
    if best.told.low < plan.target.probability:
        sure = f" The interval reaches below {wanted} %: simulate more campaigns before relying on it."
    return (
        f"The smallest of these designs that shows in {wanted} % of campaigns that {aim_words(plan)}: "
        f"{design_words(plan, best)}, with {share_words(best.told, best.campaigns)}.{sure}"
    )


def kernel_words(plan: Plan) -> str:
    """Where the kernel comes from."""
    rules = plan.planned.plan.kernel
    if rules is None:
        return (
            "drawn for each campaign from the named sequences that fit the data of the case, given that "
            f"{REGIMES[plan.target.regime].word} separation holds over half or more of the range of the aim "
            f"(probability {plan.probability:.2f} by the data)"
        )
    pieces = rules.regimes or tuple(f"exponent {a:g}" for a in rules.exponents)
    names = [REGIMES[p].word if p in REGIMES else p for p in pieces]
    text = names[0]
    for at, name in zip(rules.transitions_km, names[1:], strict=True):
        text += f" to {at:g} km, then {name}"
    return f"{text}; 2 K / r² = {rules.rate_per_d:g} per day at {rules.reference_km:g} km"
