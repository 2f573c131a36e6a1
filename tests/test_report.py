"""The report folder, the page and the verdict document."""

import itertools
import json
import re
from dataclasses import replace
from html.parser import HTMLParser
from importlib import resources

import jsonschema
import numpy as np
import pytest

from regimes.errors import CaseError
from regimes.inference.health import Health
from regimes.report import check_folder, verdict_document, write_report
from regimes.report import files as files_module
from regimes.report.figures import FIGURES, draw, names_of, svg
from regimes.report.page import page
from regimes.report.verdict_json import plain, verdict_text
from regimes.verdict.record import OuterScale
from tests.report_fixture import demo_analysis, singles_only, use_drawings_made_before, with_verdict

VOID = {"meta", "link", "br", "img", "input", "hr"}  # elements without an end, HTML standard, section 13.1.2


class Outline(HTMLParser):
    """Tags of a page, with a check that every one is closed in turn."""

    def __init__(self, text):
        super().__init__(convert_charrefs=True)
        self.stack, self.ids, self.tags, self.words = [], [], [], []
        self.feed(text)
        self.close()
        assert self.stack == []

    def handle_starttag(self, tag, attributes):
        self.tags.append((tag, dict(attributes)))
        self.ids += [value for key, value in attributes if key == "id"]
        if tag not in VOID:
            self.stack.append(tag)

    def handle_startendtag(self, tag, attributes):
        self.tags.append((tag, dict(attributes)))
        self.ids += [value for key, value in attributes if key == "id"]

    def handle_endtag(self, tag):
        assert self.stack.pop() == tag

    def handle_data(self, data):
        if "style" not in self.stack:
            self.words.append(data)

    @property
    def text(self):
        return " ".join(" ".join(self.words).split())


@pytest.fixture(scope="module")
def analysis():
    return demo_analysis()


@pytest.fixture(scope="module")
def report(analysis, tmp_path_factory):
    return write_report(analysis, tmp_path_factory.mktemp("out") / "bank")


@pytest.fixture(scope="module")
def drawings():
    return {name: svg(draw(name, demo_analysis()), name) for name in FIGURES}


@pytest.fixture
def light(monkeypatch):
    use_drawings_made_before(monkeypatch)


@pytest.fixture(scope="module")
def outline(report):
    return Outline(report["report.html"].read_text(encoding="utf-8"))


# The page


def test_page_is_well_formed_and_identifiers_are_unique(outline):
    assert len(outline.ids) == len(set(outline.ids)) > 100


def test_page_needs_nothing_from_elsewhere(report):
    text = report["report.html"].read_text(encoding="utf-8")
    names = re.findall(r'xmlns(?::\w+)?="[^"]*"', text)  # names of vocabularies, never fetched
    for name in names:
        text = text.replace(name, "")
    assert "//" not in re.sub(r"/\*.*?\*/", "", text)
    assert "<script" not in text
    assert "@import" not in text
    assert "url(" not in text.split("</style>")[0]


def test_every_reference_inside_a_drawing_is_defined(report, outline):
    text = report["report.html"].read_text(encoding="utf-8")
    used = set(re.findall(r'(?:href="#|url\(#)([^")]+)', text))
    assert used
    assert used <= set(outline.ids)


def test_links_lead_to_files_of_the_report(report, outline):
    links = [a["href"] for tag, a in outline.tags if tag == "a"]
    folder = report["report.html"].parent
    assert {"verdict.json", "curves.csv", "curves.nc", "posterior.nc", "table.tex"} <= set(links)
    assert all((folder / link).exists() for link in links)


def test_headings_descend_one_level_at_a_time(outline):
    levels = [int(tag[1]) for tag, _ in outline.tags if re.fullmatch(r"h[1-6]", tag)]
    assert levels[0] == 1
    assert levels.count(1) == 1
    assert all(after - before <= 1 for before, after in itertools.pairwise(levels))


def test_every_figure_has_words_for_those_who_cannot_see_it(outline):
    drawings = [a for tag, a in outline.tags if tag == "svg"]
    assert len(drawings) == len(FIGURES)
    for attributes in drawings:
        assert attributes["role"] == "img"
        assert attributes["aria-labelledby"] in outline.ids
    assert sum(tag == "figcaption" for tag, _ in outline.tags) == len(FIGURES)


def test_page_says_verdict_reasons_cautions_and_method(analysis, outline):
    verdict = analysis.verdict
    for said in (verdict.sentence, *verdict.reasons, verdict.methods, verdict.cautions[0].text):
        assert said in outline.text
    assert "Supported" in outline.text
    assert analysis.provenance.sha256 in outline.text
    assert "not a basis for search and rescue, spill response or navigation" in outline.text
    assert outline.text.count("search and rescue") == 1


def test_page_gives_transitions_in_km_with_supported_digits(analysis, outline):
    # 68 % half width is 1.7 km, so one decimal: two significant digits of the uncertainty, common practice, no source
    scale = next(t for t in analysis.verdict.transitions if t.upper == "richardson").scale
    half = (scale.hi68 - scale.lo68) / 2e3
    assert 1.0 <= half < 9.5
    assert f"{scale.median / 1e3:.1f} {scale.lo68 / 1e3:.1f} to {scale.hi68 / 1e3:.1f}" in outline.text


def test_decision_word_stands_once_in_front(analysis, drawings):
    changed = with_verdict(
        analysis, decision="undecided", sentence="Undecided: too few pairs.", reasons=("too few pairs", "short records")
    )
    text = Outline(page(changed, drawings)).text
    assert "Undecided Too few pairs. short records" in text


def test_page_warns_of_a_fit_that_did_not_converge(analysis, drawings):
    changed = with_verdict(analysis, healthy=False, health_reason="split R-hat 1.2 is not below 1.01")
    text = Outline(page(changed, drawings)).text
    assert "did not converge: split R-hat 1.2 is not below 1.01. Do not quote these numbers." in text


def test_models_that_did_not_converge_are_always_shown(analysis):
    from regimes.report.convergence import convergence_rows, not_shown

    inference = analysis.fits["exit_rate"]
    sick = replace(inference.named[3], health=Health(1.2, 30.0, 4.0), log_evidence=-900.0)
    named = (*inference.named[:3], sick, *inference.named[4:])
    changed = replace(analysis, fits={"exit_rate": replace(inference, named=named)})
    rows = convergence_rows(changed)
    # seven models of the fixture were sampled; six lead and the seventh is the sick one
    assert (len(rows), not_shown(changed)) == (7, 0)
    assert (len(convergence_rows(analysis)), not_shown(analysis)) == (18, 3)  # seven of each of three curves
    assert rows[-1][1] == "exponential \u2192 diffusive"
    assert rows[-1][-1].startswith("split R-hat 1.200 is not below 1.01; effective sample size 30")
    assert all(row[-1] == "good" for row in rows[:-1])


def test_words_from_outside_are_harmless(analysis, light, tmp_path):
    named = replace(analysis, provenance=replace(analysis.provenance, case='<script>alert("x")</script> & {{ 7*7 }}'))
    files = write_report(named, tmp_path / "r")
    text = files["report.html"].read_text(encoding="utf-8")
    assert "<script" not in text
    assert "&lt;script&gt;" in text
    assert '<script>alert("x")</script> & {{ 7*7 }}' in Outline(text).text
    assert json.loads(files["verdict.json"].read_text(encoding="utf-8"))["case"] == named.provenance.case


def test_report_of_an_analysis_that_found_little(analysis):
    bare = with_verdict(analysis, supported=(), transitions=(), slopes=(), cautions=(), decision="none_fits")
    first = {"exit_rate": analysis.fits["exit_rate"]}
    found = replace(bare, fits=first)
    text = Outline(page(found, {name: svg(draw(name, found), name) for name in FIGURES})).text
    for said in ("None fits", "None was raised", "No slope is quoted", "there is no second opinion"):
        assert said in text


def test_page_sets_the_joint_fit_beside_the_others(outline):
    assert outline.text.count("both together") >= 3  # second opinion, comparison and convergence
    assert "the decision does not rest on it" in outline.text


def test_page_says_what_single_particles_say(analysis, outline):
    single = analysis.single
    kappa = single.diffusivity.mean
    # two digits of the uncertainty, which is some hundreds of m2/s here: tens are printed
    assert 100.0 < (kappa.high - kappa.low) / 3.92 < 990.0
    shown = [round(x / 10) * 10 for x in (kappa.value, kappa.low, kappa.high)]
    assert "diffusivity, mean of both axes {} m²/s {} to {} m²/s".format(*shown) in outline.text
    assert "plateau of the relative over twice the single-particle diffusivity 0.94" in outline.text
    assert "Lagrangian length over the deformation radius 1.13" in outline.text
    assert f"{len(FIGURES) - 1}. Single particles: memory of the velocity" in outline.text
    assert outline.ids.index("second") < outline.ids.index("single") < outline.ids.index("reading")


def test_page_says_why_single_particles_say_nothing(analysis):
    missing = singles_only(False).single_missing
    bare = replace(analysis, single=None, single_missing=missing, ratios=())
    drawn = {name: svg(draw(name, bare), name) for name in names_of(bare)}
    assert list(drawn) == list(FIGURES)[:-2]
    text = Outline(page(bare, drawn)).text
    assert f"say nothing here: {missing}." in text
    assert "Nothing is held against a deformation radius" in text


def test_cautions_of_single_particles_are_shown_as_sentences(analysis, drawings):
    rough = replace(analysis, single=replace(analysis.single, cautions=("3 units only: rough", "slow parts are lost")))
    text = Outline(page(rough, drawings)).text
    assert "3 units only: rough." in text
    assert "Slow parts are lost." in text


# Without a pair


@pytest.mark.parametrize("single", [True, False])
def test_report_without_a_pair(single, tmp_path):
    found = singles_only(single)
    written = write_report(found, tmp_path / "r")
    figures = {f"figures/{name}.{end}" for name in ("correlation", "absolute") for end in ("svg", "pdf")}
    assert set(written) == {"report.html", "verdict.json", "curves.csv"} | (figures if single else set())
    assert {p for p in (tmp_path / "r").rglob("*") if p.is_file()} == set(written.values())
    outline = Outline(written["report.html"].read_text(encoding="utf-8"))
    assert len(outline.ids) == len(set(outline.ids))
    assert "Undecided No pair statistics exist, for want of a pair to compare. No launched pair" in outline.text
    assert outline.text.count("search and rescue") == 1
    assert sum(tag == "svg" for tag, _ in outline.tags) == (2 if single else 0)
    assert ("1. Single particles: memory of the velocity" in outline.text) == single
    assert (f"say nothing here: {found.single_missing}." in outline.text) != single
    assert "nan" not in outline.text.lower().split()
    links = {a["href"] for tag, a in outline.tags if tag == "a"}
    assert links == {"verdict.json", "curves.csv"} | ({"figures/"} if single else set())


def test_report_with_and_without_a_pair_take_each_others_place(analysis, light, tmp_path):
    write_report(analysis, tmp_path / "r")
    written = write_report(singles_only(False), tmp_path / "r")
    assert {p for p in (tmp_path / "r").rglob("*") if p.is_file()} == set(written.values())
    assert write_report(analysis, tmp_path / "r")["posterior.nc"].exists()


def test_summary_without_a_pair_says_what_there_is():
    found = singles_only()
    head, sentence, *rest = found.summary().splitlines()
    assert head == "invented bank: 36 particles, no pair"
    assert sentence == found.sentence
    assert "\n".join(rest) == found.single.summary()
    assert "<td>" in found._repr_html_()
    assert singles_only(False)._repr_html_() == f"<p>{found.sentence}</p>"


# The folder


def test_same_analysis_gives_the_same_bytes(analysis, report, tmp_path):
    again = write_report(analysis, tmp_path / "bank")
    assert set(again) == set(report)
    different = [name for name in report if report[name].read_bytes() != again[name].read_bytes()]
    assert different == []


def test_earlier_report_is_replaced(analysis, light, tmp_path):
    write_report(analysis, tmp_path / "r")
    files = write_report(with_verdict(analysis, sentence="Something else."), tmp_path / "r")
    assert json.loads(files["verdict.json"].read_text(encoding="utf-8"))["sentence"] == "Something else."
    assert [p.name for p in tmp_path.iterdir()] == ["r"]


def test_figures_of_earlier_versions_are_no_strangers(analysis, light, tmp_path):
    write_report(analysis, tmp_path / "r")
    for name in ("mean-log.svg", "passage.pdf"):  # checks by figures of their own, as they once were
        (tmp_path / "r" / "figures" / name).write_text("old")
    written = write_report(analysis, tmp_path / "r")
    assert {p for p in (tmp_path / "r").rglob("*") if p.is_file()} == set(written.values())


def test_empty_folder_and_missing_parents_are_fine(analysis, light, tmp_path):
    (tmp_path / "empty").mkdir()
    assert write_report(analysis, tmp_path / "empty")["report.html"].exists()
    assert write_report(analysis, tmp_path / "a" / "b" / "c")["report.html"].exists()


def test_other_files_are_never_touched(analysis, light, tmp_path):
    files = write_report(analysis, tmp_path / "r")
    (tmp_path / "r" / "thesis.txt").write_text("years of work")
    before = files["verdict.json"].read_bytes()
    with pytest.raises(
        CaseError, match=r"got .* with thesis\.txt in it; must be new, empty, or hold an earlier report"
    ):
        write_report(analysis, tmp_path / "r")
    assert (tmp_path / "r" / "thesis.txt").read_text() == "years of work"
    assert files["verdict.json"].read_bytes() == before


def test_folder_without_a_verdict_is_not_ours(tmp_path):
    (tmp_path / "verdict.json").write_text("[]")
    with pytest.raises(CaseError, match=r"no verdict\.json of an earlier report in it"):
        check_folder(tmp_path)


def test_file_in_the_way(light, tmp_path):
    (tmp_path / "r").write_text("")
    with pytest.raises(CaseError, match="a file; must be a folder"):
        check_folder(tmp_path / "r")
    with pytest.raises(CaseError, match=r"cannot be (read|written)"):
        write_report(demo_analysis(), tmp_path / "r" / "below")


def test_name_too_long_for_the_file_system(tmp_path):
    with pytest.raises(CaseError, match="cannot be read"):
        check_folder(tmp_path / ("x" * 5000))


def test_failure_on_the_way_leaves_what_was_there(analysis, light, tmp_path, monkeypatch):
    def broken(*_):
        raise OSError(28, "No space left on device")

    files = write_report(analysis, tmp_path / "r")
    before = {name: path.read_bytes() for name, path in files.items()}
    monkeypatch.setattr(files_module, "write_tex", broken)
    for name in ("r", "new"):
        with pytest.raises(CaseError, match=r"cannot be written .No space left on device.; must be a place"):
            write_report(analysis, tmp_path / name)
    assert [p.name for p in tmp_path.iterdir()] == ["r"]
    assert {name: path.read_bytes() for name, path in files.items()} == before


def test_failure_of_the_last_move_brings_the_earlier_report_back(analysis, light, tmp_path, monkeypatch):
    files = write_report(analysis, tmp_path / "r")
    move = files_module.os.replace

    def fails_for_new(source, target):
        if source.name == "new":
            raise OSError(16, "Device or resource busy")
        move(source, target)

    monkeypatch.setattr(files_module.os, "replace", fails_for_new)
    with pytest.raises(CaseError, match="Device or resource busy"):
        write_report(analysis, tmp_path / "r")
    assert files["report.html"].exists()


# The document


@pytest.fixture(scope="module")
def schema():
    text = resources.files("regimes.report").joinpath("verdict.schema.json").read_text(encoding="utf-8")
    found = json.loads(text)
    jsonschema.Draft202012Validator.check_schema(found)
    return jsonschema.Draft202012Validator(found)


def test_document_follows_its_schema(analysis, report, schema):
    text = report["verdict.json"].read_text(encoding="utf-8")

    def refuse(word):
        raise ValueError(f"{word} is no JSON")

    written = json.loads(text, parse_constant=refuse)
    schema.validate(written)
    assert written == verdict_document(analysis)


@pytest.mark.parametrize(
    ("path", "value"),
    [
        (("decision",), "maybe"),
        (("sequences", 0, "probability"), 1.5),
        (("resolved_km",), [1.0]),
        (("resolved_km",), []),  # there are pairs
        (("extra",), 1),
        (("single_particle",), None),  # without a reason
        (("single_particle_reason",), "none"),
        (("single_particle", "mean_removed"), "all"),
        (("single_particle", "diffusivity_m2_s", "mean", "lo95"), "small"),
    ],
)
def test_schema_refuses_what_it_should(analysis, schema, path, value):
    document = json.loads(verdict_text(analysis))
    inner = document
    for key in path[:-1]:
        inner = inner[key]
    inner[path[-1]] = value
    assert not schema.is_valid(document)


def test_document_numbers_are_those_of_the_verdict(analysis):
    document, verdict = verdict_document(analysis), analysis.verdict
    assert document["resolved_km"] == [1.2, 150.0]
    assert document["supported"][0]["low_km"] == pytest.approx(1.2, rel=1e-5)  # six printed digits
    transition = document["transitions"][0]
    assert (transition["from"], transition["to"]) == ("richardson", "diffusive")
    assert transition["median_km"] == pytest.approx(
        verdict.transitions[0].scale.median / 1000.0, rel=1e-5
    )  # six printed digits
    assert sum(s["probability"] for s in document["sequences"]) == pytest.approx(1.0, rel=1e-5)  # six printed digits
    by = document["by_separation"]
    assert len(by["edges_km"]) == len(by["separation_km"]) + 1
    assert np.allclose(sum(np.array(p) for p in by["probability"].values()), 1.0, rtol=1e-5)  # six printed digits
    none = [s for s in document["slopes"] if s["kind"] == "none"]
    assert none
    assert all(s["median"] is None for s in none)


def test_end_of_a_spectrum_is_in_the_document_and_on_the_page(analysis, schema):
    ended = replace(analysis.verdict.slopes[1], outer_scale=OuterScale(8.1e4, 5e4, 1.3e5), log_bayes_factor_end=1.5)
    found = with_verdict(analysis, slopes=(ended, analysis.verdict.slopes[0]))
    document = verdict_document(found)
    schema.validate(document)
    first, second = document["slopes"]
    assert first["outer_scale_km"] == {"median": 81.0, "lo95": 50.0, "hi95": 130.0}
    assert first["log_bayes_factor_end"] == 1.5
    assert second["outer_scale_km"] == {"median": None, "lo95": None, "hi95": None}
    assert second["log_bayes_factor_end"] is None
    assert "the spectrum may end near 81 km (50 to 130, 95 %)" in Outline(page(found, {})).text


def test_document_of_single_particles_is_that_of_the_record(analysis):
    said = verdict_document(analysis)["single_particle"]
    single = analysis.single
    scale = single.scale("first_zero")
    # six printed digits
    assert said["integral_time_d"]["first_zero"]["value"] == pytest.approx(scale.time.value / 86400.0, rel=1e-5)
    assert said["integral_length_km"]["first_zero"]["lo95"] == pytest.approx(scale.length.low / 1000.0, rel=1e-5)
    assert said["diffusivity_m2_s"]["minor"]["hi95"] == pytest.approx(single.diffusivity.minor.high, rel=1e-5)
    assert said["converges"] is single.converges
    assert (said["n_particles"], said["n_units"], said["mean_removed"]) == (36, 12, "record")
    assert [r["expected"] for r in said["ratios"]] == [1.0, None]
    assert said["ratios"][1]["name"] == "Lagrangian length over the deformation radius"


@pytest.mark.parametrize("single", [True, False])
def test_document_without_pairs_follows_the_same_schema(schema, single):
    found = singles_only(single)
    document = json.loads(verdict_text(found))
    schema.validate(document)
    assert document["decision"] == "undecided"
    assert document["sentence"] == found.sentence
    assert document["reasons"] == list(found.reasons)
    assert document["by_separation"]["slope"] == {"median": [], "lo95": [], "hi95": []}
    assert document["health"] == {"ok": True, "reason": "nothing was sampled", "rhat_max": None, "ess_min": None}
    assert (document["single_particle"] is not None) == single
    assert document["single_particle_reason"] == found.single_missing


def test_infinite_numbers_become_null(analysis):
    unhealthy = with_verdict(analysis, rhat_max=np.inf, fit_p_value=np.nan, healthy=False)
    document = verdict_document(unhealthy)
    assert document["health"]["rhat_max"] is None
    assert document["fit_p_value"] is None
    assert document["health"]["ok"] is False


def test_document_is_made_of_plain_types_only():
    with pytest.raises(TypeError, match="got a set; must be made of plain types"):
        plain({"a": {1}})
