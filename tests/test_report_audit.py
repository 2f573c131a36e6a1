"""The audit in verdict.json, on the page and in the decision."""

import json
from dataclasses import replace
from importlib import resources

import jsonschema
import pytest

from regimes.report.figures import draw, svg
from regimes.report.page import page
from regimes.report.verdict_json import verdict_document
from regimes.verdict.decide import _unsafe
from regimes.verdict.finding import THREATS
from tests.report_fixture import demo_analysis, demo_audit


def test_document_holds_nine_findings_in_order_and_keeps_to_the_schema():
    document = verdict_document(demo_analysis())
    schema = resources.files("regimes.report").joinpath("verdict.schema.json").read_text(encoding="utf-8")
    jsonschema.Draft202012Validator(json.loads(schema)).validate(document)
    rows = document["audit"]
    assert [row["threat"] for row in rows] == list(THREATS)
    by_name = {row["threat"]: row for row in rows}
    assert by_name["oscillation"]["separations_km"] == [2.0, 9.0]
    assert by_name["pairs"]["size"] is None
    assert by_name["range"]["verdict_changes"] is True


def test_page_shows_every_threat_its_flag_and_its_words():
    analysis = demo_analysis()
    text = page(analysis, {name: svg(draw(name, analysis), name) for name in ("regimes",)})
    assert "What could fake this result" in text
    assert text.count("raised</strong>") == 2
    assert "2 of 9 flags" in text
    assert all(f.text in text for f in analysis.audit)
    clean = replace(analysis, audit=tuple(replace(f, flag=False) for f in analysis.audit))
    assert "9 threats sized" in page(clean, {"regimes": svg(draw("regimes", clean), "regimes")})


@pytest.mark.parametrize(("flag", "changes", "stops"), [(True, True, 1), (True, False, 0), (False, True, 0)])
def test_only_a_flag_with_another_verdict_stops_supported(flag, changes, stops):
    finding = replace(demo_audit()[0], flag=flag, verdict_changes=changes)
    said = _unsafe((finding,))
    assert len(said) == stops
    assert all("position error may have made this result" in text for text in said)
