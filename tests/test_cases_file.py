"""The case file: defaults, units, and every problem in words, all at once."""

from typing import get_args

import pytest

from regimes.cases import REGIMES, Case, Columns, case_from, load_case
from regimes.cases.record import Regime
from regimes.errors import CaseError

SMALLEST = """
name = "bank survey"
seed = 7
[observations]
path = "data/fixes.csv"
columns = { particle = "id", time = "time", longitude = "lon", latitude = "lat" }
position_error_m = 10.0
[pairs]
max_separation_km = 1
"""


@pytest.fixture
def folder(tmp_path):
    (tmp_path / "data").mkdir()
    (tmp_path / "data" / "fixes.csv").write_text("id,time,lon,lat\n")
    return tmp_path


def load(folder, text):
    path = folder / "case.toml"
    path.write_text(text, encoding="utf-8")
    return load_case(path)


def problems(folder, text):
    """The lines of the error, without the path before them."""
    with pytest.raises(CaseError, match=r"case\.toml") as caught:
        load(folder, text)
    return str(caught.value).replace(str(folder) + "/", "").splitlines()


def test_defaults(folder):
    case = load(folder, SMALLEST)
    assert (case.name, case.seed) == ("bank survey", 7)
    assert case.observations.position_error_m == 10.0
    assert (case.observations.step, case.observations.longest_gap) == (None, None)
    assert case.observations.highest_speed_m_s is None
    assert (case.pairs.kind, case.pairs.max_separation, case.pairs.launched_within) == (
        "launched",
        1e3,
        21_600.0,
    )
    assert case.curves.separation_ratio**2 == pytest.approx(2.0, rel=1e-12)
    assert case.curves.separations is None
    assert case.models.regimes == ("ballistic", "exponential", "richardson", "diffusive")
    assert case.models.most_transitions == 2
    assert case.report.slope_range is None
    assert (case.single.mean, case.single.period, case.single.mean_flow) == ("record", None, None)
    assert case.single.deformation_radius is None


def test_everything_given_in_si_units(folder):
    text = SMALLEST.replace("position_error_m = 10.0", "position_error_m = 10\nstep_h = 0.5\nlongest_gap_h = 2.0")
    text += 'kind = "both"\nlaunched_within_h = 3\n'
    text += "[curves]\nseparation_ratio = 1.2\nseparations_km = [0.5, 500.0]\n"
    text += '[models]\nregimes = ["richardson", "diffusive"]\nmost_transitions = 0\n'
    text += "[report]\nslope_range_km = [2, 100.0]\n"
    text += '[single]\nmean = "lowpass"\nlowpass_d = 5\ndeformation_radius_km = 30\n'
    case = load(folder, text)
    assert (case.observations.step, case.observations.longest_gap) == (1800.0, 7200.0)
    assert (case.pairs.kind, case.pairs.launched_within) == ("both", 10_800.0)
    assert (case.curves.separation_ratio, case.curves.separations) == (1.2, (500.0, 500_000.0))
    assert (case.models.regimes, case.models.most_transitions) == (("richardson", "diffusive"), 0)
    assert case.report.slope_range == (2000.0, 100_000.0)
    assert (case.single.mean, case.single.period, case.single.deformation_radius) == ("lowpass", 432_000.0, 30_000.0)


def test_data_path_starts_at_the_case_file(folder, monkeypatch):
    monkeypatch.chdir(folder.parent)
    assert load(folder, SMALLEST).observations.path == str(folder / "data" / "fixes.csv")
    absolute = SMALLEST.replace("data/fixes.csv", str(folder / "data" / "fixes.csv"))
    assert load(folder, absolute).observations.path == str(folder / "data" / "fixes.csv")


def test_byte_order_mark_and_line_ends_of_other_systems(folder):
    path = folder / "case.toml"
    path.write_bytes(b"\xef\xbb\xbf" + SMALLEST.replace("\n", "\r\n").encode())
    assert load_case(str(path)) == load(folder, SMALLEST)


def test_built_in_python(folder):
    case = load(folder, SMALLEST)
    content = case.model_dump()
    assert Case(**content) == Case.model_validate(content) == case_from(content) == case
    assert hash(case) == hash(case_from(content))
    moved = case_from(content | {"observations": content["observations"] | {"path": "elsewhere.nc"}})
    assert moved.observations.path == "elsewhere.nc"  # looked for only when it is read


def test_columns_on_a_plane():
    columns = Columns(particle="id", time="t", x="x_m", y="y_m")
    assert columns.planar
    assert columns.position == ("x_m", "y_m")
    assert Columns(particle="id", time="t", longitude="a", latitude="b").position == ("a", "b")


def test_regimes_are_those_of_the_type():
    assert get_args(Regime) == REGIMES


def test_all_problems_at_once(folder):
    text = SMALLEST.replace("max_separation_km = 1", "max_separation_km = -0.5")
    text += '[models]\nregimes = ["exponentail"]\n'
    assert problems(folder, text) == [
        "case.toml has 2 problems",
        "  pairs.max_separation_km: got -0.5; must be > 0",
        '  models.regimes: got "exponentail"; known: ballistic, exponential, richardson, diffusive; '
        "did you mean exponential?",
    ]


def test_nothing_in_the_file(folder):
    assert problems(folder, "") == [
        "case.toml has 4 problems",
        "  name: missing; must be given",
        "  seed: missing; must be given",
        "  observations: missing; must be given",
        "  pairs: missing; must be given",
    ]


@pytest.mark.parametrize(
    ("old", "new", "problem"),
    [
        ("seed = 7", "seed = -1", "seed: got -1; must be >= 0"),
        ("seed = 7", "seed = 1.5", "seed: got 1.5; must be a whole number"),
        ("seed = 7", "seed = true", "seed: got true; must be a whole number"),
        ('"bank survey"', '""', 'name: got ""; must be a text of at least one character'),
        ('"bank survey"', "3", "name: got 3; must be a text in quotes"),
        ("error_m = 10.0", "error_m = -1", "observations.position_error_m: got -1; must be >= 0"),
        ("error_m = 10.0", 'error_m = "10"', 'observations.position_error_m: got "10"; must be a number'),
        (
            "error_m = 10.0",
            "error_m = nan",
            "observations.position_error_m: got nan; must be a finite number",
        ),
        ("error_m = 10.0", "error_m = 1\nstep_h = 0", "observations.step_h: got 0; must be > 0"),
        (
            "error_m = 10.0",
            "error_m = 1\nstep_h = 2.0\nlongest_gap_h = 1.5",
            "observations.longest_gap_h: got 1.5; must be at least step_h (2)",
        ),
        (
            "error_m = 10.0",
            "error_m = 1\nhighest_speed_m_s = 0.0",
            "observations.highest_speed_m_s: got 0.0; must be > 0",
        ),
        (
            ', latitude = "lat"',
            "",
            "observations.columns: got longitude; must name longitude and latitude, or x and y",
        ),
        (
            "longitude =",
            "x =",
            "observations.columns: got latitude, x; must name longitude and latitude, or x and y",
        ),
        (
            ', longitude = "lon", latitude = "lat"',
            "",
            "observations.columns: got no position; must name longitude and latitude, or x and y",
        ),
        (
            'latitude = "lat"',
            'latitude = "lon"',
            "observations.columns: got lon more than once; must name a different column for each",
        ),
        (
            "longitude =",
            "longitud =",
            "observations.columns.longitud: unknown key; known: particle, time, longitude, latitude, x, y, "
            "release; did you mean longitude?",
        ),
        (
            "max_separation_km = 1",
            'max_separation_km = 1\nkind = "lunched"',
            'pairs.kind: got "lunched"; known: launched, chance, both; did you mean launched?',
        ),
        (
            "max_separation_km = 1",
            "max_separation_km = 1\nlaunched_within_h = 2024-05-31",
            "pairs.launched_within_h: got 2024-05-31; must be a number",
        ),
        (
            "max_separation_km = 1",
            "max_separation = 1\nmax_separation_km = 1",
            "pairs.max_separation: unknown key; known: max_separation_km, kind, launched_within_h; "
            "did you mean max_separation_km?",
        ),
    ],
)
def test_one_problem(folder, old, new, problem):
    assert old in SMALLEST
    assert problems(folder, SMALLEST.replace(old, new)) == ["case.toml has 1 problem", f"  {problem}"]


@pytest.mark.parametrize(
    ("section", "problem"),
    [
        ("[curves]\nseparation_ratio = 1.05", "curves.separation_ratio: got 1.05; must be > 1.05"),
        ("[curves]\nseparation_ratio = 3.1", "curves.separation_ratio: got 3.1; must be <= 3"),
        ("[curves]\nseparations_km = [2.0]", "curves.separations_km: got [2.0]; must be a list of 2"),
        ("[curves]\nseparations_km = [1, 2, 3]", "curves.separations_km: got [1, 2, 3]; must be a list of 2"),
        ("[curves]\nseparations_km = [3, 2]", "curves.separations_km: got [3.0, 2.0]; must rise"),
        ("[curves]\nseparations_km = [0, 2]", "curves.separations_km: got 0; must be > 0"),
        (
            "[curves]\nseparations_km = [1.0, 1.2]",
            "curves.separations_km: got [1.0, 1.2]; must span at least one separation_ratio (1.41421)",
        ),
        ("[models]\nregimes = []", "models.regimes: got []; must name one regime at least"),
        ('[models]\nregimes = "diffusive"', 'models.regimes: got "diffusive"; must be a list'),
        (
            '[models]\nregimes = ["diffusive", "diffusive"]',
            'models.regimes: got ["diffusive", "diffusive"]; must name each regime once',
        ),
        (
            '[single]\nmean = "lowpas"',
            'single.mean: got "lowpas"; known: record, none, lowpass, grid; did you mean lowpass?',
        ),
        ('[single]\nmean = "lowpass"', 'single: got mean = "lowpass" without lowpass_d; must give lowpass_d too'),
        ('[single]\nmean = "grid"', 'single: got mean = "grid" without mean_flow; must give mean_flow too'),
        (
            "[single]\nlowpass_d = 3",
            'single: got lowpass_d with mean = "record"; must go without, or set mean = "lowpass"',
        ),
        ("[single]\ndeformation_radius_km = 0", "single.deformation_radius_km: got 0; must be > 0"),
        ("[models]\nmost_transitions = 4", "models.most_transitions: got 4; must be <= 3"),
        ("[report]\nslope_range_km = [100, 2]", "report.slope_range_km: got [100.0, 2.0]; must rise"),
        ("[report]\nslope_range_km = [2, inf]", "report.slope_range_km: got inf; must be a finite number"),
        (
            "[[report]]\nslope_range_km = [2, 3]",
            "report: got [{ slope_range_km = [2, 3] }]; must be a table of keys",
        ),
        (
            "[reprot]",
            "reprot: unknown key; known: name, seed, observations, pairs, curves, models, single, report, sweep, plan; "
            "did you mean report?",
        ),
    ],
)
def test_one_problem_of_an_optional_section(folder, section, problem):
    assert problems(folder, f"{SMALLEST}{section}\n") == ["case.toml has 1 problem", f"  {problem}"]


def test_long_values_are_shortened(folder):
    [_, line] = problems(folder, SMALLEST.replace("seed = 7", f'seed = "{"x" * 500}"'))
    assert line == f'  seed: got "{"x" * 56}...; must be a whole number'


def test_missing_data_is_one_problem_among_others(folder):
    (folder / "data" / "fixes.csv").unlink()
    assert problems(folder, SMALLEST.replace("seed = 7", "seed = -1")) == [
        "case.toml has 2 problems",
        "  seed: got -1; must be >= 0",
        f'  observations.path: got "data/fixes.csv"; no such file in {folder}',
    ]


def test_mean_flow_starts_at_the_case_file_and_must_be_there(folder):
    text = SMALLEST + '[single]\nmean = "grid"\nmean_flow = "flow.nc"\n'
    assert problems(folder, text) == [
        "case.toml has 1 problem",
        f'  single.mean_flow: got "flow.nc"; no such file in {folder}',
    ]
    (folder / "flow.nc").write_bytes(b"")
    assert load(folder, text).single.mean_flow == str(folder / "flow.nc")


def test_no_such_case_file(tmp_path):
    with pytest.raises(CaseError, match=r"nowhere\.toml: no such file; give the path of a case file"):
        load_case(tmp_path / "nowhere.toml")


def test_case_file_that_is_a_folder_or_no_text(tmp_path):
    with pytest.raises(CaseError, match=r"cannot be read \(.*directory.*\); must be a text file in UTF-8"):
        load_case(tmp_path)
    (tmp_path / "case.toml").write_bytes(b"\xff\xfe\x00")
    with pytest.raises(CaseError, match=r"cannot be read \('utf-8'.*\); must be a text file in UTF-8"):
        load_case(tmp_path / "case.toml")


def test_invalid_toml_names_the_line(folder):
    [line] = problems(folder, SMALLEST + "kind == 3\n")
    assert line.startswith("case.toml: no valid TOML: ")
    assert "line 10" in line
