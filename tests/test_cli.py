"""The command line: exit codes, one message and never a traceback, nothing written when it failed."""

import json
import os
import signal
import subprocess
import sys
import time
from importlib import resources
from pathlib import Path

import jsonschema
import numpy as np
import pandas as pd
import pytest
import xarray as xr

import regimes.pipeline
from regimes import cli
from regimes.errors import DataError, FitError
from tests.report_fixture import demo_analysis, use_drawings_made_before, with_verdict

CASE = """
name = "Invented bank"
seed = 3
[observations]
path = "fixes.csv"
position_error_m = 5
[observations.columns]
particle = "id"
time = "time"
{position}
[pairs]
max_separation_km = {farthest}
{more}
"""
GEOGRAPHIC = 'longitude = "lon"\nlatitude = "lat"'


def walks(particles=4, fixes=50):
    """Particles that wander from nearly the same place, hourly."""
    rng = np.random.default_rng(8)
    time_axis = pd.Timestamp("2031-03-01") + pd.to_timedelta(np.arange(fixes), unit="h")
    steps = rng.normal(0.0, 1e-3, (particles, 2, fixes)).cumsum(axis=2)
    frames = [
        pd.DataFrame({"id": f"p{k}", "time": time_axis, "lon": 10.0 + 1e-3 * k + x, "lat": 50.0 + y})
        for k, (x, y) in enumerate(steps)
    ]
    return pd.concat(frames, ignore_index=True)


def write_case(folder, fixes, position=GEOGRAPHIC, farthest=5.0, more=""):
    folder.mkdir(parents=True, exist_ok=True)
    if isinstance(fixes, bytes):
        (folder / "fixes.csv").write_bytes(fixes)
    else:
        fixes.to_csv(folder / "fixes.csv", index=False)
    path = folder / "case.toml"
    path.write_text(CASE.format(position=position, farthest=farthest, more=more))
    return path


@pytest.fixture
def here(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    return tmp_path


@pytest.fixture
def case(here):
    return write_case(here / "cases" / "bank", walks())


def stub(monkeypatch, result):
    """Let `analyse` give a result, or raise it, without a fit; returns what it was asked for."""
    asked = {}

    def analyse(case, progress=None, jobs=1, seed=None):
        asked.update(case=case, progress=progress, jobs=jobs, seed=seed)
        if isinstance(result, BaseException):
            raise result
        return result

    monkeypatch.setattr(regimes.pipeline, "analyse", analyse)
    use_drawings_made_before(monkeypatch)
    return asked


# run


def test_run_writes_the_report_and_says_where(case, here, monkeypatch, capsys):
    asked = stub(monkeypatch, demo_analysis())
    assert cli.main(["run", str(case)]) == 0
    said = capsys.readouterr()
    assert said.out.splitlines() == [
        demo_analysis().verdict.sentence,
        f"report: {Path('reports') / 'bank' / 'report.html'}",
    ]
    assert said.err == ""
    assert json.loads((here / "reports" / "bank" / "verdict.json").read_text(encoding="utf-8"))["schema"] == 1
    assert asked["case"].name == "Invented bank"
    assert asked["seed"] is None
    assert asked["jobs"] == os.cpu_count()
    assert asked["progress"] is None  # stderr is no terminal here


def test_run_takes_folder_seed_and_jobs(case, here, monkeypatch):
    asked = stub(monkeypatch, demo_analysis())
    assert cli.main(["run", str(case), "--out", "else/where", "--seed", "0", "--jobs", "1"]) == 0
    assert (asked["seed"], asked["jobs"]) == (0, 1)
    assert (here / "else" / "where" / "report.html").exists()
    assert not (here / "reports").exists()


def test_undecided_is_done(case, monkeypatch):
    stub(monkeypatch, with_verdict(demo_analysis(), decision="undecided", sentence="Undecided: few pairs."))
    assert cli.main(["run", str(case)]) == 0


def test_unhealthy_fit_is_reported_and_has_its_own_code(case, here, monkeypatch, capsys):
    stub(monkeypatch, with_verdict(demo_analysis(), healthy=False, health_reason="split R-hat 1.2 is not below 1.01"))
    assert cli.main(["run", str(case)]) == 4
    assert "did not converge: split R-hat 1.2 is not below 1.01" in capsys.readouterr().err
    assert (here / "reports" / "bank" / "report.html").exists()


@pytest.mark.parametrize(
    ("error", "code", "words"),
    [
        (DataError("no pair"), 3, "regimes: no pair\n"),
        (FitError("no start"), 4, "regimes: no start\n"),
        (KeyboardInterrupt(), 130, "interrupted; nothing was written\n"),
    ],
)
def test_errors_become_one_message_and_a_code(case, here, monkeypatch, capsys, error, code, words):
    stub(monkeypatch, error)
    assert cli.main(["run", str(case)]) == code
    assert capsys.readouterr().err == words
    assert not (here / "reports").exists()


def test_defect_becomes_one_line_that_can_be_reported(case, monkeypatch, capsys):
    stub(monkeypatch, ZeroDivisionError("division\nby zero"))
    assert cli.main(["run", str(case)]) == 1
    (line,) = capsys.readouterr().err.splitlines()
    assert line.startswith("regimes: internal error: ZeroDivisionError: division by zero (line ")
    assert "test_cli.py" in line
    assert "please report it" in line


def test_folder_of_others_is_refused_before_the_fit(case, here, monkeypatch, capsys):
    asked = stub(monkeypatch, demo_analysis())
    (here / "mine").mkdir()
    (here / "mine" / "notes.txt").write_text("keep")
    assert cli.main(["run", str(case), "--out", "mine"]) == 2
    assert "notes.txt in it" in capsys.readouterr().err
    assert asked == {}


@pytest.mark.parametrize(
    ("path", "name", "folder"),
    [
        ("cases/Bank Survey/case.toml", "x", "reports/bank-survey"),
        ("cases/bank/winter.toml", "x", "reports/winter"),
        ("cases/--/case.toml", "Südliche Bank", "reports/südliche-bank"),
        ("cases/--/case.toml", "!", "reports/case"),
    ],
)
def test_default_folder(path, name, folder):
    assert cli.default_folder(Path(path), name) == Path(folder)


# Arguments


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        ([], "the following arguments are required"),
        (["fly"], "invalid choice: 'fly'"),
        (["run"], "the following arguments are required: CASE"),
        (["run", "c", "--jobs", "0"], "argument --jobs: got '0'; must be a whole number of 1 or more"),
        (["run", "c", "--seed", "-1"], "argument --seed: got '-1'; must be a whole number of 0 or more"),
        (["run", "c", "--seed", "two"], "argument --seed: got 'two'; must be a whole number of 0 or more"),
        (["simulate", "r"], "the following arguments are required: --out"),
        (
            ["simulate", "r", "--out", "a.txt"],
            "argument --out: got 'a.txt'; must end in one of .csv, .csv.gz, .parquet",
        ),
    ],
)
def test_wrong_arguments(arguments, words, capsys):
    with pytest.raises(SystemExit) as stop:
        cli.main(arguments)
    assert stop.value.code == 2
    assert words in capsys.readouterr().err


def test_version_is_that_of_the_package(capsys):
    from importlib.metadata import version

    with pytest.raises(SystemExit) as stop:
        cli.main(["--version"])
    assert stop.value.code == 0
    assert capsys.readouterr().out == f"regimes {version('regimes')}\n"


def test_help_needs_no_heavy_library():
    code = (
        "import sys; from regimes import cli\n"
        "try: cli.main(['--help'])\n"
        "except SystemExit: sys.exit(len({'numpy', 'matplotlib', 'rich'} & set(sys.modules)))"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)
    assert done.returncode == 0
    assert "run" in done.stdout


# Data that cannot be used: the code, what the message must say


def _scaled(columns, factor):
    fixes = walks()
    fixes[columns] *= factor
    return fixes


def _fixed(**values):
    return walks().assign(**values)


NOISE = np.random.default_rng(1).integers(0, 256, 4000, dtype=np.uint8).tobytes()
BAD = {
    "no such case": (None, {}, 2, "no such file; give the path of a case file"),
    "unreadable file": (NOISE, {}, 3, "cannot be read"),
    "empty file": (b"", {}, 3, "empty"),
    "missing column": (walks().drop(columns="lat"), {}, 3, "no column named lat"),
    "metres for degrees": (_scaled(["lon", "lat"], 1e5), {}, 3, "are these metres?"),
    "degrees for metres": (walks(), {"position": 'x = "lon"\ny = "lat"'}, 3, "look like degrees"),
    "one particle": (walks(particles=1), {}, 3, "a pair needs at least two"),
    "no pairs": (walks(), {"farthest": 1e-3}, 3, "raise pairs.max_separation_km"),
    "all NaN": (_fixed(lon=np.nan, lat=np.nan), {}, 3, "not one of 200 rows has both"),
    "one point": (_fixed(lon=10.0, lat=50.0), {}, 3, "lie at one point"),
    "times in words": (_fixed(time="yesterday"), {}, 3, 'such as "yesterday"'),
    "unknown key": (walks(), {"more": "colour = 1"}, 2, "pairs.colour: unknown key"),
}


NO_PAIR = ("one particle", "no pairs")  # particles can still be taken one by one


@pytest.mark.parametrize("command", ["check", "run"])
@pytest.mark.parametrize("what", [what for what in BAD if what not in NO_PAIR])
def test_bad_input_gives_one_clear_message(what, command, here, capsys):
    fixes, changes, code, words = BAD[what]
    path = here / "absent.toml" if fixes is None else write_case(here / "case", fixes, **changes)
    assert cli.main([command, str(path)]) == code
    said = capsys.readouterr()
    assert words in said.err
    assert "Traceback" not in said.err
    assert "internal error" not in said.err
    assert said.out == ""
    assert not (here / "reports").exists()


# Data without a pair

FAR = "the smallest start separation within 6 h is"


def _far_apart(fixes):
    """Particles that wander a degree of longitude and more from one another."""
    drifts = walks(fixes=fixes)
    drifts["lon"] += drifts.id.str[1:].astype(float)
    return drifts


@pytest.mark.parametrize("what", NO_PAIR)
def test_check_without_a_pair_says_so(what, here, capsys):
    fixes, changes, _, words = BAD[what]
    assert cli.main(["check", str(write_case(here / "case", fixes, **changes))]) == 0
    said = capsys.readouterr()
    assert "no pair, single particles only: " in said.out
    assert words in said.out
    assert said.err == ""


@pytest.mark.parametrize("what", NO_PAIR)
def test_run_without_a_pair_is_done_and_undecided(what, here, capsys):
    fixes, changes, _, words = BAD[what]
    assert cli.main(["run", str(write_case(here / "case", fixes, **changes))]) == 0
    said = capsys.readouterr()
    assert words in said.out
    assert said.out.startswith("Undecided: no pair statistics exist, for want of a pair to compare. ")
    assert said.err == ""


@pytest.mark.parametrize(("fixes", "enough"), [(200, True), (12, False)])
def test_particles_far_apart_from_end_to_end(fixes, enough, here, capsys):
    path = write_case(here / "case", _far_apart(fixes), more="[single]\ndeformation_radius_km = 20")
    assert cli.main(["run", str(path), "--out", "r"]) == 0
    out = capsys.readouterr().out
    assert FAR in out
    assert "raise pairs.max_separation_km" in out
    document = json.loads((here / "r" / "verdict.json").read_text(encoding="utf-8"))
    schema = resources.files("regimes.report").joinpath("verdict.schema.json").read_text(encoding="utf-8")
    jsonschema.Draft202012Validator(json.loads(schema)).validate(document)
    assert document["decision"] == "undecided"
    assert FAR in document["reasons"][0]
    assert (document["input"]["n_pairs"], document["input"]["n_particles"]) == (0, 4)
    assert document["case"] == "Invented bank"
    assert document["resolved_km"] == document["transitions"] == document["slopes"] == []
    table = pd.read_csv(here / "r" / "curves.csv")
    page = (here / "r" / "report.html").read_text(encoding="utf-8")
    assert "Single particles" in page
    if enough:
        (ratio,) = document["single_particle"]["ratios"]
        length = document["single_particle"]["integral_length_km"]["decaying_cosine"]["value"]
        assert ratio["value"] == pytest.approx(length / 20.0, rel=1e-5)  # six printed digits
        assert document["single_particle"]["n_units"] == 4
        assert table.curve.nunique() == 9
        assert (here / "r" / "figures" / "absolute.pdf").exists()
    else:
        assert document["single_particle"] is None
        assert "at least 15 are needed" in document["single_particle_reason"]
        assert "at least 15 are needed" in document["reasons"][1]
        assert len(table) == 0
        assert not (here / "r" / "figures").exists()


def test_mean_flow_of_a_file_is_taken_away(here, capsys):
    """A flow that carries all particles alike changes nothing once it is removed as it was added."""
    still = _far_apart(200)
    hour = still.groupby("id").cumcount()
    carried = still.assign(lat=still.lat + 1e-3 * hour)
    grid = {"lat": [45.0, 55.0], "lon": [5.0, 20.0]}
    # Metres of a degree of latitude on WGS84 at 50 degrees north: 111 229 (from memory), good to 1e-3 nearby.
    speed = np.full((2, 2), 1e-3 * 111_229 / 3600.0)
    flow = xr.Dataset({"u": (("lat", "lon"), 0.0 * speed), "v": (("lat", "lon"), speed)}, grid)
    kappa = {}
    for name, fixes, mean in (("still", still, "none"), ("carried", carried, "grid"), ("as it is", carried, "none")):
        path = write_case(
            here / name, fixes, more=f'[single]\nmean = "{mean}"\n' + 'mean_flow = "f.nc"' * (mean == "grid")
        )
        if mean == "grid":
            flow.to_netcdf(here / name / "f.nc", engine="h5netcdf")
        assert cli.main(["run", str(path), "--out", name + " report"]) == 0
        document = json.loads((here / f"{name} report" / "verdict.json").read_text(encoding="utf-8"))
        assert document["single_particle"]["mean_removed"] == mean
        kappa[name] = document["single_particle"]["diffusivity_m2_s"]["mean"]["value"]
    assert kappa["carried"] == pytest.approx(kappa["still"], rel=0.02)  # the degree of latitude and its change
    assert kappa["as it is"] > 1.1 * kappa["still"]


def test_mean_flow_that_cannot_be_read_is_a_reason_not_a_failure(here, capsys):
    path = write_case(here / "case", _far_apart(200), more='[single]\nmean = "grid"\nmean_flow = "f.nc"')
    (here / "case" / "f.nc").write_text("u,v")
    assert cli.main(["run", str(path), "--out", "r"]) == 0
    assert "is no NetCDF file" in json.loads((here / "r" / "verdict.json").read_text())["single_particle_reason"]


def test_ten_rows_can_be_counted_but_not_fitted(here, capsys):
    path = write_case(here / "case", walks(particles=2, fixes=5))
    assert cli.main(["check", str(path)]) == 0
    assert "10 fixes of 2 particles" in capsys.readouterr().out
    assert cli.main(["run", str(path)]) == 3
    assert "use more or longer records" in capsys.readouterr().err
    assert not (here / "reports").exists()


def test_check_counts(case, capsys):
    assert cli.main(["check", str(case)]) == 0
    out = capsys.readouterr().out
    assert "200 fixes of 4 particles" in out
    assert "6 pairs" in out  # four particles: 4 * 3 / 2


# simulate

RECIPE = """
name = "bank"
seed = 4
[kernel]
regimes = ["exponential"]
rate_per_d = 0.5
reference_km = 2
[releases]
number = 2
particles = 3
start_separation_km = 0.5
first = 2031-03-01T00:00:00Z
[records]
duration_d = 3
fix_interval_h = 6
"""


def test_simulated_fixes_can_be_counted(here, capsys):
    (here / "recipe.toml").write_text(RECIPE)
    assert cli.main(["simulate", "recipe.toml", "--out", "fixes.csv"]) == 0
    assert capsys.readouterr().out == "fixes: fixes.csv\n"
    assert sorted(p.name for p in here.iterdir()) == ["fixes.csv", "recipe.toml"]
    columns = 'x = "x_m"\ny = "y_m"\nrelease = "release"'
    (here / "case.toml").write_text(CASE.replace('"id"', '"particle"').format(position=columns, farthest=2, more=""))
    assert cli.main(["check", "case.toml"]) == 0
    assert "6 pairs" in capsys.readouterr().out  # two releases of three


def test_simulate_says_when_it_cannot_write(here, capsys):
    (here / "recipe.toml").write_text(RECIPE)
    assert cli.main(["simulate", "recipe.toml", "--out", "no/such/fixes.csv"]) == 2
    assert "must be a file in a folder that exists" in capsys.readouterr().err
    assert cli.main(["simulate", "absent.toml", "--out", "fixes.csv"]) == 2
    assert "no such file" in capsys.readouterr().err


# Terminals and pipes


def test_progress_is_shown_on_a_terminal_only(case, monkeypatch, capsys):
    analysis = demo_analysis()

    def analyse(case, progress=None, jobs=1, seed=None):
        for done in range(3):
            progress("sampling the exit rate fits", done, 2)
        return analysis

    monkeypatch.setattr(regimes.pipeline, "analyse", analyse)
    use_drawings_made_before(monkeypatch)
    monkeypatch.setattr(sys.stderr, "isatty", lambda: True, raising=False)
    monkeypatch.setenv("TTY_COMPATIBLE", "1")
    assert cli.main(["run", str(case)]) == 0
    said = capsys.readouterr()
    assert "sampling the exit rate fits" in said.err
    assert "2/2" in said.err
    assert "sampling" not in said.out


@pytest.mark.parametrize("command", ["check", "simulate"])
def test_stages_of_unknown_length_are_named(command, case, here, monkeypatch, capsys):
    monkeypatch.setattr(sys.stderr, "isatty", lambda: True, raising=False)
    monkeypatch.setenv("TTY_COMPATIBLE", "1")
    (here / "recipe.toml").write_text(RECIPE)
    more = ["recipe.toml", "--out", "fixes.csv"] if command == "simulate" else [str(case)]
    assert cli.main([command, *more]) == 0
    said = capsys.readouterr()
    assert {"check": "reading fixes", "simulate": "simulating"}[command] in said.err
    assert "None" not in said.err


def test_closed_pipe_is_no_error(case):
    command = [sys.executable, "-m", "regimes.cli", "check", str(case)]
    read, write = os.pipe()
    os.close(read)
    with os.fdopen(write, "wb") as out:
        done = subprocess.run(command, stdout=out, stderr=subprocess.PIPE, text=True, check=False)
    assert done.returncode == 141  # 128 + 13, as a shell reports SIGPIPE; common practice, no source
    assert done.stderr == ""


def test_interrupt_ends_at_once_and_leaves_nothing(case, here):
    # threads that sample must not be waited for, as a pool does that is left
    code = (
        "import sys, time\nfrom concurrent.futures import ThreadPoolExecutor\n"
        "import regimes.pipeline\nfrom regimes import cli\n"
        "def analyse(*_, **__):\n"
        "    with ThreadPoolExecutor(1) as pool:\n"
        "        work = pool.submit(time.sleep, 40); print('ready', flush=True); work.result()\n"
        "regimes.pipeline.analyse = analyse\n"
        "sys.exit(cli.main(sys.argv[1:]))"
    )
    command = [sys.executable, "-c", code, "run", str(case)]
    with subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True) as process:
        assert process.stdout.readline() == "ready\n"
        process.send_signal(signal.SIGINT)
        asked = time.monotonic()
        _, said = process.communicate(timeout=30)
        assert time.monotonic() - asked < 10.0
    assert process.returncode == 130
    assert said == "interrupted; nothing was written\n"
    assert not (here / "reports").exists()


@pytest.mark.slow
def test_simulate_check_and_run_from_end_to_end(here, capsys):
    recipe = RECIPE.replace("number = 2", "number = 30").replace("duration_d = 3", "duration_d = 20")
    (here / "recipe.toml").write_text(recipe.replace("fix_interval_h = 6", "fix_interval_h = 1"))
    assert cli.main(["simulate", "recipe.toml", "--out", "fixes.csv"]) == 0
    columns = 'x = "x_m"\ny = "y_m"\nrelease = "release"'
    (here / "case.toml").write_text(CASE.replace('"id"', '"particle"').format(position=columns, farthest=2, more=""))
    assert cli.main(["run", "case.toml", "--out", "report"]) == 0
    document = json.loads((here / "report" / "verdict.json").read_text(encoding="utf-8"))
    by = document["by_separation"]
    # the recipe's world is exponential at every separation
    assert min(by["probability"]["exponential"]) > 0.05
    assert capsys.readouterr().out.splitlines()[-1] == f"report: {Path('report') / 'report.html'}"
