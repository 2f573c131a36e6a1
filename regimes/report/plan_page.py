"""The page of a plan: one HTML file that needs nothing else."""

import math
from typing import Any

from regimes.plan import Plan, Summary
from regimes.plan.summary import Mean, Share
from regimes.report.digits import fixed
from regimes.report.plan_words import aim_words, design_words, kernel_words, percents, plan_sentence
from regimes.report.render import inline, render
from regimes.units import HOUR, KM
from regimes.verdict.digits import km

CAPTIONS = {
    "aim": (
        "Campaigns that reach the aim",
        "Share of simulated campaigns, with its 95 % interval for having simulated only so many; the dashed line is "
        "the wanted probability.",
    ),
    "right": (
        "Campaigns with a right verdict",
        "Share of simulated campaigns in which the true regime alone is supported over half of its range or more, and "
        "nothing wrong anywhere, with its 95 % interval.",
    ),
    "alpha": (
        "How well the spectral slope is known",
        "Mean width of the 95 % interval of the slope over the range of the aim, with its 95 % interval; a bound "
        "reaches to slope 1 or 3, and where nothing can be said the width is 2.",
    ),
    "transition": (
        "How well the transition is known",
        "Ratio of the 95 % ends of the transition at the end of the range, geometric mean of the campaigns that find "
        "it, with its 95 % interval.",
    ),
    "resolved": (
        "Separations that are resolved",
        "Smallest and largest resolved separation, geometric means; the dashed lines are the range of the aim.",
    ),
}
HEADS = (
    "releases", "a fix every", "aim reached", "right verdict", "wrong supported", "P(true regime)", "width of α",
    "transition found", "its 95 % ends", "resolved (km)",
)  # fmt: skip


def plan_page(plan: Plan, figures: dict[str, str]) -> str:
    """The page as HTML text.

    Parameters
    ----------
    plan : Plan
    figures : dict of str to str
        SVG text of each figure by name, in order of appearance.
    """
    return render("plan.html.j2", {
        "case": plan.planned.name,
        "reached": plan.best is not None,
        "sentence": plan_sentence(plan),
        "aim": aim_words(plan),
        "against": plan.target.against is not None,
        "figures": [_figure(plan, name, svg, i) for i, (name, svg) in enumerate(figures.items(), 1)],
        "heads": HEADS,
        "rows": [_row(s) for s in plan.summaries],
        "keys": _keys(plan),
    })  # fmt: skip


def _figure(plan: Plan, name: str, svg: str, number: int) -> dict[str, Any]:
    title, caption = CAPTIONS[name]
    words = f"{title} against the number of releases, for {len(plan.summaries)} designs. {caption}"
    return {"number": number, "title": title, "svg": inline(svg, f"plan-{name}", words), "caption": caption}


def _row(summary: Summary) -> tuple[str, ...]:
    return (
        str(summary.point.releases),
        f"{summary.point.interval / HOUR:.4g} h",
        *(_share(s) for s in (summary.told, summary.right, summary.wrong)),
        _mean(summary.probability),
        _mean(summary.alpha_width),
        _share(summary.found),
        "not found" if math.isnan(summary.transition_factor.value) else f"× {_ratio(summary.transition_factor)}",
        "nothing" if math.isnan(summary.low.value) else f"{km(summary.low.value)} to {km(summary.high.value)}",
    )


def _share(share: Share) -> str:
    return f"{percents(share.value)} % ({percents(share.low)} to {percents(share.high)})"


def _mean(mean: Mean) -> str:
    if math.isnan(mean.value):
        return "none"
    return f"{fixed(mean.value, 2)} ± {fixed(mean.error, 2)}"


def _ratio(mean: Mean) -> str:
    return fixed(mean.value, 1 if mean.value < 20.0 else 0)


def _keys(plan: Plan) -> list[tuple[str, str]]:
    rules, target = plan.planned.plan, plan.target
    return [
        ("kernel", kernel_words(plan)),
        ("range of the aim", f"{target.low / KM:.4g} to {target.high / KM:.4g} km"),
        ("wanted probability", f"{target.probability:g}"),
        ("particles of a release", f"{rules.particles}, {rules.start_separation_km:g} km apart at the start"),
        ("records", f"{rules.duration_d:g} d, particles lost at {rules.loss_per_d:g} per day"),
        ("position error", f"{rules.position_error_m:g} m"),
        ("campaigns of each design", str(rules.campaigns)),
        ("smallest design", "none reaches the aim" if plan.best is None else design_words(plan, plan.best)),
        ("random seed", str(plan.planned.seed)),
        ("SHA-256 of the input", plan.input_sha256 or "none: the kernel is given"),
        *((f"version of {name}", version) for name, version in plan.versions.items()),
    ]
