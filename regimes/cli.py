"""The command line: ``regimes run``, ``regimes check``, ``regimes simulate``, ``regimes compare``."""

import argparse
import os
import signal
import sys
import threading
from collections.abc import Callable, Sequence
from functools import partial
from pathlib import Path
from tempfile import TemporaryDirectory

from regimes.errors import CaseError, FitError, RegimesError, defect

DONE, INTERNAL, USAGE, INTERRUPTED, PIPE_CLOSED = 0, 1, 2, 130, 141
ENDINGS = ".csv, .csv.gz, .parquet"
UNHEALTHY = FitError.exit_code
INTERRUPTED_WORDS = "interrupted; nothing was written"


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command.

    Parameters
    ----------
    arguments : sequence of str, optional
        Those of the process without it.

    Returns
    -------
    int
        0 done (also when the verdict is "undecided"), 2 a wrong argument or case file, 3 data that cannot
        answer the question, 4 a fit that did not converge (its report is written all the same), 1 a defect of
        this program, 130 interrupted.
    """
    for stream in (sys.stdout, sys.stderr):
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(errors="replace")
    chosen = _parser().parse_args(arguments)
    try:
        code = chosen.command(chosen)
        sys.stdout.flush()
    except RegimesError as error:
        return _say(f"regimes: {error}", error.exit_code)
    except KeyboardInterrupt:
        return _say(INTERRUPTED_WORDS, INTERRUPTED)
    except BrokenPipeError:
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return PIPE_CLOSED
    except Exception as error:  # noqa: BLE001 - the last resort: a defect becomes one line that can be reported
        return _say(f"regimes: {defect(error)}", INTERNAL)
    return code


def _say(message: str, code: int) -> int:
    sys.stderr.write(message + "\n")
    return code


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="regimes",
        description="Turbulence regimes, transition scales and spectral slope from pair separations of "
        "drifting instruments.",
        epilog="Exit codes: 0 done, 2 wrong argument or case file, 3 unusable data, 4 no convergence.",
    )
    parser.add_argument("--version", action="version", version=_version())
    commands = parser.add_subparsers(required=True, metavar="COMMAND")

    run = commands.add_parser("run", help="analyse a case, or several side by side, and write their reports")
    run.add_argument("cases", type=Path, metavar="CASE", nargs="+", help="case file (TOML)")
    words = "folder of the report (default: reports/NAME); of several cases or a sweep, the folder of all their reports"
    run.add_argument("--out", type=Path, metavar="DIR", help=words)
    run.add_argument(
        "--seed", type=partial(_whole, least=0), metavar="N", help="random seed (default: that of the case file)"
    )
    run.add_argument("--jobs", type=partial(_whole, least=1), metavar="N", help="threads (default: one for each core)")
    words = "of several cases or a sweep, also run those whose report is there already (same data, choices, versions)"
    run.add_argument("--again", action="store_true", help=words)
    run.set_defaults(command=_run)

    check = commands.add_parser("check", help="read the data of a case, count what is there, fit nothing")
    check.add_argument("case", type=Path, metavar="CASE", help="case file (TOML)")
    check.set_defaults(command=_check)

    audit = commands.add_parser("audit", help="size on the data of a case what could fake its result, without sampling")
    audit.add_argument("case", type=Path, metavar="CASE", help="case file (TOML)")
    words = "also write the findings (.json)"
    audit.add_argument("--out", type=_json_file, metavar="FILE", help=words)
    audit.set_defaults(command=_audit)

    plan = commands.add_parser("plan", help="simulate the designs of a plan and find the smallest that reaches its aim")
    plan.add_argument("case", type=Path, metavar="CASE", help="case file (TOML) with a section [plan]")
    plan.add_argument("--out", type=Path, metavar="DIR", help="folder of the plan (default: reports/NAME-plan)")
    words = "processes (default: one for each core)"
    plan.add_argument("--jobs", type=partial(_whole, least=1), metavar="N", help=words)
    plan.set_defaults(command=_plan)

    simulate = commands.add_parser("simulate", help="make fixes with known truth")
    simulate.add_argument("recipe", type=Path, metavar="RECIPE", help="recipe file (TOML)")
    simulate.add_argument("--out", type=_fixes_file, metavar="FILE", required=True, help=f"fixes to write ({ENDINGS})")
    simulate.set_defaults(command=_simulate)

    words = "hold two cases against one another, the larger sampled as the smaller was"
    comparing = commands.add_parser("compare", help=words)
    comparing.add_argument("observed", type=Path, metavar="OBSERVED", help="case file of the observations (TOML)")
    comparing.add_argument("model", type=Path, metavar="MODEL", help="case file of the model run (TOML)")
    words = "folder of the comparison (default: reports/OBSERVED-against-MODEL)"
    comparing.add_argument("--out", type=Path, metavar="DIR", help=words)
    words = "virtual deployments (default: 199)"
    comparing.add_argument("--deployments", type=partial(_whole, least=99), metavar="M", default=199, help=words)
    words = "random seed (default: that of the observed case)"
    comparing.add_argument("--seed", type=partial(_whole, least=0), metavar="N", help=words)
    words = "threads (default: one for each core)"
    comparing.add_argument("--jobs", type=partial(_whole, least=1), metavar="N", help=words)
    words = "only groups that start within so many km of one another stand for one another"
    comparing.add_argument("--same-place", type=_positive, metavar="KM", help=words)
    words = "only groups that start within so many days of the year of one another stand for one another"
    comparing.add_argument("--same-season", type=_positive, metavar="DAYS", help=words)
    comparing.set_defaults(command=_compare)
    return parser


def _version() -> str:
    from importlib.metadata import PackageNotFoundError, version

    try:
        return f"regimes {version('regimes')}"
    except PackageNotFoundError:
        return "regimes, not installed (run from its sources)"


def _fixes_file(text: str) -> Path:
    if not text.lower().endswith(tuple(ENDINGS.split(", "))):
        raise argparse.ArgumentTypeError(f"got {text!r}; must end in one of {ENDINGS}")
    return Path(text)


def _json_file(text: str) -> Path:
    if not text.lower().endswith(".json"):
        raise argparse.ArgumentTypeError(f"got {text!r}; must end in .json")
    return Path(text)


def _whole(text: str, least: int) -> int:
    try:
        number = int(text)
    except ValueError:
        number = least - 1
    if number < least:
        raise argparse.ArgumentTypeError(f"got {text!r}; must be a whole number of {least} or more")
    return number


def _positive(text: str) -> float:
    try:
        number = float(text)
    except ValueError:
        number = 0.0
    if not 0.0 < number < float("inf"):
        raise argparse.ArgumentTypeError(f"got {text!r}; must be a number > 0")
    return number


def _run(chosen: argparse.Namespace) -> int:
    from regimes.cases import load_case
    from regimes.pipeline import analyse
    from regimes.report import check_folder, write_report

    if len(chosen.cases) > 1:
        return _run_many(chosen)
    case = load_case(chosen.cases[0])
    if case.sweep is not None:
        return _run_many(chosen)
    folder = check_folder(chosen.out or default_folder(chosen.cases[0], case.name))
    with _Watch() as report:
        analysis = analyse(case, progress=report, jobs=chosen.jobs or os.cpu_count() or 1, seed=chosen.seed)
    files = write_report(analysis, folder)
    _tell(analysis.sentence)
    _tell(f"report: {_short(files['report.html'])}")
    if not analysis.healthy:
        reason = analysis.verdict.health_reason
        return _say(f"regimes: sampling did not converge: {reason}; the report says so", UNHEALTHY)
    return DONE


def _run_many(chosen: argparse.Namespace) -> int:
    from regimes.batch import check_overview, run_all, tasks_of, worst_code, write_overview

    loaded = [_loaded(path) for path in chosen.cases]
    alone = Path("reports") / f"{loaded[0][1]}-sweep" if len(loaded) == 1 else Path("reports")
    folder = check_overview(chosen.out or alone)
    tasks = tasks_of(loaded, folder, chosen.seed)
    with _Watch(at_once=False) as report:
        done = []

        def told(outcome) -> None:
            done.append(outcome)
            _tell_outcome(outcome)
            if report is not None:
                report("runs", len(done), len(tasks))

        if report is not None:
            report("runs", 0, len(tasks))
        outcomes = run_all(tasks, chosen.jobs or os.cpu_count() or 1, chosen.again, told)
    _tell(f"overview: {_short(write_overview(outcomes, folder))}")
    left = [outcome.task.folder.name for outcome in outcomes if outcome.state == "not run"]
    if left:
        return _say(f"interrupted; without a report: {', '.join(left)}; the others are complete", INTERRUPTED)
    return worst_code(outcomes)


def _loaded(path: Path) -> tuple[str, str, object]:
    """A case file, the name of its folder, and its case or what is wrong with it."""
    from regimes.cases import load_case

    try:
        case = load_case(path)
    except CaseError as error:
        return str(path), default_folder(path, "case").name, str(error)
    return str(path), default_folder(path, case.name).name, case


def _tell_outcome(outcome) -> None:
    name = outcome.task.folder.name
    if not outcome.reported:
        _say(f"regimes: {name}: {outcome.message}", outcome.code)
        return
    kept = " (kept: a report of the same data, choices and versions is there; --again runs it)"
    _tell(f"{name}{kept if outcome.state == 'kept' else ''}: {outcome.message}")
    if outcome.code == UNHEALTHY:
        _say(f"regimes: {name}: sampling did not converge; the report says so", UNHEALTHY)


def _check(chosen: argparse.Namespace) -> int:
    from regimes.cases import load_case
    from regimes.pipeline import check

    case = load_case(chosen.case)
    with _Watch("reading fixes"):
        survey = check(case)
    _tell(survey.summary())
    return DONE


def _audit(chosen: argparse.Namespace) -> int:
    from regimes.cases import load_case
    from regimes.pipeline import audit_case
    from regimes.report import findings_text, write_findings

    case = load_case(chosen.case)
    with _Watch() as report:
        found = audit_case(case, report)
    _tell(findings_text(found))
    if chosen.out is not None:
        _tell(f"findings: {_short(write_findings(found, chosen.out))}")
    return DONE


def _plan(chosen: argparse.Namespace) -> int:
    from regimes.cases import load_plan
    from regimes.pipeline import plan_survey
    from regimes.report import check_plan_folder, plan_sentence, write_plan

    planned, case = load_plan(chosen.case)
    folder = default_folder(chosen.case, planned.name)
    folder = check_plan_folder(chosen.out or folder.with_name(f"{folder.name}-plan"))
    count = [0, 0]
    with _Watch(at_once=False) as report:

        def told(stage: str, done: int, total: int) -> None:
            count[:] = done, total
            if report is not None:
                report(stage, done, total)

        try:
            plan = plan_survey(planned, case, folder, chosen.jobs or os.cpu_count() or 1, told)
        except KeyboardInterrupt:
            words = "{} of {} campaigns are kept; the same command goes on from there".format(*count)
            return _say(f"interrupted; {words}", INTERRUPTED)
    page = write_plan(plan, folder)
    if plan.kept:
        _tell(f"{plan.kept} campaigns were there already")
    _tell(plan_sentence(plan))
    _tell(f"plan: {_short(page)}")
    return DONE


def _simulate(chosen: argparse.Namespace) -> int:
    from regimes.fixes import write_fixes
    from regimes.synthetic import load_recipe, simulate

    recipe, out = load_recipe(chosen.recipe), chosen.out.resolve()
    with _Watch("simulating"):
        fixes = simulate(recipe)
    try:
        with TemporaryDirectory(prefix=".fixes-", dir=out.parent) as scratch:
            write_fixes(fixes, Path(scratch) / out.name)
            os.replace(Path(scratch) / out.name, out)
    except OSError as error:
        raise CaseError(
            f"--out: got {chosen.out}, which cannot be written ({error.strerror or error}); "
            "must be a file in a folder that exists; choose another"
        ) from error
    _tell(f"fixes: {_short(out)}")
    return DONE


def _compare(chosen: argparse.Namespace) -> int:
    from regimes.cases import load_case
    from regimes.compare import CompareOptions, Near, check_comparison_folder, compare, write_comparison
    from regimes.pipeline import options_of
    from regimes.units import DAY, KM

    observed, model = load_case(chosen.observed), load_case(chosen.model)
    names = [
        default_folder(path, case.name).name for path, case in ((chosen.observed, observed), (chosen.model, model))
    ]
    folder = check_comparison_folder(chosen.out or Path("reports") / "-against-".join(names))
    place = None if chosen.same_place is None else chosen.same_place * KM
    season = None if chosen.same_season is None else chosen.same_season * DAY
    seed = observed.seed if chosen.seed is None else chosen.seed
    fit = options_of(observed, seed, chosen.jobs or os.cpu_count() or 1)
    with _Watch() as report:
        found = compare(observed, model, CompareOptions(chosen.deployments, Near(place, season), fit), report)
    files = write_comparison(found, folder)
    _tell(found.sentence)
    _tell(f"comparison: {_short(files['comparison.html'])}")
    return DONE


def default_folder(case_file: Path, name: str) -> Path:
    """``reports/`` and the folder of a ``case.toml``, else the name of the file, else that of the case."""
    path = case_file.resolve()
    word = path.parent.name if path.stem == "case" else path.stem
    return Path("reports") / (_slug(word) or _slug(name) or "case")


def _slug(text: str) -> str:
    kept = "".join(c if c.isalnum() else "-" for c in text.lower())
    return "-".join(part for part in kept.split("-") if part)


def _tell(text: str) -> None:
    sys.stdout.write(text + "\n")


def _short(path: Path) -> Path:
    """The path from the current folder, if it lies in it."""
    here = Path.cwd()
    path = path.resolve()
    return path.relative_to(here) if path.is_relative_to(here) else path


class _Watch:
    """While nothing is being written: bars with the time left where stderr is a terminal, and Ctrl-C ends at once.

    Threads that sample would otherwise be waited for, which can take a minute. A `stage` that cannot tell how far it
    is has a bar that only moves. With `at_once` False, Ctrl-C raises as usual.
    """

    def __init__(self, stage: str = "", at_once: bool = True) -> None:
        self.stage = stage
        self.at_once = at_once

    def __enter__(self) -> Callable[[str, int, int], None] | None:
        self.bars = None
        self.tasks: dict[str, int] = {}
        in_main = threading.current_thread() is threading.main_thread()
        self.before = signal.signal(signal.SIGINT, self._leave) if in_main and self.at_once else None
        if not sys.stderr.isatty():
            return None
        from rich.console import Console
        from rich.progress import BarColumn, Progress, TextColumn, TimeRemainingColumn

        words, share = TextColumn("{task.description}"), TextColumn("{task.fields[share]}")
        columns = (words, BarColumn(), share, TimeRemainingColumn())
        self.bars = Progress(*columns, console=Console(stderr=True), transient=True)
        if self.stage:
            self.bars.add_task(self.stage, total=None, share="")
        self.bars.start()
        return self._report

    def __exit__(self, *_details: object) -> None:
        if self.before is not None:
            signal.signal(signal.SIGINT, self.before)
        if self.bars is not None:
            self.bars.stop()

    def _report(self, stage: str, done: int, total: int) -> None:
        if stage not in self.tasks:
            self.tasks[stage] = self.bars.add_task(stage, total=total, share="")
        self.bars.update(self.tasks[stage], completed=done, total=total, share=f"{done}/{total}")

    def _leave(self, *_details: object) -> None:
        if self.bars is not None:
            self.bars.stop()
        _say(INTERRUPTED_WORDS, INTERRUPTED)
        sys.stderr.flush()
        os._exit(INTERRUPTED)


if __name__ == "__main__":
    sys.exit(main())
