"""Several cases at once, sweeps, their overview, and what an interruption leaves."""

import csv
import json
import os
import signal
import subprocess
import sys
import time
import tomllib

import pytest

import regimes.batch.worker
from regimes import cli
from regimes.batch import Outcome, check_overview, run_all, tasks_of, worst_code, write_overview
from regimes.batch.earlier import kept
from regimes.batch.overview import COLUMNS, page_row, table_row
from regimes.batch.worker import Leaving, outcome_of
from regimes.cases import case_from, load_case, variants
from regimes.errors import CaseError, DataError
from regimes.pipeline.origin import case_sha256, versions
from regimes.report.verdict_json import verdict_document
from tests.report_fixture import demo_analysis, use_drawings_made_before, with_verdict
from tests.test_cli import RECIPE, _far_apart, walks, write_case

CASE = """
name = "bank"
seed = 3
[observations]
path = "fixes.csv"
position_error_m = 5
columns = { particle = "id", time = "time", x = "x", y = "y" }
[pairs]
max_separation_km = 1
"""


def case_with(more=""):
    return case_from(tomllib.loads(CASE + more))


# The sweep section


def test_sweep_gives_every_combination_once_with_the_rest_of_the_case():
    base = case_with()
    found = variants(case_with("[sweep]\ncurves.separation_ratio = [1.2, 2]\npairs.max_separation_km = [1, 2.5, 7]"))
    pairs = [(case.curves.separation_ratio, case.pairs.max_separation_km) for _, case in found]
    assert sorted(pairs) == [(ratio, km) for ratio in (1.2, 2.0) for km in (1.0, 2.5, 7.0)]
    assert len({label for label, _ in found}) == len({case.name for _, case in found}) == 6
    for label, case in found:
        assert label in case.name
        assert case.sweep is None
        assert (case.seed, case.observations, case.models) == (base.seed, base.observations, base.models)
        assert case.pairs.launched_within_h == base.pairs.launched_within_h
    assert variants(base) == [("", base)]


@pytest.mark.parametrize(
    ("line", "words"),
    [
        ("", r"sweep: got 0 combinations; must be 1 to 64"),
        ("curves.separation_ratio = []", r"sweep: got curves.separation_ratio = \[\]; must be a list of different"),
        ("curves.separation_ratio = [1.2, 1.2]", r"= \[1.2, 1.2\]; must be a list of different values"),
        ("curves.separation_ratio = [1.2, 9]", r"sweep.curves.separation_ratio: got 9; must be <= 3"),
        ("curves.separation_ratio = 1.2", r"sweep.curves.separation_ratio: got 1.2; must be a list"),
        ("curves.colour = [1]", r"sweep.curves.colour: unknown key; known: separation_ratio"),
        ("curve.colour = [1]", r"sweep.curve: unknown key; .*did you mean curves\?"),
        ("curves = 1", r"sweep.curves: got 1; must be a table of keys"),
        ('observations.path = ["a.csv"]', r"sweep: got observations.path; must name no file; write a case for each"),
        ("curves.separations_km = [[1, 9], [9, 1]]", r"sweep.curves.separations_km: got \[9.0, 1.0\]; must rise"),
    ],
)
def test_sweep_that_cannot_be_is_refused_at_the_door(line, words):
    with pytest.raises(CaseError, match=words):
        case_with(f"[sweep]\n{line}")


def test_hash_of_a_case_knows_the_choices_and_not_the_place(tmp_path):
    base = case_sha256(case_with())
    same = case_with("[curves]\ntriplets = true\n[sweep]\ncurves.separation_ratio = [1.2]")
    assert case_sha256(same) == base
    moved = tomllib.loads(CASE)
    moved["observations"]["path"] = "elsewhere/fixes.csv"
    assert case_sha256(case_from(moved)) == base
    flow = '[single]\nmean = "grid"\nmean_flow = "{}"'
    for name, content in (("f.nc", b"1"), ("g.nc", b"1"), ("h.nc", b"2")):
        (tmp_path / name).write_bytes(content)
    f, g, h = (case_sha256(case_with(flow.format(tmp_path / name))) for name in ("f.nc", "g.nc", "h.nc"))
    others = {case_sha256(case_with(more)) for more in ("[curves]\ntriplets = false", "launched_within_h = 5")}
    assert len({base, f, h} | others) == 5
    assert f == g


# One run


def loaded(*names, case=None):
    return [(f"{name}.toml", name, case or case_with()) for name in names]


def stubbed(monkeypatch, result):
    def analyse(case, jobs, seed):
        if isinstance(result, Exception):
            raise result
        return result

    monkeypatch.setattr(regimes.batch.worker, "analyse", analyse)
    use_drawings_made_before(monkeypatch)


@pytest.mark.parametrize(
    ("result", "state", "code", "words"),
    [
        (DataError("no pair"), "failed", 3, "no pair"),
        (ZeroDivisionError("of nothing"), "failed", 1, "internal error: ZeroDivisionError: of nothing"),
        (None, "done", 0, ""),
        ("unhealthy", "done", 4, ""),
    ],
)
def test_every_failure_of_a_run_becomes_an_outcome(result, state, code, words, tmp_path, monkeypatch):
    if not isinstance(result, Exception):
        result = with_verdict(demo_analysis(), healthy=result is None)
        words = result.sentence
    stubbed(monkeypatch, result)
    (task,) = tasks_of(loaded("bank"), tmp_path)
    outcome = outcome_of(task, 1, Leaving())
    assert (outcome.state, outcome.code) == (state, code)
    assert outcome.message.startswith(words)
    assert (tmp_path / "bank" / "report.html").exists() == (state == "done")


def test_folder_of_others_and_bad_case_file_are_failures_of_one_run(tmp_path, monkeypatch):
    stubbed(monkeypatch, demo_analysis())
    (tmp_path / "bank").mkdir()
    (tmp_path / "bank" / "notes.txt").write_text("keep")
    good, bad = tasks_of([*loaded("bank"), ("b.toml", "b", "b.toml has 1 problem")], tmp_path)
    assert "notes.txt in it" in outcome_of(good, 1, Leaving()).message
    outcome = outcome_of(bad, 1, Leaving())
    assert (outcome.code, outcome.message) == (2, "b.toml has 1 problem")


def test_two_runs_in_one_folder_are_refused(tmp_path):
    with pytest.raises(CaseError, match=r"for bank.toml; every run must have a folder of its own"):
        tasks_of(loaded("bank", "bank"), tmp_path)
    swept = case_with("[sweep]\npairs.max_separation_km = [1, 2]")
    tasks = tasks_of(loaded("bank", case=swept), tmp_path, seed=8)
    assert [t.folder.name for t in tasks] == ["bank--max_separation_km-1", "bank--max_separation_km-2"]
    assert [t.seed for t in tasks] == [8, 8]


def test_worst_code_is_the_gravest():
    codes = {code: Outcome(None, "failed", code, "") for code in (0, 1, 2, 3, 4)}
    for some, worst in (((0, 0), 0), ((0, 4), 4), ((4, 3), 3), ((3, 2, 0), 2), ((2, 1, 3), 1), ((), 0)):
        assert worst_code(codes[c] for c in some) == worst


# What is there already


def report_of(task, folder, **changes):
    """The verdict that a run of the task would leave."""
    folder.mkdir(parents=True)
    document = verdict_document(demo_analysis()) | {
        "versions": versions(), "seed": task.seed, "case_sha256": case_sha256(task.case),
    }  # fmt: skip
    document["input"] = document["input"] | {"sha256": "0" * 64}
    (folder / "verdict.json").write_text(json.dumps(document | changes))
    (folder / "report.html").write_text("page")


@pytest.mark.parametrize(
    ("changes", "same"),
    [
        ({}, True),
        ({"seed": 4}, False),
        ({"case_sha256": "1" * 64}, False),
        ({"versions": {"regimes": "0.0.1"}}, False),
        ({"input": {"sha256": "1" * 64}}, False),
    ],
)
def test_report_of_the_same_run_is_kept(changes, same, tmp_path, monkeypatch):
    monkeypatch.setattr(regimes.batch.earlier, "sha256_of", lambda path: "0" * 64)
    (task,) = tasks_of(loaded("bank"), tmp_path)
    assert kept(task) is None
    report_of(task, task.folder, **changes)
    outcome = kept(task)
    assert (outcome is not None) == same
    if same:
        assert (outcome.state, outcome.code) == ("kept", 0)
        report = task.folder / "report.html"
        report.unlink()
        assert kept(task) is None


def test_kept_report_that_did_not_converge_keeps_its_code(tmp_path, monkeypatch):
    monkeypatch.setattr(regimes.batch.earlier, "sha256_of", lambda path: "0" * 64)
    (task,) = tasks_of(loaded("bank"), tmp_path)
    health = verdict_document(demo_analysis())["health"] | {"ok": False}
    report_of(task, task.folder, health=health)
    assert kept(task).code == 4


# The overview


def test_overview_has_a_line_for_every_run(tmp_path):
    tasks = tasks_of([*loaded("a", "b", "c"), ("d.toml", "d", "d.toml has 1 problem")], tmp_path)
    report_of(tasks[0], tasks[0].folder)
    outcomes = [
        Outcome(tasks[0], "done", 0, "sentence"),
        Outcome(tasks[1], "not run", 0, "interrupted"),
        Outcome(tasks[2], "failed", 3, "no <pair>"),
        Outcome(tasks[3], "failed", 2, tasks[3].problem),
    ]
    page = write_overview(outcomes, tmp_path).read_text(encoding="utf-8")
    assert 'href="a/report.html"' in page
    assert "no &lt;pair&gt;" in page
    assert "1 done, 2 failed, 1 not run" in page
    with (tmp_path / "overview.csv").open(newline="", encoding="utf-8") as file:
        rows = list(csv.DictReader(file))
    assert [row["state"] for row in rows] == ["done", "not run", "failed", "failed"]
    assert [row["exit_code"] for row in rows] == ["0", "", "3", "2"]
    assert [row["decision"] for row in rows] == [verdict_document(demo_analysis())["decision"], "", "", ""]
    assert write_overview(outcomes[:1], tmp_path).exists()  # one of its own may be replaced


def test_lines_say_what_the_verdict_says(tmp_path):
    (task,) = tasks_of(loaded("bank"), tmp_path)
    document = verdict_document(demo_analysis())
    slope = next(s for s in document["slopes"] if s["curve"] == "exit_rate" and s["kind"] != "none")
    outcome = Outcome(task, "done", 0, "sentence")
    row = table_row(outcome, document)
    assert tuple(row) == COLUMNS
    assert (row["alpha"], row["alpha_lo95"], row["alpha_hi95"]) == (slope["median"], slope["lo95"], slope["hi95"])
    assert row["cautions"].split() == [c["code"] for c in document["cautions"]]
    likely = [t for t in document["transitions"] if t["probability"] >= 0.5]
    assert len(likely) >= 1
    assert row["transitions"].count(";") + 1 == len(page_row(outcome, document)["transitions"]) == len(likely)
    for t in likely:
        assert f"{t['from']}-{t['to']} {t['median_km']:g} (" in row["transitions"]
    bound = document | {"slopes": [slope | {"kind": "lower_bound", "lo95": 2.26}]}
    assert page_row(outcome, bound)["alpha"] == "\u2265 2.3"
    unsaid = [slope | {"curve": "separation", "median": 9.0}, slope | {"kind": "none", "median": 9.0}, slope]
    assert table_row(outcome, document | {"slopes": unsaid})["alpha"] == slope["median"]
    assert page_row(outcome, document | {"slopes": []})["alpha"] == "none quoted"


def test_overview_of_something_else_is_not_replaced(tmp_path):
    (tmp_path / "overview.csv").write_text("mine")
    with pytest.raises(CaseError, match="must have none but of earlier runs"):
        check_overview(tmp_path)
    (tmp_path / "overview.csv").unlink()
    (tmp_path / "overview.html").write_text("mine")
    with pytest.raises(CaseError, match=r"with another overview.html"):
        check_overview(tmp_path)
    with pytest.raises(CaseError, match="which is a file"):
        check_overview(tmp_path / "overview.html")


# From end to end, in processes


@pytest.mark.slow
def test_several_cases_and_a_sweep_from_end_to_end(tmp_path, monkeypatch, capsys):
    monkeypatch.chdir(tmp_path)
    write_case(tmp_path / "a", _far_apart(200))
    write_case(tmp_path / "b", _far_apart(200), more="[sweep]\nsingle.deformation_radius_km = [10, 20.5]")
    write_case(tmp_path / "c", walks(particles=2, fixes=5))
    files = [f"{name}/case.toml" for name in "abcd"]
    folders = ["a", "b--deformation_radius_km-10", "b--deformation_radius_km-20.5"]
    assert cli.main(["run", *files, "--jobs", "2"]) == 2
    said = capsys.readouterr()
    assert "regimes: d: d/case.toml: no such file" in said.err
    assert "regimes: c: exit rates: fewer than 3" in said.err
    assert said.out.splitlines()[-1] == "overview: reports/overview.html"
    for name in folders:
        assert (tmp_path / "reports" / name / "report.html").exists()
    assert not (tmp_path / "reports" / "c").exists()
    before = (tmp_path / "reports" / "a" / "verdict.json").read_bytes()
    assert cli.main(["run", *files[:2]]) == 0
    assert capsys.readouterr().out.count("(kept: a report of the same") == 3
    assert cli.main(["run", files[0], files[1], "--again"]) == 0
    assert "(kept" not in capsys.readouterr().out
    assert (tmp_path / "reports" / "a" / "verdict.json").read_bytes() == before
    assert cli.main(["run", files[1]]) == 0
    assert {path.name for path in (tmp_path / "reports" / "b-sweep").iterdir()} == {
        *folders[1:], "overview.html", "overview.csv",
    }  # fmt: skip


def test_a_process_that_dies_is_a_failure_of_its_run(tmp_path, monkeypatch):
    """It ends while it takes its task."""

    class Dies:
        def __reduce__(self):
            return (os._exit, (9,))

    (task,) = tasks_of(loaded("bank"), tmp_path)
    object.__setattr__(task, "variant", Dies())
    (outcome,) = run_all([task], 1)
    assert (outcome.state, outcome.code) == ("failed", 1)
    assert "its process ended with code 9" in outcome.message


@pytest.mark.slow
def test_interruption_leaves_complete_reports_and_says_which(tmp_path):
    write_case(tmp_path / "a", _far_apart(200))
    recipe = RECIPE.replace("number = 2", "number = 40").replace("duration_d = 3", "duration_d = 30")
    recipe = recipe.replace('["exponential"]', '["exponential", "diffusive"]\ntransitions_km = [20]')
    (tmp_path / "recipe.toml").write_text(recipe)
    assert cli.main(["simulate", str(tmp_path / "recipe.toml"), "--out", str(tmp_path / "long.csv")]) == 0
    long = (
        CASE.replace("fixes.csv", "long.csv")
        .replace('"id"', '"particle"')
        .replace('x = "x", y = "y"', 'x = "x_m", y = "y_m"')
    )
    (tmp_path / "long.toml").write_text(long + "[curves]\nrepetitions = 9999\n")
    command = [sys.executable, "-m", "regimes.cli", "run", "a/case.toml", "long.toml", "--jobs", "2"]
    run = subprocess.Popen(
        command, cwd=tmp_path, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True, start_new_session=True
    )
    until = time.monotonic() + 120
    while not (tmp_path / "reports" / "a" / "report.html").exists() and run.poll() is None:
        assert time.monotonic() < until
        time.sleep(0.2)
    time.sleep(1.0)
    os.killpg(run.pid, signal.SIGINT)  # as a terminal does: to every process of the group
    out, err = run.communicate(timeout=120)
    assert run.returncode == 130, err
    assert err == "interrupted; without a report: long; the others are complete\n"
    assert "a: Undecided" in out
    with (tmp_path / "reports" / "overview.csv").open(newline="", encoding="utf-8") as file:
        assert [row["state"] for row in csv.DictReader(file)] == ["done", "not run"]
    left = {path.name for path in (tmp_path / "reports").iterdir()}
    assert left == {"a", "overview.html", "overview.csv"}
    (task,) = tasks_of([("a/case.toml", "a", load_case(tmp_path / "a" / "case.toml"))], tmp_path / "reports")
    assert kept(task) is not None
