"""Plans of surveys: what is asked, what a campaign must show, what is kept, what is written."""

import csv
import json
import os
import signal
import subprocess
import sys
import time
import tomllib
from dataclasses import replace
from importlib import resources
from types import SimpleNamespace

import jsonschema
import numpy as np
import pytest
from scipy.integrate import quad

import regimes.plan.run
from regimes import cli
from regimes.cases import Planned, load_plan
from regimes.errors import CaseError, DataError
from regimes.fitting import Options, quick_fit
from regimes.pairs import find_pairs
from regimes.pipeline import plan_survey
from regimes.plan import Progress, drawn_truth, given_truth, simulate_plan, target_of
from regimes.plan.aim import is_true, mean_probability, right, told, true_pieces, wrong
from regimes.plan.design import points_of
from regimes.plan.judge import NOT_FITTED, Judged, judged, transition_factor
from regimes.plan.run import Work, perform
from regimes.plan.summary import geometric, mean, share
from regimes.report.plan_json import plan_document, plan_table
from regimes.report.plan_page import plan_page
from regimes.synthetic.campaign import Layout, campaign
from regimes.synthetic.recipe import recipe_from
from regimes.synthetic.survey import simulate
from regimes.theory.kernel import Kernel
from regimes.tracks import make_tracks
from regimes.verdict.rule import Stretch
from tests.worlds import in_parallel

KM, HOUR, DAY = 1e3, 3600.0, 86400.0
PLAN = """
name = "Invented sound"
seed = 7
[plan]
releases = [4, 8]
particles = 3
start_separation_km = 0.3
fix_interval_h = [1, 3.0]
position_error_m = 10
duration_d = 20
loss_per_d = 0.02
campaigns = 12
[plan.kernel]
regimes = ["exponential", "richardson"]
transitions_km = [10]
rate_per_d = 0.6
reference_km = 1
[plan.aim]
regime = "exponential"
against = "richardson"
below_km = 10
"""
KERNEL = Kernel([2.0, 4 / 3], [10 * KM], 0.3 / DAY, KM)


def write(folder, text=PLAN):
    path = folder / "sound.toml"
    path.write_text(text)
    return path


def planned(**changes):
    content = tomllib.loads(PLAN)
    content["plan"] |= changes
    return Planned.model_validate(content)


TARGET = target_of(planned().plan.aim, 0.3 * KM, 10.0)
TRUTH = given_truth(planned().plan.kernel, TARGET, 7)


# What is asked


def test_plan_alone_and_in_a_case_say_the_same(tmp_path):
    alone, case = load_plan(write(tmp_path))
    assert case is None
    (tmp_path / "fixes.csv").write_text("id,t,x,y\n")
    data = """
[observations]
path = "fixes.csv"
position_error_m = 5
columns = { particle = "id", time = "t", x = "x", y = "y" }
[pairs]
max_separation_km = 1
"""
    assert load_plan(write(tmp_path, PLAN + data)) == (alone, None)
    head, tail = PLAN.split("[plan.kernel]")
    tail = tail[tail.index("[plan.aim]") :]
    drawn, case = load_plan(write(tmp_path, head + tail + data))
    assert drawn.plan == alone.plan.model_copy(update={"kernel": None})
    assert case.observations.position_error_m == 5.0


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ("[plan]", "[plam]", r"plam: unknown key; known: name, seed, plan, curves, models; did you mean plan\?"),
        ("releases = [4, 8]", "releases = [8, 4]", r"plan.releases: got \[8, 4\]; must be a list of numbers that rise"),
        ("releases = [4, 8]", "releases = []", r"plan.releases: got \[\]; must be a list of numbers that rise"),
        ("particles = 3", "particles = 5", r"plan.particles: got 5; must be <= 4"),
        ("duration_d = 20", "duration_d = 1", r"plan.duration_d: got 1.0; must be ten times the longest fix interval"),
        ("campaigns = 12", "campaigns = 2", r"plan.campaigns: got 2; must be >= 10"),
        ("below_km = 10", "", r"plan.aim: got both or neither of below_km and range_km; must give one of them"),
        ("below_km = 10", "range_km = [9, 1]", r"plan.aim: got \[9.0, 1.0\]; must rise \(range_km\)"),
        ('against = "richardson"', 'against = "exponential"', r'against = "exponential"; must be another regime'),
        ("transitions_km = [10]", "", r"plan.kernel: got 2 pieces; must be one more than transitions_km, which has 0"),
        ("[plan.kernel]", "[plan.other]", r"plan.other: unknown key"),
    ],
)
def test_plan_that_cannot_be_is_refused_at_the_door(old, new, words, tmp_path):
    assert old in PLAN
    with pytest.raises(CaseError, match=words):
        load_plan(write(tmp_path, PLAN.replace(old, new)))


def test_neither_kernel_nor_data(tmp_path):
    text = PLAN.split("[plan.kernel]")[0] + "[plan.aim]\n" + PLAN.split("[plan.aim]")[1]
    with pytest.raises(CaseError, match=r"plan.kernel: missing; give it, or observations and pairs of data"):
        load_plan(write(tmp_path, text))


def test_aim_that_no_data_can_reach_is_refused():
    aim = planned().plan.aim
    with pytest.raises(CaseError, match=r"plan.aim.below_km: got 6 to 10 km .*must span a factor 3 at least"):
        target_of(aim, 3 * KM, 10.0)
    with pytest.raises(CaseError, match=r"got 15 to 10 km for pairs .* errors of 1000 m"):
        target_of(aim, 0.3 * KM, 1000.0)
    with pytest.raises(CaseError, match=r'plan.aim.regime: got "richardson", which \[plan.kernel\] is not'):
        given_truth(planned().plan.kernel, replace(TARGET, regime="richardson", against=None), 1)
    without = planned()
    without = without.model_copy(update={"models": without.models.model_copy(update={"regimes": ("exponential",)})})
    with pytest.raises(CaseError, match=r"plan.aim: got richardson, which models.regimes leaves out"):
        plan_survey(without, None)


# Campaigns


def test_campaign_is_laid_out_as_asked():
    layout = Layout(3, 4, 0.5 * KM, HOUR, 40)
    tracks, pairs = campaign(KERNEL, layout, 5)
    assert (tracks.n_track, pairs.n_pair, pairs.n_cluster) == (12, 18, 3)
    np.testing.assert_array_equal(pairs.length, 40)
    side = np.bincount(pairs.cluster[pairs.first], np.isclose(pairs.start_separation, 0.5 * KM))
    np.testing.assert_array_equal(side, 4)  # sides of a square; the others are its diagonals, sqrt 2 longer
    np.testing.assert_allclose(np.unique(pairs.start_separation.round(6)), 0.5 * KM * np.array([1, np.sqrt(2)]))
    again, _ = campaign(KERNEL, layout, 5)
    np.testing.assert_array_equal(tracks.position, again.position)
    assert not np.array_equal(tracks.position, campaign(KERNEL, layout, 6)[0].position)


def test_particles_are_lost_at_the_rate_asked_for():
    """A particle is there after t with probability exp(-rate t); a pair only while both are."""
    loss, n = 0.1 / DAY, 41
    tracks, pairs = campaign(KERNEL, Layout(500, 2, 0.3 * KM, 6 * HOUR, n, 0.0, loss), 1)
    length = np.diff(tracks.offset)
    for k in (4, 20, n - 1):
        expected = np.exp(-loss * 6 * HOUR * k)
        error = np.sqrt(expected * (1 - expected) / length.size)
        assert np.mean(length > k) == pytest.approx(expected, abs=4 * error)  # Monte Carlo, 4 standard errors
    np.testing.assert_array_equal(pairs.length, np.minimum(length[pairs.first], length[pairs.second]))
    assert pairs.length.min() >= 2
    assert length.min() == 1


def test_position_error_is_seen_at_the_start_too():
    tracks, pairs = campaign(KERNEL, Layout(400, 2, 1.0 * KM, HOUR, 3, 20.0), 1)
    spread = np.std(pairs.start_separation)
    assert spread == pytest.approx(20.0 * np.sqrt(2), rel=4 / np.sqrt(2 * 400))  # Monte Carlo; sqrt 2 for a difference
    assert tracks.position_error == 20.0


@pytest.mark.parametrize("change", [{"particles": 5}, {"releases": 0}, {"n_step": 1}, {"loss": -1.0}, {"step": 0.0}])
def test_campaign_that_cannot_be_is_refused(change):
    with pytest.raises(DataError, match="need 1 release or more of 2 to 4 particles"):
        replace(Layout(3, 2, 300.0, HOUR, 40), **change)


# What a campaign must show


def fitted(probability, low, high, edges=(0.6, 1.2, 2.4, 4.8, 9.6, 19.2)):
    """What the aim looks at in a fit: probability of exponential (the rest Richardson's), free interval, edges [km]."""
    p = np.asarray(probability, float)
    return SimpleNamespace(
        probability={"exponential": p, "richardson": 1.0 - p, "ballistic": 0.0 * p, "diffusive": 0.0 * p},
        exponent_low=np.broadcast_to(low, p.shape),
        exponent_high=np.broadcast_to(high, p.shape),
        rates=SimpleNamespace(likelihood=SimpleNamespace(thresholds=KM * np.asarray(edges))),
    )


def test_range_starts_where_start_and_error_are_forgotten():
    assert (TARGET.low, TARGET.high) == (0.6 * KM, 10 * KM)  # twice the start separation
    assert target_of(planned().plan.aim, 0.3 * KM, 100.0).low == 1.5 * KM  # fifteen errors
    assert true_pieces(KERNEL, replace(TARGET, high=40 * KM)) == [(0.6 * KM, 10 * KM)]
    assert is_true(KERNEL, replace(TARGET, high=100 * KM))  # 2.8 of 5.1 in ln r
    assert not is_true(KERNEL, replace(TARGET, high=200 * KM))
    assert not is_true(KERNEL, replace(TARGET, low=5 * KM, high=12 * KM))  # over a factor 2 only


def test_right_verdict_by_hand():
    half = np.sqrt(0.6 * 10) * KM  # middle of the range in ln r
    assert right((Stretch("exponential", 0.6 * KM, half),), KERNEL, TARGET)
    assert not right((Stretch("exponential", 0.6 * KM, 0.98 * half),), KERNEL, TARGET)
    assert not right((Stretch("richardson", 12 * KM, 90 * KM),), KERNEL, TARGET)
    both = (Stretch("exponential", 0.7 * KM, 9 * KM), Stretch("richardson", 12 * KM, 90 * KM))
    assert right(both, KERNEL, TARGET)
    assert right((Stretch("exponential", 0.6 * KM, 19 * KM),), KERNEL, TARGET)  # wrong only within a factor 2
    assert not right((Stretch("exponential", 0.6 * KM, 21 * KM),), KERNEL, TARGET)
    assert wrong((Stretch("ballistic", 30 * KM, 90 * KM),), KERNEL)
    assert not wrong((), KERNEL)


@pytest.mark.parametrize(
    ("probability", "low", "high", "success"),
    [
        ([0.96, 0.96, 0.96, 0.5, 0.1], 1.4, 2.0, True),  # three of four octaves
        ([0.94, 0.94, 0.94, 0.94, 0.1], 1.4, 2.0, False),  # under 95 %
        ([0.96, 0.96, 0.96, 0.96, 0.1], 1.3, 2.0, False),  # 4/3 inside the free interval too
        ([0.96, 0.96, 0.96, 0.96, 0.1], 1.4, 1.9, False),  # its own exponent outside
        ([0.96, 0.96, 0.5, 0.5, 0.1], 1.4, 2.0, False),  # two octaves: 1.39 of 2.81 in ln r
        ([0.96, 0.96, 0.5, 0.5, 0.96], 1.4, 2.0, True),  # and the part of the last that lies inside, 0.04
    ],
)
def test_telling_two_regimes_apart_by_hand(probability, low, high, success):
    assert told(fitted(probability, low, high), KERNEL, TARGET) == success


def test_mean_probability_counts_nothing_where_nothing_is_resolved():
    whole = fitted([0.8, 0.8, 0.8, 0.8, 0.1], 1, 2)
    expected = 0.8 * np.log(9.6 / 0.6) + 0.1 * np.log(10 / 9.6)
    assert mean_probability(whole, KERNEL, TARGET) == pytest.approx(expected / np.log(10 / 0.6), rel=1e-12)
    part = fitted([0.8, 0.8], 1, 2, edges=(2.4, 4.8, 9.6))
    assert mean_probability(part, KERNEL, TARGET) == pytest.approx(0.8 * np.log(4) / np.log(10 / 0.6), rel=1e-12)


def test_campaign_without_resolved_separations_shows_nothing():
    tracks, pairs = campaign(KERNEL, Layout(3, 2, 0.3 * KM, HOUR, 6), 1)
    assert judged(tracks, pairs, KERNEL, TARGET, Options()) == NOT_FITTED


@pytest.fixture(scope="module")
def survey():
    """A campaign large enough to tell, with its fit."""
    tracks, pairs = campaign(KERNEL, Layout(40, 3, 0.3 * KM, HOUR, 20 * 24, 10.0), 3)
    return tracks, pairs, quick_fit(tracks, pairs, Options(seed=3))


def test_a_large_campaign_is_judged_as_its_fit_says(survey):
    tracks, pairs, fit = survey
    found = judged(tracks, pairs, KERNEL, TARGET, Options(seed=3))
    assert found.fitted
    assert (found.low, found.high) == (fit.rates.resolved.low, fit.rates.resolved.high)
    assert found.right == any(s.regime == "exponential" and s.high / s.low > np.sqrt(10 / 0.6) for s in fit.stretches())
    assert found.right
    assert found.told
    assert 0.0 < found.alpha_width < 2.0
    assert found.transition_factor == transition_factor(fit, KERNEL, TARGET) > 1.0
    alone = judged(tracks, pairs, KERNEL, replace(TARGET, against=None), Options(seed=3))
    assert alone.told == alone.right


def test_kernels_drawn_from_data_have_the_aimed_at_regime(survey):
    *_, fit = survey
    target = replace(TARGET, high=167 * KM)  # half of it ends where the regime does: some draws have it, some not
    truth = drawn_truth(fit, target, 5)
    assert 0.1 < truth.probability < 0.9
    kernels = [truth.kernel(number) for number in range(20)]
    assert all(is_true(kernel, target) for kernel in kernels)
    assert len({kernel.rate for kernel in kernels}) > 10
    np.testing.assert_array_equal(truth.kernel(3).breaks, kernels[3].breaks)
    with pytest.raises(DataError, match=r"the data leave a probability of .* to diffusive separation over half of"):
        drawn_truth(fit, replace(TARGET, regime="diffusive"), 5)


# Summaries


@pytest.mark.parametrize(("k", "n"), [(0, 12), (12, 12), (3, 12), (39, 40)])
def test_interval_of_a_share_holds_95_percent_of_its_beta(k, n):
    found = share(np.arange(n) < k)
    assert found.value == k / n
    assert (found.low == 0.0) == (k == 0)
    assert (found.high == 1.0) == (k == n)

    def density(p):
        return p ** (k - 0.5) * (1 - p) ** (n - k - 0.5)

    low, high = max(found.low, 1e-12), min(found.high, 1 - 1e-12)
    inside = quad(density, low, high, limit=200)[0] / quad(density, 1e-12, 1 - 1e-12, limit=200)[0]
    assert inside == pytest.approx(0.975 if k in (0, n) else 0.95, abs=1e-3)  # the quadrature near the poles


def test_means_leave_out_what_is_missing():
    assert mean([1.0, 3.0, np.nan]) == mean([1.0, 3.0])
    assert (mean([1.0, 3.0]).value, mean([1.0, 3.0]).error) == (2.0, 1.0)
    assert np.isnan(mean([np.nan]).value)
    assert np.isnan(mean([2.0]).error)
    assert geometric([1.0, 4.0]).value == pytest.approx(2.0, rel=1e-12)
    assert geometric([1.0, 4.0]).error == pytest.approx(np.log(2.0), rel=1e-12)


# What is kept


def by_number(work: Work) -> Judged:
    """A campaign that takes no time: its result depends on its seed alone."""
    rng = np.random.default_rng(work.options.seed)
    hit = bool(rng.random() < work.point.releases / 10)
    return Judged(True, hit, hit, False, rng.random(), rng.random(), np.nan if rng.random() < 0.3 else 2.0, 7e2, 5e4)


@pytest.fixture
def quick(monkeypatch):
    monkeypatch.setattr(regimes.plan.run, "perform", by_number)


def test_interrupted_plan_goes_on_to_the_same_result(tmp_path, quick):
    whole = simulate_plan(planned(), TRUTH, Progress(None, "k"))
    path = tmp_path / "plan-progress.json"
    calls = []

    def impatient(stage, done, total):
        calls.append(done)
        if done == 17:
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        simulate_plan(planned(), TRUTH, Progress(path, "k"), told=impatient)
    assert calls[-1] == 17
    calls.clear()
    again = simulate_plan(planned(), TRUTH, Progress(path, "k"), told=lambda *count: calls.append(count[1:]))
    assert calls[0] == (17, 48)
    assert calls[-1] == (48, 48)
    assert str(again) == str(whole)  # NaN is not equal to itself
    calls.clear()
    simulate_plan(planned(), TRUTH, Progress(path, "k"), told=lambda *count: calls.append(count[1:]))
    assert calls == [(48, 48)]
    simulate_plan(planned(), TRUTH, Progress(path, "another"), told=lambda *count: calls.append(count[1:]))
    assert calls[1] == (0, 48)


def test_a_campaign_does_not_depend_on_the_other_designs(quick):
    whole = simulate_plan(planned(), TRUTH, Progress(None, "k"))
    part = simulate_plan(planned(releases=[8], fix_interval_h=[3.0]), TRUTH, Progress(None, "k"))
    (same,) = [s for s in whole if s.point == points_of(planned(releases=[8], fix_interval_h=[3.0]).plan)[0]]
    assert str(part[0]) == str(same)
    assert len({s.told.value for s in whole}) > 1


def test_real_campaign_again_and_in_another_process_is_the_same(tmp_path):
    small = planned(releases=[4], fix_interval_h=[3.0], campaigns=10)

    def first_only(stage, done, total):
        if done == 1:
            raise KeyboardInterrupt

    progress = Progress(tmp_path / "p.json", "k")
    with pytest.raises(KeyboardInterrupt):
        simulate_plan(small, TRUTH, progress, told=first_only)
    (point,) = points_of(small.plan)
    kept = Progress(tmp_path / "p.json", "k").find(point.key, 0)
    work = regimes.plan.run._missing(small, TRUTH, Progress(None, "k"))[0]
    (elsewhere,) = in_parallel(perform, [work])
    assert str(kept) == str(elsewhere)


# What is written


def test_document_follows_the_schema_and_the_table_the_document(quick):
    plan = plan_survey(planned(), None)
    document = plan_document(plan)
    schema = json.loads(resources.files("regimes.report").joinpath("plan.schema.json").read_text(encoding="utf-8"))
    jsonschema.Draft202012Validator(schema).validate(document)
    assert [(d["releases"], d["fix_interval_h"]) for d in document["designs"]] == [(4, 1), (8, 1), (4, 3), (8, 3)]
    assert document["designs"][1]["aim_reached"]["share"] == pytest.approx(plan.summaries[1].told.value, rel=1e-5)
    assert document["aim"]["range_km"] == [0.6, 10.0]
    assert document["designs"][0]["resolved_from_km"]["mean"] == pytest.approx(0.7, rel=1e-5)
    rows = list(csv.DictReader(plan_table(plan).splitlines()))
    assert len(rows) == 4
    assert float(rows[1]["aim_reached_share"]) == document["designs"][1]["aim_reached"]["share"]
    with pytest.raises(jsonschema.ValidationError):
        jsonschema.Draft202012Validator(schema).validate(document | {"designs": []})


def test_smallest_design_has_fewest_releases_then_longest_interval(quick):
    plan = plan_survey(planned(), None)
    shares = {(s.point.releases, s.point.interval / HOUR): s.told.value for s in plan.summaries}
    for wanted in sorted({*shares.values()} - {0.0}):
        best = replace(plan, target=replace(plan.target, probability=wanted)).best.point
        enough = [key for key, value in shares.items() if value >= wanted]
        fewest = min(n for n, _ in enough)
        assert (best.releases, best.interval / HOUR) == (fewest, max(h for n, h in enough if n == fewest))
    assert replace(plan, target=replace(plan.target, probability=1.01)).best is None


def test_page_says_whether_the_aim_is_reached_and_how_sure_that_is(quick):
    plan = plan_survey(planned(), None)
    reached = replace(plan, target=replace(plan.target, probability=0.3))
    page = plan_page(reached, {})
    assert "Reached" in page
    assert "The smallest of these designs that shows in 30 % of campaigns that exponential separation is told" in page
    not_reached = plan_page(replace(plan, target=replace(plan.target, probability=0.999)), {})
    assert "Not reached: none of these designs" in not_reached
    unsure = replace(plan, target=replace(plan.target, probability=plan.best.told.value if plan.best else 0.5))
    assert "simulate more campaigns before relying on it" in plan_page(unsure, {})


def test_plan_from_the_command_line(tmp_path, monkeypatch, quick, capsys):
    monkeypatch.chdir(tmp_path)
    path = write(tmp_path)
    assert cli.main(["plan", str(path), "--jobs", "1"]) == 0
    folder = tmp_path / "reports" / "sound-plan"
    assert capsys.readouterr().out.splitlines()[-1] == "plan: reports/sound-plan/plan.html"
    names = ["aim", "right", "alpha", "transition", "resolved"]
    assert {p.stem for p in (folder / "figures").iterdir()} == set(names)
    page = (folder / "plan.html").read_text(encoding="utf-8")
    assert page.count("<figure>") == 5
    assert "nan" not in page.lower().split()
    assert cli.main(["plan", str(write(tmp_path, PLAN.replace("[4, 8]", "[4, 8, 16]"))), "--jobs", "1"]) == 0
    assert "48 campaigns were there already" in capsys.readouterr().out
    (folder / "notes.txt").write_text("keep")
    assert cli.main(["plan", str(path)]) == 2
    assert "notes.txt in it" in capsys.readouterr().err


def test_interrupted_command_says_what_is_kept(tmp_path, monkeypatch, capsys):
    calls = []

    def tired(work):
        calls.append(work)
        if len(calls) == 6:
            raise KeyboardInterrupt
        return by_number(work)

    monkeypatch.setattr(regimes.plan.run, "perform", tired)
    monkeypatch.chdir(tmp_path)
    assert cli.main(["plan", str(write(tmp_path)), "--jobs", "1"]) == 130
    assert capsys.readouterr().err == "interrupted; 5 of 48 campaigns are kept; the same command goes on from there\n"
    monkeypatch.setattr(regimes.plan.run, "perform", by_number)
    assert cli.main(["plan", str(write(tmp_path)), "--jobs", "1"]) == 0
    assert "5 campaigns were there already" in capsys.readouterr().out


# Predicted and fresh campaigns, by another route: fixes of a recipe, read, cleaned and paired like any others


RECIPE = """
name = "sound"
seed = {seed}
[kernel]
regimes = ["exponential", "richardson"]
transitions_km = [10]
rate_per_d = 0.6
reference_km = 1
[releases]
number = {releases}
particles = 3
start_separation_km = 0.3
first = 2031-03-01T00:00:00Z
[records]
duration_d = 20
fix_interval_h = {hours}
position_error_m = 10
loss_per_d = 0.02
"""


def fresh(arguments) -> Judged:
    """One campaign from the fixes of a recipe."""
    releases, hours, seed = arguments
    recipe = recipe_from(tomllib.loads(RECIPE.format(releases=releases, hours=hours, seed=seed)))
    tracks = make_tracks(simulate(recipe))
    pairs = find_pairs(tracks, "launched", 2 * 0.3 * KM, 6 * HOUR)
    return judged(tracks, pairs, KERNEL, TARGET, Options(seed=seed))


@pytest.mark.slow
def test_predicted_probability_is_that_of_fresh_campaigns(tmp_path):
    """Bar: right verdicts and aims of three designs within four standard errors of 200 fresh campaigns."""
    wanted = planned(releases=[8, 16, 32], fix_interval_h=[3.0], campaigns=100)
    predicted = simulate_plan(wanted, TRUTH, Progress(tmp_path / "p.json", "k"), jobs=2)
    for summary in predicted:
        n = summary.point.releases
        found = in_parallel(fresh, [(n, 3.0, 1000 * n + seed) for seed in range(200)])
        for name in ("right", "told"):
            before, after = getattr(summary, name), share([getattr(f, name) for f in found])
            both = (100 * before.value + 200 * after.value) / 300
            error = max(np.sqrt(both * (1 - both) * (1 / 100 + 1 / 200)), 1 / 200)
            off = (before.value - after.value) / error
            print(f"{n} releases, {name}: predicted {before}, fresh {after}, {off:.1f} standard errors")
            assert before.value == pytest.approx(after.value, abs=4 * error)


@pytest.mark.slow
def test_interruption_of_processes_keeps_campaigns(tmp_path):
    write(tmp_path)
    command = [sys.executable, "-m", "regimes.cli", "plan", "sound.toml", "--jobs", "2"]
    run = subprocess.Popen(command, cwd=tmp_path, stderr=subprocess.PIPE, text=True, start_new_session=True)
    progress, until = tmp_path / "reports" / "sound-plan" / "plan-progress.json", time.monotonic() + 120
    while not progress.exists() and run.poll() is None:
        assert time.monotonic() < until
        time.sleep(0.2)
    os.killpg(run.pid, signal.SIGINT)  # as a terminal does: to every process of the group
    _, err = run.communicate(timeout=120)
    assert run.returncode == 130, err
    kept = sum(len(done) for done in json.loads(progress.read_text())["campaigns"].values())
    assert 0 < kept < 48
    assert err == f"interrupted; {kept} of 48 campaigns are kept; the same command goes on from there\n"
