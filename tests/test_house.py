"""The house: imports go down the floors only, and what is banned is nowhere."""

import ast
import subprocess
import sys
from pathlib import Path

import pytest

PACKAGE = Path(__file__).parent.parent / "pdclass"
FLOORS = {
    "cli": 8,
    "jobs": 7,
    "report": 6,
    "training": 5,
    "verdict": 5,
    "model": 4,
    "features": 3,
    "capture": 2,
    "extract": 2,
    "wavelets": 1,
    "sim": 1,
    "compiled": 0,
    "errors": 0,
    "digest": 0,
    "settings": 0,
    "pulses": 0,
    "writing": 0,
}
APART = [{"training", "verdict"}]
#: Third-party packages that only one place may import.
KEEPERS = {"sklearn": "training", "matplotlib": "report/plots.py", "pywt": "wavelets.py", "typer": "cli", "shap": None}
BANNED_CALLS = {"eval", "exec", "compile", "__import__"}
BANNED_MODULES = {"pickle", "cPickle", "dill", "cloudpickle", "shelve", "marshal"}
BANNED_NAMES = {"joblib.load", "joblib.dump", "numpy.random.seed", "random.seed"}
MODULES = sorted(PACKAGE.rglob("*.py"))


def where(path):
    return path.relative_to(PACKAGE).as_posix()


def room(path):
    first = path.relative_to(PACKAGE).parts[0]
    return first.removesuffix(".py")


def imported(tree, module=""):
    """(absolute name, node) for every import of a tree, each imported name also as a member of its module."""
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            yield from ((alias.name, node) for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            parents = module.split(".")[: -node.level] if node.level else []
            base = ".".join([*parents, *([node.module] if node.module else [])])
            yield base, node
            yield from ((f"{base}.{alias.name}", node) for alias in node.names)


def in_functions(tree):
    """Every node that stands inside a function."""
    for node in ast.walk(tree):
        if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef | ast.Lambda):
            yield from ast.walk(node)


def dotted(path):
    """The dotted name of a module."""
    return ".".join(["pdclass", *path.relative_to(PACKAGE).with_suffix("").parts])


def called(node):
    parts = []
    target = node.func
    while isinstance(target, ast.Attribute):
        parts.append(target.attr)
        target = target.value
    if isinstance(target, ast.Name):
        parts.append(target.id)
    return ".".join(reversed(parts))


@pytest.fixture(scope="module")
def trees():
    return {path: ast.parse(path.read_text(encoding="utf-8")) for path in MODULES}


def test_every_room_has_its_floor(trees):
    """No module stands outside the floors."""
    strange = {where(path) for path in trees if path.name != "__init__.py" or path.parent != PACKAGE} - {
        where(path) for path in trees if room(path) in FLOORS
    }
    assert not strange


def test_imports_go_down_only(trees):
    """A module imports from its own room or from lower floors, and training and verdict never from each other."""
    wrong = []
    for path, tree in trees.items():
        for name, _ in imported(tree, dotted(path)):
            there = name.split(".")[1] if name.startswith("pdclass.") else None
            if there not in FLOORS or room(path) not in FLOORS:
                continue
            upward = there != room(path) and FLOORS[there] >= FLOORS[room(path)] and FLOORS[room(path)] > 0
            quarrel = any({there, room(path)} == pair for pair in APART)
            if upward or quarrel or FLOORS[there] > FLOORS[room(path)]:
                wrong.append(f"{where(path)} imports {name}")
    assert not wrong


def test_own_imports_stand_at_the_top(trees):
    """The package imports itself inside functions only in cli, to keep --help quick, and where a job draws."""
    wrong = [
        f"{where(path)} imports {name}"
        for path, tree in trees.items()
        if room(path) not in {"cli", "__init__"}
        for inner in {id(n): n for n in in_functions(tree)}.values()
        if isinstance(inner, ast.Import | ast.ImportFrom)
        for name in [getattr(inner, "module", None) or inner.names[0].name]
        if name.startswith("pdclass") and not (room(path) == "jobs" and name.startswith("pdclass.report"))
    ]
    assert not wrong


def test_kept_packages_have_one_keeper(trees):
    """scikit-learn stays in training, matplotlib in plots, pywt in wavelets, typer in cli; shap is for tests only."""
    wrong = [
        f"{where(path)} imports {name}"
        for path, tree in trees.items()
        for name, _ in imported(tree)
        if name.split(".")[0] in KEEPERS
        and not (KEEPERS[name.split(".")[0]] and where(path).startswith(KEEPERS[name.split(".")[0]]))
    ]
    assert not wrong


def test_nothing_that_executes_a_file(trees):
    """No pickle, no eval, no joblib.load, no allow_pickle=True, no seed set for everybody."""
    wrong = []
    for path, tree in trees.items():
        wrong += [
            f"{where(path)}: {name}"
            for name, _ in imported(tree)
            if name.split(".")[0] in BANNED_MODULES or name in BANNED_NAMES
        ]
        for node in ast.walk(tree):
            if not isinstance(node, ast.Call):
                continue
            name = called(node)
            loose = any(k.arg == "allow_pickle" and getattr(k.value, "value", True) for k in node.keywords)
            seeded = name in {"np.random.seed", "numpy.random.seed", "random.seed"}
            if name in BANNED_CALLS or name in {"joblib.load", "joblib.dump"} or loose or seeded:
                wrong.append(f"{where(path)}:{node.lineno}: {name}")
    assert not wrong


def test_only_the_command_line_prints(trees):
    """`print` stands on the cli floor alone; no other floor talks past its caller."""
    wrong = [
        f"{where(path)}:{node.lineno}"
        for path, tree in trees.items()
        if room(path) != "cli"
        for node in ast.walk(tree)
        if isinstance(node, ast.Call) and called(node) == "print"
    ]
    assert not wrong


def test_no_validation_by_assert(trees):
    """Asserts vanish under -O, so the package has none."""
    wrong = [f"{where(p)}:{n.lineno}" for p, t in trees.items() for n in ast.walk(t) if isinstance(n, ast.Assert)]
    assert not wrong


@pytest.mark.parametrize(
    ("module", "unwanted"),
    [
        ("pdclass.verdict.batch", ("sklearn", "matplotlib")),
        ("pdclass.jobs.score", ("sklearn", "matplotlib")),
        ("pdclass.cli.app", ("numpy", "pandas", "scipy", "numba", "sklearn", "matplotlib")),
    ],
)
def test_what_a_floor_does_not_load(module, unwanted):
    """The verdict floor and scoring load neither scikit-learn nor matplotlib; the command line loads no numbers."""
    code = f"import sys, {module}; print(' '.join(sorted({{m.split('.')[0] for m in sys.modules}})))"
    loaded = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout.split()
    assert not set(unwanted) & set(loaded)


def test_the_checks_see_what_they_forbid():
    """An upward import is seen whichever way it is written."""
    for text in ("from pdclass import report", "from ..jobs import talk", "import pdclass.jobs.talk"):
        names = [name for name, _ in imported(ast.parse(text), "pdclass.features.table")]
        assert any(name.startswith(("pdclass.report", "pdclass.jobs")) for name in names), text
    assert "joblib.load" in [name for name, _ in imported(ast.parse("from joblib import load"))]


def test_functions_fit_on_a_screen(trees):
    """No function exceeds fifty lines of code, its docstring not counted."""
    long = []
    for path, tree in trees.items():
        for node in ast.walk(tree):
            if isinstance(node, ast.FunctionDef):
                body = node.body[1:] if ast.get_docstring(node) else node.body
                if body and node.end_lineno - body[0].lineno + 1 > 50:
                    long.append(f"{where(path)}: {node.name}")
    assert not long


def test_modules_are_of_readable_size(trees):
    """No module exceeds 500 lines: one that does holds more than one idea."""
    assert {where(path) for path in trees if len(path.read_text(encoding="utf-8").splitlines()) > 500} == set()
