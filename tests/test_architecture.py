"""The walk from fixes to report goes one way; a few habits are kept by reading the source."""

import ast
import subprocess
from graphlib import CycleError, TopologicalSorter
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent
PACKAGE = ROOT / "regimes"

# Rooms from first to last; a room imports only from rooms before it, or from its own modules.
WALK = (
    ("errors", "units", "arrays", "interrupts"),
    ("cases",),
    ("fixes",),
    ("geodesy",),
    ("tracks",),
    ("pairs",),
    ("curves",),
    ("theory", "particles"),
    ("likelihood",),
    ("inference",),
    ("checks",),
    ("verdict",),
    ("analysis",),
    ("fitting",),
    ("audit", "plan"),
    ("report", "pipeline"),
    ("batch",),
    ("compare",),
    ("cli",),
)
PLACE = {room: i for i, rooms in enumerate(WALK) for room in rooms}
GROUND = {"errors", "units", "arrays"}
# Rooms that may use less than everything before them, or that stand beside the walk.
ONLY = {
    "theory": GROUND,
    "particles": GROUND | {"geodesy", "tracks", "pairs", "curves"},
    "synthetic": GROUND | {"cases", "fixes", "geodesy", "tracks", "pairs", "theory"},
}
# Rooms that simulate: the command line, the checks and the audit, which repeat a data set, and plans of new ones.
WITH_WORLDS = {"cli", "checks", "audit", "plan"}
AT_THE_ROOT = {"pyproject.toml", "README.md", "DEVELOPERS.md", "LICENSE", "regimes", "tests", "cases", "reports"}


def name_of(path: Path, package: Path = PACKAGE) -> str:
    parts = path.relative_to(package.parent).with_suffix("").parts
    return ".".join(parts[:-1] if parts[-1] == "__init__" else parts)


def modules(package: Path = PACKAGE) -> dict[str, ast.Module]:
    return {name_of(p, package): ast.parse(p.read_text(encoding="utf-8")) for p in sorted(package.rglob("*.py"))}


TREES = modules()


def imported(tree: ast.Module, name: str, known) -> set[str]:
    """Full names of everything imported, wherever in the file; a module rather than the names inside it."""
    found = set()
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            found |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{name}: relative import"
            for alias in node.names:
                whole = f"{node.module}.{alias.name}"
                found.add(whole if whole in known else node.module)
    return found


def own(tree: ast.Module, name: str, known=TREES) -> set[str]:
    return {m for m in imported(tree, name, known) if m.split(".")[0] == "regimes"}


def room(module: str) -> str:
    return module.split(".")[1] if "." in module else ""


def broken_rules(trees) -> list[str]:
    """Imports that run against the walk."""
    wrong = []
    for name, tree in trees.items():
        here = room(name)
        for other in own(tree, name, trees):
            there = room(other)
            if there in ("", here) or here == "":  # the front page shows names of every room
                continue
            if here in ONLY:
                fine = there in ONLY[here]
            elif here in WITH_WORLDS and there == "synthetic":
                fine = True
            else:
                fine = there in PLACE and PLACE[there] < PLACE[here]
            if not fine:
                wrong.append(f"{name} imports {other}")
    return wrong


def graph(trees) -> dict[str, set[str]]:
    return {name: own(tree, name, trees) - {name} for name, tree in trees.items()}


def test_every_room_has_its_place():
    assert {room(name) for name in TREES} - {""} - set(PLACE) - {"synthetic"} == set()


def test_imports_go_one_way():
    assert broken_rules(TREES) == []


@pytest.mark.parametrize(
    ("module", "line"),
    [
        ("regimes.theory.kernel", "from regimes.curves import Curve"),
        ("regimes.theory.kernel", "import regimes.pairs"),
        ("regimes.curves.record", "from regimes.theory.kernel import Kernel"),
        ("regimes.report.page", "def late():\n    from regimes.pipeline import analyse"),
        ("regimes.pipeline.run", "from regimes.report import write_report"),
        ("regimes.synthetic.recipe", "from regimes.inference.models import Model"),
        ("regimes.verdict.rule", "from regimes import analysis"),
        ("regimes.pairs.record", "from regimes.synthetic import simulate"),
    ],
)
def test_an_import_against_the_walk_is_seen(module, line):
    assert broken_rules(TREES | {module: ast.parse(line)}) != []


def test_no_cycles():
    assert len(tuple(TopologicalSorter(graph(TREES)).static_order())) == len(TREES)


def test_a_cycle_is_seen():
    trees = TREES | {"regimes.verdict.rule": ast.parse("from regimes.verdict.decide import decide")}
    with pytest.raises(CycleError):
        tuple(TopologicalSorter(graph(trees)).static_order())


@pytest.mark.parametrize(("library", "at_home"), [("emcee", {"regimes.inference.sampler"})])
def test_the_sampler_is_known_to_one_module(library, at_home):
    using = {n for n, t in TREES.items() if library in {m.split(".")[0] for m in imported(t, n, TREES)}}
    assert using == at_home


def test_only_the_command_line_talks_to_the_terminal():
    talking = []
    for name, tree in TREES.items():
        for node in ast.walk(tree):
            printing = isinstance(node, ast.Call) and isinstance(node.func, ast.Name) and node.func.id == "print"
            stream = isinstance(node, ast.Attribute) and node.attr in ("stdout", "stderr")
            if printing or stream:
                talking.append(name)
    assert set(talking) == {"regimes.cli"}


def test_no_assert_and_no_silenced_error():
    wrong = []
    for name, tree in TREES.items():
        for node in ast.walk(tree):
            silent = isinstance(node, ast.ExceptHandler) and all(isinstance(n, ast.Pass) for n in node.body)
            if isinstance(node, ast.Assert) or silent:
                wrong.append(f"{name}:{node.lineno}")
    assert wrong == []


def test_every_module_and_package_says_what_it_is_for():
    assert [name for name, tree in TREES.items() if name != "regimes" and not ast.get_docstring(tree)] == []


def test_the_root_holds_only_what_it_should():
    asked = subprocess.run(["git", "ls-files", "-z"], cwd=ROOT, capture_output=True, text=True, check=False)
    if asked.returncode != 0:
        pytest.skip("not a git checkout: nothing says which files belong to the project")
    top = {line.split("/")[0] for line in asked.stdout.split("\0") if line}
    assert {name for name in top if not name.startswith(".")} - AT_THE_ROOT == set()
