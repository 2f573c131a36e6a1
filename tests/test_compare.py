"""The whole comparison in small: two sides, both orders, fits beside one another, page, document, folder, command."""

import json
from dataclasses import replace
from importlib import resources

import jsonschema
import numpy as np
import pandas as pd
import pytest

from regimes import cli
from regimes.cases import case_from, load_case
from regimes.compare import (
    CompareOptions,
    Near,
    check_comparison_folder,
    compare,
    compare_sides,
    write_comparison,
)
from regimes.compare.document import document
from regimes.compare.figures import FIGURES, plot_curves, plot_ratio, plot_same
from regimes.compare.fitted import common_thresholds
from regimes.compare.page import page
from regimes.compare.words import plateau_text, sentence
from regimes.errors import CaseError, DataError
from regimes.fitting import Options
from regimes.likelihood.exit_rate import ExitRateLikelihood
from regimes.units import DAY
from tests.compare_worlds import RICHARDSON_BEYOND_10, kernel_side

FIT = Options(ratio=2.0, regimes=("exponential", "richardson"), most_transitions=1, seed=4)


@pytest.fixture(scope="module")
def sides():
    kernel = RICHARDSON_BEYOND_10
    observed = kernel_side(12, 21, kernel | {"rate_per_d": 0.9}, "the observed case", duration_d=20.0)
    return observed, kernel_side(48, 22, kernel | {"rate_per_d": 0.3}, duration_d=20.0)


@pytest.fixture(scope="module")
def found(sides):
    return compare_sides(sides, 99, Near(), FIT)


def test_different_worlds_are_told_apart(found):
    assert found.same_flow == "different"
    assert found.ranks.p_value <= 0.03
    exponent = next(c for c in found.ranks.curves if c.curve == "exponent")
    assert exponent.differs_at.size >= 4
    assert found.sentence.startswith("Different: sampled alike, the two cases disagree (p = ")
    assert found.sentence.endswith("times that of the model.")
    ratio = found.fitted.ratio
    inside = (ratio[1] < 3.0) & (ratio[2] > 3.0)  # 0.9 against 0.3 per day, at all separations
    assert ratio.shape[1] >= 5
    assert inside.sum() >= ratio.shape[1] - 1


def test_design_of_the_comparison(found):
    design = found.design
    assert (design.larger, design.groups_small, design.groups_large) == ("model", 12, 48)
    assert 40 < design.groups_effective <= 48
    assert design.horizon == 20 * DAY
    assert design.deployments == 99


def test_the_other_way_round_on_more_threads_the_larger_is_sampled_all_the_same(sides, found):
    swapped = (replace(sides[1], name="the observed case"), replace(sides[0], name="the model"))
    other = compare_sides(swapped, 99, Near(), replace(FIT, jobs=2))
    assert other.design.larger == "observed"
    assert other.ranks.p_value == found.ranks.p_value
    assert other.unmatched_p == pytest.approx(found.unmatched_p)
    spread = found.fitted.log_ratio.std(axis=0) / np.sqrt(4000)
    apart = found.fitted.log_ratio.mean(axis=0) + other.fitted.log_ratio.mean(axis=0)
    assert np.all(np.abs(apart) < 5 * np.sqrt(2) * spread)
    assert other.fitted.same_regime == pytest.approx(found.fitted.same_regime)


def test_document_follows_its_schema(found):
    text = resources.files("regimes.compare").joinpath("comparison.schema.json").read_text(encoding="utf-8")
    schema = json.loads(text)
    jsonschema.Draft202012Validator.check_schema(schema)
    said = document(found)
    jsonschema.Draft202012Validator(schema).validate(said)
    for key in ("curves", "same_flow", "p_value", "exponent_ratio"):
        with pytest.raises(jsonschema.ValidationError):
            jsonschema.Draft202012Validator(schema).validate({k: v for k, v in said.items() if k != key})


def test_page_says_all_and_needs_nothing_else(found):
    text = page(found, {})
    assert "the observed case against the model" in text
    assert "Sampled alike, the two cases disagree" in text
    assert "Sampled alike" in text
    assert "<script" not in text
    for curve in found.ranks.curves:
        assert curve.curve.replace("_", " ") in text


def test_figures_show_the_numbers(found):
    axes = plot_curves(found)
    assert len(axes) == len(found.ranks.curves)
    points = np.concatenate([line.get_xdata() for line in axes[0].lines[1:]])
    assert np.sort(points) == pytest.approx(found.ranks.curves[0].axis / 1e3)
    assert plot_ratio(found).get_ylabel() == "exponent, observed over model"
    heights = plot_same(found).patches[0].get_data().values
    assert heights == pytest.approx(found.fitted.same_regime)


def test_folder_is_complete_and_only_an_earlier_comparison_is_replaced(found, tmp_path):
    files = write_comparison(found, tmp_path / "out")
    assert all(path.stat().st_size > 0 for path in files.values())
    assert {path.relative_to(tmp_path / "out").as_posix() for path in (tmp_path / "out").rglob("*.*")} == set(files)
    assert len(files) == 2 + 2 * len(FIGURES)
    assert check_comparison_folder(tmp_path / "out") == tmp_path / "out"
    (tmp_path / "out" / "notes.txt").write_text("mine")
    with pytest.raises(CaseError, match=r"with notes.txt in it; must be new, empty, or hold an earlier comparison"):
        check_comparison_folder(tmp_path / "out")
    (tmp_path / "page").mkdir()
    (tmp_path / "page" / "comparison.html").write_text("mine")
    with pytest.raises(CaseError, match=r"no comparison\.json of an earlier comparison in it"):
        check_comparison_folder(tmp_path / "page")
    with pytest.raises(CaseError, match="which is a file; must be a folder"):
        check_comparison_folder(tmp_path / "out" / "notes.txt")


def test_sentences(found):
    quiet = replace(found.ranks, p_value=0.4, factor=1.5)
    said = sentence(quiet, found.fitted, 0.5)
    assert said.startswith("Consistent: sampled alike, no curve tells the two cases apart (p = 0.40 over all curves); ")
    assert "a factor of 1.5 in all exponents would have been seen" in said
    assert sentence(quiet, found.fitted, 0.001).endswith(
        "Compared as they are they would differ (p = 0.001): sampling alone explains it."
    )
    poor = sentence(replace(quiet, factor=3.2), found.fitted, 0.5)
    assert poor.startswith("Undecided: ")
    assert "it takes a factor of 3.2 in all exponents to be seen" in poor


def test_plateau_in_words(found):
    known = replace(found.fitted, plateau=np.array([64e3, 45e3, 91e3]))
    assert plateau_text(known).startswith("Below 64 km (45 to 91 km) the exponent of the model no longer changes")
    assert plateau_text(replace(known, plateau=np.full(3, np.nan))).startswith("None: ")


def test_separations_that_do_not_overlap():
    def likelihood(first):
        return ExitRateLikelihood(first * np.sqrt(2.0) ** np.arange(6), np.ones(5), np.ones(5), 1.0)

    with pytest.raises(DataError, match=r"1 to 5.66 km \(observed\) and 4 to 22.6 km \(model\); they must share 3"):
        common_thresholds(likelihood(1e3), likelihood(4e3))
    assert common_thresholds(likelihood(1e3), likelihood(1.0e3 * np.sqrt(2.0))).size == 5


def test_options_that_make_no_sense():
    with pytest.raises(CaseError, match=r"deployments: got 20; must be 99 or more"):
        CompareOptions(deployments=20)


# From files


def table(side, longitude=None):
    """Fixes of a side as a table: metres, or degrees about a place near the equator."""
    tracks = side.tracks
    number = np.repeat(np.arange(tracks.n_track), tracks.n_step)
    row = np.arange(len(number)) - tracks.offset[number]
    seconds = tracks.first_time + tracks.step * (tracks.start_step[number] + row)
    known = np.isfinite(tracks.position[:, 0])
    x, y = tracks.position[:, 0], tracks.position[:, 1]
    columns = {"x": x, "y": y}
    if longitude is not None:
        columns = {"lon": longitude + x / 111319.5, "lat": y / 110574.3}
    frame = pd.DataFrame({"id": number, "time": seconds, "release": tracks.release[number]} | columns)
    return frame[known]


def case_of(folder, frame, position):
    folder.mkdir(parents=True)
    frame.to_csv(folder / "fixes.csv", index=False)
    text = f"""
name = "{folder.name}"
seed = 3
[observations]
path = "fixes.csv"
position_error_m = 10.0
columns = {{ particle = "id", time = "time", release = "release", {position} }}
[pairs]
max_separation_km = 1.0
[curves]
separation_ratio = 2.0
[models]
regimes = ["exponential", "richardson"]
most_transitions = 1
"""
    (folder / "case.toml").write_text(text)
    return folder / "case.toml"


@pytest.fixture(scope="module")
def files(sides, tmp_path_factory):
    folder = tmp_path_factory.mktemp("cases")
    return (
        case_of(folder / "bank", table(sides[0], 20.0), 'longitude = "lon", latitude = "lat"'),
        case_of(folder / "run", table(sides[1]), 'x = "x", y = "y"'),
    )


def test_the_command_compares_a_globe_with_a_plane(files, tmp_path, monkeypatch, capsys):
    monkeypatch.chdir(tmp_path)
    asked = ["--deployments", "99", "--seed", "4", "--jobs", "1"]
    assert cli.main(["compare", *map(str, files), *asked]) == 0
    said = capsys.readouterr()
    assert said.err == ""
    lines = said.out.splitlines()
    assert lines[0].startswith("Different: sampled alike")
    assert lines[1] == "comparison: reports/bank-against-run/comparison.html"
    document = json.loads((tmp_path / "reports" / "bank-against-run" / "comparison.json").read_text(encoding="utf-8"))
    assert document["cases"]["observed"]["case"] == "bank"
    assert len(document["cases"]["model"]["sha256"]) == 64
    assert document["seed"] == 4


@pytest.mark.parametrize(
    ("more", "code", "words"),
    [
        (["--deployments", "5"], 2, "must be a whole number of 99 or more"),
        (["--same-place", "-1"], 2, "must be a number > 0"),
        (["--same-season", "summer"], 2, "must be a number > 0"),
        (["--same-place", "10"], 3, "got --same-place with positions on a plane in one case and on the globe"),
    ],
)
def test_one_message_for_each_mistake(files, tmp_path, monkeypatch, capsys, more, code, words):
    monkeypatch.chdir(tmp_path)
    try:
        given = cli.main(["compare", *map(str, files), *more])
    except SystemExit as stop:
        given = stop.code
    assert given == code
    assert words in capsys.readouterr().err
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize("calendar", ["360_day", "noleap"])
def test_a_calendar_of_another_world_is_refused_with_advice(sides, files, tmp_path, calendar):
    frame = table(sides[1])
    hours = (frame["time"] - frame["time"].min()) / 3600.0
    data = frame.assign(time=hours).reset_index(drop=True).to_xarray().drop_vars("index")
    data["time"].attrs.update(units="hours since 2031-03-02 00:00:00", calendar=calendar)
    data.to_netcdf(tmp_path / "fixes.nc", engine="h5netcdf")
    content = {
        "name": "run",
        "seed": 3,
        "observations": {
            "path": str(tmp_path / "fixes.nc"),
            "position_error_m": 10.0,
            "columns": {"particle": "id", "time": "time", "release": "release", "x": "x", "y": "y"},
        },
        "pairs": {"max_separation_km": 1.0},
    }
    with pytest.raises(DataError, match=f"calendar '{calendar}' .* convert the times to a standard calendar first"):
        compare(load_case(files[0]), case_from(content), CompareOptions(99, Near(), FIT))


def test_a_case_without_pairs_is_named(sides, files):
    lonely = table(sides[1]).query("id % 3 == 0")
    path = case_of(files[1].parent.parent / "lonely", lonely, 'x = "x", y = "y"')
    with pytest.raises(DataError, match="compare: no pair in lonely: "):
        compare(load_case(files[0]), load_case(path), CompareOptions(99, Near(), FIT))
