"""The command line: ``regimes run``, ``regimes check``, ``regimes simulate``."""

import argparse
import os
import signal
import sys
import threading
import traceback
from collections.abc import Callable, Sequence
from functools import partial
from pathlib import Path
from tempfile import TemporaryDirectory

from regimes.errors import CaseError, FitError, RegimesError

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
        return _say(_defect(error), INTERNAL)
    return code


def _say(message: str, code: int) -> int:
    sys.stderr.write(message + "\n")
    return code


def _defect(error: Exception) -> str:
    """One line that lets a developer find the place."""
    place = traceback.extract_tb(error.__traceback__)[-1]
    words = " ".join(str(error).split())
    return (
        f"regimes: internal error: {type(error).__name__}: {words} (line {place.lineno} of "
        f"{Path(place.filename).name}); this is a defect of regimes, not of the data; please report it "
        "with this line and the case file"
    )


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="regimes",
        description="Turbulence regimes, transition scales and spectral slope from pair separations of "
        "drifting instruments.",
        epilog="Exit codes: 0 done, 2 wrong argument or case file, 3 unusable data, 4 no convergence.",
    )
    parser.add_argument("--version", action="version", version=_version())
    commands = parser.add_subparsers(required=True, metavar="COMMAND")

    run = commands.add_parser("run", help="analyse a case and write its report")
    run.add_argument("case", type=Path, metavar="CASE", help="case file (TOML)")
    run.add_argument("--out", type=Path, metavar="DIR", help="folder of the report (default: reports/NAME)")
    run.add_argument(
        "--seed", type=partial(_whole, least=0), metavar="N", help="random seed (default: that of the case file)"
    )
    run.add_argument("--jobs", type=partial(_whole, least=1), metavar="N", help="threads (default: one for each core)")
    run.set_defaults(command=_run)

    check = commands.add_parser("check", help="read the data of a case, count what is there, fit nothing")
    check.add_argument("case", type=Path, metavar="CASE", help="case file (TOML)")
    check.set_defaults(command=_check)

    simulate = commands.add_parser("simulate", help="make fixes with known truth")
    simulate.add_argument("recipe", type=Path, metavar="RECIPE", help="recipe file (TOML)")
    simulate.add_argument("--out", type=_fixes_file, metavar="FILE", required=True, help=f"fixes to write ({ENDINGS})")
    simulate.set_defaults(command=_simulate)
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


def _whole(text: str, least: int) -> int:
    try:
        number = int(text)
    except ValueError:
        number = least - 1
    if number < least:
        raise argparse.ArgumentTypeError(f"got {text!r}; must be a whole number of {least} or more")
    return number


def _run(chosen: argparse.Namespace) -> int:
    from regimes.cases import load_case
    from regimes.pipeline import analyse
    from regimes.report import check_folder, write_report

    case = load_case(chosen.case)
    folder = check_folder(chosen.out or default_folder(chosen.case, case.name))
    with _Watch() as report:
        analysis = analyse(case, progress=report, jobs=chosen.jobs or os.cpu_count() or 1, seed=chosen.seed)
    files = write_report(analysis, folder)
    _tell(analysis.sentence)
    _tell(f"report: {_short(files['report.html'])}")
    if not analysis.healthy:
        reason = analysis.verdict.health_reason
        return _say(f"regimes: sampling did not converge: {reason}; the report says so", UNHEALTHY)
    return DONE


def _check(chosen: argparse.Namespace) -> int:
    from regimes.cases import load_case
    from regimes.pipeline import check

    case = load_case(chosen.case)
    with _Watch("reading fixes"):
        survey = check(case)
    _tell(survey.summary())
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
    is has a bar that only moves.
    """

    def __init__(self, stage: str = "") -> None:
        self.stage = stage

    def __enter__(self) -> Callable[[str, int, int], None] | None:
        self.bars = None
        self.tasks: dict[str, int] = {}
        in_main = threading.current_thread() is threading.main_thread()
        self.before = signal.signal(signal.SIGINT, self._leave) if in_main else None
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
