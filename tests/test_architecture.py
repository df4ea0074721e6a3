"""The arrows between modules, and other rules that hold for all of them.

Imports are read from the syntax tree, those inside functions included: a lazy import is an
arrow too.
"""

from __future__ import annotations

import ast
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[1]
PACKAGE = ROOT / "hdetermine"
MODULES = sorted(PACKAGE.rglob("*.py"))

# The rim that writes what was found; the rest of `files` reads.
WRITERS = ("files.atomic", "files.cells", "files.resultfile", "files.modelrecord")

# Propagation by draws: it judges the budget's linear route, and so comes after it.
SAMPLERS = tuple(
    f"inference.{name}" for name in ("chain", "density", "montecarlo", "posterior", "spread")
)

# Who may import whom, longest prefix first; a package may always import itself, `errors` and
# the package's version. The path of the data is records, physics -> files -> inference ->
# budget -> judgement -> determination -> report, classcheck, planning -> cli.
ALLOWED = {
    "errors": (),
    "records": (),
    "physics": ("records",),
    "files": ("records", "physics"),
    **dict.fromkeys(WRITERS, ("records", "files", "inference.measurement")),
    "inference": ("records", "physics"),
    **dict.fromkeys(SAMPLERS, ("records", "physics", "inference", "budget")),
    "budget": ("records", "physics", "inference"),
    "judgement": ("records", "physics", "inference", "budget"),
    "determination": ("records", "physics", "inference", "budget", "judgement"),
    "planning": ("records", "physics", "files"),
    "report": ("records", "physics", "inference", "budget", "files"),
    "classcheck": (
        "records", "physics", "files", "inference", "budget", "judgement", "determination",
        "report",
    ),
    "cli": (
        "records", "physics", "files", "inference", "budget", "judgement", "determination",
        "report", "classcheck", "planning",
    ),
}  # fmt: skip

REFERENCE = "physics.reference"
MAY_KNOW_THE_ANSWER = ("judgement", "planning", "classcheck")

NETWORK = {
    "socket", "ssl", "http", "urllib.request", "urllib3", "requests", "httpx", "aiohttp",
    "ftplib", "smtplib", "socketserver", "xmlrpc", "webbrowser", "asyncio",
}  # fmt: skip
CLOCK = {"datetime.now", "datetime.today", "datetime.utcnow", "date.today", "time.time"}
SEEDED = {"Generator", "SeedSequence", "default_rng", "PCG64", "MT19937", "BitGenerator"}


def name_of(path: Path) -> str:
    """Dotted name below the package: `files.atomic`, `cli`."""
    parts = list(path.relative_to(PACKAGE).with_suffix("").parts)
    if parts[-1] == "__init__":
        parts.pop()
    return ".".join(parts)


def imports_of(tree: ast.AST) -> set[str]:
    """Every module that is imported, and every name from it, as full dotted names."""
    found = set()
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            found.update(alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, "relative import"
            found.add(node.module)
            found.update(f"{node.module}.{alias.name}" for alias in node.names)
    return found


def is_module(name: str) -> bool:
    place = PACKAGE.parent / Path(*name.split("."))
    return place.with_suffix(".py").exists() or (place / "__init__.py").exists()


def inner_imports(tree: ast.AST) -> set[str]:
    """Modules of the package itself that are imported, as dotted names below it."""
    found = set()
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            found.update(alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            for alias in node.names:
                name = f"{node.module}.{alias.name}"
                found.add(name if is_module(name) else node.module)
    own = "hdetermine."
    return {name.removeprefix(own) for name in found if name.startswith(own)}


def within(name: str, prefix: str) -> bool:
    return name == prefix or name.startswith(prefix + ".")


def rule_for(module: str) -> tuple[str, tuple[str, ...]] | None:
    matching = [prefix for prefix in ALLOWED if within(module, prefix)]
    if not matching:
        return None
    prefix = max(matching, key=len)
    return prefix, ALLOWED[prefix]


def dotted_calls(tree: ast.AST) -> set[str]:
    return {ast.unparse(node.func) for node in ast.walk(tree) if isinstance(node, ast.Call)}


TREES = {name_of(path): ast.parse(path.read_text("utf-8")) for path in MODULES}


def broken_arrows(module: str, tree: ast.AST) -> list[str]:
    rule = rule_for(module)
    if rule is None:
        return [] if module in ("", "__main__") else [f"{module} has no rule"]
    prefix, allowed = rule
    wrong = []
    for name in sorted(inner_imports(tree)):
        if not any(within(name, one) for one in ("errors", prefix, *allowed)):
            wrong.append(f"{module} imports {name}")
    return wrong


@pytest.mark.parametrize("module", [name for name in TREES if name])
def test_import_arrows(module):
    assert broken_arrows(module, TREES[module]) == []


@pytest.mark.parametrize("module", TREES)
def test_who_may_know_the_si_value(module):
    tree = TREES[module]
    known = REFERENCE in inner_imports(tree) or "scipy.constants" in imports_of(tree)
    if known and module != REFERENCE:
        assert any(within(module, one) for one in MAY_KNOW_THE_ANSWER)


@pytest.mark.parametrize("module", ["files.runsheet", "inference.relation", "budget.planck"])
def test_the_answer_cannot_leak_into_the_fit(module):
    """Whatever reading, inference and budget load, the SI value is not among it."""
    code = (
        f"import sys, hdetermine.{module}; assert 'hdetermine.physics.reference' not in sys.modules"
    )
    run = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True)
    assert run.returncode == 0, run.stderr


@pytest.mark.parametrize("module", TREES)
def test_no_network(module):
    for name in imports_of(TREES[module]):
        assert not any(within(name, one) for one in NETWORK), name


@pytest.mark.parametrize("module", TREES)
def test_no_global_random_state_and_no_clock(module):
    tree = TREES[module]
    assert not any(within(name, "random") for name in imports_of(tree))
    for call in dotted_calls(tree):
        if call.startswith(("np.random.", "numpy.random.")):
            assert call.split(".")[2].split("(")[0] in SEEDED, call
        assert not any(call == one or call.endswith("." + one) for one in CLOCK), call


@pytest.mark.parametrize("module", TREES)
def test_only_the_command_line_prints_exits_and_reads_arguments(module):
    if within(module, "cli") or module == "__main__":
        return
    tree = TREES[module]
    calls = dotted_calls(tree)
    if module == "classcheck.workers":
        calls.discard("os._exit")  # a worker process ends itself, not the program
    for call in ("print", "exit", "quit", "sys.exit", "os._exit", "input", "click.echo"):
        assert call not in calls
    names = {ast.unparse(node) for node in ast.walk(tree) if isinstance(node, ast.Attribute)}
    assert not names & {"sys.argv", "sys.stdout", "sys.stderr", "sys.stdin"}
    assert not imports_of(tree) & {"click", "rich", "argparse"}


@pytest.mark.parametrize("module", TREES)
def test_nothing_is_swallowed_or_put_off(module):
    """No bare or blanket `except`, no silenced checker."""
    for node in ast.walk(TREES[module]):
        if isinstance(node, ast.ExceptHandler):
            caught = "" if node.type is None else ast.unparse(node.type)
            reraised = any(isinstance(inner, ast.Raise) for inner in ast.walk(node))
            assert reraised or caught not in ("", "Exception", "BaseException")


def test_no_stage_calls_back_up():
    """The modules that import each other form no circle, lazy imports included."""
    arrows = {name: inner_imports(tree) & set(TREES) for name, tree in TREES.items() if name}
    left = dict(arrows)
    while left:
        ends = [name for name, targets in left.items() if not targets & set(left) - {name}]
        assert ends, f"a circle among {sorted(left)}"
        for name in ends:
            del left[name]


def test_modules_are_of_readable_length():
    lengths = {name_of(path): len(path.read_text("utf-8").splitlines()) for path in MODULES}
    assert {name: lines for name, lines in lengths.items() if lines > 350} == {}


def test_no_module_is_called_utils():
    for path in MODULES:
        assert path.stem not in ("utils", "util", "helpers", "common", "misc")


def test_the_top_level_holds_only_the_allowed_entries():
    git = subprocess.run(
        ["git", "-C", str(ROOT), "ls-files"], capture_output=True, text=True, check=False
    )
    if git.returncode != 0:
        pytest.skip("no git checkout here")
    entries = {line.split("/")[0] for line in git.stdout.splitlines()}
    allowed = {"README.md", "DEVELOPERS.md", "pyproject.toml", "hdetermine", "templates", "tests"}
    assert {entry for entry in entries if not entry.startswith(".")} <= {*allowed, "demo_runs"}


# --- the rules themselves can fail ------------------------------------------------------------

BROKEN = {
    "physics.x": "from hdetermine.inference import line",
    "records.x": "import hdetermine.physics.bragg",
    "inference.x": "def f():\n    from hdetermine.files.runsheet import read_run",
    "files.x": "from hdetermine.inference import measurement",
    "files.resultfile": "from hdetermine.inference.line import fit_straight_line",
    "budget.x": "import hdetermine.report.html",
    "report.x": "from hdetermine import determination",
    "unheard_of": "import math",
}


@pytest.mark.parametrize("module", BROKEN)
def test_a_wrong_arrow_is_seen(module):
    tree = ast.parse(BROKEN[module])
    if module == "report.x":
        tree = ast.parse("from hdetermine.determination import determine")
    assert broken_arrows(module, tree)
