"""The whole audit: every row in its order, whatever becomes of one of them."""

import math

import pytest

from regimes.audit import run
from regimes.audit.record import THREATS, Finding
from regimes.audit.subject import subject_of
from regimes.errors import DataError
from regimes.fitting import Options
from tests.audit_triplets import survey


@pytest.fixture(scope="module")
def subject():
    return subject_of(*survey(3, number=7), Options())


def _quiet(threat):
    return lambda subject: Finding(threat, False, 1.0, "of nothing", None, False, f"{threat} is fine.")


def test_rows_come_in_the_order_of_the_threats(subject, monkeypatch):
    monkeypatch.setattr(run, "ROWS", {threat: _quiet(threat) for threat in reversed(THREATS)})
    told = []
    found = run.audit(subject, lambda *progress: told.append(progress))
    assert tuple(f.threat for f in found) == THREATS
    assert told[-1] == ("audit", len(THREATS), len(THREATS))


def test_a_row_that_cannot_be_computed_says_why(subject, monkeypatch):
    def refuse(subject):
        raise DataError("got two fixes; need three; use longer records")

    monkeypatch.setattr(run, "ROWS", {threat: _quiet(threat) for threat in THREATS} | {"range": refuse})
    found = {f.threat: f for f in run.audit(subject)}
    assert not found["range"].flag
    assert math.isnan(found["range"].size)
    assert found["range"].text == "Could not be computed for these data: got two fixes; need three; use longer records."
    assert found["pairs"].text == "pairs is fine."


def test_an_error_of_the_program_is_not_hidden(subject, monkeypatch):
    def broken(subject):
        raise ZeroDivisionError

    monkeypatch.setattr(run, "ROWS", {"range": broken})
    with pytest.raises(ZeroDivisionError):
        run.audit(subject)


def test_threads_do_not_change_findings(subject, monkeypatch):
    some = {threat: run.ROWS[threat] for threat in ("record_ends", "range")}
    monkeypatch.setattr(run, "ROWS", some)
    assert run.audit(subject, jobs=2) == run.audit(subject)


def test_every_row_belongs_to_a_threat():
    assert set(run.ROWS) == set(THREATS)
