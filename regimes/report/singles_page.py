"""The page of a run without a pair, and the section on single particles that both pages share."""

from typing import Any

from regimes.analysis import Analysis, SinglesOnly
from regimes.report.digits import count, significant
from regimes.report.figures import OF_SINGLES
from regimes.report.provenance import cleaning_rows, provenance_rows
from regimes.report.render import figures_content, render
from regimes.report.single import about, number_rows, ratio_rows
from regimes.report.words import DECISIONS
from regimes.units import DAY, HOUR

_NO_RADIUS = "Nothing is held against a deformation radius: none was given, or the length has no interval."
_NO_PLATEAU = (
    "The diffusivity of pairs is not held against that of single particles: late in the records it still changes, or "
    "too few pairs tell whether it does."
)


def singles_page(found: SinglesOnly, figures: dict[str, str]) -> str:
    """The report of a run without a pair as HTML text.

    Parameters
    ----------
    found : SinglesOnly
    figures : dict of str to str
        SVG text of each figure by name, in order of appearance.

    Returns
    -------
    str
        Self-contained.
    """
    sentence = found.sentence.removeprefix(DECISIONS["undecided"] + ": ")
    content = {
        "case": found.provenance.case,
        "decision_word": DECISIONS["undecided"],
        "sentence": sentence[:1].upper() + sentence[1:],
        "facts": _facts(found),
        "single": single_content(found, figures_content(found, figures)),
        "cleaning": cleaning_rows(found.provenance),
        "provenance": provenance_rows(found.provenance),
    }
    return render("singles.html.j2", content)


def single_content(found: Analysis | SinglesOnly, drawn: dict[str, dict[str, Any]]) -> dict[str, Any]:
    """What the section on single particles shows; `drawn` is what `figures_content` gives."""
    single = found.single
    absent = [] if any("deformation" in r.name for r in found.ratios) else [_NO_RADIUS]
    paired = isinstance(found, Analysis) and single is not None
    if paired and not any("plateau" in r.name for r in found.ratios):
        absent.insert(0, _NO_PLATEAU)
    return {
        "missing": found.single_missing,
        "about": "" if single is None else about(single),
        "rows": [] if single is None else number_rows(single),
        "cautions": [] if single is None else [text[:1].upper() + text[1:] + "." for text in single.cautions],
        "ratios": ratio_rows(found.ratios),
        "absent": absent,
        "figures": [drawn[name] for name in OF_SINGLES if name in drawn],
    }


def _facts(found: SinglesOnly) -> list[tuple[str, str, str]]:
    origin, single = found.provenance, found.single
    facts = [
        ("pairs", "none", "the reason stands above"),
        ("particles", count(origin.n_particles), f"every {origin.step / HOUR:g} h"),
    ]
    if single is not None:
        time, kappa = single.scale().time.value / DAY, single.diffusivity.mean.value
        facts += [
            ("independent units", count(single.n_unit), "releases, and particles without one"),
            ("integral time", f"{significant(time)} d", "of a fitted decaying cosine"),
            ("diffusivity", f"{significant(kappa)} m²/s", "of one component"),
        ]
    return facts
