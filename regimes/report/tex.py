r"""Results as a LaTeX tabular that needs no package: ``\input{table.tex}``."""

import re
from pathlib import Path

from regimes.analysis import Analysis
from regimes.report.digits import probability, span
from regimes.report.slopes import slope_text
from regimes.report.words import CURVES, DISPLAY
from regimes.verdict.digits import km
from regimes.verdict.record import Slope, TransitionScale

TEX = {
    "\\": r"\textbackslash{}", "&": r"\&", "%": r"\%", "$": r"\$", "#": r"\#", "_": r"\_", "{": r"\{",
    "}": r"\}",
    "~": r"\textasciitilde{}", "^": r"\textasciicircum{}", "\u2192": r"$\rightarrow$", "\u2265": r"$\geq$",
    "\u2264": r"$\leq$", "<": r"$<$", ">": r"$>$", "\u202f": r"\,",
}  # fmt: skip


def write_tex(analysis: Analysis, path: Path) -> None:
    r"""Results as a LaTeX tabular that needs no package: ``\input{table.tex}``."""
    path.write_text(tex_table(analysis), encoding="utf-8", newline="\n")


def tex_table(analysis: Analysis) -> str:
    """Text of the LaTeX tabular."""
    verdict = analysis.verdict
    lines = [f"% {_tex(analysis.provenance.case)}", r"\begin{tabular}{lll}", r"\hline"]
    lines += [r"result & separation (km) & value \\", r"\hline"]
    for s in verdict.supported:
        lines.append(_row(f"{DISPLAY[s.regime]} regime", span(s.low, s.high), "supported"))
    lines += [_transition_row(t) for t in verdict.transitions if t.probability > 0.05]
    lines += [_slope_row(s) for s in verdict.slopes]
    lines.append(_row("resolved range", span(*verdict.resolved), verdict.decision.replace("_", " ")))
    return "\n".join([*lines, r"\hline", r"\end{tabular}", ""])


def _transition_row(transition: TransitionScale) -> str:
    scale = transition.scale
    where = f"{km(scale.median)} ({km(scale.lo95)} to {km(scale.hi95)})"
    name = f"{DISPLAY[transition.lower]} to {DISPLAY[transition.upper]}"
    return _row(name, where, f"probability {probability(transition.probability)}")


def _slope_row(slope: Slope) -> str:
    return _row(f"spectral slope, {CURVES[slope.curve]}", span(slope.low, slope.high), slope_text(slope))


def _row(*cells: str) -> str:
    return " & ".join(_tex(cell) for cell in cells) + r" \\"


def _tex(text: str) -> str:
    """`text` with everything that LaTeX would take for a command made harmless."""
    return re.sub("|".join(map(re.escape, TEX)), lambda found: TEX[found.group()], " ".join(text.split()))
