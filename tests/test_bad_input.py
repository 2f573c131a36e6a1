"""Input that cannot be used, beyond what the command line's own tests try: one clear message, and nothing written."""

import numpy as np
import pandas as pd
import pytest

from regimes import cli
from regimes.errors import CaseError, DataError
from regimes.fitting.quick import quick_fit
from regimes.pipeline import Options, SingleOptions, analyse_pairs
from tests.test_cli import walks, write_case
from tests.worlds import kernel, lossy_pairs


def moving(east, particles=2, fixes=200):
    """Particles on one parallel; `east(k, hour)` in degrees."""
    hour = np.arange(fixes)
    time = pd.Timestamp("2031-03-01") + pd.to_timedelta(hour, unit="h")
    frames = [
        pd.DataFrame({"id": f"p{k}", "time": time, "lon": 10.0 + east(k, hour), "lat": 50.0}) for k in range(particles)
    ]
    return pd.concat(frames, ignore_index=True)


def apart():
    """Two particles at nearly the same place, a year after one another."""
    fixes = walks(particles=2)
    fixes.loc[fixes.id == "p1", "time"] += pd.Timedelta("365D")
    return fixes


FEW = "fewer than 3 neighbouring separations are resolved"
CURVES = "[curves]\nseparations_km = {}"
BAD = {  # fixes, changes of the case, exit code, words; data for which counting already fails are marked
    "header only": (b"id,time,lon,lat\n", {}, 3, "no rows", True),
    "infinite": (walks().assign(lon=np.inf), {}, 3, "not one of 200 rows has both", True),
    "swapped": (walks().rename(columns={"lon": "lat", "lat": "lon"}).assign(lat=95.0), {}, 3, "swapped?", True),
    "words for numbers": (walks().assign(lon="east"), {}, 3, 'such as "east"', True),
    "no particle names": (walks().assign(id=np.nan), {}, 3, "not one of 200 rows has a particle", True),
    "twins": (moving(lambda k, h: 1e-3 * h), {}, 3, FEW, False),
    "in step": (moving(lambda k, h: 5e-3 * k + 1e-3 * h), {}, 3, FEW, False),
    "one pair": (moving(lambda k, h: 1e-3 * k * np.exp(h / 40)), {}, 3, "under 5 exits or 3 clusters", False),
    "closing in": (moving(lambda k, h: 3e-3 * k * np.exp(-h / 40), 4), {}, 3, FEW, False),
    "limits beyond the data": (walks(fixes=200), {"more": CURVES.format([5000, 20000])}, 3, FEW, False),
    "limits below the data": (walks(fixes=200), {"more": CURVES.format([1e-6, 1e-5])}, 3, FEW, False),
    "limits that fall": (walks(), {"more": CURVES.format([20, 5])}, 2, "curves.separations_km", True),
    "few thresholds": (walks(fixes=200), {"more": CURVES.format([1, 2.1])}, 3, "need at least 4", False),
}


@pytest.mark.parametrize("what", BAD)
def test_one_message_and_nothing_written(what, tmp_path, monkeypatch, capsys):
    monkeypatch.chdir(tmp_path)
    fixes, changes, code, words, at_once = BAD[what]
    path = write_case(tmp_path / "case", fixes, **changes)
    for command in ("check", "run"):
        wanted = code if at_once or command == "run" else 0
        assert cli.main([command, str(path)]) == wanted
        said = capsys.readouterr()
        if wanted:
            assert words in said.err
            assert said.err.startswith("regimes: ")
            assert said.err.count("regimes: ") == 1
            assert "Traceback" not in said.err
            assert "internal error" not in said.err
            assert said.out == ""
        assert not (tmp_path / "reports").exists()


def test_pairs_that_never_meet_are_no_pairs(tmp_path, monkeypatch, capsys):
    monkeypatch.chdir(tmp_path)
    path = write_case(tmp_path / "case", apart())
    for command in ("check", "run"):
        assert cli.main([command, str(path)]) == 0
        assert "no two of one release have a valid position at the same time" in capsys.readouterr().out


@pytest.mark.parametrize("how", ["backwards", "shuffled", "twice"])
def test_order_and_repeats_of_rows_do_not_matter(how, tmp_path, monkeypatch, capsys):
    """Times that go backwards are sorted, equal rows are counted once: the same pairs are found."""
    monkeypatch.chdir(tmp_path)
    fixes = walks()
    other = {
        "backwards": fixes[::-1],
        "shuffled": fixes.sample(frac=1.0, random_state=1),
        "twice": pd.concat([fixes] * 2),
    }
    said = []
    for name, table in (("plain", fixes), (how, other[how])):
        assert cli.main(["check", str(write_case(tmp_path / name, table))]) == 0
        said.append(capsys.readouterr().out.splitlines()[-1])
    assert said[0].startswith("6 pairs")
    assert said[1] == said[0]


# the library's own way in


@pytest.fixture(scope="module")
def world():
    return lossy_pairs(kernel([2.0], [], 0.3), 10, 10, 1)


def test_no_pairs(world):
    tracks, pairs = world
    nothing = pairs.select(np.zeros(pairs.n_pair, bool))
    for analyse in (analyse_pairs, quick_fit):
        with pytest.raises(DataError, match="got no pairs; need at least one; widen the rules"):
            analyse(tracks, nothing)


@pytest.mark.parametrize(
    ("wrong", "said"),
    [
        ({"ratio": 1.0}, r"ratio: got 1.0; must be over 1.05 and at most 3"),
        ({"ratio": float("nan")}, r"ratio: got nan"),
        (
            {"limits": (9e3, 1e3)},
            r"got \(9000.0, 1000.0\); must be two positive separations in metres that rise",
        ),
        ({"limits": (0.0, 1e3)}, r"limits: got \(0.0, 1000.0\)"),
        ({"limits": (1e3, float("inf"))}, r"limits: got \(1000.0, inf\)"),
        (
            {"regimes": ()},
            r"got \(\); must name some of ballistic, exponential, richardson, diffusive, each once",
        ),
        ({"regimes": ("diffusive", "diffusive")}, r"regimes: got \('diffusive', 'diffusive'\)"),
        ({"regimes": ("local",)}, r"regimes: got \('local',\)"),
        ({"most_transitions": 4}, r"most_transitions: got 4; must be 0, 1, 2 or 3"),
        ({"slope_range": (5.0, 1.0)}, r"slope_range: got \(5.0, 1.0\)"),
        ({"seed": -1}, r"seed: got -1; must be 0 or more"),
        ({"jobs": 0}, r"jobs: got 0; must be 1 or more"),
        ({"jobs": 0, "ratio": 9.0}, r"options: 2 to correct\n  ratio: got 9.0.*\n  jobs: got 0"),
    ],
)
def test_options_out_of_range(wrong, said):
    with pytest.raises(CaseError, match=said):
        Options(**wrong)


@pytest.mark.parametrize(
    ("wrong", "said"),
    [
        ({"mean": "median"}, r"mean: got 'median'; must be one of none, record, lowpass, grid"),
        ({"mean": "lowpass"}, r"period: got None; must be a number of seconds > 0 with lowpass"),
        ({"period": 3e5}, r"period: got 300000.0; must be .* None with any other mean"),
        ({"mean": "lowpass", "period": float("inf")}, r"period: got inf"),
        ({"mean": "grid"}, r"flow: got None; must be a mean flow or the path of one with grid"),
        ({"flow": "flow.nc"}, r"flow: got 'flow.nc'; must be .* None with any other mean"),
        ({"deformation_radius": 0.0}, r"deformation_radius: got 0.0; must be a length in metres > 0, or None"),
        (
            {"mean": "median", "deformation_radius": -1.0},
            r"single particles: 2 to correct\n  mean.*\n  def",
        ),
    ],
)
def test_options_for_single_particles_out_of_range(wrong, said):
    with pytest.raises(CaseError, match=said):
        SingleOptions(**wrong)
